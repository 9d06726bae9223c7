"""Every bound of the reader, from both sides: as much as is allowed is read, one more is not."""

from __future__ import annotations

from pathlib import Path

import pytest

from tauledger.netlist import Netlist, parse, read, reader
from tauledger.netlist.blocks import MAXIMUM_DEFINITION_DEPTH
from tauledger.netlist.expression import (
    MAX_DEPTH,
    MAX_LENGTH,
    ExpressionError,
    number_traps,
    parse_expression,
)
from tauledger.netlist.reader import (
    MAXIMUM_INCLUDE_DEPTH,
    MAXIMUM_INCLUDES,
    MAXIMUM_PROBLEMS,
)
from tauledger.netlist.source import MAXIMUM_BYTES, MAXIMUM_LINE, read_bytes
from tauledger.netlist.statements import MAXIMUM_NESTING
from tauledger.problems import ProblemError


def codes(text: str) -> list[str]:
    """Of the problems of a netlist below its title, those that stop it included."""
    try:
        return [entry.code for entry in parse("title\n" + text).problems]
    except ProblemError as error:
        return [entry.code for entry in error.problems]


def parentheses(depth: int) -> str:
    return "R1 a 0 r=f" + "(" * depth + "1" + ")" * depth


def subcircuits(depth: int) -> str:
    return ".subckt s a\n" * depth + "R1 a 0 1\n" + ".ends\n" * depth


@pytest.mark.parametrize(
    ("make", "most", "code"),
    [
        (parentheses, MAXIMUM_NESTING, "nesting-too-deep"),
        (lambda n: "R1 a 0 (1) " * n, MAXIMUM_NESTING + 5, None),
        (subcircuits, MAXIMUM_DEFINITION_DEPTH, "nesting-too-deep"),
        (lambda n: "R1 a 0 1" + "x" * (n - 8), MAXIMUM_LINE, "line-too-long"),
        (lambda n: "R1 a 0\n+" + "x" * (n - 7), MAXIMUM_LINE, "line-too-long"),
        (lambda n: "* " + "x" * n, MAXIMUM_LINE, None),
    ],
    ids=["parentheses", "in a row", "subcircuits", "line", "continued line", "comment"],
)
def test_bound_of_a_statement(make, most: int, code: str | None) -> None:  # type: ignore[no-untyped-def]
    assert codes(make(most)) == []
    assert codes(make(most + 1)) == ([code] if code else [])


def test_nesting_is_shown_where_it_goes_too_deep() -> None:
    (entry,) = parse("title\n" + parentheses(MAXIMUM_NESTING + 3)).problems
    assert entry.span is not None
    assert entry.span.column == len("R1 a 0 r=f") + MAXIMUM_NESTING + 1
    assert entry.span.length == 1
    # However many are closed before.
    before = "R1 a 0 " + "(1) " * (MAXIMUM_NESTING + 5)
    (entry,) = parse("title\n" + before + "(" * 50 + "1" + ")" * 50).problems
    assert entry.span is not None
    assert entry.span.column == len(before) + MAXIMUM_NESTING + 1


def test_problems_are_listed_up_to_the_bound() -> None:
    assert codes("R1 = 1\n" * MAXIMUM_PROBLEMS) == ["line-unreadable"] * MAXIMUM_PROBLEMS
    more = codes("R1 = 1\n" * (MAXIMUM_PROBLEMS + 1))
    assert more == ["line-unreadable"] * MAXIMUM_PROBLEMS + ["too-many-problems"]


