"""The graph of what carries direct current: nodes without a DC path to ground."""

from __future__ import annotations

from collections.abc import Iterator

import networkx as nx

from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    BipolarTransistor,
    Capacitor,
    Circuit,
    ControlledSource,
    Coupling,
    CurrentSource,
    Diode,
    Element,
    JunctionFet,
    MosFet,
    SemiconductorDevice,
)
from tauledger.netlist.codes import problem
from tauledger.problems import Problem

# Pairs of terminals (by position) that carry direct current inside a device. A gate insulated by
# oxide has none; a substrate is a junction to the collector.
_DC_PAIRS: dict[type[Element], tuple[tuple[int, int], ...]] = {
    Diode: ((0, 1),),
    BipolarTransistor: ((0, 1), (1, 2), (0, 3)),
    JunctionFet: ((0, 1), (1, 2), (0, 2)),
    MosFet: ((0, 2), (0, 3), (2, 3)),
}


def find_floating_nodes(circuit: Circuit) -> tuple[Problem, ...]:
    """One ``node-floating`` error for each part of the circuit without a DC path to ground.

    Capacitors, current sources and the gate of a MOSFET give no path; inductors, resistors,
    voltage sources (E, H and B included) and junctions do.
    """
    graph = nx.Graph()
    graph.add_nodes_from((GROUND, *circuit.nodes))
    graph.add_edges_from(pair for element in circuit.elements for pair in _dc_edges(element))
    grounded, *apart = nx.connected_components(graph)
    if not apart:
        return ()
    island = {node: number for number, nodes in enumerate(apart) for node in nodes}
    nodes: list[list[str]] = [[] for _ in apart]
    for node in circuit.nodes:
        if node not in grounded:
            nodes[island[node]].append(node)
    touching: list[list[Element]] = [[] for _ in apart]
    for element in circuit.elements:
        for number in {island[node] for node in element.nodes if node not in grounded}:
            touching[number].append(element)
    return tuple(_floating(*found) for found in zip(nodes, touching, strict=True))


def _dc_edges(element: Element) -> Iterator[tuple[str, str]]:
    nodes = element.nodes
    if isinstance(element, SemiconductorDevice):
        for first, second in _DC_PAIRS[type(element)]:
            if second < len(nodes):
                yield nodes[first], nodes[second]
    elif isinstance(element, ControlledSource):
        # A G source controlled by the voltage across itself is a resistor.
        itself = element.letter == "G" and {*nodes} & {*element.control_nodes} - {GROUND}
        if element.letter in "EH" or itself:
            yield nodes[0], nodes[1]
    elif isinstance(element, BehaviouralSource):
        # A current may depend on the voltage across itself, as a resistor's does.
        if element.output == "voltage" or _sees_itself(element):
            yield nodes[0], nodes[1]
    elif not isinstance(element, Capacitor | CurrentSource | Coupling):
        yield nodes[0], nodes[1]


def _sees_itself(element: BehaviouralSource) -> bool:
    from tauledger.circuit.evaluate import leaves_of
    from tauledger.netlist.expression import NodeVoltage

    seen = {
        node
        for leaf in leaves_of(element.expression)
        if isinstance(leaf, NodeVoltage)
        for node in (leaf.positive, leaf.negative)
    }
    return not seen.isdisjoint(set(element.nodes) - {GROUND})


def _floating(nodes: list[str], parts: list[Element]) -> Problem:
    shown = ", ".join(part.name for part in parts[:6]) + (" …" if len(parts) > 6 else "")
    if len(nodes) == 1:
        head = f"node {nodes[0]!r} has no DC path to ground"
    else:
        listed = ", ".join(repr(node) for node in nodes[:4]) + (" …" if len(nodes) > 4 else "")
        head = f"nodes {listed} have no DC path to ground"
    return problem(
        "node-floating",
        f"{head}: only {shown} " + ("reaches it" if len(parts) == 1 else "reach there"),
        parts[0].span,
        "Add the missing connection, or a resistor to ground; where a connector was, attach what "
        "is behind it in tauledger.toml (tauledger start writes one).",
    )
