"""The flat circuit as recognition looks at it: nodes that are one for the signal, and their parts.

Voltage sources are short circuits for the signal, so nodes they join are one node here; every
node so joined to ground is *held* (AC ground). The driven source alone keeps its two nodes apart.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

from tauledger.bias.point import DevicePoint, OperatingPoint
from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    BipolarTransistor,
    Capacitor,
    Circuit,
    ControlledSource,
    Diode,
    Element,
    IndependentSource,
    Inductor,
    JunctionFet,
    MosFet,
    Resistor,
    VoltageSource,
)

TwoTerminal = Resistor | Capacitor | Inductor | Diode

_TERMINALS = {
    "bipolar": ("collector", "base", "emitter"),
    "fet": ("drain", "gate", "source"),
}
_COUPLING_SHARE = 1e-3
"""Capacitors below this share of the largest off ground are not taken for coupling."""
_ASSUMED_TRANSCONDUCTANCE_S = 10e-3
_ASSUMED_INPUT_S = 0.1e-3
_ASSUMED_OUTPUT_S = 10e-6
"""Used only to weigh one route against another where no operating point says better."""


@dataclass(frozen=True, slots=True)
class Transistor:
    """A transistor with its nodes joined as in :class:`Wiring`.

    ``collector``, ``base`` and ``emitter`` stand for drain, gate and source too.
    """

    name: str
    family: str
    """``bipolar`` or ``fet``."""
    polarity: str
    """``n`` or ``p``."""
    collector: str
    base: str
    emitter: str
    region: str
    transconductance_s: float
    input_s: float
    """Conductance from base to emitter."""
    output_s: float
    """Conductance from collector to emitter."""

    @property
    def nodes(self) -> tuple[str, str, str]:
        return (self.collector, self.base, self.emitter)

    def node(self, terminal: str) -> str:
        """Node at ``collector``, ``base`` or ``emitter``."""
        return self.nodes[_TERMINALS["bipolar"].index(terminal)]

    def word(self, terminal: str) -> str:
        """The device's own word for ``collector``, ``base`` or ``emitter``."""
        return _TERMINALS[self.family][_TERMINALS["bipolar"].index(terminal)]


@dataclass(frozen=True, slots=True)
class Branch:
    """A resistor, capacitor, inductor or diode between two joined nodes."""

    element: TwoTerminal
    first: str
    second: str

    def far(self, node: str) -> str:
        return self.second if node == self.first else self.first

    @property
    def conductance_s(self) -> float:
        """Of a resistor, in S; zero for the rest."""
        if isinstance(self.element, Resistor):
            return 1.0 / max(abs(self.element.resistance_ohm), 1e-6)
        return 0.0


@dataclass(frozen=True, slots=True)
class Wiring:
    circuit: Circuit
    joined: Mapping[str, str]
    """Every node to the name that stands for it; held nodes map to ground."""
    held: frozenset[str]
    """Nodes, in the circuit's spelling, at ground for the signal; ground included."""
    branches: Mapping[str, tuple[Branch, ...]]
    """Joined node to the two-terminal parts there; ground included."""
    transistors: Mapping[str, Transistor]
    terminals: Mapping[str, tuple[tuple[Transistor, str], ...]]
    """Joined node to the transistor terminals there."""
    conductance_s: Mapping[str, float]
    """Joined node to the rough conductance from it to everywhere else, in S."""
    cluster: Mapping[str, str]
    """Joined node to the name of the nodes it is coupled to by capacitors off ground."""
    cluster_conductance_s: Mapping[str, float]
    """Joined node to the conductance from all nodes of its cluster, in S."""
    shunted: frozenset[str]
    """Joined nodes with a capacitor to ground or a held node."""
    fed: frozenset[str]
    """Joined nodes at the output of a source of any kind, ground left out."""
    sources: Mapping[str, tuple[str, ...]]
    """Voltage source, by name in lower case, to its joined nodes."""

    def at(self, node: str) -> tuple[Branch, ...]:
        return self.branches.get(node, ())

    def capacitors(self) -> Iterator[Branch]:
        for element in self.circuit.elements:
            if isinstance(element, Capacitor):
                yield Branch(element, *(self.joined[node] for node in element.nodes[:2]))

    def transistors_at(self, node: str, terminal: str) -> tuple[Transistor, ...]:
        return tuple(t for t, where in self.terminals.get(node, ()) if where == terminal)


