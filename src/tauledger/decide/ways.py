"""Ways to meet a low corner: each a rule of what is best, and a search among the values at hand.

Those for a high corner are in :mod:`tauledger.decide.ways_high`.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence

import numpy as np

from tauledger.decide.available import common_values
from tauledger.decide.search import BLOCK, FloatArray, Search, Wish, stepped
from tauledger.decide.ways_high import FEWEST_CHANGES, UNCHANGED, high_ways

LEAST_TOTAL = "least total capacitance"
FEWEST_VALUES = "fewest different values"
AS_SHARED = "shares as asked"
_MOST_COMBINATIONS = 4096
_VALUES_EACH = 6
_PARTS_TRIED = 5
"""Of the strongest, when a few are to be changed."""
_FEW_COMBINATIONS = 600


def ways(search: Search, wish: Wish) -> Iterator[tuple[str, FloatArray]]:
    """Each way with its (parts,) capacitances in F, verified by the exact corner of ``search``."""
    if wish.end == "high":
        yield from high_ways(search)
        return
    values = _least_total(search) if wish.shares is None else _as_shared(search)
    if values is not None:
        yield LEAST_TOTAL if wish.shares is None else AS_SHARED, values
    if wish.shares is not None:
        return
    if len(search.parts) > 1:
        values = _fewest_values(search)
        if values is not None:
            yield FEWEST_VALUES, values
    if bool(search.met(search.now_f[:, None])[0]):
        yield UNCHANGED, search.now_f
        return
    values = _fewest_changes(search)
    if values is not None:
        yield FEWEST_CHANGES, values


def _least_total(search: Search, most: int = _MOST_COMBINATIONS) -> FloatArray | None:
    """By the closed form scaled to the exact corner, then every combination of values near."""
    ideal = np.array(search.ideal_f) if search.ideal_f else search.now_f
    scales = np.logspace(-6.0, 6.0, 241)
    good = search.met(ideal[:, None] * scales)
    first = int(np.argmax(good)) if good.any() else len(scales) - 1
    each = _VALUES_EACH
    while each > 2 and each ** len(ideal) > most:
        each -= 1
    for scale in scales[first::5]:
        near = [
            stock.near(value * scale, each)
            for stock, value in zip(search.stocks, ideal, strict=True)
        ]
        table = _combinations(near)
        met = search.met(table)
        if met.any():
            totals = np.where(met, table.sum(axis=0), np.inf)
            return _descend(search, table[:, int(np.argmin(totals))])
    return None


def _as_shared(search: Search) -> FloatArray | None:
    """The closed form, scaled until the nearest values at hand meet the exact corner."""
    ideal = np.array(search.ideal_f)
    scales = np.logspace(-2.0, 2.0, 401)
    rows = [
        [stock.nearest(value * scale) for scale in scales]
        for stock, value in zip(search.stocks, ideal, strict=True)
    ]
    met = search.met(np.array(rows))
    return np.array(rows)[:, int(np.argmax(met))] if met.any() else None


def _combinations(choices: Sequence[Sequence[float]]) -> FloatArray:
    """(parts, combinations), cut to the first :data:`_MOST_COMBINATIONS`."""
    rows = itertools.islice(itertools.product(*choices), _MOST_COMBINATIONS)
    return np.array(list(rows)).T


def _descend(search: Search, values: FloatArray) -> FloatArray:
    """Take single steps down, the one that saves most, while the target is met."""

    def below(i: int, value: float) -> float | None:
        smaller = [v for v in search.stocks[i].values_f if v < value * (1.0 - 1e-9)]
        return smaller[-1] if smaller else None

    return stepped(search, values, below, np.argmin)


def _fewest_values(search: Search) -> FloatArray | None:
    """One value for all; where that cannot be, two."""
    shared = common_values(search.stocks)
    if shared:
        table = np.repeat(np.array([shared]), len(search.parts), axis=0)
        met = search.met(table)
        if met.any():
            return np.asarray(table[:, int(np.argmax(met))])
    return _two_values(search)


def _two_values(search: Search) -> FloatArray | None:
    """A larger value for those whose closed form is larger, a smaller for the others."""
    ideal = np.array(search.ideal_f) if search.ideal_f else search.now_f
    order = np.argsort(-ideal)
    best: FloatArray | None = None
    for count in range(1, len(order)):
        first, second = order[:count], order[count:]
        above = common_values([search.stocks[i] for i in first])
        below = common_values([search.stocks[i] for i in second])
        pairs = [pair for pair in itertools.product(above, below) if pair[0] > pair[1]]
        if not pairs:
            continue
        table = np.empty((len(order), len(pairs)))
        table[first], table[second] = np.array(pairs).T[:, None, :]
        totals = table.sum(axis=0)
        keep = np.argsort(totals, kind="stable")
        for start in range(0, len(keep), BLOCK):
            part = table[:, keep[start : start + BLOCK]]
            met = search.met(part)
            if met.any():
                values = part[:, int(np.argmax(met))]
                if best is None or values.sum() < best.sum():
                    best = values
                break
    return best


def _fewest_changes(search: Search) -> FloatArray | None:
    """As few capacitors changed as will do, the others as they stand; of those, the least total."""
    tried = min(len(search.parts), _PARTS_TRIED)
    for count in range(1, min(len(search.parts), 4)):
        best: FloatArray | None = None
        for indices in itertools.combinations(range(tried), count):
            part = search.only(indices)
            found = _least_total(part, _FEW_COMBINATIONS)
            if found is None:
                continue
            values = search.now_f
            values[list(indices)] = found
            if best is None or values.sum() < best.sum():
                best = values
        if best is not None:
            return best
    return None
