"""Stages along the way of the signal, and the configuration of every transistor.

A stage begins at the terminal its first device is driven at and ends where its last device
delivers the signal, so that its gain is that of the devices; what passive parts between two stages
divide off belongs to neither. Controlled sources begin where the stage before ends.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from itertools import islice

from tauledger.circuit.elements import GROUND
from tauledger.records import dataclass
from tauledger.topology import transistors as words
from tauledger.topology.flow import Flow, Step
from tauledger.topology.model import StageOutline, TransistorRole
from tauledger.topology.multiplier import is_multiplier
from tauledger.topology.transistors import Groups
from tauledger.topology.wiring import Transistor, Wiring

_DRIVEN_DISTANCE = 3.0
"""A base this far (see flow.py) from the input at most is driven by the signal."""


@dataclass(frozen=True, slots=True)
class Stage:
    """A stage with what its neighbours need to know about it."""

    members: tuple[str, ...]
    """Transistors, those the way passes first; or names of controlled sources."""
    passed: tuple[Step, ...]
    configuration: str
    entry: str
    exit: str
    follows: bool
    """The output is in phase with the input and no larger: emitter and source followers."""


def find_stages(wiring: Wiring, groups: Groups, flow: Flow) -> tuple[Stage, ...]:
    """Group the active steps of the way into stages."""
    drafts: list[list[Step]] = []
    for step in flow.steps:
        if step.kind not in {"transistor", "source"}:
            continue
        if drafts and _continues(drafts[-1], step, groups):
            drafts[-1].append(step)
        else:
            drafts.append([step])
    return tuple(_stage(wiring, groups, draft) for draft in drafts)


def _continues(draft: list[Step], step: Step, groups: Groups) -> bool:
    last = draft[-1]
    if step.kind == "source" or last.kind == "source":
        block = step.part.rpartition(".")[0]
        return step.kind == last.kind and bool(block) and block == last.part.rpartition(".")[0]
    if last.part in groups.pairs.get(step.part, ()) and step.enters == "emitter":
        return True
    if step.start != last.end:
        return False
    cascode = last.leaves == "collector" and step.enters == "emitter"
    mirror = step.part in groups.mirrors and any(s.part in groups.pairs for s in draft)
    compound = last.part in groups.darlingtons.get(
        step.part, ()
    ) or last.part in groups.complementary.get(step.part, ())
    return cascode or mirror or compound


def _stage(wiring: Wiring, groups: Groups, draft: list[Step]) -> Stage:
    first, last = draft[0], draft[-1]
    configuration = _stage_configuration(wiring, groups, draft)
    members = dict.fromkeys(step.part for step in draft)
    if first.kind == "transistor":
        members.update(dict.fromkeys(_partners(groups, tuple(members), configuration)))
    if configuration == words.DIFFERENTIAL_PAIR:
        twins = dict.fromkeys(_other_cascode(wiring, groups, draft, tuple(members)))
        loads = dict.fromkeys(_mirror_load(wiring, groups, (*members, *twins)))
        members.update(twins | loads if loads else {})
    return Stage(
        tuple(members),
        tuple(draft),
        configuration,
        first.start,
        last.end,
        all(step.leaves == "emitter" for step in draft)
        or (
            configuration == words.COMPLEMENTARY_PAIR and last.end == _first_emitter(wiring, first)
        ),
    )


def _first_emitter(wiring: Wiring, step: Step) -> str:
    return wiring.transistors[step.part].emitter


def _stage_configuration(wiring: Wiring, groups: Groups, draft: list[Step]) -> str:
    first = draft[0]
    if first.kind == "source":
        return words.CONTROLLED_SOURCE
    if first.part in groups.pairs and (first.leaves == "collector" or len(draft) > 1):
        return words.DIFFERENTIAL_PAIR
    names = {step.part for step in draft}
    for found, word in (
        (groups.push_pull, words.PUSH_PULL),
        (groups.darlingtons, words.DARLINGTON),
        (groups.complementary, words.COMPLEMENTARY_PAIR),
    ):
        if any(name in found for name in names):
            return word
    if len(draft) > 1:
        return words.CASCODE
    family = wiring.transistors[first.part].family
    return words.single_configuration(family, first.enters, first.leaves)


def _partners(groups: Groups, names: tuple[str, ...], configuration: str) -> Iterator[str]:
    """Transistors off the way that belong to the stage all the same."""
    found: list[Mapping[str, tuple[str, ...]]] = [groups.parallel]
    if configuration == words.DIFFERENTIAL_PAIR:
        found += [groups.pairs]
    elif configuration == words.PUSH_PULL:
        found += [groups.push_pull, groups.darlingtons, groups.complementary]
    elif configuration == words.DARLINGTON:
        found += [groups.darlingtons]
    elif configuration == words.COMPLEMENTARY_PAIR:
        found += [groups.complementary]
    seen, waiting = set(names), list(names)
    while waiting:
        name = waiting.pop(0)
        for partners in found:
            for partner in partners.get(name, ()):
                if partner not in seen:
                    seen.add(partner)
                    waiting.append(partner)
                    yield partner


def _other_cascode(
    wiring: Wiring, groups: Groups, draft: list[Step], names: tuple[str, ...]
) -> Iterator[str]:
    """On the other half of the pair, the twin of a cascode that the signal passes."""
    passed = [wiring.transistors[step.part] for step in draft if step.part not in groups.pairs]
    bases = {(own.base, own.polarity) for own in passed}
    for name in names:
        for twin in wiring.transistors_at(wiring.transistors[name].collector, "emitter"):
            if twin.name not in groups.pairs and (twin.base, twin.polarity) in bases:
                yield twin.name


def _mirror_load(wiring: Wiring, groups: Groups, names: tuple[str, ...]) -> Iterator[str]:
    """Mirror transistors that stand at the collectors of the pair."""
    there = dict.fromkeys(
        load.name
        for name in names
        for load in wiring.transistors_at(wiring.transistors[name].collector, "collector")
        if load.name in groups.mirrors
    )
    families = {name: {name, *groups.mirrors[name]} for name in there}
    for name, family in families.items():
        if any(family & other for partner, other in families.items() if partner != name):
            yield name
            for other in groups.mirrors[name]:
                if wiring.transistors[other].collector == wiring.transistors[other].base:
                    yield other


def outlines(stages: tuple[Stage, ...], flow: Flow) -> tuple[StageOutline, ...]:
    """Stages with the nodes of their gain; the last reaches to the output's capacitors."""
    found: list[StageOutline] = []
    here = flow.nodes[0] if stages else ""
    for stage in stages:
        is_last = stage is stages[-1]
        # A controlled source in a loop holds its control node; what drives it lies before.
        is_source = stage.configuration == words.CONTROLLED_SOURCE
        start = _through_capacitors(flow, here) if is_source else stage.entry
        end = _back_through_capacitors(flow, flow.nodes[-1]) if is_last else stage.exit
        found.append(StageOutline(stage.members, stage.configuration, start, end))
        here = stage.exit
    return tuple(found)


