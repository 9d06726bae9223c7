"""The patch of a choice: applied by git and by patch, byte for byte; or refused with the line."""

from __future__ import annotations

import codecs
import re
import shutil
import subprocess
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from decide.circuits import STAGE
from tauledger.analysis import Analysis, analyze, read
from tauledger.command import main
from tauledger.decide.patch import Patch, patch
from tauledger.decide.spelling import spice_value, written_like
from tauledger.problems import Problem, ProblemError
from tauledger.quantity import parse_number
from tauledger.review.decisions import Alternative, FittedRow

APPLIERS = [["git", "apply"], ["patch", "-p1", "--silent"]]


def alternative(analysis: Analysis, **values_f: float) -> Alternative:
    """A choice that sets the named capacitors (``X1_C1`` is X1.C1)."""
    old = {row.name: row.value for row in analysis.review.paths[0].time_constants}
    parts = tuple(
        FittedRow(name.replace("_", "."), old.get(name.replace("_", "."), 0.0), value, None, "E6")
        for name, value in values_f.items()
    )
    return Alternative("by hand", parts, 1.0, None, 0.0, 0.0, None, 1.0, 1)


def analysed(path: Path, output: str = "out") -> Analysis:
    return analyze(read(path), output=output)


def patched(folder: Path, netlist: str | bytes, **values_f: float) -> tuple[Analysis, Patch]:
    path = folder / "stage.cir"
    path.write_bytes(netlist if isinstance(netlist, bytes) else netlist.encode())
    analysis = analysed(path)
    return analysis, patch(analysis, alternative(analysis, **values_f))


def refusal(folder: Path, netlist: str, **values_f: float) -> Problem:
    with pytest.raises(ProblemError) as raised:
        patched(folder, netlist, **values_f)
    (problem,) = raised.value.problems
    assert problem.code == "patch-value"
    assert problem.span is not None
    assert "no patch is made" in problem.message
    assert "number" in problem.advice
    return problem


def apply(command: list[str], diff: bytes, folder: Path) -> None:
    if shutil.which(command[0]) is None:
        pytest.skip(f"no {command[0]} here")
    subprocess.run(command, input=diff, cwd=folder, check=True, timeout=20)


ENDINGS = {"lf": b"\n", "crlf": b"\r\n", "cr": b"\r"}
ENCODINGS = {
    "latin-1": (b"", "latin-1"),
    "utf-8": (b"", "utf-8"),
    "utf-8 with mark": (codecs.BOM_UTF8, "utf-8"),
    "utf-16": (codecs.BOM_UTF16_LE, "utf-16-le"),
}


@pytest.mark.parametrize("applier", APPLIERS, ids=lambda command: command[0])
@pytest.mark.parametrize("last", [True, False], ids=["final newline", "no final newline"])
@pytest.mark.parametrize("ending", ENDINGS)
@pytest.mark.parametrize("encoding", ENCODINGS)
def test_it_changes_the_numbers_and_no_other_byte(
    tmp_path: Path, encoding: str, ending: str, last: bool, applier: list[str]
) -> None:
    mark, name = ENCODINGS[encoding]
    text = STAGE.replace("CE e 0 100u", "ce   e 0\t100\u00b5F  ; Überbrückung \u00fc")
    text = text.removesuffix(".end\n") + "CX out 0 10p"
    text += "\n" if last else ""
    content = mark + text.replace("\n", ENDINGS[ending].decode()).encode(name)
    _, found = patched(tmp_path, content, ce=4.7e-5, CX=2.2e-11)
    assert found.folder == str(tmp_path.resolve())
    apply(applier, found.diff, tmp_path)
    expected = text.replace("100\u00b5F", "47\u00b5F").replace("CX out 0 10p", "CX out 0 22p")
    expected_bytes = mark + expected.replace("\n", ENDINGS[ending].decode()).encode(name)
    assert (tmp_path / "stage.cir").read_bytes() == expected_bytes
    again = {e.name: e for e in analysed(tmp_path / "stage.cir").circuit.elements}
    assert again["ce"].capacitance_f == pytest.approx(4.7e-5)  # type: ignore[attr-defined]
    assert again["CX"].capacitance_f == pytest.approx(2.2e-11)  # type: ignore[attr-defined]


