"""Many boards at once against the same boards one at a time, by the whole analysis."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from decide.circuits import PAIR, STAGE, run
from tauledger.analysis import analyze_circuit
from tauledger.circuit.elements import Capacitor, Resistor
from tauledger.decide.bench import bench_of, measure, measure_values
from tauledger.decide.elimination import Factors, plan_elimination
from tauledger.problems import ProblemError


@pytest.mark.parametrize("text", [STAGE, PAIR])
def test_boards_have_the_corners_of_a_single_analysis(text: str) -> None:
    analysis = run(text)
    generator = np.random.default_rng(4)
    varied = {
        e.name.lower(): (e.resistance_ohm if isinstance(e, Resistor) else e.capacitance_f)
        * generator.uniform(0.7, 1.4, 5)
        for e in analysis.circuit.elements
        if isinstance(e, Resistor | Capacitor)
    }
    bench = bench_of(analysis)
    found = measure(bench, varied, leaders=True)
    for i in range(5):
        elements = tuple(
            replace(e, resistance_ohm=varied[e.name.lower()][i])
            if isinstance(e, Resistor)
            else replace(e, capacitance_f=varied[e.name.lower()][i])
            if isinstance(e, Capacitor)
            else e
            for e in analysis.circuit.elements
        )
        # The same midband frequency for all, as a specification fixes it.
        one = analyze_circuit(
            analysis.netlist,
            replace(analysis.circuit, elements=elements),
            "VS",
            "out",
            bench.midband_hz,
        )
        assert found.gain[i] == pytest.approx(one.corners.exact_gain, rel=1e-9)
        assert found.low_hz[i] == pytest.approx(one.corners.low.exact_hz, rel=1e-7)
        assert found.high_hz[i] == pytest.approx(one.corners.high.exact_hz, rel=1e-7)
        assert found.parts[found.low_leader[i]] == one.corners.low.movers[0][0]
        assert found.parts[found.high_leader[i]] == one.corners.high.movers[0][0]


def test_a_board_without_bias_has_no_figures_and_leaves_the_others_alone() -> None:
    bench = bench_of(run(STAGE))
    sound = measure(bench, {"rc": np.array([4.7e3, 2.2e3])})
    found = measure(bench, {"rc": np.array([4.7e3, np.nan, 2.2e3])})
    assert found.measured.tolist() == [True, False, True]
    assert np.isnan([found.low_hz[1], found.high_hz[1]]).all()
    assert found.low_hz[[0, 2]] == pytest.approx(sound.low_hz, rel=1e-7)


def test_corners_far_from_the_nominal_ones_are_found() -> None:
    """Capacitors of a thousandth push the low corner up by decades."""
    analysis = run(STAGE)
    names = [e.name for e in analysis.circuit.elements if isinstance(e, Capacitor)]
    drawn = {e.name: e.capacitance_f for e in analysis.circuit.elements if e.name in names}
    values = {name.lower(): drawn[name] * np.array([1.0, 1e-3]) for name in names}
    found = measure(bench_of(analysis), values)
    elements = tuple(
        replace(e, capacitance_f=drawn[e.name] * 1e-3) if isinstance(e, Capacitor) else e
        for e in analysis.circuit.elements
    )
    far = analyze_circuit(
        analysis.netlist,
        replace(analysis.circuit, elements=elements),
        "VS",
        "out",
        analysis.corners.midband_hz,
    )
    assert found.low_hz[1] == pytest.approx(far.corners.low.exact_hz, rel=1e-7)
    assert found.low_hz[1] > 30 * found.low_hz[0]


def test_an_end_without_a_nominal_corner_is_left_out() -> None:
    text = "x\nVS in 0 AC 1\nC1 in out 1u\nRL out 0 1k\n.end\n"
    found = measure(bench_of(run(text)), {"rl": np.array([1e3, 2e3])})
    assert np.isnan(found.high_hz).all()
    assert found.low_hz == pytest.approx(1.0 / (2.0 * np.pi * np.array([1e-3, 2e-3])), rel=1e-5)


def test_changed_capacitors_need_no_new_bias() -> None:
    analysis = run(PAIR)
    bench = bench_of(analysis)
    values = {"CE1": np.array([47e-6, 470e-6, 100e-6]), "C3": np.array([1e-6, 10e-6, 10e-6])}
    quick = measure_values(bench, analysis.network, values)
    full = measure(bench, {name.lower(): value for name, value in values.items()})
    assert quick.low_hz == pytest.approx(full.low_hz, rel=1e-9)
    assert quick.high_hz == pytest.approx(full.high_hz, rel=1e-9)
    assert quick.low_hz[2] == pytest.approx(analysis.corners.low.exact_hz, rel=1e-7)


def test_what_moves_midband_too_is_not_taken_for_the_leader() -> None:
    """f = 1/(2πR(C1 + C2)): the larger of the two sets it, though C1 moves |H| there more."""
    text = "x\nVS in 0 AC 1\nC1 in out 1n\nC2 out 0 2n\nRL out 0 1Meg\n.end\n"
    analysis = run(text)
    found = measure(bench_of(analysis), leaders=True)
    assert found.parts[found.low_leader[0]] == "C2"
    assert analysis.corners.low.movers[0] == ("C2", pytest.approx(-2 / 3, rel=1e-3))


def test_pieces_join_to_the_whole(monkeypatch: pytest.MonkeyPatch) -> None:
    """A large circuit is measured a few boards at a time."""
    bench = bench_of(run(STAGE))
    varied = {"ce": np.logspace(-5, -1.5, 40), "rl": np.linspace(500.0, 20e3, 40)}
    whole = measure(bench, varied, np.linspace(0.0, 50.0, 40), leaders=True)
    monkeypatch.setattr("tauledger.decide.bench.MOST_TOGETHER", 7)
    pieces = measure(bench, varied, np.linspace(0.0, 50.0, 40), leaders=True)
    assert pieces.low_hz == pytest.approx(whole.low_hz, rel=1e-9)
    assert pieces.gain == pytest.approx(whole.gain, rel=1e-9)
    named = [pieces.parts[i] for i in pieces.low_leader]
    assert named == [whole.parts[i] for i in whole.low_leader]
    assert len(set(named)) > 1


def test_elimination_is_the_dense_solution_and_its_transpose() -> None:
    generator = np.random.default_rng(2)
    pattern = (generator.random((9, 9)) < 0.3) | np.eye(9, dtype=bool)
    boards = generator.normal(size=(6, 9, 9)) * pattern + 0j
    plan = plan_elimination(np.abs(boards).mean(axis=0))
    entries = {(int(i), int(j)): boards[:, i, j] for i, j in zip(*np.nonzero(pattern), strict=True)}
    factors = Factors.of(plan, entries)
    right = np.zeros(9)
    right[[1, 4]] = 1.0, -2.0
    sparse = {1: 1.0 + 0j, 4: -2.0 + 0j}
    for found, matrix in (
        (factors.solve(sparse), boards),
        (factors.solve_transposed(sparse), np.swapaxes(boards, 1, 2)),
    ):
        table = np.array([np.broadcast_to(x, (6,)) for x in found]).T
        residual = np.einsum("bij,bj->bi", matrix, table) - right
        assert np.abs(residual).max() < 1e-9 * np.abs(table).max()


def test_without_a_passband_there_is_no_bench() -> None:
    tuned = "tank\nIS 0 out AC 1\nL1 out 0 1m\nC1 out 0 1n\nR1 out 0 1Meg\n.end\n"
    with pytest.raises(ProblemError, match="passband"):
        bench_of(run(tuned))
