"""Slopes at the nominal board against boards solved anew, against scaling laws, and ngspice."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

import ngspice
from decide.circuits import PAIR, TRANSISTOR, run
from tauledger.decide import slopes
from tauledger.decide.asked import parse_asked
from tauledger.decide.bench import Bench, bench_of
from tauledger.decide.slopes import figure_slopes
from tauledger.decide.varied import Variety, board_values, variety_of
from tauledger.decide.worst import FIGURES, each_alone, measure_deviations

PASSIVE = ("R*=5%", "C*=20%")
AROUND = ("supply=10%", "temperature=-10..60")
BIPOLAR = ("Q*.current_gain=50%", "Q*.base_emitter_voltage=20mV")
JUNCTION_FET = ("J*.drain_current=20%", "J*.pinch_off_voltage=20%")

JFET = """self-biased stage
VDD d 0 24
VS in 0 AC 1
RS in a 10k
C1 a g 22n
RG g 0 1Meg
J1 out g s jx
RD d out 4.7k
RK s 0 1k
CK s 0 47u
C2 out load 1u
RL load 0 100k
.model jx njf (vto=-2.4 beta=0.9m lambda=8m cgs=6p cgd=3p rd=20 rs=15)
.end
"""

MOS = """common source
VDD d 0 12
VS in 0 AC 1
RS in a 1k
C1 a g 100n
R1 d g 1Meg
R2 g 0 470k
M1 out g s 0 mx w=40u l=4u
RD d out 10k
RK s 0 2.2k
CK s 0 10u
CL out 0 30p
.model mx nmos (vto=0.9 kp=90u lambda=0.02 gamma=0.5 phi=0.7 cgso=0.3n cgdo=0.3n cgbo=0.1n tox=20n)
.end
"""

FEEDBACK = f"""pair with feedback to the first emitter and bias from the second
VCC vcc 0 18
VS in 0 AC 1
RS in a 600
C1 a b 4.7u
RB b e2 180k
Q1 c1 b e1 qx
RC1 vcc c1 68k
RE1 e1 0 390
Q2 out c1 e2 qx
RC2 vcc out 6.8k
RE2 e2 f 220
RE3 f 0 1.2k
CE3 f 0 220u
RF out x 18k
CX x e1 10u
CF out c1 10p
C2 out load 2.2u
RL load 0 47k
.model qx {TRANSISTOR}
.end
"""

THREE = f"""three stages coupled directly, both polarities
VCC vcc 0 20
VS in 0 AC 1
RS in a 1k
C1 a b 10u
R1 vcc b 150k
R2 b 0 56k
Q1 c1 b e1 qx
RC1 vcc c1 2.2k
RE1 e1 0 4.7k
RE2 e1 y 220
CE y 0 100u
Q2 c2 c1 e2 qy
RE3 vcc e2 470
RC2 c2 0 3.9k
Q3 vcc c2 out qx
RE4 out 0 1.5k
CC c2 c1 22p
C2 out load 22u
RL load 0 2k
.model qx {TRANSISTOR}
.model qy pnp (is=20f bf=160 vaf=60 cje=15p cjc=6p tf=0.8n rb=60)
.end
"""

CIRCUITS = {
    "bipolar pair": (PAIR, BIPOLAR),
    "JFET stage": (JFET, JUNCTION_FET),
    "MOS stage": (MOS, ("M*.threshold_voltage=100mV",)),
    "feedback pair": (FEEDBACK, BIPOLAR),
    "three coupled directly": (THREE, BIPOLAR),
}


def prepared(text: str, *tolerances: str) -> tuple[Bench, Variety]:
    analysis = run(text)
    bench = bench_of(analysis)
    asked = [parse_asked(tolerance) for tolerance in tolerances]
    return bench, variety_of(analysis.circuit, bench.source, None, asked)


def of_boards_solved_anew(bench: Bench, variety: Variety) -> dict[str, NDArray[np.float64]]:
    """Central differences at three steps, two times extrapolated to none (Richardson)."""
    size = len(variety.draws)
    units = np.array([{"": 2e-3, "V": 1e-4, "°C": 0.2}[draw.unit] for draw in variety.draws])
    tables: dict[str, list[NDArray[np.float64]]] = {figure: [] for figure in FIGURES}
    for factor in (1.0, 2.0, 4.0):
        steps = factor * units
        found = measure_deviations(bench, variety, np.hstack([np.diag(-steps), np.diag(steps)]))
        for figure, table in tables.items():
            below, above = np.log(found.figure(figure)).reshape(2, size)
            table.append((above - below) / (2.0 * steps))
    once = {f: [(4.0 * t[i] - t[i + 1]) / 3.0 for i in (0, 1)] for f, t in tables.items()}
    return {figure: (16.0 * a - b) / 15.0 for figure, (a, b) in once.items()}


@pytest.mark.parametrize("name", CIRCUITS)
def test_slopes_are_those_of_boards_solved_anew(name: str) -> None:
    text, transistors = CIRCUITS[name]
    bench, variety = prepared(text, *PASSIVE, *AROUND, *transistors)
    units = {draw.unit for draw in variety.draws}
    assert {"", "°C"} <= units
    expected = of_boards_solved_anew(bench, variety)
    found = figure_slopes(bench, variety)
    for figure in FIGURES:
        # The search for a corner ends at 1e-9 of it: 3e-7 in a difference over 4e-3.
        assert found[figure] == pytest.approx(expected[figure], rel=1e-5, abs=1e-6)
        assert np.abs(found[figure]).max() > 0.1
    alone = each_alone(bench, variety)
    for figure in FIGURES:
        assert alone.slope[figure].tolist() == found[figure].tolist()


def of_kind(variety: Variety, values: NDArray[np.float64], *starts: str) -> float:
    return sum(
        float(value)
        for draw, value in zip(variety.draws, values, strict=True)
        if draw.label.startswith(starts)
    )


def test_impedance_and_frequency_scaling_of_a_linear_circuit() -> None:
    """Euler's theorem: all R times k and all C over k changes no ratio; C alone moves the band."""
    text = """ladder with a buffer
VS in 0 AC 1
R1 in a 2k
C1 a b 1u
R2 b 0 33k
C2 b 0 220p
E1 c 0 b 0 4.5
R3 c d 1k
C3 d out 3.3u
R4 out 0 8.2k
C4 out 0 150p
.end
"""
    bench, variety = prepared(text, *PASSIVE)
    found = figure_slopes(bench, variety)
    for figure in FIGURES:
        by_resistors, by_capacitors = (of_kind(variety, found[figure], k) for k in "RC")
        assert by_resistors == pytest.approx(by_capacitors, abs=1e-9)
        # The band is 3.5 decades wide: at its middle |H| is flat to about 1e-4.
        expected = 0.0 if figure == "gain" else -1.0
        assert by_capacitors == pytest.approx(expected, abs=2e-3)
    assert abs(of_kind(variety, found["gain"], "R1")) > 0.05
    assert abs(of_kind(variety, found["high corner"], "R1")) > 0.5