def test_words_of_a_whole_run_are_bounded(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(reader, "MAXIMUM_WORDS", 60)
    # Each line counts one more than its blanks, commas, tabs, "=" and "(".
    line = "R1 a,b\tr=f(1)\n"
    assert codes(line * 10) == []
    assert codes(line * 10 + "R2 a\n") == ["file-too-large"]


def test_bytes_of_a_file(tmp_path: Path) -> None:
    path = tmp_path / "amp.cir"
    path.write_bytes(b"title\nR1 a 0 1\n")
    size = path.stat().st_size
    assert read_bytes(path, size) == path.read_bytes()
    with pytest.raises(ProblemError, match="larger than"):
        read_bytes(path, size - 1)


def test_characters_of_a_text() -> None:
    text = "title\nR1 a 0 1\n*" + "x" * (MAXIMUM_BYTES - 16)
    assert len(text) == MAXIMUM_BYTES
    assert parse(text).problems == ()
    with pytest.raises(ProblemError) as caught:
        parse(text + "*")
    assert caught.value.problems[0].code == "file-too-large"


def including(folder: Path, lines: str) -> Netlist:
    path = folder / "amp.cir"
    path.write_text(f"title\n{lines}R1 a 0 1\n")
    return read(path)


def test_files_together_are_bounded(tmp_path: Path) -> None:
    """What the netlist holds counts, and what each file before it held."""
    half = b"* half of what is allowed\n" * (MAXIMUM_BYTES // 2 // 26)
    (tmp_path / "first.lib").write_bytes(half)
    (tmp_path / "second.lib").write_bytes(half[:-100])
    both = ".include first.lib\n.include second.lib\n"
    assert including(tmp_path, both).problems == ()
    (tmp_path / "second.lib").write_bytes(half)
    with pytest.raises(ProblemError) as caught:
        including(tmp_path, both + "* and more than is left\n" * 4)
    (entry,) = caught.value.problems
    assert entry.code == "file-too-large"
    assert entry.span is not None
    assert (entry.span.line, entry.span.column) == (3, len(".include ") + 1)


@pytest.mark.parametrize("depth", [MAXIMUM_INCLUDE_DEPTH, MAXIMUM_INCLUDE_DEPTH + 1])
def test_depth_of_includes(tmp_path: Path, depth: int) -> None:
    for level in range(1, depth):
        (tmp_path / f"{level}.lib").write_text(f".include {level + 1}.lib\n")
    (tmp_path / f"{depth}.lib").write_text("R2 a 0 1\n")
    netlist = including(tmp_path, ".include 1.lib\n")
    names = [entry.name.text for entry in netlist.statements]
    if depth <= MAXIMUM_INCLUDE_DEPTH:
        assert netlist.problems == ()
        assert names == ["R2", "R1"]
    else:
        assert [entry.code for entry in netlist.problems] == ["include-too-deep"]
        assert names == ["R1"]


@pytest.mark.parametrize("count", [MAXIMUM_INCLUDES, MAXIMUM_INCLUDES + 1])
def test_number_of_includes(tmp_path: Path, count: int) -> None:
    (tmp_path / "m.lib").write_text("R2 a 0 1\n")
    netlist = including(tmp_path, ".include m.lib\n" * count)
    allowed = min(count, MAXIMUM_INCLUDES)
    assert len(netlist.statements) == allowed + 1
    assert [entry.code for entry in netlist.problems] == ["include-too-deep"] * (count - allowed)


def sum_of(terms: int) -> str:
    return "+".join("x" * terms)


@pytest.mark.parametrize(
    ("make", "most", "place"),
    [
        (lambda n: "(" * n + "1+1" + ")" * n, MAX_DEPTH, MAX_DEPTH),
        # A sum is refused where it begins, signs where what they stand before does.
        (sum_of, MAX_DEPTH, 0),
        (lambda n: "2*" + "f({" * (n // 2) + "x" + "})" * (n // 2), MAX_DEPTH, 228),
        (lambda n: " " + "!" * (n - 1) + "x", MAX_DEPTH, MAX_DEPTH + 2),
        (lambda n: "x" + " " * (n - 3) + "+1", MAX_LENGTH, MAX_LENGTH),
        # A part closed again no longer counts.
        (lambda n: f"1+{'(' * n}2{')' * n}*{'(' * n}2{')' * n}", MAX_DEPTH, 2 + MAX_DEPTH),
    ],
    ids=["parentheses", "sum", "calls", "signs", "length", "side by side"],
)
def test_bound_of_an_expression(make, most: int, place: int) -> None:  # type: ignore[no-untyped-def]
    parse_expression(make(most))
    with pytest.raises(ExpressionError) as caught:
        parse_expression(make(most + 2))
    assert caught.value.offset == place
    assert "more than" in caught.value.message or "at most" in caught.value.message


def test_a_number_alone_is_no_trap() -> None:
    assert number_traps("1k + 2.5meg*3u") == ()