def wire(
    circuit: Circuit,
    driven: str,
    preferred: tuple[str, ...] = (),
    point: OperatingPoint | None = None,
) -> Wiring:
    """Join nodes and sort the parts; ``preferred`` nodes lend their name to the ones they join."""
    joined = _join(circuit, driven, preferred)
    branches: dict[str, list[Branch]] = {}
    terminals: dict[str, list[tuple[Transistor, str]]] = {}
    transistors: dict[str, Transistor] = {}
    for element in circuit.elements:
        if isinstance(element, TwoTerminal):
            branch = Branch(element, joined[element.nodes[0]], joined[element.nodes[1]])
            for node in {branch.first, branch.second}:
                branches.setdefault(node, []).append(branch)
        elif isinstance(element, BipolarTransistor | JunctionFet | MosFet):
            transistor = _transistor(element, joined, point)
            transistors[element.name] = transistor
            for terminal, node in zip(_TERMINALS["bipolar"], transistor.nodes, strict=True):
                terminals.setdefault(node, []).append((transistor, terminal))
    conductance = {
        node: _conductance(node, branches, terminals) for node in {*branches, *terminals}
    }
    cluster = _clusters(branches)
    shunted = frozenset(
        branch.far(GROUND)
        for branch in branches.get(GROUND, ())
        if isinstance(branch.element, Capacitor)
    )
    _lift_inputs(conductance, _sum_by_cluster(conductance, cluster), shunted, transistors.values())
    return Wiring(
        circuit,
        joined,
        frozenset(node for node, name in joined.items() if name == GROUND),
        {node: tuple(found) for node, found in branches.items()},
        transistors,
        {node: tuple(found) for node, found in terminals.items()},
        conductance,
        cluster,
        _sum_by_cluster(conductance, cluster),
        shunted,
        frozenset(
            joined[node]
            for element in circuit.elements
            if isinstance(element, IndependentSource | ControlledSource | BehaviouralSource)
            for node in element.nodes
        )
        - {GROUND},
        {
            element.name.casefold(): tuple(joined[node] for node in element.nodes)
            for element in circuit.elements
            if isinstance(element, VoltageSource)
        },
    )


def _clusters(branches: Mapping[str, list[Branch]]) -> dict[str, str]:
    """Nodes joined by capacitors off ground, the far smaller ones left out."""
    coupling = {
        branch.element.name: (branch.element.capacitance_f, branch)
        for node, found in branches.items()
        for branch in found
        if isinstance(branch.element, Capacitor) and GROUND not in (branch.first, branch.second)
    }
    least = _COUPLING_SHARE * max((farads for farads, _ in coupling.values()), default=0.0)
    union = Union()
    for farads, branch in coupling.values():
        if farads >= least:
            union.join(branch.first, branch.second)
    return {node: union.find(node) for node in branches}


def _sum_by_cluster(
    conductance: Mapping[str, float], cluster: Mapping[str, str]
) -> dict[str, float]:
    total: dict[str, float] = {}
    for node, name in cluster.items():
        total[name] = total.get(name, 0.0) + conductance[node]
    return {node: total[name] for node, name in cluster.items()}


def _conductance(
    node: str,
    branches: Mapping[str, list[Branch]],
    terminals: Mapping[str, list[tuple[Transistor, str]]],
) -> float:
    total = sum(branch.conductance_s for branch in branches.get(node, ()))
    for transistor, terminal in terminals.get(node, ()):
        if terminal == "emitter":
            total += transistor.transconductance_s
        elif terminal == "base":
            total += transistor.input_s
        else:
            total += transistor.output_s
    return total


