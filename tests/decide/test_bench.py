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


def test_changed_capacitors_need_no_new_bias() -> None:
    analysis = run(PAIR)
    bench = bench_of(analysis)
    values = {"CE1": np.array([47e-6, 470e-6, 100e-6]), "C3": np.array([1e-6, 10e-6, 10e-6])}
    quick = measure_values(bench, analysis.network, values)
    full = measure(bench, {name.lower(): value for name, value in values.items()})
    assert quick.low_hz == pytest.approx(full.low_hz, rel=1e-9)
    assert quick.high_hz == pytest.approx(full.high_hz, rel=1e-9)
    assert quick.low_hz[2] == pytest.approx(analysis.corners.low.exact_hz, rel=1e-7)


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
