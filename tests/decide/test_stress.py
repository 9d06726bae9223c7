"""Stress and temperature: voltages, polarity, discharge and heat of circuits with known answers."""

from __future__ import annotations

import json
import math
from pathlib import Path

import pytest

import ngspice
from decide.circuits import STAGE, run
from tauledger.analysis import analyze
from tauledger.configuration.reading import read_configuration
from tauledger.configuration.settings import PathSettings
from tauledger.decide.dielectric import code_limits
from tauledger.decide.stress import stress
from tauledger.decide.temperature import steps, temperature_sweep
from tauledger.netlist import parse
from tauledger.problems import ProblemError, Severity
from tauledger.report.decision_json import decision_json
from tauledger.report.decision_parts import stress_page, temperature_page
from tauledger.report.layout import plain
from tauledger.report.page import Page
from tauledger.review.decisions import CapacitorStress, Stress

DIVIDER = """divider on a supply
V1 top 0 100
VS in 0 AC 1
C1 in mid 1u
R1 top mid 60k
R2 mid 0 40k
C2 mid out 10u
RL out 0 10k
C3 top 0 100u
C4 0 mid 4.7u
.end
"""


def settings_of(folder: Path, text: str) -> PathSettings:
    (folder / "tauledger.toml").write_text(f'[path.x]\nnetlist = "x.cir"\n{text}')
    return read_configuration(folder / "tauledger.toml").paths[0]


def row(result: Stress, name: str) -> CapacitorStress:
    return next(r for r in result.capacitors if r.part == name)


def codes(result: Stress) -> dict[str, set[str]]:
    """Code of each finding to the parts it names."""
    found: dict[str, set[str]] = {}
    for problem in result.problems:
        found.setdefault(problem.code, set()).add(problem.message.split()[0].rstrip(":"))
    return found


def test_voltages_run_from_the_first_node_to_the_second() -> None:
    result = stress(run(DIVIDER), margin=0.2)
    assert row(result, "C1").voltage_v == pytest.approx(-40.0, rel=1e-6)
    assert row(result, "C4").voltage_v == pytest.approx(-40.0, rel=1e-6)
    assert row(result, "C2").voltage_v == pytest.approx(40.0, rel=1e-6)
    assert row(result, "C2").required_v == pytest.approx(50.0, rel=1e-6)


def test_polarity_by_class_and_by_model(tmp_path: Path) -> None:
    text = """
[capacitors.can]
match = ["C1", "C2"]
polarised = true
[capacitors.film]
match = "C4"
polarised = false
"""
    netlist = DIVIDER.replace("C3 top 0 100u", "C3 0 top electrolytic_63v 100u").replace(
        ".end", ".model electrolytic_63v c (cj=1)\nC5 out 0 electrolytic_63v 1u\n.end"
    )
    result = stress(run(netlist), settings_of(tmp_path, text))
    found = codes(result)
    assert found["capacitor-reversed"] == {"C1", "C3"}
    assert found["capacitor-unbiased"] == {"C5"}
    for problem in result.problems:
        if problem.code in ("capacitor-reversed", "capacitor-unbiased"):
            assert "Caution: a reversed electrolytic" in problem.advice
            assert problem.span is not None
    assert row(result, "C2").polarised == "class can"
    assert row(result, "C4").polarised == ""


@pytest.mark.parametrize(
    ("rating", "code", "severity"),
    [
        ("35 V", "capacitor-overvoltage", Severity.ERROR),
        ("45 V", "capacitor-margin", Severity.WARNING),
        ("63 V", "", None),
    ],
)
def test_only_a_given_rating_is_a_limit(
    tmp_path: Path, rating: str, code: str, severity: Severity | None
) -> None:
    text = f'[capacitors.all]\nmatch = "C2"\nrated_voltage = "{rating}"\n'
    result = stress(run(DIVIDER), settings_of(tmp_path, text), 0.2)
    found = [p for p in result.problems if p.code in ("capacitor-overvoltage", "capacitor-margin")]
    assert [(p.code, p.severity) for p in found] == ([(code, severity)] if code else [])
    assert not any("rated" in p.message for p in stress(run(DIVIDER)).problems)


