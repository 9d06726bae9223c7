"""Limits on voltages, currents, resistances, margins and who sets a corner, over the boards."""

from __future__ import annotations

import math
from collections.abc import Mapping
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import ngspice
from decide.circuits import PAIR, STAGE, TRANSISTOR, run
from tauledger.analysis import Analysis, analyze_circuit
from tauledger.circuit.elements import Capacitor, Resistor
from tauledger.configuration.reading import read_configuration
from tauledger.configuration.settings import PathSettings
from tauledger.decide.asked import parse_asked
from tauledger.decide.bench import Figures, bench_of, measure
from tauledger.decide.judged import LEAST_HOLD, Wanted, demands_of, wanted_of
from tauledger.decide.spread import Plan, board_deviations, spread
from tauledger.decide.varied import board_values, variety_of
from tauledger.report.decision import spread_page
from tauledger.report.decision_html import spread_html
from tauledger.report.layout import plain
from tauledger.report.page import BOUND, Page
from tauledger.review.decisions import FigureSpread, Spread

DIVIDER = """a coupling capacitor at a divider: v(out) = 12 R2/(R1 + R2)
VCC vcc 0 12
VS in 0 AC 1
C1 in out 1u
R1 vcc out 30k
R2 out 0 10k
CL out 0 1p
.end
"""
FOLLOWER = """directly coupled between two supplies
VCC vcc 0 12
VEE vee 0 -12
VS in 0 AC 1
RS in b 1k
Q1 vcc b out qx
RE out vee 4.7k
CL out 0 1n
.model qx npn (is=12f bf=240 vaf=90 cje=12p cjc=4p tf=0.4n rb=80)
.end
"""
RATED = '[capacitors.can]\nmatch = "C*"\nrated_voltage = "25 V"\n'


def settings_of(folder: Path, limits: str, more: str = "") -> PathSettings:
    text = f'[path.x]\nnetlist = "x.cir"\n[path.x.limits]\n{limits}\n{more}'
    (folder / "tauledger.toml").write_text(text, encoding="utf-8")
    return read_configuration(folder / "tauledger.toml").paths[0]


def spread_of(
    text: str, settings: PathSettings, boards: int, *tolerances: str, distribution: str = ""
) -> Spread:
    asked = [parse_asked(tolerance) for tolerance in tolerances]
    return spread(run(text), settings, asked, boards, distribution=distribution)


def figure(result: Spread, name: str) -> FigureSpread:
    return next(f for f in result.figures if f.figure == name)


# Against closed forms and single boards -----------------------------------------------------------


def test_percentiles_and_yield_of_a_divider_are_exact(tmp_path: Path) -> None:
    """v(out) rises with R2 alone, which is spread evenly: the p-th percentile of one is that of
    the other, but for half a stratum of the Latin hypercube and the gmin of the nodes."""
    settings = settings_of(tmp_path, 'node_voltage.OUT = { min = "2.9 V", max = "3.1 V" }')
    result = spread_of(DIVIDER, settings, 2000, "R2=20%")
    found = figure(result, "voltage of out")
    assert (found.unit, found.linear) == ("V", True)

    def voltage(r2: float) -> float:
        return 12.0 * r2 / (30e3 + r2)

    for entry in found.percentiles:
        expected = voltage(10e3 * (0.8 + 0.4 * entry.percent / 100.0))
        assert entry.value == pytest.approx(expected, abs=1e-3)
    assert found.worst_low.value == pytest.approx(voltage(8e3), rel=1e-6)
    assert found.worst_high.value == pytest.approx(voltage(12e3), rel=1e-6)
    assert found.worst_high.ends == ("R2 high",)
    (cause,) = found.contributions
    # dv/dln(R2) = 12 R1 R2/(R1 + R2)².
    assert cause.sensitivity == pytest.approx(12.0 * 30e3 * 10e3 / 40e3**2, rel=1e-5)
    assert cause.at_low == pytest.approx(voltage(8e3) - 3.0, rel=1e-5)
    assert found.linear_deviation == pytest.approx(2.25 * 0.2 / math.sqrt(3.0), rel=1e-5)

    # The limits again as values of R2: v = 2.9 V at R2 = 30k·2.9/9.1, and 3.1 V.
    inside = (30e3 * 3.1 / 8.9 - 30e3 * 2.9 / 9.1) / 4e3
    assert found.kept is not None
    assert found.kept.share == pytest.approx(inside, abs=2e-3)
    assert (found.kept.least, found.kept.most) == (2.9, 3.1)
    assert result.total is not None
    assert result.total.passed == found.kept.passed
    assert result.notes == ()


