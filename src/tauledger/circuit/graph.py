"""The circuit as a graph, and what the graph alone tells: nodes without a DC path to ground."""

from __future__ import annotations

import itertools
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

_TERMINALS: dict[type[Element], tuple[str, ...]] = {
    Diode: ("anode", "cathode"),
    BipolarTransistor: ("collector", "base", "emitter", "substrate"),
    JunctionFet: ("drain", "gate", "source"),
    MosFet: ("drain", "gate", "source", "bulk"),
}
# Pairs of terminals (by position) that carry direct current inside a device. A gate insulated by
# oxide has none; a substrate is a junction to the collector.
_DC_PAIRS: dict[type[Element], tuple[tuple[int, int], ...]] = {
    Diode: ((0, 1),),
    BipolarTransistor: ((0, 1), (1, 2), (0, 3)),
    JunctionFet: ((0, 1), (1, 2), (0, 2)),
    MosFet: ((0, 2), (0, 3), (2, 3)),
}


def element_graph(circuit: Circuit) -> nx.MultiGraph:
    """Nodes are circuit nodes; edges are elements between two of their terminals.

    Edge key and attribute ``name``: the element's flat name, with the terminals added for a
    device (``Q1:base-emitter``). Attribute ``element``: the element; for devices ``terminals``:
    the two terminal names in the edge's order ``nodes``. A controlled source is an edge at its
    output; couplings have none. An edge whose ends are one node is a loop.
    """
    graph = nx.MultiGraph()
    graph.add_node(GROUND)
    for element in circuit.elements:
        if isinstance(element, Coupling):
            continue
        if isinstance(element, SemiconductorDevice):
            for (first, one), (second, other) in itertools.combinations(
                enumerate(element.nodes), 2
            ):
                names = _TERMINALS[type(element)]
                pair = (names[first], names[second])
                graph.add_edge(
                    one,
                    other,
                    key=f"{element.name}:{pair[0]}-{pair[1]}",
                    name=element.name,
                    element=element,
                    terminals=pair,
                    nodes=(one, other),
                )
        else:
            one, other = element.nodes
            graph.add_edge(
                one, other, key=element.name, name=element.name, element=element, nodes=(one, other)
            )
    return graph


def find_floating_nodes(circuit: Circuit) -> tuple[Problem, ...]:
    """One ``node-floating`` error for each part of the circuit without a DC path to ground.

    Capacitors, current sources and the gate of a MOSFET give no path; inductors, resistors,
    voltage sources (E, H and B included) and junctions do.
    """
    parent = {node: node for node in (GROUND, *circuit.nodes)}
    for element in circuit.elements:
        for one, other in _dc_edges(element):
            parent[_root(parent, one)] = _root(parent, other)
    ground = _root(parent, GROUND)
    islands: dict[str, list[str]] = {}
    for node in circuit.nodes:
        root = _root(parent, node)
        if root != ground:
            islands.setdefault(root, []).append(node)
    if not islands:
        return ()
    touching: dict[str, list[Element]] = {}
    for element in circuit.elements:
        for root in {_root(parent, node) for node in element.nodes}:
            if root != ground:
                touching.setdefault(root, []).append(element)
    return tuple(_floating(nodes, touching[root]) for root, nodes in islands.items())


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


def _root(parent: dict[str, str], node: str) -> str:
    while parent[node] != node:
        parent[node] = parent[parent[node]]
        node = parent[node]
    return node


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
        "Add the missing connection, or a resistor to ground.",
    )
