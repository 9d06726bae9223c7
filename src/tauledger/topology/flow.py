"""The signal flow graph and the way the signal takes through it.

Nodes are joined nodes (see wiring.py), ground and held nodes left out. A transistor passes the
signal base → collector, base → emitter and emitter → collector; passive parts pass it both ways;
a controlled source passes it from its control to its output. Each edge weighs what is lost on it
(natural logarithm of the divider a resistor forms with what stands at its far end); gain is not
counted, so the lightest way follows the amplifier and not its feedback network. The way is the
shortest path of E. W. Dijkstra, "A note on two problems in connexion with graphs", 1959 [M].
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from itertools import pairwise

import networkx as nx

from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    Capacitor,
    ControlledSource,
    Coupling,
    Diode,
    Element,
    Inductor,
    Resistor,
)
from tauledger.netlist.expression import Call, Expression, NodeVoltage, SourceCurrent
from tauledger.records import dataclass
from tauledger.topology.multiplier import is_multiplier
from tauledger.topology.wiring import Branch, Transistor, Wiring

_THROUGH = {
    ("base", "collector"): 0.05,
    ("base", "emitter"): 0.1,
    ("emitter", "collector"): 0.1,
}
_CAPACITOR_WEIGHT = 0.2
_DECADE_WEIGHT = 0.5
"""Added for every decade a capacitor is smaller than the largest that does not stand at ground."""
_RESISTOR_WEIGHT = 0.02
_COMMANDED_WEIGHT = 1.5
"""Added where a resistor leads to a node that a collector drives, or a capacitor to one that a
follower drives: feedback, as a rule."""
_SHUNT_WEIGHT = 1.0
"""Added where a resistor leads to a node that a capacitor joins to ground."""
_INDUCTOR_WEIGHT = 0.3
_DIODE_WEIGHT = 0.5
_SOURCE_WEIGHT = 0.1
_MULTIPLIER_WEIGHT = 0.05
_CHANNEL_WEIGHT = 1.0
"""A field-effect transistor in its triode region, drain to source either way."""


@dataclass(frozen=True, slots=True)
class Step:
    """One edge on the way of the signal."""

    start: str
    end: str
    part: str
    """Name of the element."""
    kind: str
    """``transistor``, ``channel``, ``source``, ``resistor``, ``capacitor`` or ``other``."""
    enters: str = ""
    """``base``, ``emitter`` or ``collector`` of a transistor (also for gate, source, drain)."""
    leaves: str = ""


@dataclass(frozen=True, slots=True)
class Flow:
    """The way from input to output; ``steps`` is empty when there is none."""

    steps: tuple[Step, ...]
    distance: dict[str, float]
    """Weight of the lightest way from the input to every node the signal reaches."""

    @property
    def nodes(self) -> tuple[str, ...]:
        """Joined nodes along the way, input and output included."""
        return (self.steps[0].start, *(step.end for step in self.steps)) if self.steps else ()


def follow(wiring: Wiring, start: str, end: str) -> Flow:
    """The way from one joined node to another; devices that are cut off are used last."""
    for conducting_only in (True, False):
        graph = _graph(wiring, conducting_only)
        if start not in graph:
            return Flow((), {})
        distance, ways = nx.single_source_dijkstra(graph, start)
        if end in ways:
            way = ways[end]
            steps = tuple(graph.edges[pair]["step"] for pair in pairwise(way))
            return Flow(steps, distance)
    return Flow((), distance)


def _graph(wiring: Wiring, conducting_only: bool) -> nx.DiGraph:
    graph = nx.DiGraph()
    for step, weight in _edges(wiring, conducting_only):
        if GROUND in (step.start, step.end) or step.start == step.end:
            continue
        known = graph.get_edge_data(step.start, step.end)
        if known is None or weight < known["weight"]:
            graph.add_edge(step.start, step.end, weight=weight, step=step)
    return graph


def _edges(wiring: Wiring, conducting_only: bool) -> Iterator[tuple[Step, float]]:
    losses = _losses(wiring)
    inductors: dict[str, tuple[str, str]] = {}
    couplings: list[Coupling] = []
    for element in wiring.circuit.elements:
        ends = tuple(wiring.joined[node] for node in element.nodes)
        if isinstance(element, Resistor | Capacitor | Inductor | Diode):
            branch = Branch(element, ends[0], ends[1])
            yield from _passive(losses, branch)
            if isinstance(element, Inductor):
                inductors[element.name.casefold()] = (ends[0], ends[1])
        elif isinstance(element, Coupling):
            couplings.append(element)
        elif isinstance(element, ControlledSource | BehaviouralSource):
            yield from _controlled(wiring, element, ends[:2])
    for coupling in couplings:
        yield from _transformer(coupling, inductors)
    for transistor in wiring.transistors.values():
        if conducting_only and transistor.region == "cut off":
            continue
        yield from _through(wiring, transistor)


@dataclass(frozen=True, slots=True)
class _Losses:
    """What the weights of passive parts are made from; clusters as in :class:`Wiring`."""

    wiring: Wiring
    largest_f: float
    driven: frozenset[int]
    """Clusters a collector or drain feeds."""
    followed: frozenset[str]
    """Nodes that emitters command whose collectors stand at ground for the signal."""

    def resistor(self, branch: Branch, end: str) -> float:
        """Loss where a resistor leads to ``end``: the divider, and who else commands there."""
        cluster = self.wiring.cluster[end]
        through = branch.conductance_s
        away = max(self.wiring.cluster_conductance_s[end] - through, 0.0)
        loss = _RESISTOR_WEIGHT + math.log1p(away / through)
        if end in self.wiring.shunted:
            loss += _SHUNT_WEIGHT
        return loss + (_COMMANDED_WEIGHT if cluster in self.driven else 0.0)

    def capacitor(self, capacitor: Capacitor, end: str) -> float:
        ratio = self.largest_f / max(abs(capacitor.capacitance_f), 1e-18)
        loss = _CAPACITOR_WEIGHT + _DECADE_WEIGHT * max(math.log10(ratio), 0.0)
        return loss + (_COMMANDED_WEIGHT if end in self.followed else 0.0)


def _losses(wiring: Wiring) -> _Losses:
    return _Losses(
        wiring,
        max(
            (
                b.element.capacitance_f
                for b in wiring.capacitors()
                if GROUND not in (b.first, b.second) and isinstance(b.element, Capacitor)
            ),
            default=1.0,
        ),
        frozenset(
            wiring.cluster[t.collector]
            for t in wiring.transistors.values()
            if t.collector in wiring.cluster
        ),
        frozenset(
            t.emitter
            for t in wiring.transistors.values()
            if t.collector == GROUND != t.base and t.region != "cut off"
        ),
    )


def _passive(losses: _Losses, branch: Branch) -> Iterator[tuple[Step, float]]:
    element = branch.element
    for start, end in ((branch.first, branch.second), (branch.second, branch.first)):
        if isinstance(element, Resistor):
            yield Step(start, end, element.name, "resistor"), losses.resistor(branch, end)
        elif isinstance(element, Capacitor):
            yield Step(start, end, element.name, "capacitor"), losses.capacitor(element, end)
        else:
            weight = _INDUCTOR_WEIGHT if isinstance(element, Inductor) else _DIODE_WEIGHT
            yield Step(start, end, element.name, "other"), weight


def _through(wiring: Wiring, transistor: Transistor) -> Iterator[tuple[Step, float]]:
    if is_multiplier(wiring, transistor):
        ends = transistor.collector, transistor.emitter
        for start, end in (ends, ends[::-1]):
            yield Step(start, end, transistor.name, "other"), _MULTIPLIER_WEIGHT
        return
    for (enters, leaves), weight in _THROUGH.items():
        start, end = transistor.node(enters), transistor.node(leaves)
        if leaves == "emitter" and end in wiring.shunted:
            weight += _SHUNT_WEIGHT
        yield Step(start, end, transistor.name, "transistor", enters, leaves), weight
    if transistor.family == "fet" and transistor.region == "triode":
        for enters, leaves in (("collector", "emitter"), ("emitter", "collector")):
            start, end = transistor.node(enters), transistor.node(leaves)
            yield Step(start, end, transistor.name, "channel", enters, leaves), _CHANNEL_WEIGHT


def _transformer(
    coupling: Coupling, inductors: dict[str, tuple[str, str]]
) -> Iterator[tuple[Step, float]]:
    windings = [inductors[n.casefold()] for n in coupling.inductors if n.casefold() in inductors]
    for first in windings:
        for second in windings:
            if first is not second:
                for start in first:
                    for end in second:
                        yield Step(start, end, coupling.name, "other"), _INDUCTOR_WEIGHT


def _controlled(
    wiring: Wiring, element: Element, ends: tuple[str, ...]
) -> Iterator[tuple[Step, float]]:
    for control in dict.fromkeys(control_nodes(wiring, element)):
        for end in ends:
            yield Step(control, end, element.name, "source"), _SOURCE_WEIGHT


def control_nodes(wiring: Wiring, element: Element) -> Iterator[str]:
    """Joined nodes that command a controlled or behavioural source."""
    if isinstance(element, ControlledSource):
        names: list[str] = list(element.control_nodes)
        if element.control_source:
            names.extend(wiring.sources.get(element.control_source.casefold(), ()))
    elif isinstance(element, BehaviouralSource):
        names = list(_expression_nodes(wiring, element.expression))
    for name in names:
        if name in wiring.joined:
            yield wiring.joined[name]


def _expression_nodes(wiring: Wiring, expression: Expression) -> Iterator[str]:
    waiting = [expression]
    while waiting:
        part = waiting.pop()
        if isinstance(part, NodeVoltage):
            yield part.positive
            yield part.negative
        elif isinstance(part, SourceCurrent):
            yield from wiring.sources.get(part.source.casefold(), ())
        elif isinstance(part, Call):
            waiting.extend(part.arguments)