@pytest.mark.parametrize("applier", APPLIERS, ids=lambda command: command[0])
def test_it_applies_in_a_folder_of_a_repository_and_to_odd_names(
    tmp_path: Path,
    applier: list[str],
    monkeypatch: pytest.MonkeyPatch,
    capfdbinary: pytest.CaptureFixture[bytes],
) -> None:
    """Paths are relative to where the command is run, as those of the tools that apply it are."""
    subprocess.run(["git", "init", "-q", str(tmp_path)], check=True, timeout=20)
    folder = tmp_path / "boards" / "rev B"
    folder.mkdir(parents=True)
    (folder / "pré amp.cir").write_text(STAGE, "utf-8")
    monkeypatch.chdir(tmp_path / "boards")
    command = ["choose", "rev B/pré amp.cir", "--output", "out", "--low-corner", "30Hz", "--patch"]
    assert main(command) == 0
    out, errors = capfdbinary.readouterr()
    assert errors == b""
    assert out.startswith(b"--- a/rev B/pr\xc3\xa9 amp.cir\t\n")
    apply(applier, out, Path.cwd())
    again = analysed(folder / "pré amp.cir")
    assert again.corners.low.exact_hz is not None
    assert again.corners.low.exact_hz <= 30.0


def test_a_netlist_elsewhere_names_the_folder(
    tmp_path: Path, capfdbinary: pytest.CaptureFixture[bytes]
) -> None:
    (tmp_path / "stage.cir").write_text(STAGE)
    command = ["choose", str(tmp_path / "stage.cir"), "--output", "out", "--low-corner", "30Hz"]
    assert main([*command, "--patch", "1"]) == 0
    out, errors = capfdbinary.readouterr()
    assert f"relative to {tmp_path.resolve()}".encode() in errors
    apply(["git", "apply"], out, tmp_path)


def test_an_empty_patch_is_told(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "stage.cir").write_text(STAGE)
    command = ["choose", str(tmp_path / "stage.cir"), "--output", "out", "--low-corner", "2kHz"]
    assert main([*command, "--only", "CE", "--patch", "2"]) == 0
    assert capfd.readouterr() == (
        "",
        "note[patch-empty]: alternative 2 is the netlist as it stands\n",
    )


@pytest.mark.parametrize(
    ("options", "code", "told"),
    [
        (("--low-corner", "20Hz", "--only", "C1"), 1, "however large C1 is"),
        (("--high-corner", "20kHz"), 0, "meets the target as it stands"),
    ],
)
def test_where_nothing_can_change_there_is_no_patch(
    tmp_path: Path,
    options: tuple[str, ...],
    code: int,
    told: str,
    capfd: pytest.CaptureFixture[str],
) -> None:
    (tmp_path / "stage.cir").write_text(STAGE)
    command = ["choose", str(tmp_path / "stage.cir"), "--output", "out", *options, "--patch"]
    assert main(command) == code
    out, errors = capfd.readouterr()
    assert out == ""
    assert "note[patch-empty]: there is nothing to patch: " in errors
    assert told in errors


# Where the number stands --------------------------------------------------------------------------

BIG = STAGE.replace("CE e 0 100u", "CE e 0 {cbig}")
INNER = """bypass in a block
VCC vcc 0 12
VS in 0 AC 1
C1 in b 10u
R1 vcc b 47k
R2 b 0 10k
RC vcc out 4.7k
RL out 0 100k
Q1 out b e qx
{calls}
.subckt bypass top c=100u
RE top 0 1k
CE top 0 {value}
.ends
.model qx npn (is=12f bf=240)
.end
"""


@pytest.mark.parametrize(
    ("old", "new"),
    [
        (BIG.replace("RE e", ".param cbig=100u\nRE e"), (".param cbig=100u", ".param cbig=47u")),
        (
            BIG.replace("{cbig}", "cbig").replace("RE e", ".param x=1 CBIG = '100uF' y=2\nRE e"),
            ("CBIG = '100uF'", "CBIG = '47uF'"),
        ),
        (BIG.replace("RE e", ".param cbig={ca}\n.param ca=1e-4\nRE e"), ("ca=1e-4", "ca=47e-6")),
        (STAGE.replace("CE e 0 100u", "CE e 0 { 100u }"), ("{ 100u }", "{ 47u }")),
        (STAGE.replace("CE e 0 100u", "CE e 0 c=100u"), ("c=100u", "c=47u")),
        (STAGE.replace("CE e 0 100u", "CE e 0\n* here\n+ 100u ic=0"), ("+ 100u", "+ 47u")),
    ],
    ids=["parameter", "several on a line", "through another", "braces", "c=", "continuation"],
)
def test_a_number_is_followed_to_where_it_stands(
    tmp_path: Path, old: str, new: tuple[str, str]
) -> None:
    _, found = patched(tmp_path, old, CE=47e-6)
    apply(["git", "apply"], found.diff, tmp_path)
    assert (tmp_path / "stage.cir").read_text() == old.replace(*new)


