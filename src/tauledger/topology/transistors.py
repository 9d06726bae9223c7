"""Configurations of a transistor, and the transistors that work together.

The words are the trade's own (common practice, no source).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from itertools import combinations

from tauledger.circuit.elements import GROUND, Capacitor, Resistor
from tauledger.records import dataclass
from tauledger.topology.flow import Step
from tauledger.topology.wiring import Branch, Transistor, Wiring

COMMON_EMITTER = "common emitter"
EMITTER_FOLLOWER = "emitter follower"
COMMON_BASE = "common base"
COMMON_SOURCE = "common source"
SOURCE_FOLLOWER = "source follower"
COMMON_GATE = "common gate"
CASCODE = "cascode"
DIFFERENTIAL_PAIR = "differential pair"
CURRENT_MIRROR = "current mirror"
ACTIVE_LOAD = "active load"
CURRENT_SOURCE = "current source"
PUSH_PULL = "push-pull output"
DARLINGTON = "Darlington"
COMPLEMENTARY_PAIR = "complementary feedback pair"
DIODE_CONNECTED = "diode-connected"
SERIES_CHANNEL = "series channel"
"""A field-effect transistor in its triode region, used as a resistance or a switch."""
VBE_MULTIPLIER = "VBE multiplier"
BIAS_ONLY = "bias only"
SWITCHED_OFF = "switched off"

CONTROLLED_SOURCE = "controlled source"
"""Configuration of a stage made of E, F, G, H or B sources, as in an op-amp macromodel."""

_BY_TERMINALS = {
    ("bipolar", "base", "collector"): COMMON_EMITTER,
    ("bipolar", "base", "emitter"): EMITTER_FOLLOWER,
    ("bipolar", "emitter", "collector"): COMMON_BASE,
    ("fet", "base", "collector"): COMMON_SOURCE,
    ("fet", "base", "emitter"): SOURCE_FOLLOWER,
    ("fet", "emitter", "collector"): COMMON_GATE,
}

_BYPASS_SHARE = 1e-2
"""A capacitor at a tail counts as a bypass from this share of the circuit's largest upwards."""
_MOST_SHARING = 8
"""Transistors on one node that are compared with each other."""


def single_configuration(family: str, enters: str, leaves: str) -> str:
    """The configuration by the terminals the signal enters and leaves.

    >>> single_configuration("fet", "base", "emitter")
    'source follower'
    """
    return _BY_TERMINALS.get((family, enters, leaves), SERIES_CHANNEL)


@dataclass(frozen=True, slots=True)
class Groups:
    """Transistors that work together, each mapping a name to the names of its partners."""

    pairs: Mapping[str, tuple[str, ...]]
    mirrors: Mapping[str, tuple[str, ...]]
    darlingtons: Mapping[str, tuple[str, ...]]
    complementary: Mapping[str, tuple[str, ...]]
    push_pull: Mapping[str, tuple[str, ...]]
    parallel: Mapping[str, tuple[str, ...]]


def find_groups(wiring: Wiring) -> Groups:
    """Compound structures, by the nodes the transistors share; linear in the circuit's size.

    A pair stands on one tail, straight or through a resistor each, or has its emitters joined by
    a resistor or a large capacitor; only the way of the signal tells whether it is one in truth
    (see :func:`settle_pairs`).
    """
    conducting = list(wiring.transistors.values())
    tails = {t.name: _tails(wiring, t) for t in conducting}
    return Groups(
        _collect(_differential(wiring, conducting, tails)),
        _collect(_mirrors(wiring, conducting, tails)),
        _collect(_darlingtons(wiring, conducting)),
        _collect(_complementary(wiring, conducting)),
        _collect(_push_pull(wiring, conducting)),
        _collect(_parallel(conducting, tails)),
    )


