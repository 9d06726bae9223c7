"""The time-constant engine on circuits where the answer is known or must not be invented."""

from __future__ import annotations

import math

import pytest

from tauledger.analysis import Analysis, analyze
from tauledger.corners.model import PartAccount
from tauledger.netlist import parse
from tauledger.problems import ProblemError

TRANSISTOR = ".model qx npn bf=200 vaf=100 cje=10p cjc=4p tf=0.3n"
STAGE = f"""stage
VCC vcc 0 12
VS in 0 AC 1
RS in a 1k
C1 a b 10u
R1 vcc b 47k
R2 b 0 10k
RC vcc c 4.7k
RE e 0 1k
CE e 0 100u
C2 c out 1u
RL out 0 10k
Q1 c b e qx
{TRANSISTOR}
"""


def run(text: str, output: str = "out") -> Analysis:
    return analyze(parse(text + "\n.end\n"), output=output)


def account(analysis: Analysis, name: str) -> PartAccount:
    return next(a for a in analysis.corners.accounts if a.part.name == name)


def test_single_pole_high_pass_and_low_pass_are_exact() -> None:
    analysis = run(
        """rc
VS in 0 AC 1
RS in a 1k
C1 a out 1u
RL out 0 9k
CL out 0 10p"""
    )
    low, high = analysis.corners.low, analysis.corners.high
    assert low.estimate_hz == pytest.approx(1 / (2 * math.pi * 10e3 * 1e-6), rel=1e-12)
    assert low.exact_hz == pytest.approx(low.estimate_hz, rel=1e-4)
    assert high.estimate_hz == pytest.approx(1 / (2 * math.pi * 900 * 10e-12), rel=1e-12)
    assert high.exact_hz == pytest.approx(high.estimate_hz, rel=1e-4)
    assert analysis.corners.gain == pytest.approx(0.9)


def test_series_inductor_and_shunt_inductor_are_the_dual() -> None:
    analysis = run(
        """inductors
VS in 0 AC 1
RS in a 1k
LP a 0 1
LS a out 1u
RL out 0 1k"""
    )
    assert account(analysis, "LP").end == "low"
    assert account(analysis, "LP").tau_s == pytest.approx(1 / 500)
    assert account(analysis, "LS").end == "high"
    assert account(analysis, "LS").tau_s == pytest.approx(1e-6 / 2e3)
    assert analysis.corners.low.exact_hz == pytest.approx(500 / (2 * math.pi), rel=1e-4)
    assert analysis.corners.high.exact_hz == pytest.approx(2e9 / (2 * math.pi), rel=1e-4)


def test_scaling_every_capacitor_moves_every_corner_inversely() -> None:
    factor = 3.7
    scaled = STAGE
    for old, value in (("10u", 10e-6), ("100u", 100e-6), ("1u", 1e-6)):
        scaled = scaled.replace(f" {old}\n", f" {value * factor!r}\n")
    before, after = run(STAGE), run(scaled)
    for name in ("C1", "CE", "C2"):
        assert account(after, name).corner_hz == pytest.approx(
            account(before, name).corner_hz / factor, rel=1e-9
        )
        assert account(after, name).share == pytest.approx(account(before, name).share, rel=1e-9)
    # The midband frequency moves with the low corner, and the gain there by a little.
    assert after.corners.low.exact_hz == pytest.approx(
        before.corners.low.exact_hz / factor, rel=1e-3
    )


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("CD vcc 0 100u", "straight across a source"),
        ("CD vcc 0 100n", "straight across a source"),
        ("CP e 0 47u", "in parallel with CE"),
        ("CP e vcc 47u", "in parallel with CE"),
        ("CP 0 e 47p", "in parallel with CE"),
    ],
)
def test_degenerate_capacitors_are_named_not_counted(line: str, words: str) -> None:
    name = line.split()[0]
    assert words in account(run(STAGE + line), name).reason
    assert account(run(STAGE + line), name).share is None


def test_parallel_capacitors_act_as_their_sum() -> None:
    whole, split = run(STAGE), run(STAGE.replace("100u", "53u") + "CP e 0 47u")
    assert account(split, "CE").tau_s == pytest.approx(account(whole, "CE").tau_s, rel=1e-12)
    assert split.corners.low.exact_hz == pytest.approx(whole.corners.low.exact_hz, rel=1e-9)


