"""Jobs of a capacitor with one end at ground for the signal."""

from __future__ import annotations

import math

from tauledger.circuit.elements import GROUND, Capacitor
from tauledger.topology import capacitors as words
from tauledger.topology.capacitors import Place, has_inductor_to_ground, make_role, preferred
from tauledger.topology.layout import series_neighbours, spelt, touches_rail
from tauledger.topology.model import CapacitorRole
from tauledger.topology.wiring import Branch, Transistor

_SIGNAL_DISTANCE = 1.0
"""A node this far (see flow.py) from the input at most carries the signal."""
_REACH = 60
"""Nodes searched for the rail behind a filtered supply."""


def grounded_role(place: Place, branch: Branch, node: str) -> CapacitorRole:
    """The job of a capacitor from a joined node to ground, a rail or a quiet node."""
    layout = place.layout
    first, second = spelt(branch)
    if node == GROUND:
        if first == second:
            return make_role(branch, words.OTHER, f"has both ends at {first}")
        reason = f"stands from {first} to {second}, both held by sources"
        return make_role(branch, words.SUPPLY_DECOUPLING, reason)
    if node in layout.level and has_inductor_to_ground(layout, node):
        return make_role(branch, words.FILTER, f"tunes {node} together with an inductor")
    if node in layout.on_way:
        if branch.element.name in layout.path.load:
            return make_role(branch, words.SHUNT, f"is part of the load from {node} to ground")
        other = _other(branch, node)
        return make_role(branch, words.SHUNT, f"shunts the signal at {node} to {other}")
    for rule in (_at_emitter, _at_base, behind_resistor, _at_supply):
        found = rule(place, branch, node)
        if found is not None:
            return found
    if layout.flow.distance.get(node, math.inf) < _SIGNAL_DISTANCE:
        reason = f"shunts {node}, which carries the signal, to {_other(branch, node)}"
        return make_role(branch, words.SHUNT, reason)
    if node in layout.flow.distance:
        reason = f"filters: it stands from {node}, a side branch, to {_other(branch, node)}"
    else:
        reason = f"stands from {node}, where no signal comes, to {_other(branch, node)}"
    return make_role(branch, words.FILTER, reason)


def _other(branch: Branch, node: str) -> str:
    """The quiet end as the netlist spells it, in words when it is ground."""
    first, second = spelt(branch)
    far = second if branch.first == node else first
    return "ground" if far == GROUND else far


def _at_emitter(place: Place, branch: Branch, node: str) -> CapacitorRole | None:
    transistor = preferred(place, place.layout.wiring.transistors_at(node, "emitter"))
    if transistor is None:
        return None
    role = place.layout.transistors[transistor.name]
    if not role.on_path and transistor.collector == GROUND:
        reason = f"decouples {node}, which {transistor.name} feeds"
        return make_role(branch, words.SUPPLY_DECOUPLING, reason, transistor)
    return emitter_bypass(place, branch, node, transistor, "")


def emitter_bypass(
    place: Place, branch: Branch, node: str, transistor: Transistor, behind: str
) -> CapacitorRole:
    """A bypass at an emitter or source, or a peaking capacitor when it is small."""
    word = transistor.word("emitter")
    if not place.bypasses(branch):
        reason = (
            f"is small: from the {word} of {transistor.name} it lifts the gain at high "
            "frequencies only"
        )
        return make_role(branch, words.COMPENSATION, reason, transistor)
    role = words.EMITTER_BYPASS if transistor.family == "bipolar" else words.SOURCE_BYPASS
    reason = f"joins {node}, the {word} of {transistor.name}{behind}, to {_other(branch, node)}"
    return make_role(branch, role, reason, transistor)


def _at_base(place: Place, branch: Branch, node: str) -> CapacitorRole | None:
    transistor = preferred(place, place.layout.wiring.transistors_at(node, "base"))
    if transistor is None:
        return None
    if place.layout.enters_base(transistor):
        other = _other(branch, node)
        return make_role(branch, words.SHUNT, f"shunts the signal at {node} to {other}", transistor)
    return _base_bypass(branch, node, transistor, "")


