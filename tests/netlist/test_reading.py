"""What a file says beyond its elements: blocks, sheets, titles, sections, encodings, places."""

from __future__ import annotations

import errno
import os
from collections.abc import Callable
from pathlib import Path

import pytest

from tauledger.netlist import Netlist, Subcircuit, parse, read
from tauledger.netlist.statements import Assignment, Call, Group, Word
from tauledger.problems import ProblemError


def below(text: str) -> Netlist:
    """The netlist of a text below its title."""
    return parse("title\n" + text)


def names(block: Netlist | Subcircuit) -> list[str]:
    return [entry.name.text for entry in block.statements]


def defined(netlist: Netlist) -> list[str]:
    return [entry.name.text for entry in netlist.subcircuits]


def found(netlist: Netlist) -> list[tuple[str, int, int]]:
    """Code, line and column of every problem."""
    return [(p.code, p.span.line, p.span.column) for p in netlist.problems if p.span]


# blocks -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("opening", "closing"),
    [(".subckt", ".ends"), (".SUBCKT", ".Ends amp"), (".macro", ".eom"), (".subcircuit", ".ENDS")],
)
def test_a_block_ends_where_its_last_line_says(opening: str, closing: str) -> None:
    netlist = below(f"{opening} amp a b\nR1 a b 1\n{closing}\nR2 a 0 2\nX1 a 0 amp")
    assert names(netlist) == ["R2", "X1"]
    assert defined(netlist) == ["amp"]
    assert names(netlist.subcircuits[0]) == ["R1"]
    assert netlist.subcircuits[0].closing is not None
    assert netlist.problems == ()


def test_an_end_without_its_beginning_is_passed_over() -> None:
    netlist = below("R1 a 0 1\n.ends amp\nR2 a 0 2")
    assert names(netlist) == ["R1", "R2"]
    assert found(netlist) == [("ends-unmatched", 3, 1)]


def test_blocks_left_open_are_each_told_and_kept() -> None:
    netlist = below("R1 a 0 1\n.subckt outer a\nR2 a 0 2\n.subckt inner b\nR3 b 0 3")
    assert found(netlist) == [("subcircuit-unclosed", 5, 1), ("subcircuit-unclosed", 3, 1)]
    (outer,) = netlist.subcircuits
    assert names(outer) == ["R2"]
    assert outer.closing is None
    assert names(outer.subcircuits[0]) == ["R3"]


@pytest.mark.parametrize("header", [".subckt", ".subckt (a b)", ".subckt name=1"])
def test_a_block_without_a_name(header: str) -> None:
    netlist = below(f"R0 a 0 1\n{header}\nR1 a 0 1\n.ends\nR2 a 0 2")
    assert found(netlist) == [("line-unreadable", 3, 1)]
    assert names(netlist) == ["R0", "R2"]
    assert defined(netlist) == []


def test_words_of_a_header() -> None:
    """Pins, then parameters with or without the word that announces them."""
    for word in ("params:", "PARAM:", "optional:", ""):
        netlist = below(f"R0 a 0 1\n.subckt amp in out {word} gain=2 r={{1k}}\nR1 in out 1\n.ends")
        (amp,) = netlist.subcircuits
        assert [word.text for word in amp.nodes] == ["in", "out"]
        assert [item.name.text for item in amp.parameters] == ["gain", "r"]
    odd = below("R0 a 0 1\n.subckt amp in (out) gain=2\nR1 in 0 1\n.ends")
    assert found(odd) == [("line-unreadable", 3, len(".subckt amp in ") + 1)]
    assert [word.text for word in odd.subcircuits[0].nodes] == ["in"]


# a sheet in a subcircuit ------------------------------------------------------------------------

SHEET = ".subckt sheet\nX1 in amp\n.subckt own a\nR9 a 0 9\n.ends\n.ends sheet\n"
AMP = ".subckt amp a\nR1 a 0 1k\n.ends\n"


