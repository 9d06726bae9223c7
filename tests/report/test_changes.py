"""Comparisons on the page: every width kept, every word inert, the same figures in each format."""

from __future__ import annotations

import html
import re
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from markdown_it import MarkdownIt

from report.fixtures import ONE_STAGE
from tauledger.problems import SourceSpan
from tauledger.quantity import format_quantity
from tauledger.report.alphabet import alphabet
from tauledger.report.changes import comparison_page, comparison_section
from tauledger.report.html_bias import changes
from tauledger.report.inert import display_width
from tauledger.report.layout import plain
from tauledger.report.markdown_changes import changes_section
from tauledger.report.page import Page
from tauledger.report.wording import change, part_text, remainder, value, verdict
from tauledger.review.changes import (
    Attribution,
    Comparison,
    Detail,
    EditEffect,
    FigureChange,
    PartChange,
    WordChange,
)

HOSTILE = st.text(max_size=60) | st.sampled_from(
    ["\x1b]0;owned\x07", "::error::x", "a|b`c", "@team #1 <img src=x>", "名前" * 30, "a\r\n# b",
     "[x](javascript:y)", "x" * 300]
)  # fmt: skip


def _comparison(a: str = "C3", b: str = "R9") -> Comparison:
    span = SourceSpan(a, 7, 1, 2, a)
    effects = (
        EditEffect(a, (a,), 300.0, 340.0, 320.0, 0.9412),
        EditEffect(b, (b,), None, 10.0, 10.0, 0.0294),
    )
    return Comparison(
        old=f"HEAD:{a}",
        new=b,
        electrical=True,
        parts=(
            PartChange("changed", "capacitor", a, a, (Detail("value", 1e-4, 2.2e-5, "F"),), True,
                       span, span),
            PartChange("added", "resistor", "", b, (Detail("nodes", None, f"{a} {b}"),), True,
                       None, span),
        ),
        figures=(
            FigureChange("low corner", "", "Hz", 60.0, 400.0, 340.0, 340 / 60),
            FigureChange("collector current", a, "A", 1e-3, None, None, None),
            FigureChange("midband gain", "", "dB", 40.0, 40.0, 0.0, None),
        ),
        words=(
            WordChange("low corner set by", "", a, b, True),
            WordChange("role", a, "emitter bypass", b, True),
        ),
        attributions=(Attribution("low corner", "Hz", 60.0, 400.0, effects, 40.0, 10.0, (b,)),),
        notes=(a,),
    )  # fmt: skip


def test_the_answer_stands_first() -> None:
    assert verdict(_comparison()) == ["low corner 60.0 Hz → 400 Hz: C3 94 % of the move"]
    page = plain(comparison_page(Page(100, alphabet("utf-8")), _comparison()))
    assert page.splitlines()[1] == " low corner 60.0 Hz → 400 Hz: C3 94 % of the move"


def test_what_is_left_over_is_said() -> None:
    whole, interaction, note = remainder(_comparison().attributions[0])
    assert whole == "whole change +340 Hz; remainder +10.0 Hz (+2.9 %)"
    assert interaction.endswith(": +40.0 Hz (+11.8 %)")
    assert note == "R9"


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        (100e-6, 22e-6, "value 100 µF → 22.0 µF"),
        (4.7e3, 4.7001e3, "value 4.7000 kF → 4.7001 kF"),
        (1e-6, None, "value 1.00 µF → not given"),
    ],
)
def test_a_value_has_the_digits_that_tell(old: float, new: float | None, said: str) -> None:
    detail = Detail("value", old, new, "F")
    assert part_text(PartChange("changed", "x", "C1", "C1", (detail,), True, None, None)) == said


@pytest.mark.parametrize(
    ("figure", "said"),
    [
        (FigureChange("f", "", "Hz", 100.0, 150.0, 50.0, 0.5), "+50 %"),
        (FigureChange("f", "", "dB", 40.0, 38.0, -2.0, None), "-2.00 dB"),
        (FigureChange("f", "", "dB", 40.0, 40.0 - 5.36e-5, -5.36e-5, None), "<0.005 dB"),
        (FigureChange("f", "", "dB", 40.0, 39.994, -0.006, None), "-0.01 dB"),
        (FigureChange("f", "", "dB", 0.0, 12.346, 12.346, None), "+12.35 dB"),
        (FigureChange("f", "", "V", 0.0, 1.5e-3, 1.5e-3, None), "+1.50 mV"),
        (FigureChange("f", "", "Hz", 100.0, 100.0, 0.0, 0.0), "none"),
        (FigureChange("f", "", "Hz", 1e6, 1e6 + 1, 1.0, 1e-6), "<0.05 %"),
        (FigureChange("f", "", "Hz", None, 100.0, None, None), "new"),
        (FigureChange("f", "", "Hz", 100.0, None, None, None), "gone"),
        (FigureChange("f", "", "Hz", None, None, None, None), "—"),
    ],
)
def test_how_far_a_figure_moved(figure: FigureChange, said: str) -> None:
    assert change(figure) == said
    assert value(-3.0, "V/V", signed=True) == "-3.00 V/V"