def test_parallel_capacitors_at_the_high_end_share_in_proportion() -> None:
    analysis = run(STAGE + "CX c 0 30p\nCY 0 c 10p")
    first, second = account(analysis, "CX"), account(analysis, "CY")
    assert first.resistance_ohm == pytest.approx(second.resistance_ohm)
    assert first.share == pytest.approx(3 * second.share)
    assert first.tau_s == pytest.approx(3 * second.tau_s)
    total = sum(a.share for a in analysis.corners.accounts if a.end == "high" and a.share)
    assert total == pytest.approx(1.0)


def test_two_bypasses_that_stand_in_for_each_other_leave_one_with_its_full_effect() -> None:
    analysis = run(STAGE.replace("CE e 0 100u", "CE e 0 100u\nCX e x 22u\nRX x 0 0.05"))
    counted = [a.part.name for a in analysis.corners.accounts if a.share is not None]
    assert "CE" in counted
    assert "CX" not in counted
    assert "moves the gain by" in account(analysis, "CX").reason


def test_capacitor_triangle_is_named() -> None:
    analysis = run(
        """triangle
VS in 0 AC 1
RS in a 1k
CA a m 10u
RM m 0 50k
CB m out 10u
CC a out 30u
RL out 0 10k
CL out 0 10p"""
    )
    assert "loop of other capacitors" in account(analysis, "CB").reason
    assert analysis.corners.low.exact_hz is not None


def test_dc_coupled_path_has_no_low_corner() -> None:
    corners = run(
        f"""dc coupled
VCC vcc 0 12
VEE vee 0 -12
VS in 0 AC 1
Q1 c1 in e qx
Q2 out 0 e qx
RE e vee 5.6k
RC1 vcc c1 5k
RC2 vcc out 5k
{TRANSISTOR}"""
    ).corners
    assert corners.low.exact_hz is None
    assert corners.low.estimate_hz is None
    assert "down to DC" in corners.low.notes[0]
    assert corners.high.exact_hz is not None


def test_missing_device_capacitances_are_said_out_loud() -> None:
    corners = run(STAGE.replace(" cje=10p cjc=4p tf=0.3n", "")).corners
    assert corners.high.exact_hz is None
    assert "CJE, CJC" in corners.high.notes[0]


def test_tuned_stage_gets_exact_figures_only() -> None:
    analysis = run(
        f"""tuned
VCC vcc 0 12
VS in 0 AC 1
C1 in b 100n
R1 vcc b 47k
R2 b 0 10k
RE e 0 1k
CE e 0 100n
L1 vcc c 1u
CT c vcc 250p
RT c vcc 10k
Q1 c b e qx
{TRANSISTOR}""",
        output="c",
    )
    corners = analysis.corners
    assert not corners.flat
    assert corners.low.estimate_hz is None
    # The tank: L, CT with Cμ beside it; loaded by RT with ro in parallel.
    c_mu = analysis.point.devices["Q1"].values["c_mu"][0]
    r_o = analysis.point.devices["Q1"].values["r_o"][0]
    total, loss = 250e-12 + c_mu, 1 / (1 / 10e3 + 1 / r_o)
    assert corners.midband_hz == pytest.approx(
        1 / (2 * math.pi * math.sqrt(1e-6 * total)), rel=2e-3
    )
    bandwidth = corners.high.exact_hz - corners.low.exact_hz
    assert bandwidth == pytest.approx(1 / (2 * math.pi * loss * total), rel=0.02)


def test_capacitor_that_steps_the_gain_inside_the_band_is_in_band() -> None:
    analysis = run(
        """step
VS in 0 AC 1
C1 in a 1u
R1 a 0 100k
E1 b 0 a 0 10
R2 b c 10k
R3 c 0 40k
C3 b c 100n
R4 c out 1k
C4 out 0 1n"""
    )
    assert account(analysis, "C3").end == "in-band"
    assert account(analysis, "C3").share is None
    assert account(analysis, "C1").share == pytest.approx(1.0)
    assert any("C3" in note for note in analysis.corners.low.notes)


def test_divider_of_two_capacitors_is_said_at_midband() -> None:
    analysis = run(
        """divider
VS in 0 AC 1
RS in a 3k
C1 a out 4.7n
RL out 0 47k
CL out 0 330p"""
    )
    assert any("C1" in note and "CL" in note for note in analysis.corners.notes)
    assert analysis.corners.gain > 1.02 * analysis.corners.exact_gain


