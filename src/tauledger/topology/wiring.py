"""The circuit as the graph that recognition walks: nodes that are one for the signal, and parts.

Voltage sources are short circuits for the signal, so nodes they join are one node here; every
node so joined to ground is *held* (AC ground). The driven source alone keeps its two nodes apart.
Two-terminal parts are the edges of the graph; a transistor stands at its nodes as three terminals,
and becomes edges with a direction in flow.py.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping

import networkx as nx

from tauledger.bias.point import DevicePoint, OperatingPoint
from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    BipolarTransistor,
    Capacitor,
    Circuit,
    ControlledSource,
    Diode,
    IndependentSource,
    Inductor,
    JunctionFet,
    MosFet,
    Resistor,
    VoltageSource,
)
from tauledger.records import dataclass

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
        """Joined nodes of collector, base and emitter."""
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
        """The other end; ``node`` itself when both ends are there."""
        return self.second if node == self.first else self.first

    @property
    def conductance_s(self) -> float:
        """Of a resistor, in S; zero for the rest."""
        if isinstance(self.element, Resistor):
            return 1.0 / max(abs(self.element.resistance_ohm), 1e-6)
        return 0.0


@dataclass(frozen=True, slots=True)
class Wiring:
    """What every rule of recognition looks at: the graph of the parts, and the transistors on it.

    Figures in S are rough: they weigh one route for the signal against another.
    """

    circuit: Circuit
    joined: Mapping[str, str]
    """Every node to the name that stands for it; held nodes map to ground."""
    held: frozenset[str]
    """Nodes, in the circuit's spelling, at ground for the signal; ground included."""
    graph: nx.MultiGraph
    """Joined nodes, ground included; each two-terminal part an edge, keyed by its name, with the
    attribute ``branch``."""
    branches: Mapping[str, tuple[Branch, ...]]
    """Joined node to the edges there; at hand, as a node with very many of them is asked often."""
    transistors: Mapping[str, Transistor]
    terminals: Mapping[str, tuple[tuple[Transistor, str], ...]]
    """Joined node to the transistor terminals there."""
    conductance_s: Mapping[str, float]
    """Joined node to the rough conductance from it to everywhere else, in S."""
    cluster: Mapping[str, int]
    """Joined node to the number of the nodes it is coupled to by capacitors off ground."""
    cluster_conductance_s: Mapping[str, float]
    """Joined node to the conductance from all nodes of its cluster, in S."""
    shunted: frozenset[str]
    """Joined nodes with a capacitor to ground or a held node."""
    fed: frozenset[str]
    """Joined nodes at the output of a source of any kind, ground left out."""
    sources: Mapping[str, tuple[str, ...]]
    """Voltage source, by name in lower case, to its joined nodes."""

    def at(self, node: str) -> tuple[Branch, ...]:
        """The two-terminal parts at a joined node."""
        return self.branches.get(node, ())

    def between(self, one: str, other: str) -> Iterator[Branch]:
        """The parts that lead straight from one joined node to the other."""
        for edge in (self.graph.get_edge_data(one, other) or {}).values():
            yield edge["branch"]

    def capacitors(self) -> Iterator[Branch]:
        """Every capacitor, in the order of the netlist."""
        for element in self.circuit.elements:
            if isinstance(element, Capacitor):
                yield Branch(element, *(self.joined[node] for node in element.nodes[:2]))

    def transistors_at(self, node: str, terminal: str) -> tuple[Transistor, ...]:
        """Those with their ``collector``, ``base`` or ``emitter`` at a joined node."""
        return tuple(t for t, where in self.terminals.get(node, ()) if where == terminal)


