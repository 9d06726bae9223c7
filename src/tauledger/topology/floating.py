"""Jobs of a capacitor with neither end at ground for the signal."""

from __future__ import annotations

from collections.abc import Iterator

from tauledger.circuit.elements import GROUND, Capacitor, Diode, Inductor, Resistor
from tauledger.topology import capacitors as words
from tauledger.topology.capacitors import Place, make_role, preferred
from tauledger.topology.grounded import emitter_bypass, grounded_role, series_to_ground
from tauledger.topology.layout import Layout, series_neighbours, spelt
from tauledger.topology.model import CapacitorRole
from tauledger.topology.multiplier import bridged_multiplier
from tauledger.topology.transistors import DIFFERENTIAL_PAIR
from tauledger.topology.wiring import Branch, Transistor

_REACH = 60
"""Nodes searched round a capacitor's end for the parts of the way it serves."""


def floating_role(place: Place, branch: Branch) -> CapacitorRole:
    """The job of a capacitor between two joined nodes off ground."""
    first, second = spelt(branch)
    if branch.first == branch.second:
        return make_role(branch, words.OTHER, f"has both ends on one node, {first}")
    parallel = _bridged_by(place.layout, branch)
    if isinstance(parallel, Inductor):
        reason = f"tunes with {parallel.name} between {first} and {second}"
        return make_role(branch, words.FILTER, reason)
    multiplier = bridged_multiplier(place.layout.wiring, branch)
    if multiplier is not None:
        reason = f"leads the signal past {multiplier.name}, a VBE multiplier"
        return make_role(branch, words.INTERSTAGE_COUPLING, reason, multiplier)
    halves = _emitters(place.layout, branch)
    if halves and place.layout.transistors[halves[0].name].configuration == DIFFERENTIAL_PAIR:
        return emitter_bypass(place, branch, halves[0].emitter, halves[0], "")
    if branch.element.name in place.coupling and parallel is None:
        if _has_detour(place, branch):
            reason = f"shapes the response: resistors lead round it from {first} to {second}"
            return make_role(branch, words.FILTER, reason)
        return _on_the_way(place, branch)
    ways = ((branch.first, branch.second), (branch.second, branch.first))
    for near, far in ways:
        resistor = _resistor_to_ground(place.layout, branch, near)
        if resistor is not None and not _is_load(place, branch, far, resistor):
            found = series_to_ground(place, branch, far)
            if found is not None:
                return found
    for near, far in ways:
        if near in place.quiet and far not in place.quiet:
            return grounded_role(place, branch, far)
    return _between(place, branch, parallel)


def _bridged_by(layout: Layout, branch: Branch) -> Resistor | Inductor | Diode | None:
    for other in layout.wiring.between(branch.first, branch.second):
        if not isinstance(other.element, Capacitor):
            return other.element
    return None


def _resistor_to_ground(layout: Layout, branch: Branch, node: str) -> Branch | None:
    """The resistor to ground that alone continues the capacitor at this end."""
    there = layout.wiring.at(node)
    if len(there) != 2 or node in layout.wiring.terminals or node in layout.wiring.fed:
        return None
    other = there[0] if there[1].element is branch.element else there[1]
    is_grounded = isinstance(other.element, Resistor) and other.far(node) == GROUND
    return other if is_grounded else None


def _is_load(place: Place, branch: Branch, node: str, resistor: Branch) -> bool:
    """Whether the resistor behind the capacitor is driven by the node, not part of its network.

    On the way of the signal a load has a large capacitor; at an emitter off the way (a second
    output) it has more resistance than the emitter's own resistors.
    """
    layout = place.layout
    if node in layout.on_way:
        return place.is_large(branch)
    own = sum(b.conductance_s for b in layout.wiring.at(node))
    return node not in place.quiet and resistor.conductance_s < own


def _has_detour(place: Place, branch: Branch) -> bool:
    """Whether resistors lead from one end to the other along nodes off the way."""
    layout = place.layout
    seen, waiting = {branch.first, GROUND}, [branch.first]
    while waiting and len(seen) < _REACH:
        here = waiting.pop()
        for far in series_neighbours(layout.wiring, here):
            if far == branch.second:
                return True
            is_supply = far in place.quiet and far not in place.filtered
            if not is_supply and far not in seen and far not in layout.level:
                seen.add(far)
                waiting.append(far)
    return False


def _on_the_way(place: Place, branch: Branch) -> CapacitorRole:
    passed, start, end = place.coupling[branch.element.name]
    stages = place.layout.stages
    if passed == 0:
        to = f" of {stages[0].members[0]}" if stages and stages[0].entry == end else ""
        reason = f"leads the signal in from {start} to {end}{to}"
        return make_role(branch, words.INPUT_COUPLING, reason)
    if passed == len(stages):
        return make_role(
            branch, words.OUTPUT_COUPLING, f"leads the signal out from {start} to {end}"
        )
    before, after = stages[passed - 1].members[-1], stages[passed].members[0]
    reason = f"leads the signal on from {before} ({start}) to {after} ({end})"
    return make_role(branch, words.INTERSTAGE_COUPLING, reason)


