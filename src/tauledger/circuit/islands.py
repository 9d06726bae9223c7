"""Independent circuits in one file: joined by nothing but ground and supplies."""

from __future__ import annotations

from collections.abc import Iterator, Sequence, Set
from dataclasses import replace

import networkx as nx

from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    Circuit,
    ControlledSource,
    Coupling,
    CurrentSource,
    Element,
    VoltageSource,
)
from tauledger.problems import Problem, ProblemError, Severity, SourceSpan
from tauledger.records import dataclass

_SHOWN_CIRCUITS = 8
_SHOWN_PARTS = 6


@dataclass(frozen=True, slots=True)
class Island:
    """One circuit: its elements in netlist order, and the nodes no other circuit has."""

    elements: tuple[Element, ...]
    nodes: frozenset[str]


def islands(circuit: Circuit, source: str = "") -> tuple[Island, ...]:
    """The independent circuits of a file, in order of their first elements.

    Supplies are nodes that voltage sources hold against ground, a source with a signal (an AC
    value, a function of time, or the name ``source``) apart. Elements between supplies and ground
    alone belong to every circuit and are in none of these.
    """
    shared = _supply_nodes(circuit, source)
    graph = nx.Graph()
    sources = {element.name: element for element in circuit.elements}
    homes: list[tuple[Element, str]] = []
    for element in (*circuit.elements, *circuit.unread):
        if isinstance(element, Coupling):
            touched = [n for name in element.inductors for n in sources[name].nodes]
        else:
            touched = [*element.nodes, *_watched(element, sources)]
        own = [node for node in touched if node not in shared]
        if own:
            nx.add_path(graph, own)
            homes.append((element, own[0]))
    component = {
        node: index for index, nodes in enumerate(nx.connected_components(graph)) for node in nodes
    }
    members: dict[int, list[Element]] = {}
    for element, node in homes:
        members.setdefault(component[node], []).append(element)
    nodes_of: dict[int, set[str]] = {}
    for node, index in component.items():
        nodes_of.setdefault(index, set()).add(node)
    return tuple(
        Island(tuple(elements), frozenset(nodes_of[index])) for index, elements in members.items()
    )


def restrict(circuit: Circuit, source: str | None = None) -> Circuit:
    """The circuit that ``source`` drives, with the supplies; a note names the others.

    Without a name it is the only source with an AC value. Where that leaves several or none, or
    the source stands between supplies, the circuit is returned as it is.

    Elements that could not be read are warned of in the circuits left out. Raises ProblemError
    with their problems where they may belong to the circuit that is returned.
    """
    driven = _driven(circuit, source)
    found = islands(circuit, driven.name) if driven is not None else ()
    others = [island for island in found if all(e is not driven for e in island.elements)]
    if driven is None or not others or len(others) == len(found):
        _judge_unread(circuit, set())
        return circuit
    left_out = {element.name for island in others for element in island.elements}
    nodes: set[str] = set().union(*(island.nodes for island in others))
    kept = tuple(e for e in circuit.elements if e.name not in left_out)
    hints = tuple(hint for hint in circuit.output_hints if nodes.isdisjoint(hint))
    dropped = [hint for hint in dict.fromkeys(circuit.output_hints) if hint not in hints]
    return replace(
        circuit,
        elements=kept,
        output_hints=hints,
        node_sets={node: v for node, v in circuit.node_sets.items() if node not in nodes},
        initial_conditions={
            node: v for node, v in circuit.initial_conditions.items() if node not in nodes
        },
        problems=(*_judge_unread(circuit, left_out), _note(driven, others, dropped)),
        unread=(),
    )


def _judge_unread(circuit: Circuit, left_out: Set[str]) -> tuple[Problem, ...]:
    """The circuit's problems with those of unread elements; raises them when one is left in."""
    if not circuit.unread:
        return circuit.problems
    found = list(circuit.problems)
    for element in circuit.unread:
        if element.name in left_out:
            found += (_excused(entry) for entry in element.problems)
        else:
            found += element.problems
    found.sort(key=lambda entry: _place(circuit, entry.span))
    if any(entry.severity is Severity.ERROR for entry in found):
        raise ProblemError(*found)
    return tuple(found)