def settle_pairs(groups: Groups, steps: Sequence[Step]) -> Groups:
    """Leave only pairs that the signal crosses from emitter to emitter, or passes on one side.

    Two transistors the signal passes one after the other by their bases are two stages with
    feedback between their emitters, not a pair.
    """
    passed = {step.part: index for index, step in enumerate(s for s in steps if s.enters)}
    enters = {step.part: step.enters for step in steps}

    def is_pair(first: str, second: str) -> bool:
        if first not in passed or second not in passed:
            return True
        if passed[first] > passed[second]:
            first, second = second, first
        return passed[second] - passed[first] == 1 and enters[second] == "emitter"

    pairs = {
        name: kept
        for name, others in groups.pairs.items()
        if (kept := tuple(other for other in others if is_pair(name, other)))
    }
    return replace(groups, pairs=pairs)


def _collect(found: Iterator[tuple[str, str]]) -> dict[str, tuple[str, ...]]:
    partners: dict[str, dict[str, None]] = {}
    for first, second in found:
        if first != second:
            partners.setdefault(first, {})[second] = None
            partners.setdefault(second, {})[first] = None
    return {name: tuple(names) for name, names in partners.items()}


def sole_resistor_end(wiring: Wiring, node: str) -> str | None:
    """Far end of the one resistor at a node where nothing else but one terminal stands."""
    if node == GROUND or len(wiring.terminals.get(node, ())) != 1:
        return None
    there = wiring.at(node)
    if len(there) == 1 and isinstance(there[0].element, Resistor):
        return there[0].far(node)
    return None


def _tails(wiring: Wiring, transistor: Transistor) -> tuple[str, ...]:
    far = sole_resistor_end(wiring, transistor.emitter)
    return (transistor.emitter,) if far is None else (transistor.emitter, far)


def _by_node(
    transistors: list[Transistor], nodes: Mapping[str, tuple[str, ...]]
) -> dict[str, list[Transistor]]:
    shared: dict[str, list[Transistor]] = {}
    for transistor in transistors:
        for node in nodes[transistor.name]:
            shared.setdefault(node, []).append(transistor)
    shared.pop(GROUND, None)
    return shared


def _differential(
    wiring: Wiring, transistors: list[Transistor], tails: Mapping[str, tuple[str, ...]]
) -> Iterator[tuple[str, str]]:
    largest = max(
        (b.element.capacitance_f for b in wiring.capacitors() if isinstance(b.element, Capacitor)),
        default=0.0,
    )
    for node, here in _by_node(transistors, tails).items():
        if len(here) < 2 or _is_bypassed(wiring, node, largest):
            continue
        for first, second in combinations(here[:_MOST_SHARING], 2):
            if _alike(first, second):
                yield first.name, second.name
    for first in transistors:
        if first.emitter == GROUND or _is_bypassed(wiring, first.emitter, largest):
            continue
        for branch in wiring.at(first.emitter):
            if GROUND not in (branch.first, branch.second) and _links_emitters(branch, largest):
                for second in wiring.transistors_at(branch.far(first.emitter), "emitter"):
                    if second.emitter != first.emitter and _alike(first, second):
                        yield first.name, second.name


def _alike(first: Transistor, second: Transistor) -> bool:
    """Fit to be the halves of a pair: one kind, each with a base of its own, none driving one."""
    return (
        first.polarity == second.polarity
        and first.family == second.family
        and first.base != second.base
        and first.collector != second.base
        and second.collector != first.base
        and first.emitter != second.base
        and second.emitter != first.base
    )


def _links_emitters(branch: Branch, largest: float) -> bool:
    if isinstance(branch.element, Capacitor):
        return branch.element.capacitance_f >= _BYPASS_SHARE * largest
    return isinstance(branch.element, Resistor)


def _is_bypassed(wiring: Wiring, node: str, largest: float) -> bool:
    return any(
        isinstance(branch.element, Capacitor)
        and branch.element.capacitance_f >= _BYPASS_SHARE * largest
        for branch in wiring.between(node, GROUND)
    )


def _mirrors(
    wiring: Wiring, transistors: list[Transistor], tails: Mapping[str, tuple[str, ...]]
) -> Iterator[tuple[str, str]]:
    """One base node, one polarity, emitters at a held node, one of them diode-connected."""
    shared: dict[tuple[str, str, str], list[Transistor]] = {}
    for transistor in transistors:
        if transistor.base != GROUND and GROUND in tails[transistor.name]:
            key = (transistor.base, transistor.polarity, transistor.family)
            shared.setdefault(key, []).append(transistor)
    for here in shared.values():
        helpers = {t.name: _helpers(wiring, t) for t in here}
        reference = next((t for t in here if helpers[t.name] or t.collector == t.base), None)
        if reference is not None:
            for transistor in here:
                yield reference.name, transistor.name
                for helper in helpers[transistor.name]:
                    yield reference.name, helper