def test_impedance_scaling_carries_through_the_bias_of_bipolar_transistors() -> None:
    """Currents over k at the same voltages: R times k, C and IS over k, and nothing else moves.

    IS over k is VBE higher by Vt·ln k. The model has no resistance or capacitance of its own.
    """
    text = PAIR.replace(TRANSISTOR, "npn (is=12f bf=240 vaf=90 tf=0.4n)")
    bench, variety = prepared(text, *PASSIVE, *BIPOLAR)
    found = figure_slopes(bench, variety)
    thermal = 1.380649e-23 * 300.15 / 1.602176634e-19
    shifts = [draw.unit == "V" for draw in variety.draws]
    assert sum(shifts) == 2
    for figure in FIGURES:
        passive = of_kind(variety, found[figure], "R") - of_kind(variety, found[figure], "C")
        assert passive + thermal * found[figure][shifts].sum() == pytest.approx(0.0, abs=1e-6)
        assert thermal * abs(found[figure][shifts].sum()) > 1e-3


def test_scaling_laws_of_a_junction_field_effect_transistor() -> None:
    """Its current is IDSS·f(VGS/VP): it scales in current with IDSS and in voltage with VP."""
    text = JFET.replace("lambda=8m cgs=6p cgd=3p rd=20 rs=15", "is=1e-20")
    # No gmin: its current in RG is one that does not scale.
    text = text.replace("RL load", ".options gmin=1e-20\nCL load 0 100p\nRL load")
    bench, variety = prepared(text, *PASSIVE, "supply=5%", *JUNCTION_FET)
    found = figure_slopes(bench, variety)
    for figure in FIGURES:
        resistors, capacitors, current, pinch, supply = (
            of_kind(variety, found[figure], start)
            for start in ("R", "C", "J1 IDSS", "J1 pinch-off", "supply")
        )
        assert resistors - capacitors - current == pytest.approx(0.0, abs=1e-6)
        # All voltages times k at the same resistances: currents times k too.
        assert supply + pinch + current == pytest.approx(0.0, abs=1e-6)
        assert abs(current) > (1e-2 if figure != "high corner" else 0.0)