@pytest.mark.parametrize("text", [STAGE, PAIR])
def test_boards_have_the_figures_of_a_single_report(text: str, tmp_path: Path) -> None:
    collector = "c" if text is STAGE else "c2"
    transistor = "Q1" if text is STAGE else "Q2"
    settings = settings_of(
        tmp_path,
        'input_resistance.min = "1 Ω"\noutput_resistance.min = "1 Ω"\n'
        f'node_voltage.{collector}.min = "1 V"\ncurrent.{transistor}.min = "1 nA"\n'
        'capacitor_voltage_margin.min = "10 %"\n',
        RATED,
    )
    analysis = run(text)
    varied = _values(analysis, 5, 0.75, 1.3)
    found = _measured(analysis, settings, varied)
    for board in range(5):
        one = _single(analysis, varied, board)
        path = one.review.paths[0]
        expected = {
            "input resistance": path.input_resistance_ohm,
            "output resistance": path.output_resistance_ohm,
            f"voltage of {collector}": one.point.voltage(collector),
            f"current of {transistor}": next(
                row.current_a for row in one.review.transistors if row.name == transistor
            ),
        }
        for row in path.time_constants:
            if row.dc_voltage_v is not None:
                margin = 100.0 * (25.0 - abs(row.dc_voltage_v)) / 25.0
                expected[f"voltage margin of {row.name}"] = margin
        assert set(found.others) == set(expected)
        for name, value in expected.items():
            assert found.others[name][board] == pytest.approx(value, rel=1e-7), name


def test_resistances_of_a_current_driven_path(tmp_path: Path) -> None:
    """IS into a node with R1: the source sees R1 ∥ R2, the load R2 is taken out at the output."""
    text = "x\nIS 0 a AC 1\nR1 a 0 1k\nC1 a out 1m\nRL out 0 3k\nCL out 0 1p\n.end\n"
    settings = settings_of(
        tmp_path, 'input_resistance.min = "1 Ω"\noutput_resistance.min = "1 Ω"\n'
    )
    analysis = run(text)
    r1 = np.array([900.0, 1000.0, 1200.0])
    found = _measured(analysis, settings, {"r1": r1})
    assert found.others["input resistance"] == pytest.approx(1.0 / (1.0 / r1 + 1.0 / 3e3), rel=1e-6)
    assert found.others["output resistance"] == pytest.approx(r1, rel=1e-6)


def test_the_source_resistor_and_the_load_of_each_board_are_taken_out(tmp_path: Path) -> None:
    """Behind RS the divider is R2 alone, before RL it is RS ∥ R2, whatever RS and RL are."""
    text = "x\nVS in 0 AC 1\nRS in a 1k\nR2 a 0 4k\nC1 a out 1m\nRL out 0 3k\nCL out 0 1p\n.end\n"
    settings = settings_of(
        tmp_path, 'input_resistance.min = "1 Ω"\noutput_resistance.min = "1 Ω"\n'
    )
    analysis = run(text)
    rs, rl = np.array([500.0, 1000.0, 2000.0]), np.array([9e3, 3e3, 1e3])
    found = _measured(analysis, settings, {"rs": rs, "rl": rl})
    entry = found.others["input resistance"]
    assert entry == pytest.approx(1.0 / (1.0 / 4e3 + 1.0 / rl), rel=1e-6)
    assert found.others["output resistance"] == pytest.approx(
        1.0 / (1.0 / rs + 1.0 / 4e3), rel=1e-6
    )


