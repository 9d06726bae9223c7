"""Results as comments in a netlist: where they stand, and that they go again to the byte."""

from __future__ import annotations

import subprocess
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from annotate.strategies import netlists, review_about
from tauledger.analysis import Analysis, analyze, read
from tauledger.annotate import annotate_netlist, remove_comments
from tauledger.annotate.comments import MARKER
from tauledger.command import main
from tauledger.problems import ProblemError, SourceSpan

STAGE = """Stage with every place a comment could do harm: 10 µF
.control
op
print v(out) v(b) @q1[ic]
ac dec 3 10 1meg
print vm(out)
.endc
VCC vcc 0 12
VIN in 0 AC 1
* between a line and its continuation
C1 in
* stands a comment already
+ b 4.7u
R1 vcc b 68k
R2 b 0 15k
Q1 c b e NQ
X1 c out part
X2 e 0 part
RC vcc c 3.9k
RE e 0 1k
RL out 0 10k
.subckt part p q
C9 p q
+ 10u
.ends
.model NQ NPN (BF=200 IS=10f
+ CJC=4p)
.ac dec 10 1 1meg
.print ac v(out)
.end"""


def annotated(path: Path) -> bytes:
    analysis = analyze(read(path))
    return annotate_netlist(path.read_bytes(), analysis.review, places_of(analysis))


def places_of(analysis: Analysis) -> dict[str, SourceSpan]:
    return {element.name: element.span for element in analysis.circuit.elements}


@pytest.fixture
def stage(tmp_path: Path) -> Path:
    path = tmp_path / "stage.cir"
    path.write_text(STAGE, encoding="utf-8")
    return path


def test_each_part_has_its_result_above_it(stage: Path) -> None:
    lines = annotated(stage).decode().splitlines()
    assert lines[0] == STAGE.splitlines()[0]
    assert lines[1].startswith(MARKER + "version 0.")
    assert lines[3].startswith(MARKER + "low corner ")
    above = lines[lines.index("C1 in") - 1]
    assert above.startswith(MARKER + "input coupling | sees ")
    assert " | corner " in above
    above = lines[lines.index("Q1 c b e NQ") - 1]
    assert above.startswith(MARKER + "common emitter | IC ")
    assert " | gm " in above
    definition = lines.index("C9 p q")
    assert lines[definition - 2].startswith(MARKER + "X1.C9: output coupling | ")
    assert lines[definition - 1].startswith(MARKER + "X2.C9: emitter bypass | ")
    assert sum("SETS THE LOW CORNER" in line for line in lines) == 1
    assert all(line.isascii() for line in lines if line.startswith(MARKER))


def test_what_is_not_a_comment_keeps_its_order(stage: Path) -> None:
    lines = annotated(stage).decode().splitlines()
    assert [line for line in lines if not line.startswith(MARKER)] == STAGE.splitlines()
    after_ours = [lines[i + 1] for i, line in enumerate(lines[:-1]) if line.startswith(MARKER)]
    assert not any(line.startswith("+") for line in after_ours)


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "latin-1"])
@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("last", ["", "\n"])
def test_every_encoding_and_line_end_comes_back(
    tmp_path: Path, encoding: str, end: str, last: str
) -> None:
    original = (STAGE.replace("\n", end) + last).encode(encoding)
    path = tmp_path / "a.cir"
    path.write_bytes(original)
    once = annotated(path)
    assert len(once) > len(original) + 500
    assert remove_comments(once) == original
    path.write_bytes(once)
    assert annotated(path) == once


def test_the_end_mark_of_old_systems_stays(stage: Path) -> None:
    stage.write_bytes(stage.read_bytes().removesuffix(b".end") + b"C3 out 0 1n\r\n\x1a")
    once = annotated(stage)
    assert once.endswith(b"C3 out 0 1n\r\n\x1a")
    assert remove_comments(once) == stage.read_bytes()


def test_results_of_an_earlier_netlist_are_replaced(stage: Path) -> None:
    once = annotated(stage)
    stage.write_bytes(once.replace(b"RE e 0 1k", b"RE e 0 2k"))
    again = annotated(stage)
    assert again != once
    assert again.count(MARKER.encode()) == once.count(MARKER.encode())
    assert remove_comments(again).decode() == STAGE.replace("RE e 0 1k", "RE e 0 2k")


