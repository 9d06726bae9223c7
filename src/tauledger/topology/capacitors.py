"""The jobs a capacitor can have, and when its size decides between two of them.

Roles are read from what a capacitor connects (grounded.py, floating.py). Size decides only where
the same place serves two jobs: an emitter capacitor that is a bypass or a peaking capacitor, a
feedback capacitor that blocks direct voltage or compensates. Size is then the corner with the
resistance around it, against the corners of the coupling and shunt capacitors of the same circuit.
The words are the trade's own (common practice, no source).
"""

from __future__ import annotations

import math
from collections.abc import Mapping

from tauledger.circuit.elements import GROUND, Capacitor, Inductor
from tauledger.records import dataclass
from tauledger.topology.layout import Layout
from tauledger.topology.model import CapacitorRole
from tauledger.topology.wiring import Branch, Transistor

INPUT_COUPLING = "input coupling"
INTERSTAGE_COUPLING = "interstage coupling"
OUTPUT_COUPLING = "output coupling"
EMITTER_BYPASS = "emitter bypass"
SOURCE_BYPASS = "source bypass"
BASE_BYPASS = "base bypass"
GATE_BYPASS = "gate bypass"
SUPPLY_DECOUPLING = "supply decoupling"
FEEDBACK = "feedback"
COMPENSATION = "compensation"
SHUNT = "shunt"
BOOTSTRAP = "bootstrap"
FILTER = "filter"
OTHER = "other"

_LONE_SPAN = 3e3
"""With only one kind of neighbour to compare with, in corner ratio: 3.5 decades."""
_BYPASS_SHARE = 0.1
"""From this share of the smallest coupling capacitor upwards an emitter capacitor is a bypass."""
_LARGE_F = 10e-9
"""With nothing to compare with, a capacitor from this size upwards is large."""


@dataclass(frozen=True, slots=True)
class Place:
    """What the rules look at besides the capacitor itself."""

    layout: Layout
    coupling: Mapping[str, tuple[int, str, str]]
    """Capacitors the signal passes: number of stages before it, and nodes in its direction."""
    threshold_hz: float
    """Corners below are those of large capacitors; 0 when there is nothing to compare with."""
    quiet: frozenset[str]
    """Nodes at ground for the signal by way of a bypass, decoupling or large filter capacitor."""
    filtered: frozenset[str]
    """Those of :attr:`quiet` that a filter capacitor alone makes so."""
    least_coupling_f: float
    """Smallest of the coupling capacitors the signal passes; infinite when it passes none."""

    def is_large(self, branch: Branch) -> bool:
        """Whether its corner lies with those of the coupling capacitors of the circuit."""
        if self.threshold_hz > 0.0:
            conductance_s = self.layout.wiring.cluster_conductance_s
            return _corner_hz(self.layout, branch, conductance_s) < self.threshold_hz
        return capacitance_f(branch) >= _LARGE_F

    def bypasses(self, branch: Branch) -> bool:
        """Whether a capacitor at an emitter is large: the gain rises from below the band.

        It rises from the corner with the emitter's own resistors, whatever the transistor does.
        """
        if capacitance_f(branch) >= _BYPASS_SHARE * self.least_coupling_f:
            return True
        if self.threshold_hz == 0.0:
            return self.is_large(branch)
        wiring = self.layout.wiring
        own = {
            node: sum(b.conductance_s for b in wiring.at(node))
            or wiring.cluster_conductance_s.get(node, 0.0)
            for node in (branch.first, branch.second)
        }
        return _corner_hz(self.layout, branch, own) < self.threshold_hz


def make_place(layout: Layout, branches: list[Branch]) -> Place:
    """Coupling capacitors and the size that parts large from small; no quiet node yet."""
    coupling = _coupling(layout)
    passed = [capacitance_f(b) for b in branches if b.element.name in coupling]
    return Place(
        layout,
        coupling,
        _threshold(layout, branches, coupling),
        frozenset(),
        frozenset(),
        min(passed, default=math.inf),
    )


def _coupling(layout: Layout) -> dict[str, tuple[int, str, str]]:
    found: dict[str, tuple[int, str, str]] = {}
    passed = 0
    last_steps = {stage.passed[-1] for stage in layout.stages}
    for step in layout.flow.steps:
        if step.kind == "capacitor":
            found[step.part] = (passed, step.start, step.end)
        elif step in last_steps:
            passed += 1
    return found


def _threshold(layout: Layout, branches: list[Branch], coupling: Mapping[str, object]) -> float:
    """Corner that parts large from small: the middle, in decades, of those known by structure."""
    wiring = layout.wiring
    low = [
        _corner_hz(layout, b, wiring.conductance_s) for b in branches if b.element.name in coupling
    ]
    high = [
        _corner_hz(layout, b, wiring.cluster_conductance_s)
        for b in branches
        if GROUND in (b.first, b.second)
        and b.far(GROUND) in layout.on_way
        and not has_inductor_to_ground(layout, b.far(GROUND))
    ]
    if low and high:
        return math.sqrt(max(low) * max(min(high), max(low)))
    if low:
        return max(low) * _LONE_SPAN
    return min(high) / _LONE_SPAN if high else 0.0


def capacitance_f(branch: Branch) -> float:
    """In F; zero for any other part."""
    return branch.element.capacitance_f if isinstance(branch.element, Capacitor) else 0.0


def _corner_hz(layout: Layout, branch: Branch, conductance_s: Mapping[str, float]) -> float:
    # A voltage source that drives a node leaves no resistance there.
    stiff = {GROUND, *layout.wiring.sources.get(layout.path.source.casefold(), ())}
    resistance = sum(
        1.0 / max(conductance_s.get(node, 0.0), 1e-9)
        for node in (branch.first, branch.second)
        if node not in stiff
    )
    farads = max(abs(capacitance_f(branch)), 1e-18)
    return 1.0 / (2.0 * math.pi * farads * max(resistance, 1e-3))


def make_role(
    branch: Branch, role: str, reason: str, transistor: Transistor | None = None
) -> CapacitorRole:
    """A role whose reason is a sentence that begins with the capacitor's name."""
    name = transistor.name if transistor is not None else ""
    return CapacitorRole(branch.element.name, role, f"{branch.element.name} {reason}.", name)


def preferred(place: Place, found: tuple[Transistor, ...]) -> Transistor | None:
    """Of several transistors at a node, one the signal passes."""
    return next(
        (t for t in found if place.layout.transistors[t.name].on_path), found[0] if found else None
    )


def has_inductor_to_ground(layout: Layout, node: str) -> bool:
    """Whether an inductor leads from a joined node to ground or a held node."""
    there = layout.wiring.between(node, GROUND)
    return any(isinstance(branch.element, Inductor) for branch in there)