def _helpers(wiring: Wiring, transistor: Transistor) -> tuple[str, ...]:
    """Transistors driven by this one's collector that feed its base: helper, or Wilson's third."""
    if transistor.collector == GROUND:
        return ()
    return tuple(
        helper.name
        for helper in wiring.transistors_at(transistor.collector, "base")
        if helper.emitter == transistor.base and helper.polarity == transistor.polarity
    )


def _darlingtons(wiring: Wiring, transistors: list[Transistor]) -> Iterator[tuple[str, str]]:
    for first in transistors:
        if first.emitter == GROUND:
            continue
        for second in wiring.transistors_at(first.emitter, "base"):
            if second.polarity == first.polarity and _is_darlington(wiring, first, second):
                yield first.name, second.name


def _is_darlington(wiring: Wiring, first: Transistor, second: Transistor) -> bool:
    """Only a resistor across the second base-emitter junction may stand at the inner node."""
    inner = wiring.at(first.emitter)
    across = all(
        isinstance(branch.element, Resistor) and branch.far(first.emitter) == second.emitter
        for branch in inner
    )
    joined = first.collector == second.collector
    return len(wiring.terminals[first.emitter]) == 2 and (
        (joined and across) or (first.collector == GROUND and not inner)
    )


def _complementary(wiring: Wiring, transistors: list[Transistor]) -> Iterator[tuple[str, str]]:
    for first in transistors:
        if first.collector == GROUND:
            continue
        for second in wiring.transistors_at(first.collector, "base"):
            if second.polarity != first.polarity and second.collector == first.emitter != GROUND:
                yield first.name, second.name


def _push_pull(wiring: Wiring, transistors: list[Transistor]) -> Iterator[tuple[str, str]]:
    """Followers of both polarities on one node, or two common emitters joined at both ends."""
    followers = [t for t in transistors if t.collector == GROUND or _leads_pair(wiring, t)]
    outputs = {t.name: _emitter_and_beyond(wiring, t) for t in followers}
    for node, here in _by_node(followers, outputs).items():
        taken = bool(wiring.transistors_at(node, "emitter"))
        for first, second in combinations(here[:_MOST_SHARING], 2):
            is_theirs = node in (first.emitter, second.emitter)
            if first.polarity != second.polarity and (is_theirs or not taken):
                yield first.name, second.name
    joined: dict[tuple[str, str], Transistor] = {}
    for transistor in transistors:
        if transistor.emitter == GROUND and GROUND not in (transistor.base, transistor.collector):
            other = joined.setdefault((transistor.base, transistor.collector), transistor)
            if other.polarity != transistor.polarity:
                yield other.name, transistor.name


def _leads_pair(wiring: Wiring, first: Transistor) -> bool:
    """First of a complementary feedback pair that works as a follower."""
    return any(
        second.polarity != first.polarity and second.collector == first.emitter
        for second in wiring.transistors_at(first.collector, "base")
    )


def _emitter_and_beyond(wiring: Wiring, transistor: Transistor) -> tuple[str, ...]:
    """The emitter node and the nodes one resistor away from it."""
    far = (b.far(transistor.emitter) for b in wiring.at(transistor.emitter) if b.conductance_s)
    return () if transistor.emitter == GROUND else tuple(dict.fromkeys((transistor.emitter, *far)))


def _parallel(
    transistors: list[Transistor], tails: Mapping[str, tuple[str, ...]]
) -> Iterator[tuple[str, str]]:
    seen: dict[tuple[str, str, str, str], str] = {}
    for t in transistors:
        if t.base == GROUND or t.collector == t.base:
            continue
        key = (t.polarity, t.base, t.collector, tails[t.name][-1])
        other = seen.setdefault(key, t.name)
        if other != t.name:
            yield other, t.name