def _excused(entry: Problem) -> Problem:
    message = f"{entry.message}; it stands in another circuit of the file, which is left out"
    return replace(entry, severity=Severity.WARNING, message=message)


def _place(circuit: Circuit, span: SourceSpan | None) -> tuple[bool, str, int]:
    """By position, those of the netlist before those of its includes."""
    return (span.path != circuit.path, span.path, span.line) if span else (True, "", 0)


def _driven(circuit: Circuit, name: str | None) -> VoltageSource | CurrentSource | None:
    sources = [e for e in circuit.elements if isinstance(e, VoltageSource | CurrentSource)]
    if name is not None:
        return next((e for e in sources if e.name.casefold() == name.casefold()), None)
    with_signal = [e for e in sources if e.ac]
    return with_signal[0] if len(with_signal) == 1 else None


def _supply_nodes(circuit: Circuit, source: str) -> set[str]:
    """Ground, and what sources without a signal hold against it, one on another included."""
    measured = {e.control_source for e in circuit.elements if isinstance(e, ControlledSource)}
    measured.update(
        name
        for e in circuit.elements
        if isinstance(e, BehaviouralSource)
        for name in _currents_of(e)
    )
    held = nx.Graph()
    held.add_node(GROUND)
    held.add_edges_from(
        e.nodes
        for e in circuit.elements
        if isinstance(e, VoltageSource)
        and not (e.ac or e.time_function or e.name == source or e.name in measured)
    )
    return set(nx.node_connected_component(held, GROUND))


def _watched(element: Element, elements: dict[str, Element]) -> Iterator[str]:
    """Nodes that control an element from afar."""
    if isinstance(element, ControlledSource):
        yield from element.control_nodes
        if element.control_source:
            yield from elements[element.control_source].nodes
    elif isinstance(element, BehaviouralSource):
        yield from _voltages_of(element)
        for name in _currents_of(element):
            yield from elements[name].nodes


def _voltages_of(element: BehaviouralSource) -> Iterator[str]:
    from tauledger.circuit.evaluate import leaves_of
    from tauledger.netlist.expression import NodeVoltage

    for leaf in leaves_of(element.expression):
        if isinstance(leaf, NodeVoltage):
            yield leaf.positive
            yield leaf.negative


def _currents_of(element: BehaviouralSource) -> Iterator[str]:
    from tauledger.circuit.evaluate import leaves_of
    from tauledger.netlist.expression import SourceCurrent

    for leaf in leaves_of(element.expression):
        if isinstance(leaf, SourceCurrent):
            yield leaf.source


def _note(driven: Element, others: Sequence[Island], dropped: Sequence[tuple[str, ...]]) -> Problem:
    listed = [_describe(island) for island in others[:_SHOWN_CIRCUITS]]
    if len(others) > _SHOWN_CIRCUITS:
        listed.append(f"{len(others) - _SHOWN_CIRCUITS} more")
    count = "another circuit" if len(others) == 1 else f"{len(others)} other circuits"
    return Problem(
        "circuit-independent",
        Severity.NOTE,
        f"the report covers the circuit that {driven.name} drives; the file holds {count}, joined "
        f"to it by ground and supplies at most and left out: {'; '.join(listed)}"
        + _said_of(dropped),
        others[0].elements[0].span,
        "Name a source of another circuit with --input NAME to see that one.",
    )


def _said_of(dropped: Sequence[tuple[str, ...]]) -> str:
    """What .print and statements like it ask to see of the circuits left out."""
    if not dropped:
        return ""
    more = len(dropped) - _SHOWN_PARTS
    shown = ", ".join(f"v({','.join(hint)})" for hint in dropped[:_SHOWN_PARTS])
    shown += f" and {more} more" if more > 0 else ""
    return f"; so is what .print or a statement like it asks to see there: {shown}"


def _describe(island: Island) -> str:
    names = [element.name for element in island.elements]
    if len(names) <= _SHOWN_PARTS:
        return ", ".join(names)
    return f"{', '.join(names[:_SHOWN_PARTS])} … ({len(names)} parts)"