@pytest.mark.parametrize(
    ("value", "calls", "new"),
    [
        ("100u", "X1 e bypass", ("CE top 0 100u", "CE top 0 47u")),
        ("{c}", "X1 e bypass", ("top c=100u", "top c=47u")),
        ("c", "X1 e bypass c=220u", ("c=220u", "c=47u")),
        ("{c}", "X1 e bypass c=220u\nX2 k bypass\nRK k 0 1k", ("c=220u", "c=47u")),
        ("{c}", "X1 e bypass c={cx}\n.param cx=220u", ("cx=220u", "cx=47u")),
        ("{own}", "X1 e bypass\n.param own=220u", ("own=220u", "own=47u")),
    ],
    ids=[
        "body",
        "head",
        "call",
        "one of two calls",
        "call by parameter",
        "parameter of the caller",
    ],
)
def test_a_number_inside_a_subcircuit_is_found(
    tmp_path: Path, value: str, calls: str, new: tuple[str, str]
) -> None:
    old = INNER.format(value=value, calls=calls)
    _, found = patched(tmp_path, old, X1_CE=47e-6)
    apply(["git", "apply"], found.diff, tmp_path)
    assert (tmp_path / "stage.cir").read_text() == old.replace(*new)


def test_a_subcircuit_in_a_subcircuit_and_an_include(tmp_path: Path) -> None:
    inner = "* parts\n.subckt leg a b\nCL a b 100uF\n.ends\n.subckt both a\nXL a 0 leg\n.ends\n"
    (tmp_path / "parts.inc").write_bytes(inner.encode())
    old = STAGE.replace("CE e 0 100u", "XB e both\n.include parts.inc")
    _, found = patched(tmp_path, old, XB_XL_CL=4.7e-4)
    apply(["patch", "-p1", "--silent"], found.diff, tmp_path)
    assert (tmp_path / "parts.inc").read_text() == inner.replace("100uF", "470uF")
    assert (tmp_path / "stage.cir").read_text() == old


def test_parts_with_one_number_get_it_together_or_not_at_all(tmp_path: Path) -> None:
    text = BIG.replace("C1 a b 10u", "C1 a b {cbig}\n.param cbig=100u")
    _, found = patched(tmp_path, text, CE=47e-6, C1=47e-6)
    apply(["git", "apply"], found.diff, tmp_path)
    assert (tmp_path / "stage.cir").read_text() == text.replace("cbig=100u", "cbig=47u")
    assert "CE and C1" in refusal(tmp_path, text, CE=47e-6, C1=22e-6).message


@pytest.mark.parametrize(
    ("text", "line", "told"),
    [
        (BIG.replace("{cbig}", "{2*cx}\n.param cx=50u"), "{2*cx}", "the expression '2*cx'"),
        (BIG.replace("RE e", ".param cbig={a+b} a=60u b=40u\nRE e"), "a+b", "of parameter cbig"),
        (BIG.replace("C1 a b 10u", "C1 a b {cbig}\n.param cbig=100u"), ".param", "also sets C1"),
        (BIG.replace("RE e 0 1k", "RE e 0 {1k+cbig}\n.param cbig=100u"), ".param", "also sets RE"),
        (STAGE.replace("CE e 0 100u", "CE e 0 100u m=2"), "CE e", "m, scale, tc"),
        (STAGE.replace("CE e 0 100u", "CE e 0 can\n.model can c cap=100u"), "CE e", "in a model"),
        (
            BIG.replace("RE e", ".param cbig=100u\n.if (cbig>50u)\nRX e 0 9k\n.endif\nRE e"),
            ".param",
            "which parts there are",
        ),
    ],
    ids=[
        "formula",
        "formula behind",
        "shared",
        "in a resistor",
        "multiplier",
        "model",
        "condition",
    ],
)
def test_what_no_single_number_sets_is_refused_with_its_line(
    tmp_path: Path, text: str, line: str, told: str
) -> None:
    problem = refusal(tmp_path, text, CE=47e-6)
    assert told in problem.message
    assert problem.message.startswith("the value of CE ")
    assert problem.span is not None
    assert line in problem.span.text