def _through_capacitors(flow: Flow, node: str) -> str:
    """The farthest node on the way behind capacitors only, from a node of the way."""
    for step in islice(flow.steps, flow.nodes.index(node), None):
        if step.kind != "capacitor":
            break
        node = step.end
    return node


def _back_through_capacitors(flow: Flow, node: str) -> str:
    for step in reversed(flow.steps):
        if step.kind != "capacitor":
            break
        node = step.start
    return node


def transistor_roles(
    wiring: Wiring, groups: Groups, flow: Flow, stages: tuple[Stage, ...]
) -> dict[str, TransistorRole]:
    """The role of every transistor: those of the stages first, the others by what they do."""
    roles: dict[str, TransistorRole] = {}
    for stage in stages:
        if stage.configuration != words.CONTROLLED_SOURCE:
            for role in _members(wiring, groups, stage):
                roles.setdefault(role.name, role)
    for step in flow.steps:
        if step.kind == "channel" and step.part not in roles:
            roles[step.part] = _role(
                wiring.transistors[step.part], words.SERIES_CHANNEL, step.enters, step.leaves
            )
    places = _places(wiring, stages)
    for transistor in wiring.transistors.values():
        if transistor.name not in roles:
            roles[transistor.name] = _off_path(wiring, groups, flow, places, transistor)
    return {name: roles[name] for name in wiring.transistors}


def _role(
    transistor: Transistor,
    configuration: str,
    enters: str = "",
    leaves: str = "",
    companions: tuple[str, ...] = (),
    on_path: bool = True,
) -> TransistorRole:
    return TransistorRole(
        transistor.name,
        configuration,
        on_path,
        transistor.word(enters) if enters else "",
        transistor.word(leaves) if leaves else "",
        companions,
    )


def _members(wiring: Wiring, groups: Groups, stage: Stage) -> Iterator[TransistorRole]:
    ways = {step.part: (step.enters, step.leaves) for step in stage.passed}
    for name in stage.members:
        transistor = wiring.transistors[name]
        enters, leaves = ways.get(name) or _implied_way(groups, stage, name, ways)
        configuration, companions = _member_configuration(groups, stage, transistor, enters, leaves)
        yield _role(transistor, configuration, enters, leaves, companions)


def _member_configuration(
    groups: Groups, stage: Stage, transistor: Transistor, enters: str, leaves: str
) -> tuple[str, tuple[str, ...]]:
    name = transistor.name
    if stage.configuration == words.DIFFERENTIAL_PAIR and name in groups.pairs:
        return words.DIFFERENTIAL_PAIR, groups.pairs[name]
    if name in groups.mirrors and stage.configuration == words.DIFFERENTIAL_PAIR:
        return words.CURRENT_MIRROR, groups.mirrors[name]
    for found, word in (
        (groups.push_pull, words.PUSH_PULL),
        (groups.darlingtons, words.DARLINGTON),
        (groups.complementary, words.COMPLEMENTARY_PAIR),
    ):
        if name in found and stage.configuration in {word, words.PUSH_PULL}:
            return word, found[name]
    others = tuple(other for other in stage.members if other != name)
    if enters == "emitter" and len(stage.passed) > 1:
        return words.CASCODE, others
    return words.single_configuration(transistor.family, enters, leaves), others