def test_a_draw_that_moves_a_junction_by_many_volts_takes_short_steps() -> None:
    """Between two rails IC = IS·exp((VB − VE)/Vt), so that d ln gm/d ln VB = VB/Vt, in thousands.

    The steps by default would move the junction by twenty and forty millivolts.
    """
    text = """a junction between two rails
VB vb 0 100
VS b vb AC 1
VE e 0 99.36
VC vc 0 110
Q1 out b e qx
RC vc out 2.2k
CL out 0 1n
.model qx npn (is=12f bf=240)
.end
"""
    bench, variety = prepared(text, *PASSIVE, "supply=1%")
    slope = figure_slopes(bench, variety)["gain"]
    thermal = 1.380649e-23 * 300.15 / 1.602176634e-19
    assert of_kind(variety, slope, "supply VB") == pytest.approx(100.0 / thermal, rel=1e-6)
    assert of_kind(variety, slope, "supply VE") == pytest.approx(-99.36 / thermal, rel=1e-6)


def test_a_corner_that_is_not_there_has_no_slopes() -> None:
    text = "x\nVS in 0 AC 1\nC1 in out 1u\nRL out 0 1k\n.end\n"
    found = figure_slopes(*prepared(text, *PASSIVE))
    assert np.isnan(found["high corner"]).all()
    assert found["low corner"] == pytest.approx([-1.0, -1.0], abs=1e-5)


def test_draws_taken_a_few_at_a_time_have_the_same_slopes(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    bench, variety = prepared(PAIR, *PASSIVE, *BIPOLAR)
    whole = figure_slopes(bench, variety)
    monkeypatch.setattr("tauledger.decide.bench.MOST_TOGETHER", 20)
    pieces = figure_slopes(bench, variety)
    for figure in FIGURES:
        assert pieces[figure] == pytest.approx(whole[figure], rel=1e-9, abs=1e-9)


def test_no_bias_is_solved_but_the_nominal_one(monkeypatch: pytest.MonkeyPatch) -> None:
    bench, variety = prepared(PAIR, *PASSIVE, *AROUND)
    solved: list[int] = []
    real = slopes.solve

    def counting(bench: Bench) -> slopes.BiasSolution:
        solution = real(bench)
        solved.append(solution.equations.boards)
        return solution

    monkeypatch.setattr(slopes, "solve", counting)
    figure_slopes(bench, variety)
    assert solved == [1]


@pytest.mark.referee
def test_slopes_are_those_of_ngspice(tmp_path: Path) -> None:
    """Differences of its gain and corners, by a hundredth or a few kelvins either way."""
    labels = {"RE1": 0.01, "R3": 0.01, "CE2": 0.01, "Q1 current gain": 0.02, "Q2 VBE": 2e-3,
              "supply VCC": 0.01, "temperature": 3.0}  # fmt: skip
    bench, variety = prepared(PAIR, *PASSIVE, *AROUND, *BIPOLAR)
    found = figure_slopes(bench, variety)
    names = [draw.label for draw in variety.draws]
    for label, step in labels.items():
        index = names.index(label)
        logs = []
        for sign in (-1.0, 1.0):
            deviations = np.zeros((len(names), 1))
            deviations[index] = sign * step
            netlist = tmp_path / "board.cir"
            netlist.write_text(_netlist(bench, variety, deviations))
            band = ngspice.band(netlist, "out", bench.midband_hz)
            assert band.low_hz is not None
            assert band.high_hz is not None
            logs.append(np.log([abs(band.gain), band.low_hz, band.high_hz]))
        expected = (logs[1] - logs[0]) / (2.0 * step)
        here = np.array([found[figure][index] for figure in FIGURES])
        # Corners read to 1e-5 of themselves; curvature over the step is below 1e-3 of the slope.
        assert here == pytest.approx(expected, rel=3e-3, abs=2e-5 / step), label


def _netlist(bench: Bench, variety: Variety, deviations: NDArray[np.float64]) -> str:
    """PAIR with the values of one board, each transistor with a model of its own."""
    varied, temperature = board_values(bench.circuit, variety, deviations)
    assert temperature is not None
    values = {name: float(value[0]) for name, value in varied.items()}
    lines = []
    for line in PAIR.splitlines():
        words = line.split()
        name = words[0].lower()
        if name in values:
            words[-1] = repr(values[name])
        elif name in ("q1", "q2"):
            card = TRANSISTOR.replace("bf=240", f"bf={values[f'{name}.bf']!r}")
            card = card.replace("is=12f", f"is={values[f'{name}.is']!r}")
            lines.append(f".model m{name} {card}")
            words[-1] = f"m{name}"
        lines.append(" ".join(words))
    lines.insert(-1, f".temp {float(temperature[0])!r}")
    return "\n".join([*lines, ""])
