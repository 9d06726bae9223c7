"""How fast gain and corners follow each draw at the nominal board, without another bias solution.

With ``F(x, p) = 0`` the equations of the operating point, ``p`` moving along a draw ``t`` as
:func:`~tauledger.decide.varied.board_values` says, and ``H(s) = lᵀ A⁻¹ b``, ``A = G + sC``::

    dx/dt = −J⁻¹ ∂F/∂t                       J = ∂F/∂x, which is G itself: one solution, all draws
    d ln|H|/dt = −Re(yᵀ (dG/dt + s·dC/dt) x / H)        A x = b,  Aᵀ y = l  (adjoint network)
    d ln f_c/dt = −(d ln|H(f_c)|/dt − d ln|H(f_m)|/dt) / (d ln|H|/d ln f at f_c)

The last follows from ``|H(f_c)|² = |H(f_m)|²/2`` with the midband frequency ``f_m`` fixed.

Not everything is a formula: ``∂F/∂t`` at fixed ``x``, and ``dG/dt`` and ``dC/dt`` along
``(dx/dt, dp/dt)``, are differences of the element and device equations alone, since devices state
no second derivatives and ``board_values`` states none at all. They follow the five-point rule
``f' = (8(f₁ − f₋₁) − (f₂ − f₋₂))/12h``. Its error is h⁴f⁽⁵⁾/30: relative to the
value, 2e-8 for a junction that moves by 0.7 mV, the most :data:`LARGEST_MOVE` allows it; rounding
adds some 1e-16/h. Where two regions of a device meet and its equations have a kink, the
slope is a mean of both sides.

Source: adjoint sensitivities, S. W. Director, R. A. Rohrer, IEEE Trans. Circuit Theory CT-16 (1969)
318-323 (from memory, not re-read).
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from tauledger.bias import BiasSolution
from tauledger.bias.equations import Equations, build_equations
from tauledger.bias.newton import State, linearise
from tauledger.circuit.elements import IndependentSource
from tauledger.decide.bench import Bench, solve
from tauledger.decide.varied import Variety, board_values
from tauledger.records import dataclass
from tauledger.smallsignal import drive_vector, linear_network, sense_vector
from tauledger.smallsignal.network import LinearNetwork

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

STEPS: Mapping[str, float] = {"": 2e-4, "V": 2e-5, "°C": 0.02}
"""Of the differences, by the unit of the draw: relative, volts, kelvins."""
LARGEST_MOVE, LARGEST_MOVE_V = 1e-3, 5e-4
"""Of a device's branch voltages in one step, relative and, if that is more, in volts: a fortieth
of the thermal voltage for a junction in conduction."""
_PLACES = np.array([-2.0, -1.0, 1.0, 2.0])
_WEIGHTS = np.array([1.0, -8.0, 8.0, -1.0]) / 12.0


@dataclass(frozen=True, slots=True)
class _Nominal:
    """The board without deviations."""

    bench: Bench
    variety: Variety
    solution: BiasSolution
    network: LinearNetwork


@dataclass(frozen=True, slots=True)
class _Probe:
    """|H| at one frequency: what its logarithm gains by a change of each entry of G and C."""

    by_conductance: FloatArray
    """(N·N,): ∂ln|H|/∂G."""
    by_reactance: FloatArray
    slope: float
    """d ln|H| / d ln f."""

    def change(self, conductance: FloatArray, reactance: FloatArray) -> FloatArray:
        """(draws,): d ln|H|/dt from (draws, N·N) derivatives of G and C."""
        return conductance @ self.by_conductance + reactance @ self.by_reactance


def figure_slopes(bench: Bench, variety: Variety) -> dict[str, FloatArray]:
    """d ln(figure)/d(deviation) of every draw, (draws,), at the nominal board.

    NaN for a corner the nominal board does not have. Units are those of the draws: per unit of
    relative deviation, per volt, per kelvin.
    """
    solution = solve(bench)
    found = {
        name: np.full(len(variety.draws), np.nan) for name in ("gain", "low corner", "high corner")
    }
    edges = {"low corner": bench.low_hz, "high corner": bench.high_hz}
    together = max(1, bench.most_boards // _PLACES.size)
    with np.errstate(all="ignore"):  # as where boards are measured
        nominal = _Nominal(bench, variety, solution, linear_network(solution))
        middle = _probe(nominal, bench.midband_hz)
        probes = {name: _probe(nominal, hz) for name, hz in edges.items() if hz is not None}
        for first in range(0, len(variety.draws), together):
            draws = np.arange(first, min(first + together, len(variety.draws)))
            derivatives = _network_derivatives(nominal, draws)
            gain = middle.change(*derivatives)
            found["gain"][draws] = gain
            for name, probe in probes.items():
                found[name][draws] = (gain - probe.change(*derivatives)) / probe.slope
    return found


def _probe(nominal: _Nominal, frequency_hz: float) -> _Probe:
    """With W = y xᵀ: d ln|H| = −Re(Σ W·(dG + s dC) / H)."""
    bench, network = nominal.bench, nominal.network
    source = next(e for e in bench.circuit.elements if e.name == bench.source)
    assert isinstance(source, IndependentSource)
    drive = drive_vector(network, source)
    sense = sense_vector(network, bench.output, bench.reference)
    s = 2j * math.pi * frequency_hz
    matrix = network.conductance[0] + s * network.reactance[0]
    x: ComplexArray = np.asarray(np.linalg.solve(matrix, drive), dtype=np.complex128)
    y: ComplexArray = np.asarray(np.linalg.solve(matrix.T, sense), dtype=np.complex128)
    weights = -np.outer(y, x) / (sense @ x)
    by_reactance = (s * weights).real
    slope = float(np.sum(by_reactance * network.reactance[0]))
    return _Probe(weights.real.ravel(), by_reactance.ravel(), slope)


def _network_derivatives(nominal: _Nominal, draws: NDArray[np.intp]) -> tuple[FloatArray, ...]:
    """dG/dt and dC/dt, (draws, N·N) each, with the bias following the draw."""
    steps = np.array([STEPS[nominal.variety.draws[i].unit] for i in draws])
    equations = _equations(nominal, draws, steps)
    moves = _bias_derivatives(nominal, equations, steps)
    longest = _longest(nominal.solution, moves)
    if (steps > longest).any():
        steps = np.minimum(steps, longest)
        equations = _equations(nominal, draws, steps)
    at = _around(steps)
    unknowns = nominal.solution.state.unknowns + at[:, None] * np.tile(moves, (_PLACES.size, 1))
    network = linear_network(_placed(nominal.solution, equations, unknowns))
    return tuple(
        _derivative(matrices.reshape(at.size, -1), steps)
        for matrices in (network.conductance, network.reactance)
    )


def _longest(solution: BiasSolution, moves: FloatArray) -> FloatArray:
    """(draws,): the step at which some device's branch voltage moves as far as it may."""
    fastest = np.full(len(moves), 1e-30)
    across = _branch_voltages(solution.equations, moves)
    for speeds, u in zip(across, solution.state.branch_voltages, strict=True):
        allowed = np.maximum(LARGEST_MOVE_V, LARGEST_MOVE * np.abs(u))
        fastest = np.maximum(fastest, (np.abs(speeds) / allowed).max(axis=(1, 2)))
    return np.asarray(1.0 / fastest)


