"""Which standard values to fit so that the exact corner meets a target.

The closed form of :mod:`tauledger.decide.sizing` starts the search; every value that is shown has
been verified with the exact −3 dB frequency of the whole network.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tauledger import __version__
from tauledger.analysis import Analysis
from tauledger.circuit.elements import Capacitor, Circuit
from tauledger.configuration.settings import PathSettings
from tauledger.decide.available import Stock, common_values, stock_of
from tauledger.decide.bench import Bench, bench_of, measure_values
from tauledger.decide.rows import Alternative, Choice, FittedRow
from tauledger.decide.settling import settling_time, slowest_pole
from tauledger.decide.sizing import by_shares, least_total
from tauledger.decide.varied import Asked, variety_of
from tauledger.decide.worst import each_alone, worst_cases
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.smallsignal.network import LinearNetwork

FloatArray = NDArray[np.float64]

LEAST_TOTAL = "least total capacitance"
FEWEST_VALUES = "fewest different values"
FEWEST_CHANGES = "fewest changes"
CLOSEST = "closest to the target"
_MOST_COMBINATIONS = 4096
_VALUES_EACH = 6
_BLOCK = 1000
HIGHEST_PEAK = 10.0 ** (0.5 / 20.0)
"""Half a decibel; more only where the netlist as it stands has more."""
GAIN_KEPT = 0.1
"""Largest change of the midband gain, in nepers."""
_HUGE = 1e6
"""A capacitor so many times larger (smaller, at the high end) is out of the way."""


@dataclass(frozen=True, slots=True)
class Wish:
    """What is asked for."""

    end: str
    target_hz: float
    only: tuple[str, ...] = ()
    """Designators that may change; empty for all that count at this end."""
    shares: Mapping[str, float] | None = None
    """Share of the corner each capacitor is to have, in place of the least total."""
    series: str = ""
    margin: float = 0.0
    """How far the corner is to keep from the target, relative."""
    with_tolerance: bool = False
    """Whether the worst case of all tolerances is to meet it."""


@dataclass(frozen=True, slots=True)
class _Search:
    """The bench, the capacitors that may change, and what they may become."""

    bench: Bench
    network: LinearNetwork
    parts: tuple[Capacitor, ...]
    stocks: tuple[Stock, ...]
    ideal_f: tuple[float, ...] | None
    end: str
    limit_hz: float
    """What the nominal exact corner has to meet."""

    def corner(self, values_f: FloatArray) -> FloatArray:
        """(boards,): exact corners with (parts, boards) capacitances; NaN where there is none."""
        return self._measured(values_f)[0]

    def met(self, values_f: FloatArray) -> NDArray[np.bool_]:
        """(boards,): whether the corner meets the limit (no corner at all does) with a band that
        is still the amplifier's: no more peak than allowed, and the gain as it was."""
        corner, peak, gain = self._measured(values_f)
        good = corner <= self.limit_hz if self.end == "low" else corner >= self.limit_hz
        _, now_peak, _ = self._measured(self.now_f[:, None])
        calm = peak <= np.maximum(now_peak * 1.01, HIGHEST_PEAK)
        same = np.abs(np.log(gain / self.bench.gain)) <= GAIN_KEPT
        return np.asarray((good | np.isnan(corner)) & calm & same)

    def peak(self, values_f: FloatArray) -> float:
        """Of one board, as a ratio to midband."""
        return float(self._measured(values_f[:, None])[1][0])

    def _measured(self, values_f: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Corner, peak towards it, and midband gain."""
        found = []
        for start in range(0, values_f.shape[1], _BLOCK):
            block = values_f[:, start : start + _BLOCK]
            varied = {part.name: block[i] for i, part in enumerate(self.parts)}
            f = measure_values(self.bench, self.network, varied)
            low = self.end == "low"
            found.append((f.low_hz if low else f.high_hz, f.low_peak if low else f.high_peak, f.gain))
        corner, peak, gain = (np.concatenate(columns) for columns in zip(*found, strict=True))
        return corner, peak, gain

    @property
    def now_f(self) -> FloatArray:
        return np.array([part.capacitance_f for part in self.parts])

    def only(self, indices: Sequence[int]) -> _Search:
        """The same with fewer parts that may change, the others as they stand."""
        return replace(
            self,
            parts=tuple(self.parts[i] for i in indices),
            stocks=tuple(self.stocks[i] for i in indices),
            ideal_f=None,
        )


def choose(
    analysis: Analysis,
    wish: Wish,
    settings: PathSettings | None = None,
    asked: Sequence[Asked] = (),
) -> Choice:
    """Find two or three ways to meet a corner.

    The low corner is met by an exact −3 dB frequency at or below the target, the high corner by
    one at or above it. ``asked`` are tolerances given by hand, for ``wish.with_tolerance``.

    Raises
    ------
    ProblemError
        When there is no passband, a named part is unknown or cannot be chosen, or tolerances are
        asked for and none is known.
    """
    bench = bench_of(analysis)
    names = _candidates(analysis, wish)
    search = _search(analysis, bench, names, wish, settings)
    worst = _worst_ratio(analysis, bench, wish, settings, asked)
    search = replace(search, limit_hz=_limit(wish, worst(bench.circuit)))
    found: list[tuple[str, FloatArray]] = []
    reason = _obstacle(analysis, search, wish)
    if not reason:
        for _ in range(4):
            found = list(_ways(search, wish))
            # The ratio of worst to nominal corner moves a little with the values.
            ratios = [worst(_with_values(bench.circuit, search.parts, v)) for _, v in found]
            strictest = max([_limit(wish, r) for r in ratios], key=lambda x: abs(x - wish.target_hz))
            if not wish.with_tolerance or _keeps(search, wish, found, ratios):
                break
            search = replace(search, limit_hz=strictest)
    current = bench.low_hz if wish.end == "low" else bench.high_hz
    return Choice(
        title=analysis.circuit.title,
        netlist=analysis.circuit.path,
        version=__version__,
        end=wish.end,
        target_hz=wish.target_hz,
        margin_asked=wish.margin or None,
        with_tolerance=wish.with_tolerance,
        now_hz=current,
        now_settling_s=_settling(search, search.now_f),
        alternatives=tuple(
            _alternative(search, wish, rule, values, worst) for rule, values in _distinct(found)
        ),
        infeasible=reason,
        notes=tuple(_notes(search, wish, current)),
        problems=analysis.circuit.problems,
    )


# What may change ----------------------------------------------------------------------------------


def _candidates(analysis: Analysis, wish: Wish) -> list[str]:
    """Names of the capacitors to set, strongest first."""
    elements = {e.name.casefold(): e for e in analysis.circuit.elements}
    named = wish.only or tuple(wish.shares or ())
    for name in named:
        if not isinstance(elements.get(name.casefold()), Capacitor):
            raise ProblemError(_not_a_capacitor(name, analysis.circuit))
    counted = {
        account.part.name.casefold(): account
        for account in analysis.corners.accounts
        if account.end == wish.end and account.resistance_ohm and not account.part.device
    }
    if named:
        strange = [n for n in named if n.casefold() not in counted]
        if strange:
            raise ProblemError(_other_end(strange, wish))
        return [elements[name.casefold()].name for name in named]
    ranked = sorted(counted.values(), key=lambda account: -(account.share or 0.0))
    return [a.part.name for a in ranked if isinstance(elements[a.part.name.casefold()], Capacitor)]


def _not_a_capacitor(name: str, circuit: Circuit) -> Problem:
    known = ", ".join(e.name for e in circuit.elements if isinstance(e, Capacitor))
    return Problem(
        "capacitor-unknown",
        Severity.ERROR,
        f"{name!r} is no capacitor of this circuit",
        None,
        f"Its capacitors: {known[:300] or 'none'}.",
    )


def _other_end(names: Sequence[str], wish: Wish) -> Problem:
    return Problem(
        "capacitor-other-end",
        Severity.ERROR,
        f"{', '.join(names)} does not limit the {wish.end} end, so it cannot set that corner",
        None,
        "Leave it out; tauledger report NETLIST shows at which end each capacitor counts.",
    )


def _search(
    analysis: Analysis,
    bench: Bench,
    names: Sequence[str],
    wish: Wish,
    settings: PathSettings | None,
) -> _Search:
    by_name = {e.name: e for e in analysis.circuit.elements}
    parts = tuple(e for name in names if isinstance(e := by_name[name], Capacitor))
    stocks = tuple(stock_of(part.name, settings, wish.series) for part in parts)
    ideal = _ideal(analysis, parts, wish) if wish.end == "low" else None
    # Only this end is searched: the other costs as much and decides nothing.
    one = replace(bench, high_hz=None) if wish.end == "low" else replace(bench, low_hz=None)
    return _Search(one, analysis.network, parts, stocks, ideal, wish.end, wish.target_hz)


def _ideal(
    analysis: Analysis, parts: Sequence[Capacitor], wish: Wish
) -> tuple[float, ...] | None:
    """By closed form, after what the other capacitors take of the corner."""
    accounts = {a.part.name: a for a in analysis.corners.accounts}
    names = {part.name for part in parts}
    resistances = [accounts[part.name].resistance_ohm or 0.0 for part in parts]
    if wish.shares is not None:
        lower = {name.casefold(): share for name, share in wish.shares.items()}
        shares = [lower[part.name.casefold()] for part in parts]
        return tuple(by_shares(resistances, shares, wish.target_hz))
    taken = sum(
        a.corner_hz or 0.0
        for a in accounts.values()
        if a.end == "low" and a.part.name not in names and a.share is not None
    )
    left = wish.target_hz - taken
    return tuple(least_total(resistances, left)) if left > 0.0 and parts else None


# Tolerances and margin ----------------------------------------------------------------------------

Ratio = Callable[[Circuit], float]


def _worst_ratio(
    analysis: Analysis,
    bench: Bench,
    wish: Wish,
    settings: PathSettings | None,
    asked: Sequence[Asked],
) -> Ratio:
    """Worst corner over nominal corner of a circuit; 1 when tolerances are not asked for."""
    if not wish.with_tolerance:
        return lambda circuit: 1.0
    variety = variety_of(analysis.circuit, bench.source, settings, asked)
    figure = f"{wish.end} corner"

    def ratio(circuit: Circuit) -> float:
        own = replace(bench, circuit=circuit)
        alone = each_alone(own, variety)
        nominal = float(alone.nominal.figure(figure)[0])
        low, high = worst_cases(own, variety, alone, figure)
        worst = high[0] if wish.end == "low" else low[0]
        return worst / nominal if np.isfinite(worst) and nominal > 0.0 else 1.0

    return ratio


def _limit(wish: Wish, ratio: float) -> float:
    """What the nominal corner has to meet, so that the worst one keeps the margin."""
    kept = 1.0 - wish.margin if wish.end == "low" else 1.0 + wish.margin
    return wish.target_hz * kept / ratio


def _keeps(
    search: _Search, wish: Wish, found: Sequence[tuple[str, FloatArray]], ratios: Sequence[float]
) -> bool:
    corners = search.corner(np.stack([values for _, values in found], axis=1))
    limits = np.array([_limit(wish, ratio) for ratio in ratios])
    good = corners <= limits if wish.end == "low" else corners >= limits
    return bool((good | np.isnan(corners)).all())


def _with_values(
    circuit: Circuit, parts: Sequence[Capacitor], values_f: FloatArray
) -> Circuit:
    new = {part.name: float(value) for part, value in zip(parts, values_f, strict=True)}
    elements = tuple(
        replace(e, capacitance_f=new[e.name]) if isinstance(e, Capacitor) and e.name in new else e
        for e in circuit.elements
    )
    return replace(circuit, elements=elements)


# Feasibility --------------------------------------------------------------------------------------


def _obstacle(analysis: Analysis, search: _Search, wish: Wish) -> str:
    """Which constraint makes the target infeasible; empty when none does."""
    if not search.parts:
        return (
            f"no capacitor of the netlist limits the {wish.end} end; what does is inside the "
            "transistors or missing"
        )
    extreme = -1 if wish.end == "low" else 0
    best = np.array([[stock.values_f[extreme]] for stock in search.stocks])
    if bool(search.met(best)[0]):
        return ""
    best_hz = float(search.corner(best)[0])
    away = search.now_f * (_HUGE if wish.end == "low" else 1.0 / _HUGE)
    gone_hz = float(search.corner(away[:, None])[0])
    names = ", ".join(part.name for part in search.parts)
    limit = search.limit_hz
    if (gone_hz > limit) == (wish.end == "low"):
        others = _others(analysis, search, wish)
        size = "large" if wish.end == "low" else "small"
        return (
            f"however {size} {names} {'is' if len(search.parts) == 1 else 'are'}, the "
            f"{wish.end} corner stays at {gone_hz:.4g} Hz where {limit:.4g} Hz is needed: "
            f"{others or 'the transistors'} hold{'' if ',' in others else 's'} it there"
        )
    what = "largest" if wish.end == "low" else "smallest"
    return (
        f"the {what} values at hand for {names} give {best_hz:.4g} Hz where {limit:.4g} Hz is "
        "needed: the list of values binds"
    )


def _others(analysis: Analysis, search: _Search, wish: Wish) -> str:
    free = {part.name for part in search.parts}
    held = [
        account
        for account in analysis.corners.accounts
        if account.end == wish.end and account.part.name not in free and account.share
    ]
    held.sort(key=lambda account: -(account.share or 0.0))
    return ", ".join(account.part.name for account in held[:3])


# Ways to meet it ----------------------------------------------------------------------------------


def _ways(search: _Search, wish: Wish) -> Iterator[tuple[str, FloatArray]]:
    if wish.end == "high":
        yield from _closest(search)
        return
    values = _least_total(search)
    if values is not None:
        yield LEAST_TOTAL if wish.shares is None else "shares as asked", values
    if len(search.parts) > 1 and wish.shares is None:
        values = _fewest_values(search)
        if values is not None:
            yield FEWEST_VALUES, values
        values = _fewest_changes(search)
        if values is not None:
            yield FEWEST_CHANGES, values


def _closest(search: _Search) -> Iterator[tuple[str, FloatArray]]:
    """One capacitor at a time: the largest value that keeps the high corner."""
    for i in range(min(len(search.parts), 3)):
        one = search.only([i])
        table = np.array([one.stocks[0].values_f])
        good = one.met(table)
        # From the smallest value on: far beyond the first failure the band is another one.
        count = int(np.argmin(good)) if not good.all() else good.size
        if count:
            values = search.now_f
            values[i] = table[0, count - 1]
            yield CLOSEST, values


def _least_total(search: _Search) -> FloatArray | None:
    """By the closed form scaled to the exact corner, then every combination of values near."""
    ideal = np.array(search.ideal_f) if search.ideal_f else search.now_f
    scales = np.logspace(-3.0, 3.0, 121)
    good = search.met(ideal[:, None] * scales)
    first = int(np.argmax(good)) if good.any() else len(scales) - 1
    each = _VALUES_EACH
    while each > 2 and each ** len(ideal) > _MOST_COMBINATIONS:
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


def _combinations(choices: Sequence[Sequence[float]]) -> FloatArray:
    """(parts, combinations), cut to the first :data:`_MOST_COMBINATIONS`."""
    rows = itertools.islice(itertools.product(*choices), _MOST_COMBINATIONS)
    return np.array(list(rows)).T


def _descend(search: _Search, values: FloatArray) -> FloatArray:
    """Take single steps down, the one that saves most, while the target is met."""
    while True:
        trials = []
        for i, stock in enumerate(search.stocks):
            below = [v for v in stock.values_f if v < values[i] * (1.0 - 1e-9)]
            if below:
                trial = values.copy()
                trial[i] = below[-1]
                trials.append(trial)
        if not trials:
            return values
        table = np.stack(trials, axis=1)
        met = search.met(table)
        if not met.any():
            return values
        values = table[:, int(np.argmin(np.where(met, table.sum(axis=0), np.inf)))]


def _fewest_values(search: _Search) -> FloatArray | None:
    """One value for all; where that cannot be, two."""
    shared = common_values(search.stocks)
    if shared:
        table = np.repeat(np.array([shared]), len(search.parts), axis=0)
        met = search.met(table)
        if met.any():
            return np.asarray(table[:, int(np.argmax(met))])
    return _two_values(search)


def _two_values(search: _Search) -> FloatArray | None:
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
        for start in range(0, len(keep), _BLOCK):
            part = table[:, keep[start : start + _BLOCK]]
            met = search.met(part)
            if met.any():
                values = part[:, int(np.argmax(met))]
                if best is None or values.sum() < best.sum():
                    best = values
                break
    return best


def _fewest_changes(search: _Search) -> FloatArray | None:
    """As few capacitors changed as will do, the others as they stand; of those, the least total."""
    if bool(search.met(search.now_f[:, None])[0]):
        return search.now_f
    for count in range(1, min(len(search.parts), 4)):
        best: FloatArray | None = None
        for indices in itertools.combinations(range(len(search.parts)), count):
            part = search.only(indices)
            found = _least_total(part)
            if found is None:
                continue
            values = search.now_f
            values[list(indices)] = found
            if best is None or values.sum() < best.sum():
                best = values
        if best is not None:
            return best
    return None


# Rows ---------------------------------------------------------------------------------------------


def _distinct(found: Sequence[tuple[str, FloatArray]]) -> list[tuple[str, FloatArray]]:
    """Each set of values once, under every rule it satisfies."""
    merged: dict[tuple[float, ...], tuple[str, FloatArray]] = {}
    for rule, values in found:
        key = tuple(float(v) for v in values)
        rules = f"{merged[key][0]}; {rule}" if key in merged else rule
        merged[key] = (rules, values)
    return list(merged.values())


def _alternative(
    search: _Search, wish: Wish, rule: str, values: FloatArray, worst: Ratio
) -> Alternative:
    corner = float(search.corner(values[:, None])[0])
    worst_hz = corner * worst(_with_values(search.bench.circuit, search.parts, values))
    judged = worst_hz if wish.with_tolerance else corner
    margin = 1.0 - judged / wish.target_hz if wish.end == "low" else judged / wish.target_hz - 1.0
    return Alternative(
        rule=rule,
        parts=tuple(_fitted(search, i, float(value)) for i, value in enumerate(values)),
        corner_hz=corner,
        worst_hz=worst_hz if wish.with_tolerance else None,
        margin=margin,
        peak_db=20.0 * math.log10(search.peak(values)),
        settling_s=_settling(search, values),
        total_f=float(values.sum()),
        values=len({float(v) for v in values}),
    )


def _fitted(search: _Search, index: int, value: float) -> FittedRow:
    part, stock = search.parts[index], search.stocks[index]
    unchanged = abs(value - part.capacitance_f) <= 1e-9 * value
    ideal = search.ideal_f[index] if search.ideal_f else None
    series = "unchanged" if unchanged else stock.series_of(value)
    return FittedRow(part.name, part.capacitance_f, value, ideal, series)


def _settling(search: _Search, values: FloatArray) -> float | None:
    reactance = search.network.reactance[0].copy()
    new = {part.name: value for part, value in zip(search.parts, values, strict=True)}
    for part in search.network.parts:
        if part.name in new:
            ends = [(part.positive, 1.0), (part.negative, -1.0)]
            for (i, a), (j, b) in itertools.product([e for e in ends if e[0] >= 0], repeat=2):
                reactance[i, j] += a * b * (new[part.name] - part.value[0])
    return settling_time(slowest_pole(search.network.conductance[0], reactance))


def _notes(search: _Search, wish: Wish, now_hz: float | None) -> Iterator[str]:
    met = now_hz is not None and (
        now_hz <= search.limit_hz if wish.end == "low" else now_hz >= search.limit_hz
    )
    if met or now_hz is None:
        yield "the netlist meets the target as it stands"
    if any(not stock.source for stock in search.stocks):
        yield (
            "values from E6 from 1 µF up, as electrolytics come, and E12 below; --series or the "
            "classes of tauledger.toml choose others"
        )
