"""The tolerance spread against closed forms, and against itself when the work is split."""

from __future__ import annotations

import json
import math
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest

from decide.circuits import PAIR, STAGE, run
from tauledger.analysis import Analysis
from tauledger.configuration.reading import read_configuration
from tauledger.configuration.settings import PathSettings
from tauledger.decide.asked import Asked, parse_asked
from tauledger.decide.bench import bench_of
from tauledger.decide.spread import INSIDE, spread
from tauledger.decide.varied import variety_of
from tauledger.decide.worst import each_alone, worst_cases
from tauledger.problems import ProblemError
from tauledger.report.decision import spread_page
from tauledger.report.decision_json import decision_json
from tauledger.report.layout import plain
from tauledger.report.page import Page
from tauledger.review.decisions import FigureSpread, Spread

HIGH_PASS = """one capacitor
VS in 0 AC 1
RS in a 1k
C1 a out 1u
RL out 0 9k
CL out 0 1p
.end
"""
DIVIDER = """transresistance
IS 0 out AC 1
R1 out 0 1k
C1 out 0 1n
.end
"""
TOLERANCES = ("R*=5%", "C*=-20..+80%", "Q*.current_gain=-40..+80%", "supply=5%")


def asked(*texts: str) -> list[Asked]:
    return [parse_asked(text) for text in texts]


def figure(result: Spread, name: str) -> FigureSpread:
    return next(f for f in result.figures if f.figure == name)


def settings_of(folder: Path, text: str) -> PathSettings:
    (folder / "tauledger.toml").write_text(f'[path.x]\nnetlist = "x.cir"\n{text}')
    return read_configuration(folder / "tauledger.toml").paths[0]


def test_normal_propagation_of_one_capacitor() -> None:
    """f = 1/(2π(RS + RL)C): σ(f)/f = σ(C)/C to first order, a tolerance being 3 σ."""
    result = spread(run(HIGH_PASS), None, asked("C1=15%"), 4000, distribution="normal")
    low = figure(result, "low corner")
    assert low.nominal == pytest.approx(1 / (2 * math.pi * 10e3 * 1e-6), rel=1e-4)
    assert low.linear_deviation / low.nominal == pytest.approx(0.05, rel=1e-4)
    # Second order of 1/C: the relative standard deviation grows by 4σ² of itself.
    assert low.deviation / low.nominal == pytest.approx(0.05 * (1 + 4 * 0.05**2), rel=0.01)
    assert low.mean / low.nominal == pytest.approx(1 + 0.05**2, rel=1e-3)
    (cause,) = low.contributions
    assert (cause.label, cause.sensitivity) == ("C1", pytest.approx(-1.0, rel=1e-5))
    assert cause.at_low == pytest.approx(1 / 0.85 - 1, rel=1e-4)


def test_percentiles_of_a_linear_case_are_exact() -> None:
    """The gain is R1 itself, spread evenly: its p-th percentile is known, to half a stratum."""
    result = spread(run(DIVIDER), None, asked("R1=-10..+30%"), 2000)
    gain = figure(result, "gain")
    assert gain.unit == "Ω"
    for entry in gain.percentiles:
        expected = 900.0 + 400.0 * entry.percent / 100.0
        assert entry.value == pytest.approx(expected, abs=400.0 / 2000)
    assert gain.worst_low.value == pytest.approx(900.0, rel=1e-6)
    assert gain.worst_high.value == pytest.approx(1300.0, rel=1e-6)
    assert gain.deviation == pytest.approx(400.0 / math.sqrt(12.0), rel=1e-3)
    # The only figure the other end has: the corner 1/(2πR1C1) is lowest where R1 is highest.
    high = figure(result, "high corner")
    assert high.worst_low.ends == ("R1 high",)


def test_yield_of_a_linear_case(tmp_path: Path) -> None:
    text = '[path.x.limits]\nmidband_gain = { min = "950 Ω", max = "1200 Ω" }\n'
    result = spread(run(DIVIDER), settings_of(tmp_path, text), asked("R1=20%"), 2000)
    kept = figure(result, "gain").kept
    assert kept is not None
    assert kept.share == pytest.approx(250.0 / 400.0, abs=1e-3)
    assert kept.lowest < 0.625 < kept.highest
    assert (kept.minimum, kept.maximum) == ("950 Ω", "1200 Ω")
    assert result.total is not None
    assert result.total.passed == kept.passed


