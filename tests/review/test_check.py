"""What is wrong with a circuit is found, at its line, whatever else is checked beside it."""

from __future__ import annotations

from concurrent.futures import Executor, ProcessPoolExecutor, ThreadPoolExecutor
from multiprocessing import get_context
from pathlib import Path

import pytest

from report.amplifier import (
    CE_LINE,
    FLOATING,
    GARBLED,
    LIMITS,
    NETLIST,
    REVERSED,
    SATURATED,
    SMALL_BYPASS,
    checked,
    checked_files,
    write,
)
from tauledger.fleet import check_targets, configured_targets, named_targets
from tauledger.problems import ProblemError, Severity
from tauledger.review.check import Finding, NetlistCheck, describe, exit_code


def _codes(checks: list[NetlistCheck]) -> list[str]:
    return [finding.problem.code for one in checks for finding in one.findings]


def _only(checks: list[NetlistCheck], code: str) -> Finding:
    (found,) = (f for one in checks for f in one.findings if f.problem.code == code)
    return found


def test_a_good_amplifier_within_its_limits_has_no_finding(tmp_path: Path) -> None:
    checks = checked(tmp_path, NETLIST, LIMITS)
    assert _codes(checks) == []
    assert [row.verdict for row in checks[0].limits] == ["met"] * 3
    assert exit_code(checks, Severity.WARNING) == 0


def test_without_configuration_it_is_said_that_no_limits_are_set(tmp_path: Path) -> None:
    checks = checked(tmp_path, NETLIST)
    assert _codes(checks) == ["limits-absent"]
    assert exit_code(checks, Severity.WARNING) == 0


def test_a_small_bypass_is_found_at_its_own_line(tmp_path: Path) -> None:
    checks = checked(tmp_path, SMALL_BYPASS, LIMITS)
    missed = _only(checks, "limit-missed")
    assert missed.part == "CE"
    assert missed.problem.span is not None
    assert missed.problem.span.line == CE_LINE
    assert missed.problem.span.path == str(tmp_path / "amp.cir")
    assert missed.limit is not None
    assert Path(missed.limit.path).name == "tauledger.toml"
    assert exit_code(checks, Severity.ERROR) == 1


@pytest.mark.parametrize(
    ("netlist", "code", "part"),
    [
        (SATURATED, "device-out-of-region", "Q1"),
        (REVERSED, "capacitor-reversed", "C1"),
        (FLOATING, "node-floating", ""),
        (GARBLED, "expression-invalid", ""),
    ],
)
def test_what_is_wrong_in_itself(tmp_path: Path, netlist: str, code: str, part: str) -> None:
    checks = checked(tmp_path, netlist)
    found = _only(checks, code)
    assert found.part == part
    assert found.problem.span is not None
    assert found.problem.advice
    assert exit_code(checks, Severity.ERROR) == 1


def test_reversal_comes_with_its_caution(tmp_path: Path) -> None:
    found = _only(checked(tmp_path, REVERSED), "capacitor-reversed")
    assert "burst" in found.problem.advice
    assert "discharge" in found.problem.advice


@pytest.mark.parametrize(
    ("name", "reversed_"),
    [("electrolytic", True), ("Tantalum-25V", True), ("film", False), ("bipolar-elko", False)],
)
def test_polarity_by_the_class_of_the_configuration(
    tmp_path: Path, name: str, reversed_: bool
) -> None:
    turned = NETLIST.replace("C1  base src", "C1  src  base")
    limits = f'{LIMITS}[capacitors.{name}]\nmatch = ["C*"]\n'
    assert _codes(checked(tmp_path, turned, limits)) == ["capacitor-reversed"] * reversed_


def test_an_unbiased_push_pull_output_is_cut_off_by_design(tmp_path: Path) -> None:
    netlist = """Class B pair, invented
VCC vcc 0 DC 12
VEE 0 vee DC 12
VIN in 0 DC 0 AC 1
Q1 vcc in out QN
Q2 vee in out QP
RL out 0 100
.model QN NPN (BF=100)
.model QP PNP (BF=100)
.print ac v(out)
.end
"""
    assert _codes(checked(tmp_path, netlist)) == ["limits-absent"]


def test_a_netlist_without_a_signal_is_checked_for_its_bias(tmp_path: Path) -> None:
    checks = checked(tmp_path, REVERSED.replace("AC 1", ""))
    assert _codes(checks) == ["capacitor-reversed", "path-unnamed", "limits-absent"]


def test_a_configured_path_that_cannot_be_found_is_an_error(tmp_path: Path) -> None:
    checks = checked(tmp_path, NETLIST.replace("AC 1", ""), LIMITS)
    assert _only(checks, "input-missing").problem.severity is Severity.ERROR


def test_a_file_of_definitions_is_no_fault(tmp_path: Path) -> None:
    library = "* models\n.model NVOICE NPN (BF=260)\n.subckt pad a b\nR1 a b 1k\n.ends\n"
    checks = checked(tmp_path, library)
    assert _codes(checks) == ["definitions-only"]
    assert exit_code(checks, Severity.ERROR) == 0