def test_what_keeps_its_charge_is_told() -> None:
    """C3 stands on the supply alone; C2 discharges through R2 and RL: 10 µF · 50 kΩ."""
    text = DIVIDER.replace("R1 top mid 60k", "D1 top x dx\nR1 x mid 60k").replace(
        ".end", ".model dx d (is=1f)\n.end"
    )
    result = stress(run(text))
    (problem,) = [p for p in result.problems if p.code == "capacitor-stays-charged"]
    assert problem.message.startswith("no resistor discharges C3")
    assert problem.severity is Severity.WARNING
    assert "Caution" in problem.advice
    assert row(result, "C3").discharge_tau_s is None
    assert row(result, "C2").discharge_tau_s == pytest.approx(10e-6 * 50e3, rel=1e-6)
    assert set(row(result, "C2").discharge.split(", ")) == {"R2", "RL"}
    bled = stress(run(text.replace("C3 top 0 100u", "C3 top 0 100u\nRB top 0 100k")))
    assert "capacitor-stays-charged" not in codes(bled)
    assert row(bled, "C3").discharge_tau_s == pytest.approx(10.0, rel=1e-6)


def test_ceramic_loses_capacitance_at_its_voltage(tmp_path: Path) -> None:
    """A bias curve halves C2 at its 40 V, by a straight line between points; its corner doubles."""
    text = """
[capacitors.ceramic]
match = "C2"
dielectric = "X7R"
bias_curve = [
  { voltage = "0 V", change = "0 %" },
  { voltage = "30 V", change = "-40 %" },
  { voltage = "50 V", change = "-60 %" },
]
temperature_curve = [
  { temperature = "0 °C", change = "0 %" },
  { temperature = "60 °C", change = "0 %" },
]
"""
    netlist = "x\nVS in 0 dc 40 AC 1\nC2 in out 1u\nRL out 0 10k\n.end\n"
    result = stress(run(netlist), settings_of(tmp_path, text))
    assert row(result, "C2").effective_f == pytest.approx(0.5e-6)
    assert result.low_hz == pytest.approx(1 / (2 * math.pi * 10e3 * 1e-6), rel=1e-4)
    assert result.low_effective_hz == pytest.approx(2 * result.low_hz, rel=1e-4)
    turned = stress(run(netlist.replace("C2 in out", "C2 out in")), settings_of(tmp_path, text))
    assert row(turned, "C2").effective_f == pytest.approx(0.5e-6)
    far = stress(run(netlist.replace("dc 40", "dc 60")), settings_of(tmp_path, text))
    assert codes(far)["dielectric-beyond"] == {"C2"}


def test_without_curves_the_code_limits_count(tmp_path: Path) -> None:
    """References C4 [P]: Y5V may lose 82 % between -30 and +85 °C; C0G has no such letters."""
    text = '[capacitors.ceramic]\nmatch = "C2"\ndielectric = "Y5V"\n'
    netlist = "x\nVS in 0 AC 1\nC2 in out 1u\nRL out 0 10k\n.end\n"
    result = stress(run(netlist), settings_of(tmp_path, text))
    assert row(result, "C2").effective_f == pytest.approx(0.18e-6)
    assert row(result, "C2").basis == "lower limit of Y5V"
    assert any("loses at direct voltage is not in the code" in note for note in result.notes)
    assert code_limits("C0G") is None
    limits = code_limits("x7r")
    assert limits is not None
    assert (limits.lowest_c, limits.highest_c, limits.change) == (-55.0, 125.0, (-0.15, 0.15))