def test_a_body_that_is_used_twice_is_refused(tmp_path: Path) -> None:
    calls = "X1 e bypass\nX2 out bypass"
    problem = refusal(tmp_path, INNER.format(value="100u", calls=calls), X1_CE=47e-6)
    assert "also sets X2.CE" in problem.message
    assert "subcircuit bypass" in problem.message
    assert problem.span is not None
    assert problem.span.text == "CE top 0 100u"


@pytest.mark.parametrize("applier", APPLIERS, ids=lambda command: command[0])
def test_a_link_is_followed_to_the_file_itself(
    tmp_path: Path, applier: list[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """What applies a patch refuses links and what lies beyond them."""
    (tmp_path / "real").mkdir()
    (tmp_path / "real" / "stage.cir").write_text(STAGE)
    (tmp_path / "linked").symlink_to("real")
    (tmp_path / "link.cir").symlink_to("real/stage.cir")
    monkeypatch.chdir(tmp_path)
    for name in ("linked/stage.cir", "link.cir"):
        (tmp_path / "real" / "stage.cir").write_text(STAGE)
        analysis = analysed(Path(name))
        found = patch(analysis, alternative(analysis, CE=47e-6))
        apply(applier, found.diff, Path(found.folder))
        assert (tmp_path / "link.cir").is_symlink()
        assert (tmp_path / "real" / "stage.cir").read_text() == STAGE.replace("100u", "47u")


def test_a_file_that_changed_since_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "stage.cir"
    path.write_text(STAGE)
    analysis = analysed(path)
    path.write_text(STAGE.replace("RS in a 1k", "RS in a 1k\nR9 a 0 1Meg"))
    with pytest.raises(ProblemError) as raised:
        patch(analysis, alternative(analysis, CE=47e-6))
    assert raised.value.problems[0].code == "netlist-changed"


# Spelling -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("old", "value_f", "new"),
    [
        ("10u", 2.2e-6, "2.2u"),
        ("10u", 2.2e-3, "2200u"),
        ("10u", 2.2e-8, "22n"),
        ("10uF", 4.7e-5, "47uF"),
        ("100N", 4.7e-8, "47N"),
        ("100NF", 1e-6, "1UF"),
        ("0.1u", 4.7e-8, "0.047u"),
        ("2200u", 4.7e-3, "4700u"),
        ("1e-6", 4.7e-5, "47e-6"),
        ("1.0E-06", 4.7e-10, "470E-12"),
        ("1E9F", 4.7e-6, "4.7u"),
        ("1Farad", 4.7e-6, "4.7u"),
        ("0.0001", 4.7e-5, "0.000047"),
        ("4u7", 2.2e-6, "2.2u"),
        ("10n", 1.2345e-8, "12.345n"),
        ("1e-8", 1.2345e-8, "12.345e-9"),
        ("0.000001", 4.75e-15, "0.00000000000000475"),
        ("0.000001", 4.7, "4.7"),
        ("10\u00b5F", 4.7e-5, "47\u00b5F"),
        ("10\u03bcF", 4.7e-5, "47u"),
    ],
)
def test_values_are_written_as_the_netlist_writes_them(old: str, value_f: float, new: str) -> None:
    assert written_like(value_f, old) == new


WRITTEN = st.sampled_from(
    ["10u", "0.1uF", "100N", "1e-6", "4u7", "0.00001", "22pF", "1m", "1E-12F", "1E-12", "2200U"]
)


@given(WRITTEN, st.sampled_from([1.0, 1.5, 2.2, 3.92, 9.76]), st.integers(-12, -1))
def test_what_is_written_reads_as_the_value(old: str, mantissa: float, power: int) -> None:
    value_f = float(f"{mantissa}e{power}")
    for text in (written_like(value_f, old), spice_value(value_f)):
        found = parse_number(text)
        assert found is not None
        assert found.value == pytest.approx(value_f, rel=1e-9)
        assert found.trap == ""
        assert re.fullmatch(r"[0-9.]+(?:[eE]-?[0-9]+)?[munpfMUNPF\u00b5]?F?", text)