def _implied_way(
    groups: Groups, stage: Stage, name: str, ways: Mapping[str, tuple[str, str]]
) -> tuple[str, str]:
    """Terminals of a member beside the way: those of its twin, or of the compound's second."""
    for found in (groups.parallel, groups.push_pull):
        for twin in found.get(name, ()):
            if twin in ways:
                return ways[twin]
    if stage.configuration == words.DIFFERENTIAL_PAIR and name in groups.pairs:
        return "emitter", "collector"
    if name in groups.mirrors:
        return "base", "collector"
    if stage.configuration == words.DIFFERENTIAL_PAIR:
        return "emitter", "collector"
    if name in groups.complementary:
        return "base", "collector"
    if name in groups.darlingtons:
        return "base", "emitter" if stage.configuration == words.PUSH_PULL else "collector"
    return "", ""


@dataclass(frozen=True, slots=True)
class _Places:
    collectors: frozenset[str]
    """Collector nodes of transistors the signal passes."""
    outputs: frozenset[str]
    """Nodes where stages deliver their signal, and others the signal passes but the bases."""
    emitters: frozenset[str]
    """Emitter nodes of transistors the signal passes, and the far ends of tail resistors."""


def _places(wiring: Wiring, stages: tuple[Stage, ...]) -> _Places:
    emitters: set[str] = set()
    collectors: set[str] = set()
    outputs: set[str] = {stage.exit for stage in stages}
    for number, stage in enumerate(stages):
        for name in stage.members:
            transistor = wiring.transistors.get(name)
            if transistor is None:
                continue
            if number > 0:
                outputs.add(transistor.base)
            emitters.add(transistor.emitter)
            collectors.add(transistor.collector)
            far = words.sole_resistor_end(wiring, transistor.emitter)
            if far is not None:
                emitters.add(far)
    return _Places(
        frozenset(collectors - {GROUND}),
        frozenset((outputs | collectors) - {GROUND}),
        frozenset(emitters - {GROUND}),
    )


def _off_path(
    wiring: Wiring, groups: Groups, flow: Flow, places: _Places, transistor: Transistor
) -> TransistorRole:
    name = transistor.name
    companions = groups.mirrors.get(name, ())
    if transistor.region == "cut off" or len(set(transistor.nodes)) == 1:
        return _role(transistor, words.SWITCHED_OFF, on_path=False)
    if is_multiplier(wiring, transistor):
        return _role(transistor, words.VBE_MULTIPLIER, on_path=False)
    if transistor.collector == transistor.base:
        word = words.CURRENT_MIRROR if companions else words.DIODE_CONNECTED
        return _role(transistor, word, companions=companions, on_path=False)
    if name in groups.pairs:
        word, companions = words.DIFFERENTIAL_PAIR, groups.pairs[name]
    elif name in groups.push_pull:
        word, companions = words.PUSH_PULL, groups.push_pull[name]
    elif _is_driven(wiring, flow, transistor) and not companions:
        return _driven(transistor)
    elif transistor.emitter in places.collectors:
        word = words.CASCODE
        companions = tuple(
            lower.name for lower in wiring.transistors_at(transistor.emitter, "collector")
        )
    elif {transistor.collector, transistor.emitter} <= places.outputs:
        word = words.BIAS_ONLY
    elif transistor.collector in places.emitters:
        word = words.CURRENT_SOURCE
    elif transistor.collector in places.outputs:
        word = words.ACTIVE_LOAD
    elif companions:
        word = words.CURRENT_MIRROR
    elif _feeds_current_source(wiring, places, transistor):
        word = words.CURRENT_SOURCE
    else:
        word = words.BIAS_ONLY
    return _role(transistor, word, companions=companions, on_path=False)


def _is_driven(wiring: Wiring, flow: Flow, transistor: Transistor) -> bool:
    """The signal comes to the base other than by a divider between collector and emitter."""
    distance = flow.distance.get(transistor.base, math.inf)
    divider = {transistor.collector, transistor.emitter} <= {
        branch.far(transistor.base)
        for branch in wiring.at(transistor.base)
        if branch.conductance_s > 0.0
    }
    return distance < _DRIVEN_DISTANCE and not divider


def _driven(transistor: Transistor) -> TransistorRole:
    leaves = "emitter" if transistor.collector == GROUND else "collector"
    word = words.single_configuration(transistor.family, "base", leaves)
    return _role(transistor, word, "base", leaves, on_path=False)


def _feeds_current_source(wiring: Wiring, places: _Places, transistor: Transistor) -> bool:
    """The lower device of a stacked current source or load."""
    return transistor.collector != GROUND and any(
        upper.collector in places.emitters | places.outputs
        for upper in wiring.transistors_at(transistor.collector, "emitter")
    )
