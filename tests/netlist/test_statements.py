"""Lines, words and blocks: what the syntax alone says, with positions."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from lark.exceptions import UnexpectedInput

from tauledger.netlist import parse, statements
from tauledger.netlist.statements import Assignment, Call, Formula, Group, Statement, Table, Word


def statement(line: str) -> Statement:
    netlist = parse("title\n" + line)
    assert netlist.problems == ()
    return netlist.statements[0]


def words(line: str) -> list[str]:
    return [item.text for item in statement(line).items if isinstance(item, Word)]


@pytest.mark.parametrize(
    "name",
    [
        "net-_q1-pad1_",
        "Net-(Q1-C)",
        "/IN",
        "/amp/stage-(2)/out",
        "+12V",
        "-12V",
        "$N_0001",
        "$G_VCC",
        "a#b",
        "x1.y",
        "n~1",
        "q:1",
        "Net-(U1-+)",
        "Net-(D1-Pad1)",
        "N$17",
        "Straße",
    ],
)
def test_node_names_of_schematic_editors_are_one_word(name: str) -> None:
    assert words(f"R1 {name} 0 10k") == [name, "0", "10k"]
    assert words(f"R1 0 {name} 10k tc1=0")[:3] == ["0", name, "10k"]


@pytest.mark.parametrize(
    ("line", "kept"),
    [
        ("R1 a b 1k ; c d", ["a", "b", "1k"]),
        ("R1 a b 1k;c d", ["a", "b", "1k"]),
        ("R1 a b 1k $ c d", ["a", "b", "1k"]),
        ("R1 a b 1k // c d", ["a", "b", "1k"]),
        ("R1,a,b,1k", ["a", "b", "1k"]),
        ("R1\ta\t b  1k", ["a", "b", "1k"]),
        ("   R1 a b 1k", ["a", "b", "1k"]),
        ("R1 a\n+ b\n\n* between\n+1k", ["a", "b", "1k"]),
        ("R1 a b$x 1k", ["a", "b$x", "1k"]),
    ],
)
def test_comments_blanks_and_continuation(line: str, kept: list[str]) -> None:
    assert words(line) == kept


def test_assignments_groups_calls_and_tables() -> None:
    model = statement(".model m npn (is = 1f, bf=100 vaf={x+1})")
    group = model.items[2]
    assert isinstance(group, Group)
    names = [item.name.text for item in group.items if isinstance(item, Assignment)]
    values = [item.value for item in group.items if isinstance(item, Assignment)]
    assert names == ["is", "bf", "vaf"]
    assert isinstance(values[2], Formula)
    assert values[2].text == "x+1"
    limit = statement("R1 a b r=limit(a, 1, 2)").items[2]
    assert isinstance(limit, Assignment)
    assert isinstance(limit.value, Call)
    table = statement("E1 a 0 TABLE {v(b)} = (0, 1) (1, 2)").items
    assert [type(item) for item in table[3:]] == [Table, Group]


def test_definitions_run_up_to_the_next_name() -> None:
    items = statement(".param a = 2 * b c={a == b} f(x, y) = x+y d='a ? b : c'").items
    pairs = [
        (item.name.text, item.value.text.strip())
        for item in items
        if isinstance(item, Assignment) and isinstance(item.value, Word)
    ]
    assert pairs == [
        ("a", "2 * b"),
        ("c", "{a == b}"),
        ("f(x, y)", "x+y"),
        ("d", "'a ? b : c'"),
    ]


def test_behavioural_source_keeps_its_whole_expression() -> None:
    items = statement("B1 out 0 I = 2*v(a, b) + {k}*i(V1)\n+ - 1").items
    assert isinstance(items[2], Word)
    assert items[2].text == "I = 2*v(a, b) + {k}*i(V1)  - 1"


def test_a_position_points_into_the_physical_line() -> None:
    text = "title\nR1 a b 1k\nQ1 c b e\n  + MODEL area=2 ; note\n"
    items = parse(text, "amp.cir").statements[1]
    span = items.span(items.items[4])
    assert (span.path, span.line, span.column, span.length) == ("amp.cir", 4, 11, 6)
    assert span.text == "  + MODEL area=2 ; note"
    assert span.text[span.column - 1 :][: span.length] == "area=2"


def test_one_bad_line_is_one_problem_on_that_line() -> None:
    netlist = parse("title\nR1 a b {1k\nR2 a b 2k\nR3 a b )\nR4 = b\nC1 a b 1u")
    assert [entry.span.line for entry in netlist.problems if entry.span] == [2, 4, 5]
    assert [entry.name.text for entry in netlist.statements] == ["R2", "C1"]


@pytest.mark.parametrize(
    ("line", "column", "words_in_message"),
    [
        ("R1 a b {1k", 8, "never closed"),
        ("R1 a b 'x", 8, "never closed"),
        ("R1 a b )", 8, "without an opening one"),
        ("R1 a b 1k}", 10, "without an opening one"),
        ("V1 a b dc= ", 11, "after it"),
        ("V1 = 5", 4, "before it"),
        ("B1 a b 5", 8, "Bname node node V=expression"),
        (".param 5 = 3", 8, "name = value"),
    ],
)
def test_syntax_messages(line: str, column: int, words_in_message: str) -> None:
    (entry,) = parse("title\n" + line).problems
    assert entry.code == "line-unreadable"
    assert words_in_message in entry.message
    assert entry.advice
    assert entry.span is not None
    assert (entry.span.line, entry.span.column) == (2, column)


def test_subcircuits_nest_and_keep_their_header() -> None:
    netlist = parse(
        "title\n.subckt outer a b params: g=2 h={g}\n.subckt inner c\nR1 c 0 1\n.ends inner\n"
        "X1 a inner\n.ends\nX2 a b outer\n"
    )
    (outer,) = netlist.subcircuits
    assert [word.text for word in outer.nodes] == ["a", "b"]
    assert [item.name.text for item in outer.parameters] == ["g", "h"]
    assert outer.subcircuits[0].name.text == "inner"
    assert [entry.name.text for entry in netlist.statements] == ["X2"]


def test_control_blocks_are_read_over() -> None:
    netlist = parse("title\nR1 a 0 1\n.control\nlet x = {v(1\nplot v(a)\n.endc\nR2 a 0 1\n")
    assert [entry.name.text for entry in netlist.statements] == ["R1", "R2"]
    assert [entry.name.text for entry in netlist.commands] == ["let", "plot"]
    assert netlist.problems == ()


@pytest.mark.parametrize(
    ("text", "title"),
    [
        ("An amplifier\nR1 a 0 1", "An amplifier"),
        ("* An amplifier *\nR1 a 0 1", "An amplifier *"),
        (".title An amplifier\nR1 a 0 1", "An amplifier"),
        ("\nR1 a 0 1", ""),
        ("old\nR1 a 0 1\n.title new", "new"),
    ],
)
def test_title(text: str, title: str) -> None:
    netlist = parse(text)
    assert netlist.title == title
    assert [entry.name.text for entry in netlist.statements if entry.name.text[0] == "R"] == ["R1"]


def test_plain_lines_are_split_as_the_grammar_would() -> None:
    line = "Q1,  Net-(Q1-C) /a-(b)/(c)x\t$N_1  e-  2N3904 -(x) 1k"
    by_hand = statements._WORD.findall(line)
    by_grammar = statements._parser().parse(line, start="items")
    assert by_hand[1:] == [word.text for word in by_grammar]
    assert statements._PLAIN_LINE.fullmatch("R1 Net-(Q1-C) 0 1k")
    assert not statements._PLAIN_LINE.fullmatch("R1 a 0 (1k)")


PIECES = st.sampled_from(
    ["a", "b-", "/c", "1k", "2.5", "npn", "(", ")", "=", " ", ",", "\t", "-(x)", "Net-(Q1-C)", "ac"]
)


@settings(max_examples=3000, deadline=None)
@given(st.lists(PIECES, max_size=14).map("".join))
def test_simple_lines_are_read_as_the_grammar_would(rest: str) -> None:
    line = "Q1 " + rest
    simple = statements._simple_items(line, 2)
    try:
        by_grammar = statements._parser().parse(line, start="items")
    except UnexpectedInput:
        by_grammar = None
    if simple is not None:
        assert simple == by_grammar


def test_model_cards_need_no_grammar() -> None:
    card = ".model qx npn(is=1e-14 bf=200, vaf=80) level=1 (a (b c))"
    simple = statements._simple_items(card, len(".model"))
    assert simple == statements._parser().parse(card, start="items")
    for line in ("R1 a b {r}", "R1 a b r=limit(1)", "R1 a (b", "R1 a b) c", "R1 a = ", "R1 = 2"):
        assert statements._simple_items(line, 2) is None
