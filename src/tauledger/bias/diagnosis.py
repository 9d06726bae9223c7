"""Why no operating point was found: which parts make it impossible, or where it did not settle."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np

from tauledger.bias.equations import Equations
from tauledger.bias.newton import State, linearise, starting_state
from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    ControlledSource,
    Coupling,
    CurrentSource,
    Element,
    Inductor,
    VoltageSource,
)
from tauledger.circuit.graph import find_floating_nodes
from tauledger.devices.interface import FloatArray
from tauledger.problems import Problem, Severity

NAMED = 4
"""Parts and nodes listed in a message."""


def explain_failure(equations: Equations, state: State) -> tuple[Problem, ...]:
    """Problems with the places of the parts at fault, for a solve in which no board converged."""
    found = voltage_loops(equations) or undetermined_nodes(equations)
    return found or (_numerically_singular(equations) or _not_settled(equations, state),)


# Structure ----------------------------------------------------------------------------------------


def voltage_loops(equations: Equations) -> tuple[Problem, ...]:
    """Loops of voltage sources and inductors alone, whose current nothing limits at DC."""
    neighbours: dict[str, list[tuple[str, Element]]] = {}
    problems = []
    for element in equations.circuit.elements:
        if element.name.lower() not in equations.branch_index:
            continue
        a, b = element.nodes[:2]
        route = _route(neighbours, a, b)
        if route is not None:
            problems.append(_voltage_loop([*route, element]))
            continue
        neighbours.setdefault(a, []).append((b, element))
        neighbours.setdefault(b, []).append((a, element))
    return tuple(problems)


def _route(
    neighbours: dict[str, list[tuple[str, Element]]], start: str, end: str
) -> list[Element] | None:
    """Elements from one node to the other; the graph has no loops yet."""
    routes: dict[str, list[Element]] = {start: []}
    waiting = [start]
    while waiting:
        node = waiting.pop()
        if node == end:
            return routes[node]
        for other, element in neighbours.get(node, []):
            if other not in routes:
                routes[other] = [*routes[node], element]
                waiting.append(other)
    return None


def _voltage_loop(loop: Sequence[Element]) -> Problem:
    kinds = _kinds(loop)
    names = _placed(loop)
    if len(loop) == 1:
        message = f"{names} has both ends on one node, so its current is not determined"
    else:
        message = (
            f"{names} form a loop of {kinds} with no resistance, so the current round it is "
            "not determined"
        )
    return Problem(
        "voltage-loop",
        Severity.ERROR,
        message,
        loop[-1].span,
        "Put the resistance of the real part in series, or remove the duplicate source.",
    )


def _kinds(loop: Iterable[Element]) -> str:
    words = {
        VoltageSource: "voltage sources",
        Inductor: "inductors",
        ControlledSource: "controlled sources",
        BehaviouralSource: "controlled sources",
    }
    named = sorted({words[type(element)] for element in loop}, key=list(words.values()).index)
    return " and ".join([", ".join(named[:-1]), named[-1]] if len(named) > 1 else named)


def undetermined_nodes(equations: Equations) -> tuple[Problem, ...]:
    """Nodes cut off from ground by capacitors and current sources."""
    circuit = equations.circuit
    found = find_floating_nodes(circuit)
    if not found:
        return ()
    determined = _reached(equations)
    cut = [
        element
        for element in circuit.elements
        if _drives_current(element) and any(node not in determined for node in element.nodes[:2])
    ]
    if not cut:
        return found
    nodes = dict.fromkeys(n for e in cut for n in e.nodes[:2] if n not in determined)
    shown = ", ".join(repr(node) for node in list(nodes)[:NAMED])
    return (
        Problem(
            "current-cutset",
            Severity.ERROR,
            f"no path carries the current of {_placed(cut)} from {shown} to ground, so the "
            "voltage there is not determined",
            cut[0].span,
            "Give the current a return: a resistor or a device to ground or a supply.",
        ),
    )


def _drives_current(element: Element) -> bool:
    if isinstance(element, ControlledSource):
        return element.letter in "FG"
    if isinstance(element, BehaviouralSource):
        return element.output == "current"
    return isinstance(element, CurrentSource)


def _reached(equations: Equations) -> set[str]:
    """Nodes with a DC path to ground through anything but current sources and capacitors."""
    links: dict[str, set[str]] = {}
    for element in equations.circuit.elements:
        if isinstance(element, Coupling) or _drives_current(element):
            continue
        if element.name.lower() in equations.values and not isinstance(element, Inductor):
            continue
        nodes = element.nodes
        for a in nodes:
            links.setdefault(a, set()).update(nodes)
    reached, waiting = {GROUND}, [GROUND]
    while waiting:
        fresh = links.get(waiting.pop(), set()) - reached
        reached |= fresh
        waiting += fresh
    return reached


# Numbers ------------------------------------------------------------------------------------------


def _numerically_singular(equations: Equations) -> Problem | None:
    """The unknowns that the first matrix leaves open, found in its null space."""
    start = starting_state(equations)
    matrix, _ = linearise(equations, start.unknowns, start.branch_voltages)
    names = _null_space_names(equations, matrix[0, : equations.size, : equations.size])
    if not names:
        return None
    touching = [e for e in equations.circuit.elements if {*e.nodes, e.name} & set(names)]
    return Problem(
        "node-undetermined",
        Severity.ERROR,
        f"nothing fixes {', '.join(names[:NAMED])} at DC"
        + (f"; what stands there: {_placed(touching)}" if touching else ""),
        touching[0].span if touching else None,
        "Give the node a DC path to ground, such as a bias resistor.",
    )


def _null_space_names(equations: Equations, matrix: FloatArray) -> list[str]:
    """Names of the unknowns that a singular matrix leaves undetermined; empty when it is not."""
    if not np.isfinite(matrix).all() or equations.size > 500:
        return []
    scale = np.abs(matrix).max(axis=1, keepdims=True)
    _, singular, right = np.linalg.svd(matrix / np.where(scale > 0, scale, 1.0))
    if singular[-1] > 1e-14 * singular[0]:
        return []
    vector = np.abs(right[-1])
    names = (*equations.nodes, *equations.branches)
    return [names[i] for i in np.argsort(vector)[::-1] if vector[i] > 0.3 * vector.max()][:6]


def _not_settled(equations: Equations, state: State) -> Problem:
    movement = np.where(np.isfinite(state.movement[0]), state.movement[0], 0.0)
    by_device = {
        name: float(movement[nodes[nodes >= 0]].max(initial=0.0))
        for group in equations.groups
        for name, nodes in zip(group.names, group.terminal_nodes, strict=True)
    }
    elements = {element.name: element for element in equations.circuit.elements}
    worst = sorted(by_device, key=lambda name: -by_device[name])
    # Nothing is known of the movement where the very first matrix could not be solved.
    moving = [name for name in worst if by_device[name] > 0.0] or worst
    devices = [elements[name] for name in moving[:NAMED]]
    nodes = np.argsort(movement[: len(equations.nodes)])[::-1][:3]
    moved = ", ".join(
        f"{equations.nodes[i]} by {movement[i]:.3g} V" for i in nodes if movement[i] > 0.0
    )
    return Problem(
        "bias-not-found",
        Severity.ERROR,
        "no operating point found by Newton's method, gmin stepping, source stepping or "
        "pseudo-transient continuation"
        + (f"; the last step still moved {moved}" if moved else "")
        + (f"; the devices that moved most: {_placed(devices)}" if devices else ""),
        devices[0].span if devices else None,
        "Check the supplies and the bias network there; a .nodeset near the expected voltages "
        "helps the solver.",
    )


def _placed(elements: Sequence[Element]) -> str:
    """``V1 (line 3), L2 (line 7)``."""
    shown = ", ".join(f"{e.name} (line {e.span.line})" for e in elements[:NAMED])
    more = len(elements) - NAMED
    return f"{shown} and {more} more" if more > 0 else shown
