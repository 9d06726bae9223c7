"""From a circuit to its operating point: Newton, then its helps, then a clear refusal.

The order is plain Newton, gmin stepping, source stepping and pseudo-transient continuation; each
later method is tried only on the boards that still need it. Many boards start from the solution of
the circuit as drawn.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from tauledger.bias.continuation import gmin_stepping, pseudo_transient, source_stepping
from tauledger.bias.diagnosis import explain_failure
from tauledger.bias.equations import Equations, build_equations
from tauledger.bias.newton import (
    Helps,
    IntArray,
    State,
    solve_newton,
    starting_state,
    take_boards,
)
from tauledger.bias.point import DevicePoint, OperatingPoint
from tauledger.bias.stamps import Variations
from tauledger.circuit.elements import Circuit
from tauledger.devices.interface import OperatingValues, Value
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass

LARGEST_SYSTEM = 4000
"""Unknowns; a dense matrix of that order takes 128 MB."""
CHUNK_BYTES = 1 << 20
"""Size of the matrices of the boards solved together."""
FEWEST_WARM = 8
"""Boards for which it pays to solve the circuit as drawn first."""
FALLBACKS: Mapping[str, Callable[[Equations, State], State]] = {
    "gmin stepping": gmin_stepping,
    "source stepping": source_stepping,
    "pseudo-transient continuation": pseudo_transient,
}


@dataclass(frozen=True, slots=True)
class BiasSolution:
    """The operating point, with the equations it solves."""

    point: OperatingPoint
    equations: Equations
    state: State
    figures: tuple[OperatingValues, ...]
    """Small-signal figures of each device group of the equations."""


def solve_bias(
    circuit: Circuit,
    variations: Variations | None = None,
    temperature_c: Value | None = None,
) -> BiasSolution:
    """Find the operating point of a circuit, of all boards at once when there are variations.

    Raises
    ------
    ProblemError
        When the equations are too many or singular, or no board converges; the message names
        the nodes and parts at fault, or the devices that moved most.
    """
    equations = build_equations(circuit, variations, temperature_c)
    if equations.size > LARGEST_SYSTEM:
        raise ProblemError(_too_large(equations))
    state, method = _converge(equations, _nominal_state(circuit, equations, temperature_c))
    if not state.converged.any():
        raise ProblemError(*explain_failure(equations, state))
    figures = tuple(
        group.device.operating(group.parameters, u, circuit.gmin)
        for group, u in zip(equations.groups, state.branch_voltages, strict=True)
    )
    point = _operating_point(equations, state, figures, method)
    return BiasSolution(point, equations, state, figures)


def _converge(equations: Equations, nominal: State | None) -> tuple[State, str]:
    """All boards, in chunks that stay in the processor's cache."""
    chunk = max(64, CHUNK_BYTES // (8 * (equations.size + 1) ** 2))
    if equations.boards <= chunk:
        return _converge_chunk(equations, nominal)
    whole = starting_state(equations)
    methods = set()
    for first in range(0, equations.boards, chunk):
        boards = np.arange(first, min(first + chunk, equations.boards))
        part, method = _converge_chunk(take_boards(equations, boards), nominal)
        _put_state(whole, boards, part)
        methods.add(method)
    return whole, max(methods, key=["newton", *FALLBACKS].index)


def _converge_chunk(equations: Equations, nominal: State | None) -> tuple[State, str]:
    state = starting_state(equations)
    if nominal is not None:
        state = solve_newton(equations, _repeated(nominal, equations.boards))
    method = "newton"
    attempts: tuple[tuple[str, Callable[[Equations, State], State]], ...] = (
        ("newton", solve_newton),
        *FALLBACKS.items(),
    )
    for name, attempt in attempts:
        left = np.flatnonzero(~state.converged)
        if not left.size:
            break
        part = equations if left.size == equations.boards else take_boards(equations, left)
        found = attempt(part, _with_node_sets(part, starting_state(part)))
        if found.converged.any():
            method = name
        _put_state(state, left, found)
    return state, method


def _nominal_state(
    circuit: Circuit, equations: Equations, temperature_c: Value | None
) -> State | None:
    """Solution of the circuit as drawn, to start many boards from; None when it is no help."""
    if equations.boards < FEWEST_WARM or isinstance(temperature_c, np.ndarray):
        return None
    nominal = build_equations(circuit, None, temperature_c)
    if nominal.nodes != equations.nodes:
        return None  # a varied series resistance adds nodes
    state, _ = _converge(nominal, None)
    return state if state.converged.all() else None


def _repeated(state: State, boards: int) -> State:
    return State(
        np.repeat(state.unknowns, boards, axis=0),
        tuple(np.repeat(array, boards, axis=0) for array in state.branch_voltages),
        np.zeros(boards, dtype=bool),
        np.repeat(state.movement, boards, axis=0),
    )


def _with_node_sets(equations: Equations, start: State) -> State:
    """Begin from a solution in which the nodes of .nodeset are held at their voltages.

    As in ngspice, ``.ic`` has no part in an operating point; it is for transient analysis.
    """
    wanted: Mapping[str, float] = {
        node.lower(): value for node, value in equations.circuit.node_sets.items()
    }
    if not wanted:
        return start
    targets = np.array([[wanted.get(node.lower(), np.nan) for node in equations.nodes]])
    held = solve_newton(equations, start, Helps(pull_conductance_s=1e6, pull_targets=targets))
    return held if held.converged.all() else start


def _put_state(whole: State, boards: IntArray, part: State) -> None:
    """Write the results of some boards into ``whole``, in place."""
    whole.unknowns[boards] = part.unknowns
    whole.converged[boards] = part.converged
    whole.movement[boards] = part.movement
    for array, fresh in zip(whole.branch_voltages, part.branch_voltages, strict=True):
        array[boards] = fresh


def _operating_point(
    equations: Equations, state: State, figures_of: tuple[OperatingValues, ...], method: str
) -> OperatingPoint:
    nodes = len(equations.nodes)
    unknowns = np.where(state.converged[:, None], state.unknowns, np.nan)
    devices: dict[str, DevicePoint] = {}
    for group, figures in zip(equations.groups, figures_of, strict=True):
        symbols = [symbol for symbol, _, _ in group.device.capacitors]
        for i, name in enumerate(group.names):
            devices[name] = DevicePoint(
                name=name,
                kind=group.device.name,
                values={key: value[:, i] for key, value in figures.values.items()},
                region=str(figures.region[0, i]),
                capacitances={
                    symbol: figures.capacitance[:, i, k] for k, symbol in enumerate(symbols)
                },
            )
    return OperatingPoint(
        nodes=equations.nodes,
        voltages=unknowns[:, :nodes],
        branches=equations.branches,
        currents=unknowns[:, nodes:],
        devices=devices,
        method=method,
        failed_boards=int((~state.converged).sum()),
    )


def _too_large(equations: Equations) -> Problem:
    return Problem(
        "circuit-too-large",
        Severity.ERROR,
        f"the circuit has {equations.size} unknowns, more than the {LARGEST_SYSTEM} "
        "that are solved",
        None,
        "Give the netlist of the amplifier alone, without the rest of the board.",
    )