def _lift_inputs(
    conductance: dict[str, float],
    total: Mapping[str, float],
    shunted: frozenset[str],
    transistors: Iterable[Transistor],
) -> None:
    """Lower what a base draws by the loop gain round an emitter that is free to follow it."""
    for transistor in transistors:
        emitter = transistor.emitter
        if emitter in {GROUND, transistor.base} or emitter in shunted:
            continue
        below = max(total.get(emitter, 0.0) - transistor.transconductance_s, 1e-9)
        loop = transistor.transconductance_s / below
        conductance[transistor.base] -= transistor.input_s * loop / (1.0 + loop)


class Union:
    """Disjoint sets of nodes; the first of two joined lends its name."""

    def __init__(self) -> None:
        self._parent: dict[str, str] = {}

    def find(self, node: str) -> str:
        parent = self._parent
        parent.setdefault(node, node)
        while parent[node] != node:
            parent[node] = parent[parent[node]]
            node = parent[node]
        return node

    def join(self, first: str, second: str) -> None:
        self._parent[self.find(second)] = self.find(first)


def _join(circuit: Circuit, driven: str, preferred: tuple[str, ...]) -> dict[str, str]:
    union = Union()
    rank = {node: index for index, node in enumerate(dict.fromkeys((GROUND, *preferred)))}
    nodes = {GROUND: None}
    kept = {driven, *_sensing(circuit)}
    for element in circuit.elements:
        nodes.update(dict.fromkeys(element.nodes))
        if _is_short(element) and element.name not in kept:
            ends = [union.find(node) for node in element.nodes[:2]]
            ends.sort(key=lambda node: rank.get(node, len(rank)))
            union.join(ends[0], ends[1])
    return {node: union.find(node) for node in nodes}


def _sensing(circuit: Circuit) -> Iterator[str]:
    """Sources of 0 V whose current controls another source: they carry signal, even to ground."""
    controls = {
        e.control_source.casefold() for e in circuit.elements if isinstance(e, ControlledSource)
    }
    for element in circuit.elements:
        is_meter = isinstance(element, VoltageSource) and element.dc == 0.0
        if is_meter and element.name.casefold() in controls:
            yield element.name


def _is_short(element: Element) -> bool:
    if isinstance(element, Resistor):
        return element.resistance_ohm == 0.0
    return isinstance(element, VoltageSource)


def _transistor(
    element: BipolarTransistor | JunctionFet | MosFet,
    joined: Mapping[str, str],
    point: OperatingPoint | None,
) -> Transistor:
    collector, base, emitter = (joined[node] for node in element.nodes[:3])
    device = point.devices.get(element.name) if point is not None else None
    kind = element.model.kind
    family = "bipolar" if isinstance(element, BipolarTransistor) else "fet"
    polarity = "p" if kind.startswith("p") or kind in {"lpnp", "vdmosp"} else "n"
    if family == "fet" and _figure(device, "vds", 0.0) * (-1 if polarity == "p" else 1) < 0.0:
        # A channel is symmetrical: the end that works as source is the source.
        collector, emitter = emitter, collector
    input_ohm, output_ohm = _figure(device, "r_pi", 0.0), _figure(device, "r_o", 0.0)
    return Transistor(
        element.name,
        family,
        polarity,
        collector,
        base,
        emitter,
        device.region if device is not None else "",
        max(_figure(device, "gm", _ASSUMED_TRANSCONDUCTANCE_S), 1e-9),
        0.0 if family == "fet" else _inverse(input_ohm, _ASSUMED_INPUT_S),
        _inverse(output_ohm, _ASSUMED_OUTPUT_S),
    )


def _inverse(resistance_ohm: float, default_s: float) -> float:
    return 1.0 / resistance_ohm if resistance_ohm > 0.0 else default_s


def _figure(device: DevicePoint | None, symbol: str, default: float) -> float:
    if device is None or symbol not in device.values:
        return default
    value = float(device.values[symbol].flat[0])
    return value if math.isfinite(value) else default