def test_a_sheet_brings_its_elements_and_its_own_subcircuits() -> None:
    for text in (SHEET + AMP, AMP + SHEET, AMP + ".param x=1\n" + SHEET + ".model m npn\n"):
        netlist = below(text)
        assert names(netlist)[-1] == "X1"
        assert sorted(defined(netlist)) == ["amp", "own"]
        assert [p.code for p in netlist.problems] == ["sheet-subcircuit"]


@pytest.mark.parametrize(
    "text",
    [
        SHEET + "R1 a 0 1\n",  # there is an element outside
        SHEET + ".subckt another\nR2 a 0 2\n.ends\n",  # which of the two is the sheet?
        AMP,  # it has pins, so something else would call it
    ],
)
def test_what_is_no_sheet(text: str) -> None:
    netlist = below(text)
    assert "X1" not in names(netlist)
    assert netlist.problems == ()


# lines whose text is for others to read -----------------------------------------------------------

RAW = (
    ".title .if .elseif .else .endif .ic .nodeset .ac .tran .dc .tf .print .probe .save .plot "
    ".meas .measure .four .noise .func"
)


@pytest.mark.parametrize("word", RAW.split())
def test_text_that_the_grammar_does_not_read_is_kept_as_it_is(word: str) -> None:
    tail = " v(out) = ) {odd 'text"
    for spelt in (word, word.upper()):
        statement = below(f"R1 a 0 1\n{spelt}{tail}").statements[1]
        assert statement.keyword == word
        assert statement.items == ()
        assert statement.tail() == tail


@pytest.mark.parametrize("word", [".param", ".PARAMS", ".parameters", ".csparam"])
def test_a_definition_runs_up_to_the_next_name(word: str) -> None:
    items = below(f"{word} a = 2 * b c=3").statements[0].items
    pairs = [
        (item.name.text, item.value.text.strip())
        for item in items
        if isinstance(item, Assignment) and isinstance(item.value, Word)
    ]
    assert pairs == [("a", "2 * b"), ("c", "3")]


def test_a_value_is_one_word_unless_it_touches_a_parenthesis() -> None:
    (statement,) = below("R1 a 0 r=f(1) tc=2 (3) m=4").statements
    values = [item.value for item in statement.items if isinstance(item, Assignment)]
    assert [statement.text_of(value) for value in values] == ["f(1)", "2", "4"]
    assert isinstance(values[0], Call)
    assert statement.text_of(statement.items[4]) == "(3)"


def test_what_is_missing_at_the_end_is_shown_at_the_last_letter() -> None:
    assert found(below("V1 a b dc=")) == [("line-unreadable", 2, 10)]
    assert found(below("V1 a b dc= ")) == [("line-unreadable", 2, 11)]
    (entry,) = below("R1 a b ) c").problems
    assert entry.span is not None
    assert (entry.span.column, entry.span.length) == (8, 1)


def test_a_model_card_that_is_cut_short_is_read_as_if_closed() -> None:
    netlist = below(".model qx npn(bf=100 vaf={2*40}\nR1 a 0 1")
    assert found(netlist) == [("parenthesis-unclosed", 2, len(".model qx npn") + 1)]
    group = netlist.statements[0].items[-1]
    assert isinstance(group, Group)
    assert [i.name.text for i in group.items if isinstance(i, Assignment)] == ["bf", "vaf"]
    twice = below(".model qx npn((bf=100\nR1 a 0 1")
    assert [p.code for p in twice.problems] == ["parenthesis-unclosed"]
    assert names(twice) == [".model", "R1"]


def test_the_end_is_the_end() -> None:
    for end in (".end", ".END", "  .End  "):
        assert names(below(f"R1 a 0 1\n{end}\nR2 a 0 = {{")) == ["R1"]


@pytest.mark.parametrize(
    ("tail", "kept"),
    [
        (' "a ; b" ; c', ' "a ; b" '),
        (' "a $ b // c" d', ' "a $ b // c" d'),
        (' "a" $ "b"', ' "a" '),
        (" a$b//c", " a$b//c"),
        (" $N_1 $d // c", " $N_1 "),
        (" a,$ b", " a,"),
        (" a", " a"),
    ],
)
def test_no_comment_begins_in_double_quotes_or_inside_a_word(tail: str, kept: str) -> None:
    assert below(f".print{tail}").statements[0].tail() == kept