def test_feedthrough_of_a_transistor_that_is_off_is_not_the_passband() -> None:
    """Cμ passes the signal at very high frequency; the stage is used far below."""
    weak = STAGE.replace("RC vcc c 4.7k", "RC vcc c 2")
    corners = run(weak).corners
    assert corners.midband_hz < 1e8
    assert corners.low.set_by == ("CE",)


def test_part_inside_a_loop_counts_when_it_moves_the_corner() -> None:
    """Feedback holds the midband gain whatever C1 does, yet C1 alone makes the high corner."""
    corners = run(
        """loop
VS in 0 AC 1
RI in n 10k
RF n out 100k
G1 p 0 n 0 10m
RP p 0 1Meg
CP p 0 10n
E1 out 0 p 0 1
RL out 0 2k"""
    ).corners
    assert corners.high.set_by == ("CP",)
    assert corners.high.estimate_hz == pytest.approx(corners.high.exact_hz, rel=0.02)


def test_unstable_circuit_is_said_and_gets_no_consequences() -> None:
    analysis = run(
        """positive feedback
VS in 0 AC 1
RI in p 10k
RF p out 30k
CP p 0 1n
E1 out 0 p 0 5
RL out 0 2k"""
    )
    corners = analysis.corners
    # One capacitor: (1/RI + 1/RF − 5/RF)/C, growing.
    expected = abs(1 / 10e3 + 1 / 30e3 - 5 / 30e3) / 1e-9 / (2 * math.pi)
    assert corners.unstable_hz == pytest.approx(expected, rel=1e-6)
    assert "unstable" in corners.notes[0]
    assert not corners.high.timing
    assert corners.high.improved_hz is None
    assert any(problem.code == "path-unstable" for problem in analysis.review.problems)


@pytest.mark.parametrize("negative", ["RN out 0 -50k", "RN b 0 -40k"])
def test_negative_resistors_end_in_a_report(negative: str) -> None:
    assert run(STAGE + negative).review.paths


def test_network_too_large_for_its_poles_is_refused() -> None:
    ladder = "\n".join(f"R{i} n{i} n{i + 1} 1k\nC{i} n{i + 1} 0 1n" for i in range(400))
    with pytest.raises(ProblemError) as caught:
        run(f"ladder\nVS n0 0 AC 1\n{ladder}\nRL n400 0 1k", output="n400")
    assert caught.value.problems[0].code == "circuit-too-large"


def test_a_skirt_that_runs_off_the_sweep_is_no_passband() -> None:
    """Less than a decade wide, 30 dB below its source: its skirt was taken for the passband, with
    -112 dB at 4 MHz for the gain.
    """
    analysis = run(
        """narrow band
VS in 0 AC 1
C0 in n0 983n
R0 n0 0 1.38k
R1 n0 n1 7.03k
C1 n1 0 2.13u
C2 n1 out 54.4n
R2 out 0 15.1k"""
    )
    corners = analysis.corners
    assert not corners.flat
    assert 100.0 < corners.midband_hz < 300.0
    assert corners.low.exact_hz is not None
    assert corners.high.exact_hz is not None
    assert 50.0 < corners.low.exact_hz < corners.midband_hz < corners.high.exact_hz < 500.0


def test_a_loop_of_shorts_leaves_the_exact_figures() -> None:
    """Parts inside the band are shorted for the high end: here that leaves no unique solution."""
    analysis = run(
        """one value throughout
V1 in 0 AC 1
C0 in n0 1.432u
R0 n0 in 75.89k
RL0 n0 0 10.84k
R1 n0 n1 75.89k
C1 n1 0 1.432u
L2 n1 n2 283.9u
C2 n2 0 1.432u
R2 n2 0 75.89k
R3 n0 out 75.89k
C3 out 0 1.432u"""
    )
    assert any("only exact figures" in note for note in analysis.corners.notes)
    assert analysis.corners.high.exact_hz is not None


def test_a_part_behind_an_ideal_source_makes_no_warning() -> None:
    """Warnings of the array routines would reach the terminal; tests turn them into errors."""
    analysis = run(
        """a coil with a capacitor at an ideal amplifier
V1 in 0 AC 1
L0 in n0 28.26m
C0 n0 0 65.78p
R0 n0 0 16.98k
E1 n1 0 n0 0 1e9
C3 n1 out 65.78p
R3 out n1 16.98k
RL3 out 0 2426"""
    )
    assert analysis.corners.exact_gain > 1e8
