"""The configuration that ``tauledger start`` writes: what it finds, and what it leaves open."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

from tauledger.command import main
from tauledger.configuration.reading import read_configuration
from tauledger.configuration.settings import PathSettings
from tauledger.problems import ProblemError

BOARD = """door line
VCC vcc 0 9
VIN in 0 AC 1
C1 in b 4.7u
RB1 vcc b 82k
RB2 b 0 18k
RC vcc c 3.3k
RE e 0 680
CE e 0 220u
Q1 c b e QN
C[2] c g 100n
RG g 0 1Meg
J1 vcc g out JN
RS out 0 2.2k
XP out 0 CLAMP
.subckt CLAMP a k
D1 a k DN
R1 a k 1Meg
.ends
.model QN NPN (IS=20f BF=220 VAF=80 CJE=10p CJC=4p TF=0.4n)
.model JN NJF (VTO=-1.5 BETA=2m LAMBDA=5m CGS=3p CGD=3p)
.model DN D (IS=1f BV=40)
.print ac v(out)
.end
"""
_CLASSES = re.compile(r"^# \[(?:capacitors|resistors|transistors|diodes|spread)", re.MULTILINE)


@pytest.fixture
def board(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "door.cir").write_text(BOARD)
    return tmp_path / "tauledger.toml"


def filled(text: str, *, blanks: bool = False) -> str:
    """The classes without their #; lines left blank only on demand."""
    start = _CLASSES.search(text)
    assert start is not None
    lines = text[: start.start()].splitlines()
    for line in text[start.start() :].splitlines():
        is_line = re.match(r'# (?:\[[a-z.]+\]$|[a-z_]+ = |  ")', line) is not None
        lines.append(line[2:] if is_line and (blanks or '""' not in line) else line)
    return "\n".join(lines) + "\n"


def settings_of(file: Path) -> PathSettings:
    (settings,) = read_configuration(file).paths
    return settings


def test_as_written_it_claims_nothing(board: Path, capfd: pytest.CaptureFixture[str]) -> None:
    assert main(["start", "door.cir", "--output", "tauledger.toml"]) == 0
    settings = settings_of(board)
    assert {settings.capacitors, settings.resistors, settings.transistors, settings.diodes} == {()}
    assert settings.spread is None
    assert main(["stress", "door.cir"]) == 0
    capfd.readouterr()
    assert main(["spread", "door.cir"]) == 2
    assert "[resistors.NAME]" in capfd.readouterr().err


def test_its_examples_can_be_taken_as_they_stand(
    board: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    assert main(["start", "door.cir", "--output", "tauledger.toml"]) == 0
    text = board.read_text()
    board.write_text(filled(text))
    settings = settings_of(board)
    assert [c.match for c in settings.capacitors] == [("c1", "ce", "c[[]2]")] * 2
    assert [c.match for c in settings.resistors] == [("r*",)]
    assert {c.name: c.match for c in settings.transistors} == {"bipolar": ("q*",), "jfet": ("j*",)}
    assert [c.match for c in settings.diodes] == [("xp.d*",)]
    for line in text.splitlines():
        if "tolerance" in line and "=" in line:
            assert line.endswith("# example, replace")
    assert main(["spread", "door.cir", "--boards", "50", "--format", "json"]) == 0
    spread = json.loads(capfd.readouterr().out)
    drawn = {word for draw in spread["draws"] for word in draw["label"].split()}
    assert {"RC", "CE", "C[2]", "Q1", "J1", "VCC"} <= drawn
    assert "XP.R1" not in drawn


def test_a_rating_left_blank_is_asked_for_by_line(board: Path) -> None:
    assert main(["start", "door.cir", "--output", "tauledger.toml"]) == 0
    text = filled(board.read_text(), blanks=True)
    board.write_text(text)
    with pytest.raises(ProblemError) as caught:
        read_configuration(board)
    blank = [n for n, line in enumerate(text.splitlines(), 1) if line.startswith("rated_")]
    assert len(blank) == 6
    assert [p.span and p.span.line for p in caught.value.problems] == blank
    assert {p.code for p in caught.value.problems} == {"config-unit"}


def test_it_tells_what_stands_across_the_parts(
    board: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    assert main(["start", "door.cir"]) == 0
    text = capfd.readouterr().out
    assert main(["stress", "door.cir", "--format", "json"]) == 0
    stress = json.loads(capfd.readouterr().out)
    hottest = max(stress["resistors"], key=lambda row: row["power_w"])
    assert f"found at most {1e3 * hottest['power_w']:.2f} mW in {hottest['part']}\n" in text
    coupling = next(row for row in stress["capacitors"] if row["part"] == "C1")
    assert f"C1 (4.70 µF, {abs(coupling['voltage_v']):.2f} V across it)" in text
    assert "does not say which capacitors are electrolytic, film or ceramic" in text
    assert all(len(line) <= 100 for line in text.splitlines())


def test_a_board_that_cannot_be_analysed_has_its_classes_too(
    board: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    bare = "\n".join(line for line in BOARD.splitlines() if not line.startswith(("V", ".print")))
    (board.parent / "door.cir").write_text(bare + "\n")
    assert main(["start", "door.cir", "--output", "tauledger.toml"]) == 0
    text = board.read_text()
    assert '# match = ["R*"]' in text
    assert "found at most" not in text
    board.write_text(filled(text))
    assert len(settings_of(board).transistors) == 2
    capfd.readouterr()


def test_a_missing_model_keeps_nobody_from_starting(
    tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    netlist = tmp_path / "board.cir"
    netlist.write_text(BOARD.replace(".model QN NPN", ".model QOTHER NPN").replace(" QN", " KNPN"))
    assert main(["start", str(netlist), "--output", str(tmp_path / "tauledger.toml")]) == 0
    assert capfd.readouterr().err.count("error[model-missing]") == 1
    text = (tmp_path / "tauledger.toml").read_text()
    assert "# generic_models = true" in text
    assert '"vcc"' in text


def test_what_cannot_be_read_is_told_once(
    tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    netlist = tmp_path / "board.cir"
    netlist.write_text(BOARD.replace("RE e 0 680", "RE e 0 six"))
    assert main(["start", str(netlist)]) == 2
    out, err = capfd.readouterr()
    assert out == ""
    assert err.count("error[value-unreadable]") == 1
