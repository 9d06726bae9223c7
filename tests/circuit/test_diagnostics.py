"""Every problem code of the reader is triggered here, at its place, with advice."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

import pytest

from tauledger.circuit import flatten
from tauledger.circuit.graph import find_floating_nodes
from tauledger.netlist import read
from tauledger.netlist.codes import CODES
from tauledger.problems import Problem, ProblemError, Severity

# Code → netlist behind a title line, and line and column of the problem (0: no position).
LINES: dict[str, tuple[str, int, int]] = {
    "line-unreadable": ("R1 a 0 {1k\n", 2, 8),
    "continuation-orphan": ("* nothing above\n+ 1k\nR1 a 0 1\n", 3, 1),
    "nesting-too-deep": ("V1 a 0 dc=" + "(" * 60 + ")" * 60 + "\n", 2, 51),
    "parenthesis-unclosed": ("D1 a 0 m\n.model m d(is=1f\n", 3, 11),
    "control-unclosed": ("R1 a 0 1\n.control\nrun\n", 3, 1),
    "ends-unmatched": ("R1 a 0 1\n.ends\n", 3, 1),
    "subcircuit-unclosed": (".subckt s a\nR1 a 0 1\n", 2, 1),
    "conditional-unbalanced": (".if (1)\nR1 a 0 1\n", 3, 1),
    "sheet-subcircuit": (".subckt sheet\nR1 a 0 1\n.ends\n", 2, 1),
    "directive-unknown": ("R1 a 0 1\n.modle m d\n", 3, 1),
    "element-incomplete": ("R1 a 0 1\nQ1 c b\n", 3, 1),
    "element-left-out": ("R1 a 0 1\nT1 a 0 b 0 z0=50\n", 3, 1),
    "name-duplicate": ("R1 a 0 1\nr1 a 0 2\n", 3, 1),
    "reference-missing": ("F1 a 0 Vx 2\nR1 a 0 1\n", 2, 8),
    "value-missing": ("R1 a 0\n", 2, 1),
    "value-unreadable": ("R1 a 0 rload\n.param rlaod=5\n", 2, 8),
    "value-unusable": ("R1 a 0 1k m=0\n", 2, 1),
    "value-zero": ("R1 a 0 0\n", 2, 1),
    "value-out-of-range": ("R1 a 0 1\n.ac dec 10 1k 10\n", 3, 12),
    "words-ignored": ("R1 a 0 1 2W\n", 2, 10),
    "coupling-out-of-range": ("L1 a 0 1\nL2 a 0 1\nK1 L1 L2 1.5\n", 4, 10),
    "polynomial-dimension": ("E1 a 0 POLY(0) b 0 1\n", 2, 12),
    "polynomial-single": ("E1 a 0 POLY(1) b 0 1\n", 2, 20),
    "model-missing": ("Q1 a b 0 BC847\n.model BC847B npn\n", 2, 10),
    "model-parameter-unknown": ("D1 a 0 m\n.model m d(is=1f tiss=3)\n", 3, 18),
    "model-kind": ("Q1 a b 0 m\n.model m d\n", 2, 10),
    "model-binned": ("M1 d g s b m\n.model m.1 nmos(lmin=1u)\n", 2, 12),
    "definition-repeated": ("D1 a 0 m\n.model m d(is=1f)\n.model M d(is=2f)\n", 4, 8),
    "subcircuit-missing": ("X1 a b ampp\n.subckt amp a b\nR1 a b 1\n.ends\n", 2, 8),
    "subcircuit-nodes": ("X1 a amp\n.subckt amp a b\nR1 a b 1\n.ends\n", 2, 1),
    "expression-invalid": ("R1 a 0 {2*}\n", 2, 8),
    "expression-unbraced": ("R1 a 0 x\n.param y=2 x=y * 2\n", 3, 14),
    "parameter-cycle": ("R1 a 0 1\n.param x={y} y={x}\n", 3, 16),
    "node-missing": ("R1 a 0 1\n.print v(aa)\n", 3, 8),
    "circuit-empty": ("* nothing\n", 0, 0),
    "circuit-too-large": ("X1 a s\n.subckt s a\nX1 a s\n.ends\n", 4, 1),
    "problems-omitted": ("".join(f"R{n} a 0 4k7\n" for n in range(30)), 0, 0),
    "too-many-problems": ("R1 = 1\n" * 200, 102, 4),
    "line-too-long": ("R1 a 0 1" + " x" * 60_000 + "\n", 2, 1),
    "node-floating": ("V1 a 0 1\nC1 a b 1u\nC2 b 0 1u\n", 3, 1),
    "include-missing": (".include nosuch.lib\nR1 a 0 1\n", 2, 10),
    "include-refused": (".include /etc/hostname\nR1 a 0 1\n", 2, 10),
    "include-cycle": (".include amp.cir\nR1 a 0 1\n", 2, 10),
    "library-section-missing": (".lib models.lib slow\nR1 a 0 1\n", 2, 1),
    "include-relocated": (".include C:\\kits\\models.lib\nR1 a 0 1\n", 2, 10),
    "value-milli": ("R1 a 0 1M\n", 2, 8),
    "value-range": ("R1 a 0 1-3k\n", 2, 8),
    "value-letter-digit": ("R1 a 0 {2*4k7}\n", 2, 11),
}
FIRST_LINE = {"title-is-statement": "R1 a 0 1k\nR2 a 0 1k\n"}


def _directory(folder: Path) -> Path:
    return folder


def _missing(folder: Path) -> Path:
    return folder / "nosuch.cir"


def _empty(folder: Path) -> Path:
    return _written(folder, b" \r\n")


def _binary(folder: Path) -> Path:
    return _written(folder, b"\x7fELF\x02\x01\x01\x00\x00\x90")


def _foreign(folder: Path) -> Path:
    return _written(folder, b"<svg xmlns='http://www.w3.org/2000/svg'>\n<g/>\n</svg>\n")


def _large(folder: Path) -> Path:
    return _written(folder, b"title\n" + b"* comment line\n" * 600_000)


def _unreadable(folder: Path) -> Path:
    # A link to itself cannot be opened by anyone, root included.
    path = folder / "loop.cir"
    path.symlink_to(path)
    return path


def _deep(folder: Path) -> Path:
    for level in range(30):
        (folder / f"l{level}.lib").write_text(f".include l{level + 1}.lib\n")
    return _written(folder, b"title\n.include l0.lib\nR1 a 0 1\n")


def _written(folder: Path, content: bytes) -> Path:
    path = folder / "amp.cir"
    path.write_bytes(content)
    return path


FILES: dict[str, Callable[[Path], Path]] = {
    "file-not-regular": _directory,
    "file-missing": _missing,
    "file-empty": _empty,
    "file-binary": _binary,
    "file-foreign": _foreign,
    "file-too-large": _large,
    "file-unreadable": _unreadable,
    "include-too-deep": _deep,
}


def problems_of(path: Path) -> tuple[Problem, ...]:
    try:
        circuit = flatten(read(path))
    except ProblemError as error:
        return error.problems
    return circuit.problems + find_floating_nodes(circuit)


def test_every_code_has_a_trigger_here() -> None:
    assert set(CODES) <= set(LINES) | set(FIRST_LINE) | set(FILES)


@pytest.mark.parametrize("code", LINES)
def test_problem_at_its_place(code: str, tmp_path: Path) -> None:
    text, line, column = LINES[code]
    (tmp_path / "models.lib").write_text(".model m d(is=1f)\n")
    path = _written(tmp_path, ("title\n" + text).encode())
    found = [entry for entry in problems_of(path) if entry.code == code]
    assert len(found) == 1
    (entry,) = found
    assert entry.advice or entry.severity is Severity.NOTE
    assert "\n" not in entry.message
    if line:
        assert entry.span is not None
        assert (entry.span.line, entry.span.column) == (line, column)
        assert entry.span.path == str(path)
        if len(entry.span.text) < 200:
            assert entry.span.text == ("title\n" + text).split("\n")[line - 1]
        assert 1 <= entry.span.length <= len(entry.span.text) - column + 1


@pytest.mark.parametrize("code", FIRST_LINE)
def test_problem_in_the_title_line(code: str, tmp_path: Path) -> None:
    (entry,) = problems_of(_written(tmp_path, FIRST_LINE[code].encode()))
    assert (entry.code, entry.span and entry.span.line) == (code, 1)


@pytest.mark.parametrize("code", FILES)
def test_problem_of_a_whole_file(code: str, tmp_path: Path) -> None:
    path = FILES[code](tmp_path)
    (entry,) = problems_of(path)
    assert entry.code == code
    assert entry.advice
    if code.startswith("file"):
        assert str(path) in entry.message


def test_unreadable_for_lack_of_permission(tmp_path: Path) -> None:
    path = _written(tmp_path, b"title\nR1 a 0 1\n")
    path.chmod(0)
    if os.access(path, os.R_OK):
        assert problems_of(path) == ()  # run by root, who may read everything
    else:
        assert [entry.code for entry in problems_of(path)] == ["file-unreadable"]


def test_all_problems_of_a_file_in_one_run(tmp_path: Path) -> None:
    path = _written(
        tmp_path,
        b"title\nR1 a 0 {1k\nQ1 c b e QX\nR2 a 0 bad\nR3 a 0 1k\n"
        b".include no.lib\nX1 a sub\nR4 a 0 1M\n",
    )
    found = [(entry.span.line, entry.code) for entry in problems_of(path) if entry.span]
    assert found == [
        (2, "line-unreadable"),
        (3, "model-missing"),
        (4, "value-unreadable"),
        (6, "include-missing"),
        (7, "subcircuit-missing"),
        (8, "value-milli"),
    ]


def test_a_fault_in_a_subcircuit_nothing_calls_does_not_stop_the_rest(tmp_path: Path) -> None:
    (tmp_path / "vendor.lib").write_text(
        ".subckt other a\nR1 a 0 {1k\n.ends\n.subckt mine a\nR1 a 0 1k\n.ends\n"
    )
    path = _written(tmp_path, b"title\n.include vendor.lib\nX1 a mine\n")
    (entry,) = problems_of(path)
    assert (entry.code, entry.severity) == ("line-unreadable", Severity.WARNING)
    path = _written(tmp_path, b"title\n.include vendor.lib\nX1 a other\n")
    (entry,) = problems_of(path)
    assert (entry.code, entry.severity) == ("line-unreadable", Severity.ERROR)


@pytest.mark.parametrize(
    ("text", "near"),
    [
        (LINES["model-missing"][0], "bc847b"),
        (LINES["value-unreadable"][0], "rlaod"),
        (LINES["subcircuit-missing"][0], "amp"),
        ("R1 a 0 {rload}\n.param rlaod=1\n", "rlaod"),
    ],
)
def test_near_names_are_listed(text: str, near: str, tmp_path: Path) -> None:
    entry = problems_of(_written(tmp_path, ("title\n" + text).encode()))[0]
    assert near in entry.message.lower().split("'")[-1]


@pytest.mark.parametrize(
    ("line", "unused"),
    [
        ("R1 a 0 1k 5%", "5%"),
        ("R1 a 0 1k rser=2", "rser=2"),
        ("C1 a 0 1u 25V", "25V"),
        ("L1 a 0 1m rser=2", "rser=2"),
        ("V1 a 0 1 rser=2", "rser=2"),
        ("E1 a 0 b 0 10 20", "20"),
        ("G1 a 0 b 0 10 m=2", "m=2"),
        ("E1 a 0 value={v(b)} tc=2", "tc=2"),
        ("D1 a 0 m 1 2", "2"),
        ("M1 a 0 0 0 n 2", "2"),
        ("Q1 a b 0 q nosuch=2", "nosuch=2"),
        ("X1 a s m=2", "m=2"),
    ],
)
def test_nothing_is_passed_over_in_silence(line: str, unused: str, tmp_path: Path) -> None:
    models = ".model m d\n.model n nmos\n.model q npn\n.subckt s p\nR9 p 0 1\n.ends\nR2 b 0 1\n"
    found = problems_of(_written(tmp_path, f"title\n{line}\nR3 a 0 1\n{models}".encode()))
    (entry,) = [entry for entry in found if entry.code == "words-ignored"]
    assert entry.span is not None
    start = entry.span.column - 1
    assert entry.span.text[start : start + entry.span.length] == unused


@pytest.mark.parametrize(
    ("line", "code", "said", "place"),
    [
        ("R1 a 0 -1k", "value-out-of-range", "-1.00 kΩ", (2, 1)),
        ("R1 a 0 0", "value-zero", "1 mΩ", (2, 1)),
        ("C1 a 0 0", "value-out-of-range", "0 F", (2, 1)),
        ("C1 a 0 -10p", "value-unusable", "-10.0 pF", (2, 1)),
        ("L1 a 0 0", "value-out-of-range", "0 H", (2, 1)),
        ("L1 a 0 {-1m}", "value-unusable", "-1.00 mH", (2, 1)),
        ("R1 a 0 1k temp=-300", "value-unusable", "absolute zero", (2, 16)),
        ("Q1 a b 0 m temp=2000\n.model m npn", "value-out-of-range", "1000 °C", (2, 17)),
        (".temp -273.15", "value-unusable", "absolute zero", (2, 7)),
        (".temp 1e6", "value-out-of-range", "1000 °C", (2, 7)),
        (".options tnom=-400", "value-unusable", "absolute zero", (2, 15)),
        (".options gmin={-1p}", "value-unusable", "GMIN is -1e-12 S; expected zero", (2, 15)),
        ("Q1 a b 0 m\n.model m npn(bf=0)", "value-out-of-range", "BF is 0", (3, 14)),
        ("Q1 a b 0 m\n.model m pnp(vaf=80 bf=-5)", "value-out-of-range", "BF is -5", (3, 21)),
        ("Q1 a b 0 m\n.model m npn(is=0)", "value-out-of-range", "IS is 0", (3, 14)),
        ("Q1 a b 0 m\n.model m npn(is=-1f)", "value-unusable", "IS is -1e-15", (3, 14)),
        ("Q1 a b 0 m\n.model m npn(va=-80)", "value-out-of-range", "VAF is -80", (3, 14)),
        ("D1 a 0 m\n.model m d(n=0)", "value-out-of-range", "N is 0", (3, 12)),
    ],
)
def test_values_that_make_no_sense_are_told_once(
    line: str, code: str, said: str, place: tuple[int, int], tmp_path: Path
) -> None:
    found = problems_of(_written(tmp_path, f"title\n{line}\nR8 b 0 1\nR9 a 0 1\n".encode()))
    (entry,) = found
    assert (entry.code, entry.span and (entry.span.line, entry.span.column)) == (code, place)
    assert entry.severity == CODES[code][0]
    assert said in entry.message


def test_limits_of_sense_are_not_warned_of(tmp_path: Path) -> None:
    settings = ".temp -273\n.options tnom=1000 gmin=0\n"
    text = f"t\n{settings}Q1 a a 0 m\n.model m npn(vaf=0 var=0)\nR2 a 0 1p\n"
    assert not problems_of(_written(tmp_path, text.encode()))


def test_a_fault_in_a_subcircuit_counts_once_however_often_it_is_called(tmp_path: Path) -> None:
    calls = "".join(f"X{n} a s\n" for n in range(50))
    path = _written(
        tmp_path, f"title\n{calls}.subckt s a\nR1 a 0 bad\nR2 a 0 4k7\n.ends\n".encode()
    )
    assert [entry.code for entry in problems_of(path)] == ["value-unreadable", "value-letter-digit"]


@pytest.mark.parametrize(
    ("text", "floating"),
    [
        ("V1 a 0 1\nC1 a b 1u\nC2 b 0 1u", ["b"]),
        ("I1 0 a 1\nC2 a 0 1u", ["a"]),
        ("V1 a 0 1\nC1 a g 1u\nM1 a g 0 0 m\n.model m nmos", ["g"]),
        ("V1 a 0 1\nC1 a b 1u\nQ1 a b 0 m\n.model m npn", []),
        ("V1 a 0 1\nC1 a b 1u\nJ1 a b 0 m\n.model m njf", []),
        ("V1 a 0 1\nL1 a b 1u\nD1 b c m\nR1 c d 1\nG1 d 0 a 0 1\n.model m d", []),
        ("V1 a 0 1\nG1 b 0 a 0 1\nC1 b 0 1u", ["b"]),
        ("V1 a 0 1\nR1 b c 1\nC1 a b 1u", ["b", "c"]),
        ("V1 a 0 1\nB1 b 0 I=v(b)/1k\nC1 a b 1u", []),
        ("V1 a 0 1\nE1 b 0 a 0 2\nC1 a b 1u", []),
        ("M1 d g s v\nV1 d 0 1\nV2 g 0 1\nC1 s 0 1u\n.model v vdmos", []),
    ],
)
def test_floating_nodes(text: str, floating: list[str], tmp_path: Path) -> None:
    found = problems_of(_written(tmp_path, ("title\n" + text).encode()))
    assert all(entry.code == "node-floating" for entry in found)
    named = [part for entry in found for part in entry.message.split("'")[1::2]]
    assert named == floating


@pytest.mark.parametrize(
    ("line", "column"),
    [
        ("R1 a 0 1,5k", 8),
        ("C1 a 0 c=4,7n", 10),
        ("V1 a 0 12,5 ac 1", 8),
        ("V1 a 0 ac 1 dc=12,5", 16),
        ("D1 a 0 m\n.model m d(is=1,5f)", 15),
    ],
)
def test_a_decimal_comma_is_not_read_as_the_end_of_the_number(
    line: str, column: int, tmp_path: Path
) -> None:
    (found,) = problems_of(_written(tmp_path, f"title\n{line}\nR9 a 0 1\n".encode()))
    assert (found.code, found.severity) == ("value-decimal-comma", Severity.ERROR)
    assert found.span is not None
    assert found.span.column == column


def test_commas_that_separate_are_no_decimal_commas(tmp_path: Path) -> None:
    lines = (
        "V1 1,0 12 ac 1,90",
        "R1 1,2 10k tc=1m,2u",
        "I1 0,2,1u",
        "D1 2,0 m",
        ".model m d(is=1f,n=1,cjo=2p)",
        "E1 3 0 poly(2) 1,0 2,0 0,1,2",
        "R3 3,0,1k",
    )
    assert not problems_of(_written(tmp_path, ("title\n" + "\n".join(lines)).encode()))