def wire(
    circuit: Circuit,
    driven: str,
    preferred: tuple[str, ...] = (),
    point: OperatingPoint | None = None,
) -> Wiring:
    """Join nodes and put the parts between them; ``driven`` names the source kept apart.

    ``preferred`` nodes lend their name to the ones they join. Without an operating point typical
    figures stand for a transistor's own.
    """
    joined = _join(circuit, driven, preferred)
    graph = _part_graph(circuit, joined)
    branches = {
        node: tuple(edge["branch"] for edges in there.values() for edge in edges.values())
        for node, there in graph.adjacency()
    }
    transistors = {
        element.name: _transistor(element, joined, point)
        for element in circuit.elements
        if isinstance(element, BipolarTransistor | JunctionFet | MosFet)
    }
    terminals: dict[str, list[tuple[Transistor, str]]] = {}
    for transistor in transistors.values():
        for terminal, node in zip(_TERMINALS["bipolar"], transistor.nodes, strict=True):
            terminals.setdefault(node, []).append((transistor, terminal))
    conductance = {
        node: _conductance(node, branches, terminals)
        for node in dict.fromkeys((*branches, *terminals))
    }
    cluster = _clusters(graph)
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
        graph,
        branches,
        transistors,
        {node: tuple(found) for node, found in terminals.items()},
        conductance,
        cluster,
        _sum_by_cluster(conductance, cluster),
        shunted,
        _fed(circuit, joined),
        {
            element.name.casefold(): tuple(joined[node] for node in element.nodes)
            for element in circuit.elements
            if isinstance(element, VoltageSource)
        },
    )


def _part_graph(circuit: Circuit, joined: Mapping[str, str]) -> nx.MultiGraph:
    graph = nx.MultiGraph()
    for element in circuit.elements:
        if isinstance(element, TwoTerminal):
            branch = Branch(element, joined[element.nodes[0]], joined[element.nodes[1]])
            graph.add_edge(branch.first, branch.second, key=element.name, branch=branch)
    return graph


def _fed(circuit: Circuit, joined: Mapping[str, str]) -> frozenset[str]:
    sources = IndependentSource | ControlledSource | BehaviouralSource
    outputs = (e.nodes for e in circuit.elements if isinstance(e, sources))
    return frozenset(joined[node] for nodes in outputs for node in nodes) - {GROUND}


def _clusters(graph: nx.MultiGraph) -> dict[str, int]:
    """Nodes joined by capacitors off ground, the far smaller ones left out."""
    coupling = [
        (branch.element.capacitance_f, branch)
        for *_, branch in graph.edges(data="branch")
        if isinstance(branch.element, Capacitor) and GROUND not in (branch.first, branch.second)
    ]
    least = _COUPLING_SHARE * max((farads for farads, _ in coupling), default=0.0)
    coupled = nx.Graph()
    coupled.add_nodes_from(graph)
    coupled.add_edges_from((b.first, b.second) for farads, b in coupling if farads >= least)
    return {
        node: number
        for number, nodes in enumerate(nx.connected_components(coupled))
        for node in nodes
    }


def _sum_by_cluster(
    conductance: Mapping[str, float], cluster: Mapping[str, int]
) -> dict[str, float]:
    total: dict[int, float] = {}
    for node, value in conductance.items():
        if node in cluster:
            total[cluster[node]] = total.get(cluster[node], 0.0) + value
    return {node: total[number] for node, number in cluster.items()}


def _conductance(
    node: str,
    branches: Mapping[str, tuple[Branch, ...]],
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


def _join(circuit: Circuit, driven: str, preferred: tuple[str, ...]) -> dict[str, str]:
    """Every node to the name of those that voltage sources join it to.

    That is ground, else the first of the preferred ones, else the circuit's own first.
    """
    kept = {driven, *_sensing(circuit)}
    joints = nx.Graph()
    joints.add_edges_from(
        element.nodes
        for element in circuit.elements
        if isinstance(element, VoltageSource) and element.name not in kept
    )
    nodes = (GROUND, *circuit.nodes)
    rank = {node: place for place, node in enumerate(dict.fromkeys((GROUND, *preferred, *nodes)))}
    names = {node: node for node in nodes}
    for joined in nx.connected_components(joints):
        names.update(dict.fromkeys(joined, min(joined, key=rank.__getitem__)))
    return names


def _sensing(circuit: Circuit) -> Iterator[str]:
    """Sources of 0 V whose current controls another source: they carry signal, even to ground."""
    controls = {
        e.control_source.casefold() for e in circuit.elements if isinstance(e, ControlledSource)
    }
    for element in circuit.elements:
        is_meter = isinstance(element, VoltageSource) and element.dc == 0.0
        if is_meter and element.name.casefold() in controls:
            yield element.name


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