def test_one_bad_netlist_does_not_stop_the_others(tmp_path: Path) -> None:
    files = [
        write(tmp_path, NETLIST, name="good.cir"),
        tmp_path / "missing.cir",
        write(tmp_path, GARBLED, name="garbled.cir"),
        write(tmp_path, SATURATED, name="saturated.cir"),
    ]
    checks = checked_files(files)
    assert [one.netlist for one in checks] == [str(file) for file in files]
    assert [one.outcome for one in checks] == ["checked", "unusable", "checked", "checked"]
    assert [one.review is not None for one in checks] == [True, False, False, True]
    assert exit_code(checks, Severity.ERROR) == 2
    assert exit_code(checks[2:], Severity.ERROR) == 1


def test_a_fault_of_ours_is_told_for_its_netlist_alone(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*_: object, **__: object) -> None:
        raise ZeroDivisionError("on purpose")

    monkeypatch.setattr("tauledger.analysis.analyze", broken)
    checks = checked_files([write(tmp_path, NETLIST), tmp_path / "missing.cir"])
    assert [one.outcome for one in checks] == ["internal error", "unusable"]
    assert "ZeroDivisionError" in checks[0].details
    assert exit_code(checks, Severity.ERROR) == 3


@pytest.mark.parametrize("split", [1, 2, 3])
def test_a_split_list_gives_the_same_result_for_each_file(tmp_path: Path, split: int) -> None:
    write(tmp_path, NETLIST, LIMITS)
    texts = [NETLIST, SMALL_BYPASS, REVERSED, FLOATING]
    files = [write(tmp_path, text, name=f"{i}.cir") for i, text in enumerate(texts)]
    parts = checked_files(files[:split]) + checked_files(files[split:])
    assert parts == checked_files(files)


def test_a_broken_configuration_is_a_problem_of_each_of_its_netlists(tmp_path: Path) -> None:
    broken, sound = tmp_path / "broken", tmp_path / "sound"
    for folder, limits in ((broken, "[path.voice]\nnetlst = 1\n"), (sound, LIMITS)):
        folder.mkdir()
        write(folder, NETLIST, limits)
    checks = checked_files([broken / "amp.cir", sound / "amp.cir"])
    assert [one.outcome for one in checks] == ["unusable", "checked"]
    assert "config-key-unknown" in _codes(checks)


def test_every_path_of_a_netlist_is_checked(tmp_path: Path) -> None:
    second = '[path.strict]\nnetlist = "*.cir"\nlimits.low_corner = { max = "50 Hz" }\n'
    checks = checked(tmp_path, NETLIST, LIMITS + second)
    assert [one.path for one in checks] == ["voice", "strict"]
    assert _only(checks, "limit-missed").problem.message.startswith("strict: low corner")


def test_without_names_every_configured_netlist_is_checked(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    limits = LIMITS.replace('"amp.cir"', '"**/*.cir"') + '[path.gone]\nnetlist = "gone.cir"\n'
    boards = tmp_path / "boards"
    boards.mkdir()
    write(tmp_path, NETLIST, limits)
    write(boards, SMALL_BYPASS, name="small.cir")
    monkeypatch.chdir(tmp_path)
    checks = check_targets(configured_targets(tmp_path))
    assert [(one.netlist, one.outcome) for one in checks] == [
        ("amp.cir", "checked"),
        (str(Path("boards", "small.cir")), "checked"),
        ("gone.cir", "unusable"),
    ]
    assert _codes(checks) == ["limit-missed", "config-path-unmatched"]


def test_nothing_to_check_is_an_error_of_use(tmp_path: Path) -> None:
    with pytest.raises(ProblemError, match="no netlist was named"):
        configured_targets(tmp_path)


def _processes() -> Executor:
    return ProcessPoolExecutor(2, mp_context=get_context("spawn"))


@pytest.mark.parametrize("make", [lambda: ThreadPoolExecutor(2), _processes])
def test_any_executor_gives_what_this_process_gives(tmp_path: Path, make: object) -> None:
    assert callable(make)
    texts = [NETLIST, SMALL_BYPASS, REVERSED, FLOATING, GARBLED]
    files = [write(tmp_path, text, LIMITS, f"{i}.cir") for i, text in enumerate(texts)]
    targets = named_targets(files)
    done: list[int] = []
    with make() as executor:
        assert check_targets(targets, executor, done.append) == check_targets(targets)
    assert done == [1, 2, 3, 4, 5]


def test_every_code_met_is_described(tmp_path: Path) -> None:
    for netlist in (SMALL_BYPASS, SATURATED, REVERSED, FLOATING, GARBLED):
        for one in checked(tmp_path, netlist, LIMITS):
            for finding in one.findings:
                described = describe(finding.problem)
                assert described.id == finding.problem.code
                assert described.help
