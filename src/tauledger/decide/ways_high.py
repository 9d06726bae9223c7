"""Ways to meet a high corner, with one capacitor or several together.

A target below the corner as it stands is one to come down to: capacitors grow, and the corner ends
as near above the target as the values at hand allow. A target above it is one to come up to:
capacitors shrink, and as much of them is kept as can be. None goes the other way: each is there
for a purpose that the corner does not show.

By the sum of open-circuit time constants the least change is one at the largest resistance alone
(:func:`tauledger.decide.sizing.least_change`). The exact corner bends that: poles act on each
other, values come in steps. So every combination of values is tried, two at a time, each step
verified by the exact −3 dB frequency of the whole network; more at a time only where two cannot
meet the target.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence

import numpy as np
from numpy.typing import NDArray

from tauledger.decide.search import FloatArray, Search, stepped
from tauledger.records import dataclass

LEAST_ADDED = "least capacitance added"
LEAST_TAKEN = "least capacitance taken away"
FEWEST_CHANGES = "fewest changes"
CLOSEST = "closest to the target"
UNCHANGED = "as it stands"
_PARTS_TRIED = 5
"""Strongest first; the others stay as they are unless these are not enough."""
_MOST_TOGETHER = 4
_MOST_COMBINATIONS = 4096


@dataclass(frozen=True, slots=True)
class _Pool:
    """Combinations that meet the target."""

    values_f: FloatArray
    """(parts, combinations)."""
    corner_hz: FloatArray
    """(combinations,); infinite where there is none."""
    changes: FloatArray
    """(combinations,): how many capacitors differ from the netlist."""

    def best(self, score: FloatArray) -> FloatArray:
        """(parts,): the combination with the lowest score, of equals the one with less changes."""
        return np.asarray(self.values_f[:, int(np.lexsort((self.changes, score))[0])])

    def nearest(self, some: NDArray[np.bool_]) -> int:
        """Index of the combination that comes nearest the target, out of some."""
        return int(np.argmin(np.where(some, self.corner_hz, np.inf)))


def high_ways(search: Search) -> Iterator[tuple[str, FloatArray]]:
    """Each way with its (parts,) capacitances in F; none when no combination meets the target."""
    found = search.measured(search.now_f[:, None])
    if search.reaches(found.corner_hz)[0]:
        yield from _come_down(search)
    else:
        yield from _come_up(search)


def _come_down(search: Search) -> Iterator[tuple[str, FloatArray]]:
    """From above: grow until the corner is next to the target."""
    choices = [_larger(search, i) for i in range(_tried(search))]
    pool = _pool(search, choices, 2)
    if not (pool.changes > 0).any():
        yield UNCHANGED, search.now_f
        return
    total = pool.values_f.sum(axis=0)
    alone = [pool.nearest(_only(pool, search, i)) for i in range(len(choices)) if choices[i]]
    one = min(alone, key=lambda at: float(total[at]))
    as_near = (pool.changes > 0) & (pool.corner_hz <= pool.corner_hz[one])
    yield LEAST_ADDED, pool.best(np.where(as_near, total, np.inf))
    yield CLOSEST, pool.best(pool.corner_hz)
    yield FEWEST_CHANGES, np.asarray(pool.values_f[:, one])


def _come_up(search: Search) -> Iterator[tuple[str, FloatArray]]:
    """From below: shrink until the corner is past the target."""
    choices = [_smaller(search, i) for i in range(_tried(search))]
    for most in range(2, max(_MOST_TOGETHER, 2) + 1):
        pool = _pool(search, choices, most)
        if pool.corner_hz.size:
            break
    else:
        pool = _all_smaller(search)
    if not pool.corner_hz.size:
        return
    kept = pool.values_f.sum(axis=0)
    yield LEAST_TAKEN, _grown(search, pool.best(-kept))
    few = pool.changes == pool.changes.min()
    yield FEWEST_CHANGES, _grown(search, pool.best(np.where(few, -kept, np.inf)))
    yield CLOSEST, pool.best(pool.corner_hz)


def _only(pool: _Pool, search: Search, index: int) -> NDArray[np.bool_]:
    """(combinations,): where this capacitor alone differs from the netlist."""
    return np.asarray((pool.changes == 1) & (pool.values_f[index] != search.now_f[index]))


def _tried(search: Search) -> int:
    return min(len(search.parts), _PARTS_TRIED)


# Values to try ------------------------------------------------------------------------------------


def _larger(search: Search, index: int) -> list[float]:
    """From the next above the present value to the largest that meets the target alone."""
    now = search.now_f
    values = [v for v in search.stocks[index].values_f if v > now[index] * (1.0 + 1e-9)]
    if not values:
        return []
    table = np.repeat(now[:, None], len(values), axis=1)
    table[index] = values
    good = search.met(table)
    # Up to the first failure: far beyond it the band is another one.
    return values[: int(np.argmin(good)) if not good.all() else len(values)]


def _smaller(search: Search, index: int) -> list[float]:
    now = search.now_f[index]
    return [v for v in search.stocks[index].values_f if v < now * (1.0 - 1e-9)]


def _thinned(values: Sequence[float], most: int) -> list[float]:
    """At most so many of them, both ends among them."""
    if len(values) <= most:
        return list(values)
    return [values[i] for i in np.linspace(0, len(values) - 1, max(most, 2)).round().astype(int)]


def _pool(search: Search, choices: Sequence[Sequence[float]], most: int) -> _Pool:
    """All combinations that change at most so many capacitors and meet the target."""
    sets = [
        indices
        for count in range(most + 1)
        for indices in itertools.combinations(range(len(choices)), count)
    ]
    tables, changes = [], []
    for indices in sets:
        together = sum(len(other) == len(indices) for other in sets)
        each = max(2, int((_MOST_COMBINATIONS / together) ** (1.0 / max(len(indices), 1))))
        options = [_thinned(choices[i], each) for i in indices]
        rows = list(itertools.product(*options))
        table = np.repeat(search.now_f[:, None], len(rows), axis=1)
        for index, column in zip(indices, zip(*rows, strict=True), strict=False):
            table[index] = column
        tables.append(table)
        changes.append(np.full(len(rows), len(indices)))
    return _kept(search, np.concatenate(tables, axis=1), np.concatenate(changes))


def _all_smaller(search: Search) -> _Pool:
    """Every capacitor shrunk by the same factor, to the value below."""
    floors = [np.array(stock.values_f) for stock in search.stocks]
    columns = []
    for scale in np.logspace(0.0, -9.0, 181)[1:]:
        places = [
            np.searchsorted(floor, value * scale, side="right") - 1
            for floor, value in zip(floors, search.now_f, strict=True)
        ]
        columns.append([floor[max(at, 0)] for floor, at in zip(floors, places, strict=True)])
    table = np.minimum(np.array(columns).T, search.now_f[:, None])
    return _kept(search, table, (table < search.now_f[:, None]).sum(axis=0))


def _kept(search: Search, table: FloatArray, changes: FloatArray) -> _Pool:
    """Those that meet the target."""
    found = search.measured(table)
    good = search.good(found)
    corner = np.nan_to_num(found.corner_hz, nan=np.inf)
    return _Pool(table[:, good], corner[good], np.asarray(changes)[good])


def _grown(search: Search, values: FloatArray) -> FloatArray:
    """Take single steps back up, the one that gives most, while the target is met."""

    def above(i: int, value: float) -> float | None:
        now = float(search.now_f[i])
        if value >= now * (1.0 - 1e-9):
            return None
        larger = (v for v in search.stocks[i].values_f if value * (1.0 + 1e-9) < v <= now)
        return next(larger, now)

    return stepped(search, values, above, np.argmax)
