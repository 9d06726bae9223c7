"""Expressions read back and drawn: the drawing is the circuit that the expression says."""

from __future__ import annotations

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tauledger.corners.symbols import Term, bridging, divided, multiplied, parallel, series, symbol
from tauledger.report.expressions import hand_value, parse, parse_hand, value_of, written
from tauledger.report.html_text import expression
from tauledger.report.schematic import draw_seen

VALUES = {
    "R1": 68e3,
    "RS1": 600.0,
    "RE": 1e3,
    "XA.R2": 15e3,
    "ro(Q1)": 60e3,
    "rπ": 4.7e3,
    "β": 200.0,
    "gm": 40e-3,
}
LEAVES = [symbol(name, value) for name, value in VALUES.items() if name not in ("β", "gm")]


def _inner(terms: st.SearchStrategy[Term]) -> st.SearchStrategy[Term]:
    return st.one_of(
        st.lists(terms, min_size=2, max_size=3).map(lambda some: series(*some)),
        st.lists(terms, min_size=2, max_size=3).map(lambda some: parallel(*some)),
        terms.map(lambda term: multiplied(201.0, "(β+1)", term)),
        terms.map(lambda term: divided(term, 201.0, "(β+1)")),
    )


TERMS = st.recursive(st.sampled_from(LEAVES), _inner, max_leaves=8)


@given(TERMS)
def test_an_expression_reads_back_as_what_it_was_made_from(term: Term) -> None:
    node = parse(term.text)
    assert node is not None
    assert value_of(node, VALUES) == pytest.approx(term.value)
    assert written(node).replace("β + 1", "β+1") == term.text
    again = parse(written(node))
    assert again == node


@given(TERMS, TERMS)
def test_a_bridge_reads_back_with_its_own_names(first: Term, second: Term) -> None:
    """R1 names a part in the sides and a side in the whole; neither is taken for the other."""
    term = bridging(first, second, symbol("gm", VALUES["gm"]))
    hand = parse_hand(", ".join([term.text, *term.where]))
    assert hand is not None
    assert hand_value(hand, VALUES) == pytest.approx(term.value)


def _draw(words: str, seen: float, part: str = "C1") -> str:
    drawing = draw_seen(words, part, "1.00 µF", ("a", "0"), seen, VALUES, "id")
    return drawing.svg if drawing else ""


def test_drawing_has_every_resistor_once_with_its_value() -> None:
    seen = 600.0 + 1.0 / (1 / 68e3 + 1 / 15e3)
    drawn = _draw("R1‖XA.R2 + RS1", seen)
    assert drawn.count('<rect class="rs"') == 3
    assert [word for word in ("R1", "XA.R2", "RS1") if f">{word}</text>" in drawn] == [
        "R1",
        "XA.R2",
        "RS1",
    ]
    assert all(value in drawn for value in ("68.0 kΩ", "15.0 kΩ", "600 Ω"))
    assert "C1 sees (R1 68.0 kΩ in parallel with XA.R2 15.0 kΩ) in series with RS1 600 Ω" in drawn


def test_a_reflected_resistance_is_one_dashed_resistor_with_its_value() -> None:
    drawing = draw_seen("RE‖(rπ + RS1)/(β+1)", "CE", "100 µF", ("e", "0"), 25.69, VALUES, "id")
    assert drawing is not None
    assert drawing.svg.count("<rect") == 2
    assert drawing.svg.count('class="rs im"') == 1
    assert "26.4 Ω" in drawing.svg
    assert [(letter, written(node)) for letter, node in drawing.key] == [
        ("a", "(rπ + RS1)/(β + 1)")
    ]


def test_drawing_states_the_transistors_own_feedback() -> None:
    words = "(RE‖R1)·(1 + 4)/(1 + 9), return ratios of Q2"
    hand = parse_hand(words)
    assert hand is not None
    assert hand.around == "Q2"
    assert hand_value(hand, VALUES) == pytest.approx(0.5 / (1 / 1e3 + 1 / 68e3))
    assert _draw(words, hand_value(hand, VALUES)).count("<rect") == 2


@pytest.mark.parametrize(
    ("words", "seen"),
    [
        ("R1‖RE", 500.0),  # its values give 985 Ω
        ("R1‖RX", 985.5),  # nobody knows RX
        ("R+1‖RE", 985.5),  # a name the notation cannot hold
        ("R1‖(RE", 985.5),
        ("R1 RE", 985.5),
        ("‖", 985.5),
        ("(" * 3000, 985.5),
        ("+".join(["RE"] * 40), 40e3),  # too many to draw
    ],
)
def test_what_cannot_be_drawn_truly_is_not_drawn(words: str, seen: float) -> None:
    assert _draw(words, seen) == ""


@given(st.text(max_size=60))
def test_any_text_is_set_without_a_crash_and_stays_text(words: str) -> None:
    shown = expression(words)
    kept = re.sub(r"<(/?)(span|sub|i|wbr)( class=\"\w+\")?>", "", shown)
    assert "<" not in kept
    parse_hand(words)


def test_short_quotients_are_stacked_and_long_ones_are_not() -> None:
    assert 'class="fr"' in expression("gm·RE/(1 + gm·RE)")
    assert expression("1/gm(Q1)").count("<sub>m,Q1</sub>") == 1
    long = "·".join(["RE"] * 30)
    assert 'class="fr"' not in expression(f"{long}/RE")