def _between(
    place: Place, branch: Branch, parallel: Resistor | Inductor | Diode | None
) -> CapacitorRole:
    layout = place.layout
    one = min(_served(place, branch, branch.first), default=None)
    two = min(_served(place, branch, branch.second), default=None)
    if one is None or two is None:
        return _side_branch(place, branch, one is not None or two is not None)
    ends = sorted(((one[0], branch.first), (two[0], branch.second)), key=lambda end: end[0])
    (bottom, low), (top, high) = ends
    if top == bottom:
        return _same_level(place, branch, parallel, top)
    direct = high in layout.level and low in layout.level
    if direct and (parallel is not None or not place.is_large(branch)):
        return _compensation(layout, branch, high, low)
    if not direct and all(stage.follows for stage in layout.stages[bottom:top]):
        reason = (
            f"leads the output at {high} back to {low}, which rises with it, so that the resistor "
            f"from {low} carries next to no signal current"
        )
        return make_role(branch, words.BOOTSTRAP, reason)
    if not place.is_large(branch):
        reason = f"feeds high frequencies back from {high} to {low}"
        return make_role(branch, words.COMPENSATION, reason)
    return make_role(branch, words.FEEDBACK, f"leads the signal at {high} back to {low}")


def _compensation(layout: Layout, branch: Branch, high: str, low: str) -> CapacitorRole:
    device = next(
        (t for t in layout.wiring.transistors_at(high, "collector") if t.base == low), None
    )
    if device is None:
        where = f"from {high} back to {low}, round the stages between"
    else:
        where = (
            f"from {device.word('collector')} to {device.word('base')} of {device.name} "
            f"({high} to {low})"
        )
    return make_role(branch, words.COMPENSATION, f"stands {where}", device)


def _same_level(
    place: Place,
    branch: Branch,
    parallel: Resistor | Inductor | Diode | None,
    level: int,
) -> CapacitorRole:
    layout = place.layout
    first, second = spelt(branch)
    emitters = _emitters(layout, branch)
    if emitters and layout.on_way.isdisjoint((branch.first, branch.second)):
        transistor = preferred(place, emitters)
        assert transistor is not None
        return emitter_bypass(place, branch, transistor.emitter, transistor, "")
    if parallel is not None or not place.is_large(branch):
        reason = f"lets high frequencies pass from {first} to {second}"
        return make_role(branch, words.COMPENSATION, reason)
    stages = layout.stages
    if level == 0:
        role = words.INPUT_COUPLING
    else:
        role = words.OUTPUT_COUPLING if level == len(stages) else words.INTERSTAGE_COUPLING
    return make_role(branch, role, f"leads the signal between {first} and {second}")


def _emitters(layout: Layout, branch: Branch) -> tuple[Transistor, ...]:
    """Transistors whose emitters the capacitor joins, when both ends are emitters."""
    first, second = (
        layout.wiring.transistors_at(node, "emitter") for node in (branch.first, branch.second)
    )
    return (*first, *second) if first and second else ()


def _served(place: Place, branch: Branch, node: str) -> Iterator[tuple[int, str]]:
    """Nodes of the way, with their level, that a capacitor's end reaches through quiet parts."""
    layout = place.layout
    if node in layout.level:
        yield layout.level[node], node
        return
    seen, waiting = {node, GROUND}, [node]
    while waiting and len(seen) < _REACH:
        here = waiting.pop()
        for other in layout.wiring.at(here):
            far = other.far(here)
            if other.element is branch.element or far in seen or far in place.quiet:
                continue
            seen.add(far)
            if far in layout.level:
                yield layout.level[far], far
            else:
                waiting.append(far)


def _side_branch(place: Place, branch: Branch, served: bool) -> CapacitorRole:
    """Leads off the way to parts that serve no other output we follow."""
    layout = place.layout
    first, second = spelt(branch)
    if not served:
        reason = f"joins {first} and {second}, both off the way of the signal"
        return make_role(branch, words.OTHER, reason)
    near = branch.first if branch.first in layout.level else branch.second
    level = layout.level.get(near, 0)
    far = branch.far(near)
    if not place.is_large(branch):
        reason = f"is small: it joins {near} and {far} at high frequencies only"
        return make_role(branch, words.COMPENSATION, reason)
    reason = f"leads the signal from {near} off to {far}"
    if layout.wiring.terminals.get(far) or 0 < level < len(layout.stages):
        return make_role(branch, words.INTERSTAGE_COUPLING, reason)
    delivers = level > 0 or any(t != "base" for _, t in layout.wiring.terminals.get(near, ()))
    return make_role(branch, words.OUTPUT_COUPLING if delivers else words.INPUT_COUPLING, reason)