# the first line -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("first", "title", "warned"),
    [
        ("R1 in out 10k", "R1 in out 10k", True),
        ("  c7 in 0 4.7u  ", "c7 in 0 4.7u", True),
        (".model qx npn", ".model qx npn", True),
        ("R1 is the load of the 2nd stage", "R1 is the load of the 2nd stage", False),
        ("Vox humana, third rev 2b (draft)", "Vox humana, third rev 2b (draft)", False),
        ("**  Preamp  **", "Preamp  **", False),
        (".TITLE   Preamp, rev B  ", "Preamp, rev B", False),
        (".title", "", False),
        ("", "", False),
        (".lib", ".lib", True),
        ("R1 in out 10" + "0" * 200, "R1 in out 10" + "0" * 200, False),
    ],
)
def test_a_title_that_reads_as_a_statement(first: str, title: str, warned: bool) -> None:
    netlist = parse(first + "\nRX a 0 1\n")
    assert netlist.title == title
    assert names(netlist)[-1:] == ["RX"]
    assert [p.code for p in netlist.problems] == ["title-is-statement"] * warned
    if warned:
        (span,) = (p.span for p in netlist.problems)
        assert span is not None
        assert (span.line, span.column, span.length, span.text) == (1, 1, len(first), first)


# commands -----------------------------------------------------------------------------------------


def test_commands_keep_their_place_and_are_told_when_left_open() -> None:
    netlist = below("R1 a 0 1\n.CONTROL\n  run\nplot v(a) vs {\n.ENDC\nR2 a 0 2\n.control\nlet x")
    assert names(netlist) == ["R1", "R2"]
    assert [c.name.text for c in netlist.commands] == ["run", "plot", "let"]
    assert [(c.span().line, c.span().column) for c in netlist.commands] == [(4, 3), (5, 1), (9, 1)]
    assert netlist.commands[1].tail() == " v(a) vs {"
    assert found(netlist) == [("control-unclosed", 8, 1)]


# places in lines that are continued ---------------------------------------------------------------


def test_a_place_in_each_piece_of_a_continued_line() -> None:
    netlist = below("Q1 c b e ; the first\n* between\n+ QX area=2\n\n  +  m=3 off\n")
    (statement,) = netlist.statements
    spans = [statement.span(item) for item in statement.items]
    assert [(s.line, s.column, s.length) for s in spans] == [
        (2, 4, 1),
        (2, 6, 1),
        (2, 8, 1),
        (4, 3, 2),
        (4, 6, 6),
        (6, 6, 3),
        (6, 10, 3),
    ]
    assert [s.text[s.column - 1 :][: s.length] for s in spans] == [
        statement.text_of(item) for item in statement.items
    ]


def test_what_runs_over_a_line_end_is_marked_up_to_there() -> None:
    (statement,) = below("R1 a b r={2*\n+ 3}\n").statements
    span = statement.span(statement.items[-1])
    assert (span.line, span.column) == (2, 8)
    assert span.text[span.column - 1 :][: span.length] == "r={2*"


def test_a_continuation_of_nothing_is_marked_whole() -> None:
    (entry,) = parse("title\n  + a b\nR1 a 0 1\n").problems
    assert entry.span is not None
    assert entry.code == "continuation-orphan"
    assert (entry.span.line, entry.span.column, entry.span.length) == (2, 1, 7)


# encodings ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("encoding", ["utf-16-le", "utf-16-be"])
@pytest.mark.parametrize("marked", [False, True])
def test_two_bytes_a_character(tmp_path: Path, encoding: str, marked: bool) -> None:
    path = tmp_path / "amp.cir"
    text = ("\ufeff" if marked else "") + "Verstärker\nR1 a 0 4µ7\n"
    path.write_bytes(text.encode(encoding))
    netlist = read(path)
    assert netlist.title == "Verstärker"
    assert netlist.statements[0].tail() == " a 0 4µ7"