def test_heat_in_resistors(tmp_path: Path) -> None:
    """60 V across 60 kΩ: 60 mW."""
    text = '[resistors.small]\nmatch = "R1"\nrated_power = "50 mW"\n'
    result = stress(run(DIVIDER), settings_of(tmp_path, text))
    first = next(r for r in result.resistors if r.part == "R1")
    assert (first.power_w, first.load) == (pytest.approx(0.06), pytest.approx(1.2))
    assert codes(result)["resistor-overloaded"] == {"R1"}
    assert next(r for r in result.resistors if r.part == "R2").load is None


HOT = """one of each, emitters and sources above ground
VP p 0 20
VM m 0 -5
Q1 p b e hot m=2
VB b 0 3 AC 1
RE e m 470
D1 p k dz
RD k 0 1k
J1 p 0 s jf
RS s 0 220
M1 p g t 0 mo w=100u l=10u
VG g 0 6
RM t 0 330
C1 e k 1u
C2 k s 1u
C3 s t 1u
C4 t out 1u
RL out 0 10k
.model hot npn (is=20f bf=150 vaf=90 rb=40 re=0.5 ptot=0.05)
.model dz d (is=1n rs=3)
.model jf njf (beta=2m vto=-2 lambda=5m rd=20 rs=20)
.model mo nmos (level=1 vto=1 kp=50u lambda=0.01 gamma=0.4)
.end
"""


def test_ratings_of_devices_come_from_class_or_card(tmp_path: Path) -> None:
    """Two devices in parallel stand twice the rating; a word as a rating is none."""
    worded = HOT.replace("rs=3", "rs=3 pd=lots mfg=somebody")
    bare = {row.part: row for row in stress(run(worded)).devices}
    assert set(bare) == {"Q1", "D1", "J1", "M1"}
    assert bare["Q1"].rated_w == pytest.approx(0.1)
    assert bare["Q1"].basis == "ptot of model hot"
    assert bare["Q1"].load == pytest.approx(bare["Q1"].power_w / 0.1)
    assert {bare[part].rated_w for part in ("D1", "J1", "M1")} == {None}
    text = """
[transistors.signal]
match = "[qj]*"
current_gain = "30 %"
rated_power = "75 mW"
[diodes.small]
match = "D?"
rated_power = "5 mW"
"""
    result = stress(run(HOT), settings_of(tmp_path, text))
    rated = {row.part: (row.rated_w, row.basis) for row in result.devices}
    assert rated == {
        "Q1": (pytest.approx(0.15), "class signal"),
        "J1": (pytest.approx(0.075), "class signal"),
        "D1": (pytest.approx(5e-3), "class small"),
        "M1": (None, ""),
    }
    hotter = {row.part for row in result.devices if row.rated_w and row.power_w > row.rated_w}
    assert hotter == codes(result)["device-overloaded"]
    assert hotter == {"Q1", "D1"}
    (problem, _) = [p for p in result.problems if p.code == "device-overloaded"]
    assert problem.message.endswith("and is rated 150 mW (class signal)")
    assert problem.severity is Severity.ERROR
    assert problem.span is not None
    assert "Caution" in problem.advice
    page = plain(stress_page(Page(100, str), result))
    assert "Transistors and diodes, hottest first" in page
    assert "rated by class small" in page
    assert json.loads(decision_json(result))["devices"][0]["basis"] == "class signal"


@pytest.mark.referee
def test_heat_of_devices_against_ngspice(tmp_path: Path) -> None:
    """Source: ngspice 39.3 run here [P: its output]."""
    netlist = tmp_path / "hot.cir"
    netlist.write_text(HOT)
    powers = {f"@{row.part.lower()}[p]": row.power_w for row in stress(run(HOT)).devices}
    assert len(powers) == 4
    assert powers == pytest.approx(ngspice.operating_point(netlist, powers).figures, rel=1e-5)


