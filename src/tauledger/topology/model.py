"""What each part does, by recognition on the graph: plain results."""

from __future__ import annotations

from collections.abc import Mapping

from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class SignalPath:
    """From which source to which node the signal is followed."""

    source: str
    """Name of the independent source that drives the path."""
    source_is_current: bool
    input_node: str
    """Where the amplifier begins: after the source's own series resistor when it has one."""
    source_resistor: str
    """Name of that resistor, or empty."""
    output_node: str
    output_reference: str
    """``"0"``, or the second node of a differential output."""
    load: tuple[str, ...]
    """Elements that are the load at the output (not part of the output resistance)."""
    notes: tuple[str, ...] = ()
    """What the choice passed over: nodes the netlist asks to see that cannot be the output."""


@dataclass(frozen=True, slots=True)
class TransistorRole:
    """What one transistor is there for."""

    name: str
    configuration: str
    """See :mod:`tauledger.topology.transistors` for the list of words."""
    on_path: bool
    input_terminal: str
    """``base``, ``emitter``, ``gate`` …; empty when the signal does not pass."""
    output_terminal: str
    companions: tuple[str, ...] = ()
    """Transistors it works with: mirror reference, other half of a pair, cascode partner."""


@dataclass(frozen=True, slots=True)
class StageOutline:
    """Transistors that act as one stage, and the nodes between which its gain is taken."""

    transistors: tuple[str, ...]
    configuration: str
    input_node: str
    output_node: str


@dataclass(frozen=True, slots=True)
class CapacitorRole:
    """What one capacitor is there for, and the sentence that says why."""

    name: str
    role: str
    """See :mod:`tauledger.topology.capacitors` for the list of words."""
    reason: str
    transistor: str = ""
    """The transistor it serves, where there is one."""


@dataclass(frozen=True, slots=True)
class Topology:
    """What recognition found for one signal path; every transistor and capacitor has a role."""

    path: SignalPath
    path_nodes: tuple[str, ...]
    """Nodes the signal passes, input to output."""
    transistors: Mapping[str, TransistorRole]
    stages: tuple[StageOutline, ...]
    capacitors: Mapping[str, CapacitorRole]
    notes: tuple[str, ...] = ()