def test_a_file_that_changes_meanwhile_is_refused(stage: Path) -> None:
    analysis = analyze(read(stage))
    with pytest.raises(ProblemError, match="changed while the file was read"):
        annotate_netlist(b"title\n" + stage.read_bytes(), analysis.review, places_of(analysis))


def test_parts_of_included_files_are_passed_over(tmp_path: Path) -> None:
    (tmp_path / "part.inc").write_text(STAGE[STAGE.index(".subckt") : STAGE.index(".model")])
    text = STAGE.replace(".subckt part p q\nC9 p q\n+ 10u\n.ends", ".include part.inc")
    path = tmp_path / "a.cir"
    path.write_text(text, encoding="utf-8")
    lines = annotated(path).decode().splitlines()
    assert not any("C9" in line and "set by" not in line for line in lines)
    assert lines[lines.index("C1 in") - 1].startswith(MARKER)


def test_the_listing_of_instances_is_bounded(tmp_path: Path) -> None:
    calls = "".join(f"X{number} e 0 part\n" for number in range(3, 30))
    path = tmp_path / "a.cir"
    path.write_text(STAGE.replace("RC vcc", calls + "RC vcc"), encoding="utf-8")
    lines = annotated(path).decode().splitlines()
    assert lines[lines.index("C9 p q") - 1] == MARKER + "and 25 more instances"


@given(netlists())
def test_any_netlist_annotates_once_and_comes_back(
    given: tuple[bytes, dict[str, SourceSpan]],
) -> None:
    content, places = given
    review = review_about(places)
    once = annotate_netlist(content, review, places)
    assert remove_comments(once) == remove_comments(content)
    assert once.count(_as_in(content, "input coupling")) >= len(places)
    moved = _moved(content, once, places)
    assert annotate_netlist(once, review, moved) == once


def _as_in(content: bytes, text: str) -> bytes:
    return text.encode("utf-16-le" if content.startswith(b"\xff\xfe") else "ascii")


def _moved(before: bytes, after: bytes, places: dict[str, SourceSpan]) -> dict[str, SourceSpan]:
    """The same parts in the annotated file."""
    rows = {place.line - 1: name for name, place in places.items()}
    old, new = _rows(before), _rows(after)
    return {
        rows[origin]: SourceSpan("a.cir", row + 1, 1, 1, places[rows[origin]].text)
        for origin, row in zip(old, new, strict=True)
        if origin in rows
    }


def _rows(content: bytes) -> list[int]:
    """Line numbers of all that is not ours, counted without the help of the module tested."""
    text = content.decode("utf-16" if content.startswith(b"\xff\xfe") else "latin-1")
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    if lines[-1] == "":
        lines.pop()
    return [row for row, line in enumerate(lines) if not (row and line.startswith(MARKER))]


@given(st.binary(max_size=400), st.integers(0, 3))
def test_taking_out_what_is_not_there_changes_nothing(content: bytes, cut: int) -> None:
    marker = MARKER.encode()[cut:]
    sprinkled = content.replace(b"\x00", marker)
    once = remove_comments(sprinkled)
    assert remove_comments(once) == once
    if b"\n" + MARKER.encode() not in sprinkled and b"\r" + MARKER.encode() not in sprinkled:
        assert once == sprinkled


def _ngspice(path: Path) -> list[str]:
    done = subprocess.run(
        ["bash", "-c", 'ulimit -v 2000000; exec ngspice -b "$0"', str(path)],
        capture_output=True,
        text=True,
        timeout=60,
    )
    return [line for line in done.stdout.splitlines() if line[:2] in ("v(", "@q") or "\t" in line]


@pytest.mark.referee
def test_ngspice_sees_the_same_circuit(stage: Path) -> None:
    """ngspice 39, on the deck's own control block [P: run beside]."""
    before = _ngspice(stage)
    assert any(line.startswith("@q1[ic] = 1.") for line in before)
    assert sum("\t" in line for line in before) > 10
    stage.write_bytes(annotated(stage))
    assert _ngspice(stage) == before


def test_midband_may_be_given(stage: Path) -> None:
    """As for a report: at 300 Hz the emitter is not yet bypassed in full."""
    assert main(["annotate", str(stage), "--midband", "300Hz"]) == 0
    gain = abs(analyze(read(stage), midband_hz=300.0).corners.exact_gain)
    assert f"gain -{gain:.3g} V/V" in stage.read_text(encoding="utf-8")
    assert main(["annotate", str(stage), "--check", "--midband", "300Hz"]) == 0
    assert main(["annotate", str(stage), "--check"]) == 1