@settings(max_examples=60, deadline=None)
@given(a=HOSTILE, b=HOSTILE, width=st.integers(72, 100))
def test_words_of_a_netlist_are_inert_on_the_page(a: str, b: str, width: int) -> None:
    page = Page(width, alphabet("utf-8"))
    for lines in (
        comparison_page(page, _comparison(a, b)),
        comparison_section(page, _comparison(a, b)),
    ):
        for line in plain(lines).splitlines():
            assert line.replace("\u00a0", " ").isprintable()
            assert display_width(line) <= width


@settings(max_examples=60, deadline=None)
@given(a=HOSTILE, b=HOSTILE)
def test_words_of_a_netlist_are_inert_in_markdown(a: str, b: str) -> None:
    section = changes_section(_comparison(a, b))
    tokens = MarkdownIt("commonmark", {"html": True}).enable("table").parse(section)
    kinds = [token.type for token in tokens]
    assert kinds.count("table_open") == 3
    assert kinds.count("heading_open") == 1
    inner = [child for token in tokens for child in token.children or ()]
    assert not {child.type for child in inner} & {"link_open", "image"}
    raw = [token.content for token in (*tokens, *inner) if token.type.startswith("html")]
    assert (
        re.sub(r"</?(details|summary|span)>|\$|All figures, old and new|\s", "", "".join(raw)) == ""
    )
    rows = [line for line in section.splitlines() if line.startswith("|")]
    assert {line.count("|") for line in rows} == {5, 6}


def test_no_comparison_is_no_section() -> None:
    assert comparison_section(Page(100, alphabet("utf-8")), ONE_STAGE.comparison) == []


@pytest.mark.parametrize("unit", ["dB", "Hz"])
def test_an_edit_that_hardly_moves_a_figure_has_no_digits(unit: str) -> None:
    """Half a unit of the last decimal shown: 0.005 dB, or 0.05 % of the old 60 Hz."""
    effects = (EditEffect("C3", ("C3",), -5.36e-5, 2.0, 0.006, 0.003),)
    whole = Attribution("f", unit, 60.0, 62.0, effects, 1.9, -0.0123)
    comparison = replace(_comparison(), attributions=(whole,))
    page = plain(comparison_page(Page(100, alphabet("utf-8")), comparison)).replace("\u00a0", " ")
    least, rest = {
        "dB": ("<0.005 dB", "-0.01 dB (-0.6 %)"),
        "Hz": ("<30 mHz", "<30 mHz (-0.6 %)"),
    }[unit]
    assert re.search(rf"^ C3 +{least} ", page, re.MULTILINE)
    assert f"remainder {rest}" in page
    for text in (changes_section(comparison), changes(comparison)):
        assert "5.36e-5" not in text
        assert least in html.unescape(text).replace("\\", "").replace("\u00a0", " ")


def test_a_move_its_own_digits_do_not_show_is_not_in_the_answer() -> None:
    comparison = _comparison()
    (low,) = comparison.attributions
    gain = replace(low, figure="midband gain", unit="dB", old=69.401, new=69.41)
    both = replace(comparison, attributions=(low, gain))
    assert verdict(both) == verdict(comparison)
    alone = replace(comparison, attributions=(gain,))
    assert verdict(alone)[0].startswith("midband gain 69.4 dB → 69.4 dB")


def test_what_rounds_to_nothing_has_no_sign() -> None:
    page = Page(100, alphabet("utf-8"))
    assert [page.signed_percent(v).replace("\u00a0", " ") for v in (-0.0002, 0.0002, 0.002)] == [
        "0.0 %", "0.0 %", "+0.2 %"
    ]  # fmt: skip
    assert page.percent(-0.0002).endswith("0.0\u00a0%")
    assert not page.percent(-0.0002).startswith("-")
    assert format_quantity(-4e-6, "dB") == "0 dB"


def test_a_move_too_small_to_print_is_not_called_one() -> None:
    comparison = _comparison()
    (low,) = comparison.attributions
    same = replace(comparison, attributions=(replace(low, new=low.old * 1.0002),))
    (sentence,) = verdict(same)
    assert sentence == "parts changed; neither the corners nor the gain moved by 0.05 %"
    assert "which edit moved it" not in plain(comparison_page(Page(100, alphabet("utf-8")), same))