@pytest.mark.parametrize(
    ("key", "part", "text"),
    [
        ("low_corner_set_by", "CE", STAGE),
        ("high_corner_set_by", "CX", STAGE.replace(".end", "CX out 0 300p\n.end")),
    ],
)
def test_who_sets_a_corner_is_judged_as_on_one_board(
    key: str, part: str, text: str, tmp_path: Path
) -> None:
    settings = settings_of(tmp_path, f'{key} = "{part}"')
    analysis = run(text)
    drawn = next(e for e in analysis.circuit.elements if e.name == part)
    assert isinstance(drawn, Capacitor)
    varied = {part.lower(): drawn.capacitance_f * np.logspace(-1.2, 2.2, 12)}
    found = _measured(analysis, settings, varied, leaders=True)
    (hold,) = found.others.values()
    single = []
    for board in range(12):
        corners = _single(analysis, varied, board).corners
        single.append(part in (corners.low if key[0] == "l" else corners.high).set_by)
    assert (hold >= LEAST_HOLD).tolist() == single
    assert len(set(single)) == 2


@pytest.mark.referee
def test_percentiles_are_those_of_boards_that_ngspice_solves(tmp_path: Path) -> None:
    """Boards drawn for the spread, biased by ngspice; numpy's percentiles of what it finds."""
    settings = settings_of(tmp_path, 'node_voltage.c2.min = "6 V"\ncurrent.Q2.max = "2 mA"\n')
    asked = ("R*=10%", "Q*.current_gain=-50..+100%", "Q*.base_emitter_voltage=20mV")
    analysis, boards = run(PAIR), 12
    result = spread_of(PAIR, settings, boards, *asked)
    variety = variety_of(analysis.circuit, "VS", None, [parse_asked(text) for text in asked])
    plan = Plan(bench_of(analysis), variety, boards, 1, "uniform")
    varied, _ = board_values(analysis.circuit, variety, board_deviations(plan, 0, boards))
    solved: dict[str, list[float]] = {"voltage of c2": [], "current of Q2": []}
    for board in range(boards):
        netlist = tmp_path / f"board{board}.cir"
        netlist.write_text(_netlist({k: float(v[board]) for k, v in varied.items()}))
        point = ngspice.operating_point(netlist, ["@q2[ic]"])
        solved["voltage of c2"].append(point.voltages["c2"])
        solved["current of Q2"].append(point.figures["@q2[ic]"])
    for name, values in solved.items():
        for entry in figure(result, name).percentiles:
            expected = float(np.percentile(values, entry.percent))
            assert entry.value == pytest.approx(expected, rel=1e-4), (name, entry.percent)
    kept = (np.array(solved["voltage of c2"]) >= 6.0) & (np.array(solved["current of Q2"]) <= 2e-3)
    assert result.total is not None
    assert result.total.passed == int(kept.sum())


# What counts, and what cannot ---------------------------------------------------------------------


def test_every_limit_counts_in_the_total(tmp_path: Path) -> None:
    """The boards that keep all are those that keep each; taken board by board they are the same."""
    limits = (
        'midband_gain.min = "40 dB"\nlow_corner_set_by = "CE"\nhigh_corner.min = "500 kHz"\n'
        'input_resistance.min = "2.5 kΩ"\nnode_voltage.c = { min = "5 V", max = "7.5 V" }\n'
        'current.Q1.max = "1.5 mA"\n'
    )
    settings = settings_of(tmp_path, limits)
    asked = ("R*=10%", "C*=-20..+80%", "Q*.current_gain=-40..+80%")
    result = spread_of(STAGE, settings, 600, *asked)
    yields = [row.kept for row in result.figures if row.kept] + [r.kept for r in result.demands]
    assert len(yields) == 6
    assert [row.demand for row in result.demands] == ["low corner set by CE"]
    assert result.total is not None
    passed = [kept.passed for kept in yields if kept]
    assert max(0, sum(passed) - 5 * 600) <= result.total.passed <= min(passed) < 600
    assert result.total.lowest < result.total.share < result.total.highest
    # Without the limits on bias and resistance more boards pass.
    fewer = replace(settings, limits=tuple(x for x in settings.limits if "corner" in x.figure))
    looser = spread_of(STAGE, fewer, 600, *asked)
    assert looser.total is not None
    assert looser.total.passed > result.total.passed
    # They are the same boards all the same.
    for name in ("gain", "low corner", "high corner"):
        assert figure(looser, name).percentiles == figure(result, name).percentiles