def test_a_limit_in_another_unit_is_not_judged(tmp_path: Path) -> None:
    text = '[path.x.limits]\nmidband_gain.min = "3 V/V"\ncurrent.Q1.max = "2 mA"\n'
    result = spread(run(DIVIDER), settings_of(tmp_path, text), asked("R1=20%"), 50)
    assert figure(result, "gain").kept is None
    (note,) = result.notes
    assert note.startswith("not judged over the boards: ")
    assert "the gain is in Ω, the limit in V/V" in note


def test_a_wide_normal_never_turns_a_value_negative() -> None:
    result = spread(run(DIVIDER), None, asked("R1=95%"), 5000, distribution="normal")
    assert result.failed == 0
    assert result.figures[0].histogram.edges[0] > 0.0


def test_the_figures_do_not_depend_on_who_does_the_work() -> None:
    analysis = run(STAGE)
    steps: list[tuple[int, int]] = []

    def count(done: int, boards: int) -> None:
        steps.append((done, boards))

    alone = spread(analysis, None, asked(*TOLERANCES), 2500, progress=count)
    with ThreadPoolExecutor(3) as threads:
        shared = spread(analysis, None, asked(*TOLERANCES), 2500, executor=threads)
    assert alone == shared
    assert steps == [(1000, 2500), (2000, 2500), (2500, 2500)]
    other = spread(analysis, None, asked(*TOLERANCES), 2500, seed=2)
    assert figure(other, "gain").mean != figure(alone, "gain").mean


def test_worst_cases_enclose_every_board_and_shares_add_up() -> None:
    result = spread(run(PAIR), None, asked(*TOLERANCES), 1000)
    assert result.failed == 0
    for found in result.figures:
        edges = found.histogram.edges
        assert found.worst_low.value <= edges[0] * (1 + 1e-9)
        assert found.worst_high.value >= edges[-1] * (1 - 1e-9)
        assert sum(found.histogram.counts) == 1000
        # Independent draws: their shares make the whole but for curvature and chance.
        assert 0.9 < sum(c.share for c in found.contributions) < 1.1
    assert sum(row.share for row in result.leaders if row.end == "low") == pytest.approx(1.0)


def test_worst_case_of_a_bridge_is_found_by_combination() -> None:
    """Nearly balanced, every resistor alone moves the gain more one way than the other; all at
    those ends together they unbalance it the wrong way, and only pairs of ends bring it down."""
    text = """bridge
VS in 0 AC 1
R1 in a 10k
R2 a 0 10.5k
R3 in b 10k
R4 b 0 10k
C1 a b 1p
.end
"""
    analysis = run(text, "a,b")
    bench = bench_of(analysis)
    variety = variety_of(analysis.circuit, "VS", None, asked("R*=10%"))
    (lowest, _), _ = worst_cases(bench, variety, each_alone(bench, variety), ["gain"])["gain"]
    assert lowest < bench.gain
    result = spread(analysis, None, asked("R*=10%"), 1000)
    gain = figure(result, "gain")
    # Balance itself lies between the ends, where only boards find it.
    assert gain.worst_low.value < 0.1 * lowest
    assert gain.worst_low.ends == (INSIDE,)
    # All one way: 11.55/(9 + 11.55) − 9/(11 + 9).
    assert gain.worst_high.value == pytest.approx(11.55 / 20.55 - 0.45, rel=1e-6)


def test_the_dominating_capacitor_is_named() -> None:
    """References D2 (common practice, no source): the emitter bypass sets the low corner."""
    result = spread(run(STAGE), None, asked("C*=20%"), 1000)
    assert figure(result, "low corner").contributions[0].label == "CE"
    assert result.leaders[0].part == "CE"
    assert set(result.fixed) >= {"R1", "R2", "RC", "RE", "RL", "RS", "Q1"}


def test_matched_parts_stray_together(tmp_path: Path) -> None:
    """Two matched resistors differ by the difference allowed at most, and so does their ratio."""
    text = """divider
VS in 0 AC 1
R1 in out 1k
R2 out 0 1k
C1 out 0 1n
.end
"""
    loose = '[resistors.film]\nmatch = "R*"\ntolerance = "J"\n'
    for matched, widest in ((None, 0.05), ("0.1 %", 0.0005)):
        line = f'matched = "{matched}"\n' if matched else ""
        settings = settings_of(tmp_path, loose + line)
        gain = figure(spread(run(text), settings, (), 500), "gain")
        # gain = R2/(R1 + R2): relative change is half the difference of the two.
        assert gain.worst_high.value / 0.5 - 1 == pytest.approx(widest, rel=0.1)