def test_the_end_of_file_mark_of_old_systems(tmp_path: Path) -> None:
    path = tmp_path / "amp.cir"
    path.write_bytes(b"title\r\nR1 a 0 1\r\n\x1a")
    assert names(read(path)) == ["R1"]
    path.write_bytes(b"title\r\nR1 a 0 1\r\n\x1a\r\n")
    with pytest.raises(ProblemError) as caught:
        read(path)
    assert caught.value.problems[0].code == "file-binary"


@pytest.mark.parametrize(
    "text",
    [
        '<?xml version="1.0"?>\n<svg>\n</svg>\n',
        "<!DOCTYPE html>\n<p>\n</html>",
        "(schematic\n  (version 1)\n  (symbol (at 1 2))\n)\n",
        "Version 4\nSHEET 1 880 680\nWIRE 1 2 3 4\n",
        '{"elements": []}\n',
        "%PDF-1.4\n1 0 obj\n",
    ],
)
def test_a_file_of_another_kind_is_told_once(tmp_path: Path, text: str) -> None:
    path = tmp_path / "amp.cir"
    path.write_text(text)
    with pytest.raises(ProblemError) as caught:
        read(path)
    assert [problem.code for problem in caught.value.problems] == ["file-foreign"]


@pytest.mark.parametrize("title", ["<draft>", "(old (2nd) try)", "{x}", "Version 4 of the stage"])
def test_a_title_may_look_like_anything(tmp_path: Path, title: str) -> None:
    path = tmp_path / "amp.cir"
    path.write_text(f"{title}\nR1 a 0 1k\n.end\n")
    assert read(path).title == title


# included files -----------------------------------------------------------------------------------


def written(folder: Path, files: dict[str, str]) -> Path:
    """Files under a folder; the path of the first."""
    for name, text in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text)
    return folder / next(iter(files))


def test_a_spelling_that_exists_comes_before_its_neighbours(tmp_path: Path) -> None:
    """Where letter case alone tells files apart, only what is not there is guessed."""
    top = written(
        tmp_path,
        {
            "amp.cir": "title\n.inc Kit/parts.LIB\n.inc kit/Parts.lib\n.inc KIT/b.lib\n",
            "KIT/b.lib": "R5 a 0 5\n",
            "Kit/Parts.lib": "R1 a 0 1\n",
            "Kit/parts.lib": "R2 a 0 2\n",
            "kit/Parts.lib": "R3 a 0 3\n",
            "kit/parts.lib": "R4 a 0 4\n",
        },
    )
    if (tmp_path / "AMP.CIR").exists():
        pytest.skip("letter case does not tell files apart here")
    assert names(read(top)) == ["R1", "R3", "R5"]


def test_includes_look_from_the_file_they_stand_in(tmp_path: Path) -> None:
    top = written(
        tmp_path,
        {
            "amp.cir": "title\n.include sub/one.lib\nR1 a 0 {\n",
            "sub/one.lib": ".include two.lib\nR2 a 0 {\n",
            "sub/two.lib": "R3 a 0 {\n",
        },
    )
    (tmp_path / ".git").mkdir()
    netlist = read(top)
    places = [(p.span.path, p.span.line, p.span.column) for p in netlist.problems if p.span]
    assert places == [
        (str(tmp_path / "sub" / "two.lib"), 1, 8),
        (str(tmp_path / "sub" / "one.lib"), 2, 8),
        (str(top), 3, 8),
    ]


@pytest.mark.parametrize("word", [".include", ".INC", ".incl", ".lib"])
def test_a_file_name_is_no_expression(tmp_path: Path, word: str) -> None:
    files = {"amp.cir": f"title\n{word} x={{1.lib\nR1 a 0 1\n", "x={1.lib": "R2 a 0 2\n"}
    netlist = read(written(tmp_path, files))
    assert netlist.problems == ()
    assert names(netlist) == ["R2", "R1"]


