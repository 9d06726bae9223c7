"""From a circuit to its operating point: Newton, then its helps, then a clear refusal.

The order is plain Newton, gmin stepping (a conductance from every node to ground, taken away
step by step) and source stepping (the supplies brought up step by step). Each later method is
tried only on the boards that still need it.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from tauledger.bias.equations import Equations, Variations, build_equations
from tauledger.bias.newton import (
    Helps,
    State,
    linearise,
    solve_newton,
    starting_state,
    take_boards,
)
from tauledger.bias.point import DevicePoint, OperatingPoint
from tauledger.circuit.elements import Circuit, Element, VoltageSource
from tauledger.devices.interface import FloatArray, OperatingValues, Value
from tauledger.problems import Problem, ProblemError, Severity

LARGEST_SYSTEM = 2000
"""Unknowns; the dense solver's time grows with the cube of their number."""


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
        the nodes and parts at fault, or the nodes that moved most.
    """
    equations = build_equations(circuit, variations, temperature_c)
    if equations.size > LARGEST_SYSTEM:
        raise ProblemError(_too_large(equations))
    state, method = _converge(equations)
    if not state.converged.any():
        raise ProblemError(_explain_failure(equations, state))
    figures = tuple(
        group.device.operating(group.parameters, u, circuit.gmin)
        for group, u in zip(equations.groups, state.branch_voltages, strict=True)
    )
    point = _operating_point(equations, state, figures, method)
    return BiasSolution(point, equations, state, figures)


def _converge(equations: Equations) -> tuple[State, str]:
    start = _with_node_sets(equations, starting_state(equations))
    state = solve_newton(equations, start)
    method = "newton"
    fallbacks: tuple[tuple[str, Callable[[Equations, State], State]], ...] = (
        ("gmin stepping", _gmin_stepping),
        ("source stepping", _source_stepping),
    )
    for name, fallback in fallbacks:
        left = np.flatnonzero(~state.converged)
        if not left.size:
            break
        part = equations if left.size == equations.boards else take_boards(equations, left)
        found = fallback(part, _take_state(start, left))
        if found.converged.any():
            method = name
        state = _put_state(state, left, found)
    return state, method


def _gmin_stepping(equations: Equations, start: State) -> State:
    """Ten-fold steps from 10 mS down, halved in the exponent when one fails."""
    state, exponent, step = start, -2.0, 1.0
    reached = solve_newton(equations, start, Helps(node_conductance_s=10.0**exponent))
    if not reached.converged.any():
        return reached
    while step > 0.02:
        state = reached
        if exponent <= -14.0:
            return solve_newton(equations, state)
        trial = solve_newton(
            equations, state, Helps(node_conductance_s=10.0 ** (exponent - step)), 60
        )
        if trial.converged.sum() >= state.converged.sum():
            reached, exponent, step = trial, exponent - step, min(1.0, 1.5 * step)
        else:
            step /= 4.0
    return solve_newton(equations, state)


def _source_stepping(equations: Equations, start: State) -> State:
    """Supplies from zero to full, the step adapted to what converges."""
    scale, step = 0.0, 0.1
    state = solve_newton(equations, start, Helps(source_scale=0.0))
    while scale < 1.0 and step > 1e-4:
        target = min(1.0, scale + step)
        trial = solve_newton(equations, state, Helps(source_scale=target), 60)
        if trial.converged.sum() >= max(1, state.converged.sum()):
            state, scale, step = trial, target, 2.0 * step
        else:
            step /= 4.0
    return dataclasses.replace(state, converged=state.converged & (scale >= 1.0))


def _with_node_sets(equations: Equations, start: State) -> State:
    """Begin from a solution in which the nodes of .nodeset are held at their voltages."""
    wanted: Mapping[str, float] = {
        node.lower(): value for node, value in equations.circuit.node_sets.items()
    }
    if not wanted:
        return start
    targets = np.array([[wanted.get(node.lower(), np.nan) for node in equations.nodes]])
    held = solve_newton(equations, start, Helps(pull_conductance_s=1e6, pull_targets=targets))
    return held if held.converged.all() else start


def _take_state(state: State, boards: np.ndarray) -> State:
    return State(
        state.unknowns[boards],
        tuple(array[boards] for array in state.branch_voltages),
        state.converged[boards],
        state.movement[boards],
    )


def _put_state(whole: State, boards: np.ndarray, part: State) -> State:
    result = State(
        whole.unknowns.copy(),
        tuple(array.copy() for array in whole.branch_voltages),
        whole.converged.copy(),
        whole.movement.copy(),
    )
    result.unknowns[boards] = part.unknowns
    result.converged[boards] = part.converged
    result.movement[boards] = part.movement
    for array, fresh in zip(result.branch_voltages, part.branch_voltages, strict=True):
        array[boards] = fresh
    return result


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


def _explain_failure(equations: Equations, state: State) -> Problem:
    start = starting_state(equations)
    matrix, _ = linearise(equations, start.unknowns, start.branch_voltages)
    size = equations.size
    guilty = _null_space_names(equations, matrix[0, :size, :size])
    if guilty:
        return _singular(equations, guilty)
    movement = np.where(np.isfinite(state.movement[0]), state.movement[0], 0.0)
    worst = np.argsort(movement[: len(equations.nodes)])[::-1][:3]
    names = [equations.nodes[i] for i in worst if movement[i] > 0] or list(equations.nodes[:3])
    devices = _devices_at(equations, set(names))
    return Problem(
        "bias-not-found",
        Severity.ERROR,
        f"no operating point found; the last steps still moved {', '.join(names)}"
        + (f" (at {', '.join(devices)})" if devices else ""),
        None,
        "Check the supplies and the bias network there; a .nodeset near the expected voltages "
        "helps the solver.",
    )


def _null_space_names(equations: Equations, matrix: FloatArray) -> list[str]:
    """Names of the unknowns that a singular matrix leaves undetermined; empty when it is not."""
    scale = np.abs(matrix).max(axis=1, keepdims=True)
    if not np.isfinite(matrix).all():
        return []
    _, singular, right = np.linalg.svd(matrix / np.where(scale > 0, scale, 1.0))
    if singular[-1] > 1e-14 * singular[0]:
        return []
    vector = np.abs(right[-1])
    names = (*equations.nodes, *equations.branches)
    return [names[i] for i in np.argsort(vector)[::-1] if vector[i] > 0.3 * vector.max()][:6]


def _singular(equations: Equations, guilty: list[str]) -> Problem:
    branches = [name for name in guilty if name in equations.branches]
    by_name: dict[str, Element] = {e.name: e for e in equations.circuit.elements}
    if branches:
        loop = all(isinstance(by_name[name], VoltageSource) for name in branches)
        what = "voltage sources" if loop else "voltage sources, inductors or controlled sources"
        return Problem(
            "voltage-loop",
            Severity.ERROR,
            f"{', '.join(branches)} form a loop of {what} with no resistance, "
            "so their current is not determined",
            by_name[branches[0]].span,
            "Put the resistance of the real part in series, or remove the duplicate source.",
        )
    return Problem(
        "node-undetermined",
        Severity.ERROR,
        f"nothing fixes the DC voltage of {', '.join(guilty)}",
        None,
        "Give the node a DC path to ground, such as a bias resistor.",
    )


def _devices_at(equations: Equations, nodes: set[str]) -> list[str]:
    return [
        e.name
        for e in equations.circuit.elements
        if nodes & {*e.nodes} and e.name in {n for g in equations.groups for n in g.names}
    ][:4]