def test_figures_do_not_depend_on_who_does_the_work(tmp_path: Path) -> None:
    limits = (
        'input_resistance.min = "2.5 kΩ"\noutput_resistance.max = "4.8 kΩ"\n'
        'node_voltage.c.min = "5 V"\ncurrent.Q1.max = "1.5 mA"\nlow_corner_set_by = "CE"\n'
        'capacitor_voltage_margin.min = "30 %"\n'
    )
    settings, analysis = settings_of(tmp_path, limits, RATED), run(STAGE)
    asked = [parse_asked(text) for text in ("R*=5%", "C*=20%", "temperature=0..50")]
    alone = spread(analysis, settings, asked, 2200)
    with ThreadPoolExecutor(3) as threads:
        shared = spread(analysis, settings, asked, 2200, executor=threads)
    assert alone == shared
    assert len(alone.figures) == 3 + 2 + 2 + 3


def test_nothing_more_is_measured_than_limits_ask_for(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    analysis = run(STAGE)
    settings = settings_of(tmp_path, 'low_corner.max = "60 Hz"')
    assert wanted_of(demands_of(analysis, settings), analysis) == Wanted()

    def refuse(*_: object) -> None:
        raise AssertionError("measured without need")

    monkeypatch.setattr("tauledger.decide.bench.port_resistances", refuse)
    monkeypatch.setattr("tauledger.decide.apart.measure_deviations", refuse)
    assert spread_of(STAGE, settings, 50, "C*=20%").total is not None
    bias_only = settings_of(tmp_path, 'current.Q1.max = "2 mA"')
    assert wanted_of(demands_of(analysis, bias_only), analysis).ports is None


def test_a_gain_down_to_dc_keeps_a_limit_of_the_low_corner(tmp_path: Path) -> None:
    limits = (
        'low_corner = {{ max = "20 Hz"{0} }}\nnode_voltage.in.max = "1 V"\n'
        'node_voltage.out = {{ min = "-0.7 V", max = "-0.6 V" }}\nnode_voltage.vcc.min = "11 V"'
    )
    for least, passed in (("", 300), (', min = "1 Hz"', 0)):
        settings = settings_of(tmp_path, limits.format(least))
        result = spread_of(FOLLOWER, settings, 300, "R*=5%", "Q*.current_gain=50%")
        (row,) = result.demands
        assert row.demand.startswith("low corner, 0 Hz")
        assert row.kept.passed == passed
        assert result.total is not None
        assert result.total.passed == passed
    out = figure(result, "voltage of out")
    assert out.nominal < out.percentiles[-1].value < 0.0
    # A voltage that no part moves has one bin, at its place, and nothing that moves it.
    for name, value in (("voltage of in", 0.0), ("voltage of vcc", 12.0)):
        held = figure(result, name)
        assert held.histogram.counts == (300,)
        assert held.histogram.edges == pytest.approx((value, value))
        assert (held.worst_low.ends, held.worst_high.ends) == ((), ())
        assert all(c.share == c.at_low == c.at_high == 0.0 for c in held.contributions)


def test_a_resistance_without_bound_keeps_its_least(tmp_path: Path) -> None:
    """An ideal amplifier draws no current: there is no figure to spread, but the limit is met."""
    text = "x\nVS in 0 AC 1\nE1 a 0 in 0 10\nR1 a out 1k\nCL out 0 1n\n.end\n"
    settings = settings_of(tmp_path, 'input_resistance = { min = "1 MΩ" }')
    result = spread_of(text, settings, 40, "R1=5%")
    assert [f.figure for f in result.figures] == ["gain", "high corner"]
    (row,) = result.demands
    assert (row.demand, row.kept.passed, row.kept.minimum) == ("input resistance", 40, "1 MΩ")


def test_what_cannot_be_judged_is_told_with_its_reason(tmp_path: Path) -> None:
    limits = (
        'node_voltage.zz.min = "1 V"\ncurrent.Q9.min = "1 A"\nhigh_corner_set_by = "C9"\n'
        'capacitor_voltage_margin.min = "5 V"\nmidband_gain.min = "3 Ω"\n'
    )
    more = '[capacitors.can]\nmatch = ["C1", "CE"]\nrated_voltage = "25 V"\n'
    result = spread_of(STAGE, settings_of(tmp_path, limits, more), 50, "C*=20%")
    (note,) = result.notes
    for told in (
        "voltage of zz (there is no such node)",
        "current of Q9 (there is no such transistor)",
        "high corner set by C9 (there is no such capacitor or inductor)",
        "voltage margin of C2 (no rated voltage is given)",
        "midband gain (the gain is in V/V, the limit in Ω)",
    ):
        assert told in note
    assert [f.figure for f in result.figures][3:] == [
        "voltage margin of C1",
        "voltage margin of CE",
    ]
    assert result.total is not None
    assert result.total.share == 1.0
    told = "keep all limits that can be judged"
    assert told in plain(spread_page(Page(100, str), result)).replace(BOUND, " ")
    assert told in spread_html(result)


def test_a_board_without_bias_has_none_of_the_figures(tmp_path: Path) -> None:
    limits = (
        'input_resistance.min = "1 Ω"\nnode_voltage.c.min = "1 V"\ncurrent.Q1.max = "2 mA"\n'
        'low_corner_set_by = "CE"'
    )
    settings, analysis = settings_of(tmp_path, limits), run(STAGE)
    sound = _measured(analysis, settings, {"rc": np.array([4.7e3, 2.2e3])}, leaders=True)
    lost = np.array([4.7e3, np.nan, 2.2e3])
    found = _measured(analysis, settings, {"rc": lost}, leaders=True)
    assert set(found.others) == set(sound.others)
    assert len(found.others) == 4
    for name, values in found.others.items():
        assert np.isnan(values).tolist() == [False, True, False], name
        assert values[[0, 2]] == pytest.approx(sound.others[name], rel=1e-7)


def test_the_page_shows_what_else_has_limits(tmp_path: Path) -> None:
    limits = (
        'current.Q1 = { min = "1.2 mA", max = "1.35 mA" }\nnode_voltage.c.min = "1 V"\n'
        'low_corner_set_by = "CE"'
    )
    result = spread_of(STAGE, settings_of(tmp_path, limits), 400, "R*=10%")
    page = plain(spread_page(Page(100, str), result)).replace(BOUND, " ")
    assert "Other figures with limits" in page
    assert "low corner set by CE: 100.00 % of the boards" in page
    # Drawn where a board misses, left to the table where all keep it.
    assert "Current of Q1: boards by value" in page
    assert "Voltage of c: boards by value" not in page
    assert "limit 1 V to any: 100.00 %" in page
    assert max(map(len, page.splitlines())) <= 100


# Helpers ------------------------------------------------------------------------------------------


def _values(analysis: Analysis, boards: int, low: float, high: float) -> dict[str, np.ndarray]:
    generator = np.random.default_rng(6)
    return {
        e.name.lower(): (e.resistance_ohm if isinstance(e, Resistor) else e.capacitance_f)
        * generator.uniform(low, high, boards)
        for e in analysis.circuit.elements
        if isinstance(e, Resistor | Capacitor)
    }


def _measured(
    analysis: Analysis,
    settings: PathSettings,
    varied: Mapping[str, np.ndarray],
    leaders: bool = False,
) -> Figures:
    wanted = wanted_of(demands_of(analysis, settings), analysis)
    return measure(replace(bench_of(analysis), wanted=wanted), varied, leaders=leaders)


def _single(analysis: Analysis, varied: Mapping[str, np.ndarray], board: int) -> Analysis:
    """The whole analysis of one board, at the midband frequency of the nominal one."""

    def changed(e: object) -> object:
        if isinstance(e, Resistor) and e.name.lower() in varied:
            return replace(e, resistance_ohm=float(varied[e.name.lower()][board]))
        if isinstance(e, Capacitor) and e.name.lower() in varied:
            return replace(e, capacitance_f=float(varied[e.name.lower()][board]))
        return e

    elements = tuple(changed(e) for e in analysis.circuit.elements)
    circuit = replace(analysis.circuit, elements=elements)  # type: ignore[arg-type]
    midband_hz = analysis.corners.midband_hz
    return analyze_circuit(analysis.netlist, circuit, "VS", "out", midband_hz)


def _netlist(values: dict[str, float]) -> str:
    """PAIR with the values of one board, each transistor with a model of its own."""
    lines = []
    for line in PAIR.splitlines():
        words = line.split()
        name = words[0].lower()
        if name in (".model", ".end"):
            continue
        if name in values:
            words[-1] = repr(values[name])
        if name.startswith("q"):
            words[-1] = f"m{name}"
        lines.append(" ".join(words))
    for name in ("q1", "q2"):
        card = TRANSISTOR.replace("bf=240", f"bf={values[f'{name}.bf']!r}")
        card = card.replace("is=12f", f"is={values[f'{name}.is']!r}")
        lines.append(f".model m{name} {card}")
    return "\n".join([*lines, ".end", ""])


def test_an_output_without_resistance_keeps_its_limit(tmp_path: Path) -> None:
    """Zero has no logarithm: it used to stop the histogram."""
    text = """an ideal amplifier behind a coupling capacitor
V1 in 0 AC 1
C1 in a 1u
R1 a 0 10k
C2 a 0 1n
E1 out 0 a 0 10
RL out 0 1k
.end
"""
    settings = settings_of(tmp_path, 'output_resistance = { max = "100 Ω" }')
    found = spread_of(text, settings, 50, "R1=5%")
    (row,) = [f for f in found.figures if f.figure == "output resistance"]
    assert (row.nominal, row.mean, row.worst_high.value) == (0.0, 0.0, 0.0)
    assert row.kept is not None
    assert row.kept.share == 1.0
    assert row.histogram.counts == (50,)
    shown = plain(spread_page(Page(100, str), found))
    assert "limit any to 100 Ω: 100.00" in shown.replace(BOUND, " ")


def test_boards_far_off_are_counted_and_stop_nothing(tmp_path: Path) -> None:
    """Some have no operating point, on some the common order of elimination meets a zero pivot, and
    every combination of the ends fails: then the worst board found stands in its place.
    """
    settings = settings_of(tmp_path, 'midband_gain.min = "1 V/V"\nlow_corner_set_by = "CE"')
    found = spread_of(STAGE, settings, 200, "Q1.base_emitter_voltage=5V")
    assert 0 < found.failed < 200
    gain = figure(found, "gain")
    assert gain.missing == found.failed
    assert gain.worst_low.value <= gain.percentiles[0].value
    assert gain.worst_high.value >= gain.percentiles[-1].value
    assert found.total is not None
    assert found.total.boards == 200
    assert found.total.passed <= 200 - found.failed


def test_boards_none_of_which_has_a_bias_are_measured_as_missing(tmp_path: Path) -> None:
    settings, analysis = settings_of(tmp_path, 'node_voltage.c.min = "1 V"'), run(STAGE)
    found = _measured(analysis, settings, {"rc": np.array([np.nan, np.nan])}, leaders=True)
    for values in (found.gain, found.low_hz, found.others["voltage of c"]):
        assert np.isnan(values).tolist() == [True, True]
    assert found.low_leader.tolist() == [-1, -1]