def test_a_link_out_of_the_project_is_refused_in_any_spelling(tmp_path: Path) -> None:
    top = written(tmp_path, {"in/amp.cir": "title\n.include DIR/secret.lib\nR1 a 0 1\n"})
    (tmp_path / "secret.lib").write_text("R2 a 0 2\n")
    (tmp_path / "in" / "dir").symlink_to(tmp_path)
    netlist = read(top, [tmp_path / "in"])
    assert names(netlist) == ["R1"]
    assert [p.code for p in netlist.problems] in (["include-refused"], ["include-missing"])


@pytest.mark.parametrize("name", ["../", "../.", "..", "../../..", "sub/"])
def test_a_folder_is_no_file_to_include(tmp_path: Path, name: str) -> None:
    netlist = read(written(tmp_path, {"amp.cir": f"title\n.include {name}\nR1 a 0 1\n"}))
    assert names(netlist) == ["R1"]
    assert [p.code for p in netlist.problems] in (["include-refused"], ["include-missing"])


def test_the_reason_why_a_file_cannot_be_read(tmp_path: Path) -> None:
    path = tmp_path / "amp.cir"
    path.symlink_to(path)
    with pytest.raises(ProblemError) as caught:
        read(path)
    (entry,) = caught.value.problems
    assert entry.code == "file-unreadable"
    assert f"({os.strerror(errno.ELOOP)})" in entry.message


def test_the_same_file_twice_is_no_cycle(tmp_path: Path) -> None:
    top = written(
        tmp_path,
        {
            "amp.cir": "title\n.include one.lib\n.include two.lib\n.include two.lib\n",
            "one.lib": ".include two.lib\n",
            "two.lib": "R1 a 0 1\n",
        },
    )
    netlist = read(top)
    assert netlist.problems == ()
    assert names(netlist) == ["R1", "R1", "R1"]
    (tmp_path / "two.lib").write_text(".include one.lib\nR2 a 0 1\n")
    assert {p.code for p in read(top).problems} == {"include-cycle"}


LIBRARY = """.lib 'Slow'
.include own.lib
R1 a 0 1
  .endl
R2 a 0 2
.LIB fast
R3 a 0 3
.lib other.lib "LowNoise"
	.ENDL fast
"""
OTHER = ".lib 'lownoise'\nR4 a 0 4\n.endl\n.lib normal\nR5 a 0 5\n.endl\n"


@pytest.mark.parametrize(
    ("asked", "elements"),
    [
        ("vendor.lib slow", ["R0", "R1"]),
        ("'vendor.lib' 'SLOW'", ["R0", "R1"]),
        ("vendor.lib fast", ["R3", "R4"]),
        ("other.lib normal", ["R5"]),
        # Without a section, what stands in none.
        ("vendor.lib", ["R2"]),
    ],
)
def test_sections_of_a_library(tmp_path: Path, asked: str, elements: list[str]) -> None:
    files = {"amp.cir": f"title\n.lib {asked}\n", "vendor.lib": LIBRARY, "own.lib": "R0 a 0 9\n"}
    netlist = read(written(tmp_path, {**files, "other.lib": OTHER}))
    assert netlist.problems == ()
    assert names(netlist) == elements


@pytest.mark.parametrize("shout", [str.lower, str.upper])
def test_sections_in_either_case(tmp_path: Path, shout: Callable[[str], str]) -> None:
    library = shout(".lib tt\nr1 a 0 1\n.endl tt\nr2 a 0 2\n")
    top = written(tmp_path, {"amp.cir": "title\n.lib m.lib tt\n", "m.lib": library})
    assert names(read(top)) == [shout("r1")]
    (tmp_path / "amp.cir").write_text("title\n.lib m.lib\n")
    assert names(read(top)) == [shout("r2")]


def test_a_section_that_is_not_there_is_named(tmp_path: Path) -> None:
    top = written(tmp_path, {"amp.cir": "title\n.lib vendor.lib typ\n", "vendor.lib": LIBRARY})
    (entry,) = read(top).problems
    assert entry.code == "library-section-missing"
    assert "'typ'" in entry.message
    assert "'vendor.lib'" in entry.message