def test_the_load_of_the_configuration_is_no_part_of_the_board(tmp_path: Path) -> None:
    text = """
output = { node = "out", load_resistance = "50 Ω", load_capacitance = "1 nF" }
[capacitors.all]
match = "C*"
polarised = true
rated_voltage = "50 V"
[resistors.all]
match = "R*"
rated_power = "1 nW"
[path.x.limits]
capacitor_voltage_margin = { min = "10 %" }
"""
    settings = settings_of(tmp_path, text)
    netlist = "x\nVS in 0 AC 1\nC2 in out 1u\nRB out 0 100k\n.end\n"
    analysis = analyze(parse(netlist), settings=settings)
    assert analysis.circuit.attached == {"Rload", "Cload"}
    result = stress(analysis, settings)
    assert [r.part for r in result.capacitors] == ["C2"]
    assert [r.part for r in result.resistors] == ["RB"]
    assert codes(result)["capacitor-unbiased"] == {"C2"}


def test_the_inside_of_a_macromodel_has_no_rows() -> None:
    """Nobody can fit another compensation capacitor into an op-amp; a real block has its rows."""
    text = """buffer and a stage in subcircuits
VCC vcc 0 12
VS in 0 AC 1
XU1 in out opamp
XS out end vcc stage
RL end 0 10k
.subckt opamp p o
RIN p 0 1Meg
G1 0 x p o 1m
R1 x 0 1Meg
C1 x 0 1n
E1 o 0 x 0 1
.ends
.subckt stage a b v
C9 a c 1u
R8 v c 47k
R9 c 0 22k
C8 c b 1u
.ends
.end
"""
    result = stress(run(text, "end"), margin=0.2)
    assert [r.part for r in result.capacitors] == ["XS.C9", "XS.C8"]
    assert [r.part for r in result.resistors] == ["XS.R8", "XS.R9", "RL"]
    assert any("inside XU1" in note for note in result.notes)


def test_settling_of_one_time_constant() -> None:
    """4.605 time constants to 1 % (references B13)."""
    result = stress(run("x\nVS in 0 AC 1\nC2 in out 1u\nRL out 0 10k\n.end\n"))
    assert result.settling_s == pytest.approx(math.log(100.0) * 10e-3, rel=1e-6)
    assert result.slowest_pole_hz == pytest.approx(15.9155, rel=1e-4)


def test_every_temperature_is_the_analysis_at_that_temperature() -> None:
    sweep = temperature_sweep(run(STAGE), [-10.0, 27.0, 60.0])
    for found in sweep.rows:
        text = STAGE.replace(".end", f".options temp={found.temperature_c}\n.end")
        one = run(text)
        assert found.gain == pytest.approx(one.corners.exact_gain, rel=1e-4)
        assert found.low_hz == pytest.approx(one.corners.low.exact_hz, rel=1e-3)
        assert found.high_hz == pytest.approx(one.corners.high.exact_hz, rel=1e-3)
        current = float(one.point.devices["Q1"].values["ic"][0])
        assert found.transistors[0].current_a == pytest.approx(current, rel=1e-6)
    currents = [found.transistors[0].current_a for found in sweep.rows]
    assert currents == sorted(currents)  # VBE falls as it gets warmer


@pytest.mark.parametrize("window", [(60.0, 0.0), (-300.0, 0.0), (0.0, 5000.0)])
def test_an_impossible_range_is_refused(window: tuple[float, float]) -> None:
    with pytest.raises(ProblemError, match="cannot sweep"):
        steps(*window)


def test_the_pages_show_what_was_found(tmp_path: Path) -> None:
    text = '[capacitors.all]\nmatch = "C*"\nrated_voltage = "63 V"\npolarised = true\n'
    result = stress(run(DIVIDER), settings_of(tmp_path, text))
    page = plain(stress_page(Page(100, str), result)).replace("\u00a0", " ")
    assert "settles to 1 %" in page
    assert "-40.0 V" in page
    assert "R1" in page
    assert json.loads(decision_json(result))["capacitors"][0]["rated_v"] == 63.0
    sweep = temperature_sweep(run(STAGE), steps(0.0, 50.0, 3))
    shown = plain(temperature_page(Page(100, str), sweep)).replace("\u00a0", " ")
    assert "25.0 °C" in shown
    assert "Q1 current" in shown