def _base_bypass(branch: Branch, node: str, transistor: Transistor, behind: str) -> CapacitorRole:
    role = words.BASE_BYPASS if transistor.family == "bipolar" else words.GATE_BYPASS
    reason = (
        f"holds {node}, the {transistor.word('base')} of {transistor.name}{behind}, at "
        f"{_other(branch, node)} for the signal"
    )
    return make_role(branch, role, reason, transistor)


def behind_resistor(place: Place, branch: Branch, node: str) -> CapacitorRole | None:
    """At a node that reaches emitters only, or bases only, through resistors."""
    layout = place.layout
    wiring = layout.wiring
    if any(terminal != "collector" for _, terminal in wiring.terminals.get(node, ())):
        return None
    links = series_neighbours(wiring, node)
    neighbours = [n for n in links if n not in place.quiet or _is_controlled(place, n)]
    ends = [n for n in neighbours if wiring.transistors_at(n, "emitter")]
    emitters = tuple(t for n in ends for t in wiring.transistors_at(n, "emitter"))
    others = [n for n in neighbours if n not in ends]
    if ends and layout.on_way.isdisjoint(ends) and _are_fed(place, node, others, emitters):
        transistor = preferred(place, emitters)
        assert transistor is not None
        return emitter_bypass(place, branch, node, transistor, f" behind {links[ends[0]]}")
    if len(neighbours) != 1 or wiring.terminals.get(node):
        return None
    lone = len(wiring.at(node)) == 2
    if lone:
        found = series_to_ground(place, branch, neighbours[0])
        if found is not None:
            return found
    base = preferred(place, wiring.transistors_at(neighbours[0], "base"))
    if base is None:
        return None
    if layout.enters_base(base):
        reason = f"keeps the bias of {base.name} at {node} quiet"
        return make_role(branch, words.FILTER, reason, base)
    return _base_bypass(branch, node, base, f" behind {links[neighbours[0]]}")


def _are_fed(place: Place, node: str, others: list[str], emitters: tuple[Transistor, ...]) -> bool:
    """Whether the node feeds the others no more than the bias of bases of other transistors.

    A supply behind a filter feeds the base and the emitter of one and the same transistor.
    """
    wiring = place.layout.wiring
    own = {transistor.base for transistor in emitters}
    to_ground = sum(b.conductance_s for b in wiring.at(node) if b.far(node) == GROUND)
    return all(
        wiring.transistors_at(n, "base")
        and n not in own
        and sum(b.conductance_s for b in wiring.at(node) if b.far(node) == n) < to_ground
        for n in others
    )


def _is_controlled(place: Place, node: str) -> bool:
    """A base or an emitter stands at the node: not a supply."""
    there = place.layout.wiring.terminals.get(node, ())
    return any(terminal != "collector" for _, terminal in there)


def series_to_ground(place: Place, branch: Branch, near: str) -> CapacitorRole | None:
    """A resistor and a capacitor in series from a node to ground, in either order."""
    layout = place.layout
    if near in layout.on_way:
        reason = f"forms a network from {near} to ground with a resistor in series"
        return make_role(branch, words.FILTER, reason)
    emitter = preferred(place, layout.wiring.transistors_at(near, "emitter"))
    if emitter is not None:
        return emitter_bypass(place, branch, near, emitter, " in series with a resistor")
    if near in layout.level and series_neighbours(layout.wiring, near):
        base = preferred(place, layout.wiring.transistors_at(near, "base"))
        reason = f"grounds the lower end of the feedback divider at {near} for the signal"
        return make_role(branch, words.FEEDBACK, reason, base)
    return None


def _at_supply(place: Place, branch: Branch, node: str) -> CapacitorRole | None:
    if not _is_supply(place, node):
        return None
    reason = f"decouples {node}, a supply behind a filter, to {_other(branch, node)}"
    return make_role(branch, words.SUPPLY_DECOUPLING, reason)


def _is_supply(place: Place, node: str) -> bool:
    """Fed from a rail through resistors, inductors or diodes along nodes off the way."""
    wiring, layout = place.layout.wiring, place.layout
    seen, waiting = {node}, [node]
    while waiting and len(seen) < _REACH:
        here = waiting.pop()
        if touches_rail(wiring, here):
            return True
        for branch in wiring.at(here):
            far = branch.far(here)
            if (
                not isinstance(branch.element, Capacitor)
                and far in wiring.shunted
                and far not in layout.level
                and far not in seen
            ):
                seen.add(far)
                waiting.append(far)
    return False
