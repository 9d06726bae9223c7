"""Which end of the band each reactive part belongs to.

At midband a part is compared with what it sees: a capacitor whose reactance is below the
resistance it sees is a short there (low end), above it an open (high end); an inductor the other
way round. The impedance it sees is first taken from the whole network at midband, with every
other part as it is; the sets that follow give purely resistive figures, and the comparison is
repeated with those until no part changes sides.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from tauledger.corners.band import TWO_PI
from tauledger.corners.ports import Midband, midband_network
from tauledger.records import dataclass
from tauledger.smallsignal.network import FloatArray, ReactivePart
from tauledger.smallsignal.response import Response

LONGEST_ITERATION = 8
HeldPairs = Sequence[tuple[int, int]]
"""Pairs of node indices (−1 is ground) that something holds together."""


@dataclass(frozen=True, slots=True)
class Sides:
    """The parts by end, and the midband network that results."""

    low: tuple[ReactivePart, ...]
    high: tuple[ReactivePart, ...]
    looped: tuple[ReactivePart, ...]
    """Low-end capacitors that close a loop of shorts and so have no pole of their own."""
    midband: Midband


def impedance_seen(
    response: Response, parts: Sequence[ReactivePart], frequency_hz: float
) -> FloatArray:
    """(K,): magnitude in Ω of what each part sees, every other part as it is at the frequency."""
    s = 1j * TWO_PI * frequency_hz
    inverse = np.linalg.inv(response.conductance + s * response.reactance)
    seen = np.empty(len(parts))
    for k, part in enumerate(parts):
        if part.is_inductor:
            seen[k] = abs(-1.0 / inverse[part.branch, part.branch] - s * part.value[0])
            continue
        # The port impedance includes the part itself in parallel; take it out again.
        port = _port_impedance(inverse, part)
        rest = (1.0 / port if port != 0 else math.inf) - s * part.value[0]
        seen[k] = abs(1.0 / rest) if rest != 0 else math.inf
    return seen


def _port_impedance(inverse: np.ndarray, part: ReactivePart) -> complex:
    a, b = part.positive, part.negative
    total = 0j
    for i, sign_i in ((a, 1.0), (b, -1.0)):
        for j, sign_j in ((a, 1.0), (b, -1.0)):
            if i >= 0 and j >= 0:
                total += sign_i * sign_j * complex(inverse[i, j])
    return total


def ratio_at_midband(
    parts: Sequence[ReactivePart], resistance_ohm: FloatArray, midband_hz: float
) -> FloatArray:
    """(K,): resistance over reactance for a capacitor, reactance over resistance for an inductor.

    Above one the part is in the state it has at high frequency, so it belongs to the low end.
    """
    omega = TWO_PI * midband_hz
    values = np.array([part.value[0] for part in parts])
    # Rounding gives a part whose ends are tied a resistance of either sign of zero.
    resistance_ohm = np.abs(resistance_ohm)
    inductive = np.array([part.is_inductor for part in parts], dtype=bool)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where(
            inductive, omega * values / resistance_ohm, omega * values * resistance_ohm
        )
    return np.asarray(np.nan_to_num(ratio, nan=0.0, posinf=np.inf))


def split_sides(
    response: Response,
    parts: Sequence[ReactivePart],
    midband_hz: float,
    fixed_voltage_pairs: HeldPairs,
) -> Sides:
    """Divide the parts between the two ends, consistently with the midband network.

    ``fixed_voltage_pairs`` are node pairs held together by a source, for finding loops.

    Raises
    ------
    numpy.linalg.LinAlgError
        When no division gives a solvable midband network.
    """
    ratio = ratio_at_midband(parts, impedance_seen(response, parts, midband_hz), midband_hz)
    is_low = ratio > 1.0
    for _ in range(LONGEST_ITERATION):
        sides = _solve_sides(response, parts, is_low, fixed_voltage_pairs)
        again = is_low.copy()
        for model in (sides.midband.low, sides.midband.high):
            fresh = ratio_at_midband(model.parts, model.resistance_ohm, midband_hz)
            for part, value in zip(model.parts, fresh, strict=True):
                again[_position(parts, part)] = value > 1.0
        if (again == is_low).all():
            break
        is_low = again
    return sides


def _position(parts: Sequence[ReactivePart], part: ReactivePart) -> int:
    return next(i for i, other in enumerate(parts) if other.name == part.name)


def _solve_sides(
    response: Response,
    parts: Sequence[ReactivePart],
    is_low: np.ndarray,
    fixed: HeldPairs,
) -> Sides:
    low = [part for part, flag in zip(parts, is_low, strict=True) if flag]
    high = [part for part, flag in zip(parts, is_low, strict=True) if not flag]
    shorted = list(fixed) + [(p.positive, p.negative) for p in high if p.is_inductor]
    low, looped = _without_loops(low, shorted)
    return Sides(tuple(low), tuple(high), tuple(looped), midband_network(response, low, high))


def _without_loops(
    low: Sequence[ReactivePart], shorted: HeldPairs
) -> tuple[list[ReactivePart], list[ReactivePart]]:
    """Leave out capacitors whose ends are already tied together; large values tie first."""
    ties = _Ties(shorted)
    looped = [
        part
        for part in sorted(low, key=lambda p: -float(p.value[0]))
        if not part.is_inductor and not ties.join(part.positive, part.negative)
    ]
    names = {part.name for part in looped}
    return [part for part in low if part.name not in names], looped


def tied_by(
    parts: Sequence[ReactivePart], index: int, held: HeldPairs, high: Sequence[ReactivePart]
) -> list[int]:
    """Capacitors whose ends become tied when one inductor of the low end turns into a short."""
    coil = parts[index]
    if not coil.is_inductor:
        return []
    shorts = [(p.positive, p.negative) for p in (coil, *high) if p.is_inductor]
    ties = _Ties([*held, *shorts])
    return [
        i
        for i, part in enumerate(parts)
        if not part.is_inductor and ties.joined(part.positive, part.negative)
    ]


def part_out_held(
    parts: Sequence[ReactivePart], held: HeldPairs
) -> tuple[list[ReactivePart], list[ReactivePart]]:
    """Capacitors that are free, and those whose voltage ideal sources dictate (no pole)."""
    ties = _Ties(held)
    dictated = [p for p in parts if not p.is_inductor and ties.joined(p.positive, p.negative)]
    names = {part.name for part in dictated}
    return [part for part in parts if part.name not in names], dictated


def merge_parallel(
    parts: Sequence[ReactivePart], held: HeldPairs
) -> list[tuple[ReactivePart, ...]]:
    """Group capacitors between the same two nodes; nodes held together by a source count as one.

    Each group is led by its largest member. Inductors stand alone.
    """
    ties = _Ties(held)
    groups: dict[object, list[ReactivePart]] = {}
    for part in parts:
        ends = frozenset((ties.root(part.positive), ties.root(part.negative)))
        key: object = part.name if part.is_inductor or len(ends) == 1 else ends
        groups.setdefault(key, []).append(part)
    return [tuple(sorted(group, key=lambda p: -float(p.value[0]))) for group in groups.values()]


def as_one(group: Sequence[ReactivePart]) -> ReactivePart:
    """A group of parallel capacitors as one part, named after the first."""
    if len(group) == 1:
        return group[0]
    return replace(group[0], value=np.sum([part.value for part in group], axis=0))


class _Ties:
    """Sets of nodes tied together (union by parent links)."""

    def __init__(self, pairs: HeldPairs) -> None:
        self._parent: dict[int, int] = {}
        for a, b in pairs:
            self.join(a, b)

    def root(self, node: int) -> int:
        while (parent := self._parent.setdefault(node, node)) != node:
            node = parent
        return node

    def joined(self, a: int, b: int) -> bool:
        return self.root(a) == self.root(b)

    def join(self, a: int, b: int) -> bool:
        """Tie two nodes; False when they were tied before."""
        root_a, root_b = self.root(a), self.root(b)
        self._parent[root_a] = root_b
        return root_a != root_b
