"""The flat circuit: every subcircuit expanded, every parameter a number, every model resolved.

Nodes are strings in the spelling of their first appearance; ground is always ``"0"``. Inside a
subcircuit instance names and nodes carry the path, as in ``X1.Q1`` and ``X1.base``. Values are in
SI base units. Model and instance parameter names are lower case, as SPICE defines them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import field

from tauledger.netlist.expression import Expression
from tauledger.problems import Problem, SourceSpan
from tauledger.records import dataclass

GROUND = "0"


@dataclass(frozen=True, slots=True)
class Model:
    """A ``.model`` card: ``kind`` is the lower-case type, such as ``npn``, ``d``, ``njf``."""

    name: str
    kind: str
    parameters: Mapping[str, float]
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class Element:
    """What every element has: its flat name, its nodes in SPICE order, and where it stands."""

    name: str
    nodes: tuple[str, ...]
    span: SourceSpan


@dataclass(frozen=True, slots=True)
class Resistor(Element):
    resistance_ohm: float


@dataclass(frozen=True, slots=True)
class Capacitor(Element):
    capacitance_f: float
    initial_v: float | None = None
    model_name: str = ""


@dataclass(frozen=True, slots=True)
class Inductor(Element):
    inductance_h: float


@dataclass(frozen=True, slots=True)
class Coupling(Element):
    """Mutual inductance (K element); ``nodes`` is empty, ``inductors`` are flat names."""

    inductors: tuple[str, ...]
    coefficient: float


@dataclass(frozen=True, slots=True)
class IndependentSource(Element):
    """``dc`` in V or A at time zero; ``ac`` is the phasor, or None when the source has none."""

    dc: float
    ac: complex | None
    time_function: str = ""
    """Lower-case name of the transient function (``sin``, ``pulse``, …), or empty."""


@dataclass(frozen=True, slots=True)
class VoltageSource(IndependentSource):
    pass


@dataclass(frozen=True, slots=True)
class CurrentSource(IndependentSource):
    """Positive current flows from ``nodes[0]`` through the source to ``nodes[1]``."""


@dataclass(frozen=True, slots=True)
class ControlledSource(Element):
    """Linear E, F, G or H source."""

    letter: str
    """``E`` (V from V), ``F`` (I from I), ``G`` (I from V), ``H`` (V from I)."""
    gain: float
    control_nodes: tuple[str, ...] = ()
    """For E and G: positive and negative control node."""
    control_source: str = ""
    """For F and H: flat name of the voltage source whose current controls."""


@dataclass(frozen=True, slots=True)
class BehaviouralSource(Element):
    """B source, and POLY, VALUE and TABLE forms of E, F, G and H rewritten as one.

    ``expression`` has every parameter and user function already put in; its only free variables
    are time (0), node voltages and source currents, named as in the flat circuit.
    """

    output: str
    """``voltage`` or ``current``."""
    expression: Expression


@dataclass(frozen=True, slots=True)
class SemiconductorDevice(Element):
    model: Model
    parameters: Mapping[str, float]
    """Instance parameters such as ``area``, ``m``, ``w``, ``l``, ``temp``, ``dtemp``."""


@dataclass(frozen=True, slots=True)
class Diode(SemiconductorDevice):
    """Nodes: anode, cathode."""


@dataclass(frozen=True, slots=True)
class BipolarTransistor(SemiconductorDevice):
    """Nodes: collector, base, emitter, and substrate when given."""


@dataclass(frozen=True, slots=True)
class JunctionFet(SemiconductorDevice):
    """Nodes: drain, gate, source."""


@dataclass(frozen=True, slots=True)
class MosFet(SemiconductorDevice):
    """Nodes: drain, gate, source, and bulk (three nodes only for a vertical power MOSFET)."""


@dataclass(frozen=True, slots=True)
class Unread(Element):
    """An element whose model or value cannot be read; ``nodes`` are all that it may touch."""

    problems: tuple[Problem, ...]
    """Why not: errors, wherever the element belongs to the circuit that is analysed."""


@dataclass(frozen=True, slots=True)
class Circuit:
    """A flat circuit ready for the equations. Element names are unique ignoring letter case."""

    title: str
    path: str
    elements: tuple[Element, ...]
    temperature_c: float = 27.0
    nominal_temperature_c: float = 27.0
    gmin: float = 1e-12
    output_hints: tuple[tuple[str, ...], ...] = ()
    """Node names, or pairs of them, asked for by .print, .probe, .plot, .save, .meas and .tf."""
    ac_range_hz: tuple[float, float] | None = None
    node_sets: Mapping[str, float] = field(default_factory=dict)
    initial_conditions: Mapping[str, float] = field(default_factory=dict)
    problems: tuple[Problem, ...] = ()
    """Warnings and notes met on the way; an error would have been raised."""
    attached: frozenset[str] = frozenset()
    """Elements that the configuration put in: supplies, source and load, no parts of the board."""
    unread: tuple[Unread, ...] = ()
    """In none of ``elements``; empty once :func:`tauledger.circuit.islands.restrict` has passed."""

    @property
    def nodes(self) -> tuple[str, ...]:
        """Every node but ground, in order of first appearance."""
        seen: dict[str, None] = {}
        for element in self.elements:
            for node in element.nodes:
                seen.setdefault(node)
        seen.pop(GROUND, None)
        return tuple(seen)