def test_what_differs_comes_from_the_first_class_that_matches(tmp_path: Path) -> None:
    text = """
[capacitors.bypass]
match = "CE"
tolerance = "Z"
[capacitors.film]
match = "C*"
tolerance = "K"
[transistors.any]
match = "Q*"
base_emitter_voltage = "20 mV"
[spread]
distribution = "truncated"
temperature = { min = "0 °C", max = "50 °C" }
"""
    settings = settings_of(tmp_path, text)
    circuit = run(STAGE).circuit
    draws = {d.label: d for d in variety_of(circuit, "VS", settings).draws}
    assert (draws["CE"].low, draws["CE"].high) == (-0.2, 0.8)
    assert (draws["C1"].low, draws["C1"].high) == (-0.1, 0.1)
    assert draws["Q1 VBE"].unit == "V"
    assert (draws["temperature"].low, draws["temperature"].high) == (-27.0, 23.0)
    by_hand = variety_of(circuit, "VS", settings, asked("C*=1%"))
    assert {d.high for d in by_hand.draws if d.label.startswith("C")} == {0.01}
    assert spread(run(STAGE), settings, (), 50).distribution == "truncated"


def test_a_shift_of_vbe_moves_vbe() -> None:
    """At the same current VBE is higher by the shift: the emitter sits lower by nearly as much."""
    from tauledger.decide.bench import bench_of, solve
    from tauledger.decide.varied import board_values

    analysis = run(STAGE)
    bench = bench_of(analysis)
    variety = variety_of(analysis.circuit, "VS", None, asked("Q1.base_emitter_voltage=30mV"))
    varied, _ = board_values(analysis.circuit, variety, np.array([[0.0, 0.03]]))
    point = solve(bench, varied).point
    rise = np.diff(
        point.voltages[:, point.nodes.index("b")] - point.voltages[:, point.nodes.index("e")]
    )
    current = point.devices["Q1"].values["ic"]
    thermal = 1.380649e-23 * 300.15 / 1.602176634e-19
    assert rise[0] == pytest.approx(0.03 + thermal * math.log(current[1] / current[0]), abs=2e-4)


def test_pinch_off_moves_without_the_drain_current() -> None:
    from tauledger.decide.varied import board_values

    text = """source follower
VDD d 0 12
VS in 0 AC 1
C1 in g 1u
RG g 0 1Meg
J1 d g out jx
RS out 0 2.2k
CL out 0 1n
.model jx njf (vto=-2 beta=1.5m)
.end
"""
    analysis = run(text)
    variety = variety_of(
        analysis.circuit, "VS", None, asked("J*.drain_current=20%", "J*.pinch_off_voltage=25%")
    )
    labels = [draw.label for draw in variety.draws]
    shift = np.array([[0.1 if "IDSS" in label else -0.2] for label in labels])
    varied, _ = board_values(analysis.circuit, variety, shift)
    assert varied["j1.vto"] == pytest.approx([-1.6])
    assert varied["j1.beta"] * varied["j1.vto"] ** 2 == pytest.approx([1.5e-3 * 4.0 * 1.1])


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("R*", "PATTERN=TOLERANCE"),
        ("R*=x", "not a quantity"),
        ("R*=150%", "above"),
        ("C*=80..-20%", "low to high"),
        ("Q*.base_emitter_voltage=5", "volts"),
        ("temperature=20", "two ends"),
        ("R*=5V", "expected %"),
    ],
)
def test_a_tolerance_that_cannot_be_read_is_explained(text: str, told: str) -> None:
    with pytest.raises(ProblemError, match=told) as raised:
        parse_asked(text)
    assert raised.value.problems[0].advice


def test_tolerances_for_nothing_are_refused() -> None:
    for texts, code in (((), "tolerances-missing"), (("R99=5%",), "tolerance-unmatched")):
        with pytest.raises(ProblemError) as raised:
            spread(run(STAGE), None, asked(*texts), 100)
        assert [p.code for p in raised.value.problems] == [code]


@pytest.fixture(scope="module")
def stage() -> Analysis:
    return run(STAGE)


def test_the_page_shows_yield_causes_and_histogram(stage: Analysis, tmp_path: Path) -> None:
    limits = '[path.x.limits]\nlow_corner.max = "60 Hz"\nmidband_gain.min = "30 dB"\n'
    result = spread(stage, settings_of(tmp_path, limits), asked(*TOLERANCES), 500)
    for spell in (str, lambda text: text.encode("ascii", "replace").decode()):
        text = plain(spread_page(Page(80, spell), result)).replace("\u00a0", " ")
        assert max(map(len, text.splitlines())) <= 100
        assert "95 % confidence" in text
        assert "limit any to 60 Hz" in text
        assert "CE" in text
    document = json.loads(decision_json(result))
    assert document["figures"][1]["figure"] == "low corner"
    assert document["seed"] == 1
