"""The four decisions as a shell sees them."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from decide.circuits import PAIR, STAGE
from tauledger.command import main

TOLERANCES = ("--tolerance", "R*=5%", "--tolerance", "C*=20%", "--boards", "200")


@pytest.fixture
def netlist(tmp_path: Path) -> str:
    path = tmp_path / "stage.cir"
    path.write_text(STAGE)
    return str(path)


@pytest.mark.parametrize(
    ("command", "key"),
    [
        (("spread", *TOLERANCES), "figures"),
        (("choose", "--low-corner", "30Hz"), "alternatives"),
        (("stress",), "capacitors"),
        (("temperature", "--range", "0..50", "--steps", "3"), "rows"),
    ],
)
def test_text_and_json(
    netlist: str, command: tuple[str, ...], key: str, capsys: pytest.CaptureFixture[str]
) -> None:
    name, *options = command
    assert main([name, netlist, "--output", "out", *options]) == 0
    text, errors = capsys.readouterr()
    assert text.startswith("one stage")
    assert errors == ""
    assert max(map(len, text.splitlines())) <= 100
    assert main([name, netlist, "--output", "out", *options, "--format", "json"]) == 0
    assert json.loads(capsys.readouterr().out)[key]


def test_a_saved_file_has_the_format_its_name_ends_in(
    netlist: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    commands = {
        "report": ((".md", "#"), (".svg", "<svg"), (".json", "{"), (".html", "<!DOCTYPE html>")),
        "spread": ((".html", "<!DOCTYPE html>"), (".json", "{"), (".txt", "one stage")),
        "temperature": ((".HTML", "<!DOCTYPE html>"), (".svg", "one stage")),
    }
    options = {"spread": TOLERANCES, "temperature": ("--range", "0..50")}
    for command, cases in commands.items():
        given = [command, netlist, "--output", "out", *options.get(command, ())]
        for suffix, start in cases:
            path = tmp_path / f"saved{suffix}"
            assert main([*given, "--save", str(path)]) == 0
            assert path.read_text(encoding="utf-8").lstrip().startswith(start)
    page = tmp_path / "page.html"
    assert (
        main(["report", netlist, "--output", "out", "--format", "json", "--save", str(page)]) == 0
    )
    assert json.loads(page.read_text(encoding="utf-8"))
    assert capsys.readouterr().out == ""


def test_values_may_begin_with_a_minus(netlist: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["temperature", netlist, "--range", "-40..85", "--steps", "2"]) == 0
    assert "-40.0 °C" in capsys.readouterr().out
    assert main(["choose", netlist, "--low-corner", "-5"]) == 2
    assert "found '-5'; expected a frequency" in capsys.readouterr().err


def test_workers_give_the_same_figures(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "pair.cir"
    path.write_text(PAIR)
    command = ["spread", str(path), "--output", "out", "--format", "json", "--boards", "2100"]
    command += ["--tolerance", "C*=20%"]
    assert main(command) == 0
    alone = capsys.readouterr().out
    monkeypatch.setattr("tauledger.commands.workers.FEW", 100)
    assert main(command) == 0
    assert capsys.readouterr().out == alone


def test_an_unreachable_target_is_a_finding(
    netlist: str, capsys: pytest.CaptureFixture[str]
) -> None:
    command = ["choose", netlist, "--output", "out", "--low-corner", "20Hz", "--only", "C1"]
    assert main(command) == 1
    assert "cannot be met" in capsys.readouterr().out


def test_a_reversed_capacitor_is_a_finding(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "stage.cir").write_text(STAGE)
    (tmp_path / "tauledger.toml").write_text(
        '[path.x]\nnetlist = "stage.cir"\n[capacitors.can]\nmatch = "C1"\npolarised = true\n'
    )
    assert main(["stress", str(tmp_path / "stage.cir"), "--output", "out"]) == 1
    errors = capsys.readouterr().err
    assert "stage.cir:5:1" in errors
    assert "stands reversed" in errors
    assert "Caution" in errors


def test_the_patch_is_printed_alone(
    netlist: str, capfdbinary: pytest.CaptureFixture[bytes]
) -> None:
    command = ["choose", netlist, "--output", "out", "--low-corner", "30Hz", "--patch", "1"]
    assert main(command) == 0
    out, _ = capfdbinary.readouterr()
    assert out.startswith(b"--- ")
    changed = [line for line in out.splitlines() if line.startswith(b"+C")]
    assert changed


@pytest.mark.parametrize(
    ("command", "told"),
    [
        (("spread", "--boards", "1"), "2 to 1000000"),
        (("spread",), "no tolerance is known"),
        (("choose", "--low-corner", "20V"), "a frequency such as 20Hz"),
        (("choose",), "--low-corner"),
        (("choose", "--low-corner", "20Hz", "--series", "E7"), "one of E3"),
        (("choose", "--low-corner", "20Hz", "--shares", "CE=50,C1=20"), "100 together"),
        (("choose", "--low-corner", "30Hz", "--patch", "9"), "that exists; there are 3"),
        (("stress", "--margin", "120%"), "0 to below 100"),
        (("temperature",), "Give it with --range 0..60"),
        (("temperature", "--range", "9"), "two temperatures"),
    ],
)
def test_a_wrong_option_is_explained(
    netlist: str, command: tuple[str, ...], told: str, capsys: pytest.CaptureFixture[str]
) -> None:
    name, *options = command
    assert main([name, netlist, "--output", "out", *options]) == 2
    out, errors = capsys.readouterr()
    assert out == ""
    assert told in errors
    assert "internal" not in errors
