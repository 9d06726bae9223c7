"""The job of every capacitor, the grounded ones first: they tell which nodes are quiet."""

from __future__ import annotations

from dataclasses import replace

from tauledger.circuit.elements import GROUND
from tauledger.topology import capacitors as words
from tauledger.topology.capacitors import capacitance_f, make_place
from tauledger.topology.floating import floating_role
from tauledger.topology.grounded import grounded_role
from tauledger.topology.layout import Layout
from tauledger.topology.model import CapacitorRole
from tauledger.topology.wiring import Branch

_QUIETING = frozenset(
    {
        words.EMITTER_BYPASS,
        words.SOURCE_BYPASS,
        words.BASE_BYPASS,
        words.GATE_BYPASS,
        words.SUPPLY_DECOUPLING,
    }
)


def capacitor_roles(layout: Layout) -> tuple[dict[str, CapacitorRole], frozenset[str]]:
    """Role of every capacitor, and the nodes that bypass and decoupling hold at ground.

    Grounded capacitors are read twice: the second time with the filtered supplies known.
    Capacitors in parallel share the job of the largest.
    """
    everyone = list(layout.wiring.capacitors())
    leaders = _largest_in_parallel(everyone)
    branches = list(leaders.values())
    place = make_place(layout, branches)
    roles: dict[str, CapacitorRole] = {}
    for _ in range(2):
        quiet: set[str] = set()
        filtered: set[str] = set()
        for branch in branches:
            if GROUND in (branch.first, branch.second):
                node = branch.far(GROUND)
                role = roles[branch.element.name] = grounded_role(place, branch, node)
                if node == GROUND or node in layout.on_way:
                    continue
                if role.role in _QUIETING:
                    quiet.add(node)
                elif role.role == words.FILTER and place.is_large(branch):
                    filtered.add(node)
        place = replace(
            place, quiet=frozenset(quiet | filtered), filtered=frozenset(filtered - quiet)
        )
    for branch in branches:
        if branch.element.name not in roles:
            roles[branch.element.name] = floating_role(place, branch)
    found = (_role_of(branch, leaders[_ends(branch)], roles) for branch in everyone)
    return {role.name: role for role in found}, place.quiet


def _ends(branch: Branch) -> tuple[str, str]:
    if branch.first == branch.second:
        return branch.element.name, ""
    return min(branch.first, branch.second), max(branch.first, branch.second)


def _largest_in_parallel(branches: list[Branch]) -> dict[tuple[str, str], Branch]:
    largest: dict[tuple[str, str], Branch] = {}
    for branch in branches:
        known = largest.setdefault(_ends(branch), branch)
        if capacitance_f(branch) > capacitance_f(known):
            largest[_ends(branch)] = branch
    return largest


def _role_of(branch: Branch, leader: Branch, roles: dict[str, CapacitorRole]) -> CapacitorRole:
    role = roles[leader.element.name]
    if branch is leader:
        return role
    reason = f"{branch.element.name} stands in parallel with {leader.element.name}."
    return replace(role, name=branch.element.name, reason=reason)