def _bias_derivatives(nominal: _Nominal, equations: Equations, steps: FloatArray) -> FloatArray:
    """dx/dt, (draws, N)."""
    state, size, boards = nominal.solution.state, equations.size, equations.boards
    unknowns = np.repeat(state.unknowns, boards, axis=0)
    voltages = [np.repeat(u, boards, axis=0) for u in state.branch_voltages]
    matrix, right = linearise(equations, unknowns, voltages)
    # (G + J) x − (s − i(x) + J x) is what the currents at x fail to balance by.
    failing = matrix[:, :size, :size] @ state.unknowns[0] - right[:, :size]
    jacobian = nominal.network.conductance[0]
    return np.asarray(-np.linalg.solve(jacobian, _derivative(failing, steps).T).T)


def _around(steps: FloatArray) -> FloatArray:
    """(4·draws,): where the differences are taken, all draws at one place after the other."""
    return np.outer(_PLACES, steps).ravel()


def _derivative(values: FloatArray, steps: FloatArray) -> FloatArray:
    """(draws, M) from the (4·draws, M) values at :func:`_around`."""
    parts = values.reshape(_PLACES.size, steps.size, -1)
    return np.asarray(np.tensordot(_WEIGHTS, parts, axes=1) / steps[:, None])


def _equations(nominal: _Nominal, draws: NDArray[np.intp], steps: FloatArray) -> Equations:
    """Those of boards a little off in one draw each."""
    deviations = np.zeros((len(nominal.variety.draws), _PLACES.size * draws.size))
    columns = np.arange(deviations.shape[1])
    deviations[np.tile(draws, _PLACES.size), columns] = _around(steps)
    circuit = nominal.bench.circuit
    return build_equations(circuit, *board_values(circuit, nominal.variety, deviations))


def _branch_voltages(equations: Equations, unknowns: FloatArray) -> tuple[FloatArray, ...]:
    """Those of every device group, (boards, n, U), from (boards, N) unknowns."""
    grounded = np.pad(unknowns, ((0, 0), (0, 1)))
    return tuple(grounded[:, group.plus] - grounded[:, group.minus] for group in equations.groups)


def _placed(solution: BiasSolution, equations: Equations, unknowns: FloatArray) -> BiasSolution:
    """The devices at given unknowns; ``point`` stays the nominal one."""
    voltages = _branch_voltages(equations, unknowns)
    state = State(unknowns, voltages, np.ones(len(unknowns), bool), np.zeros_like(unknowns))
    figures = tuple(
        group.device.operating(group.parameters, u, equations.circuit.gmin)
        for group, u in zip(equations.groups, voltages, strict=True)
    )
    return replace(solution, equations=equations, state=state, figures=figures)
