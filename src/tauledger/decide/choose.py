"""Which standard values to fit so that the exact corner meets a target.

The closed form of :mod:`tauledger.decide.sizing` starts the search; every value that is shown has
been verified with the exact −3 dB frequency of the whole network.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from tauledger.analysis import Analysis, corners_of
from tauledger.circuit.elements import Capacitor, Circuit
from tauledger.configuration.settings import PathSettings
from tauledger.decide.asked import Asked
from tauledger.decide.available import ELECTROLYTIC_F, stock_of
from tauledger.decide.bench import Bench, bench_of
from tauledger.decide.search import HIGHEST_PEAK, FloatArray, Search, Wish
from tauledger.decide.settling import settling_time, slowest_pole
from tauledger.decide.sizing import by_shares, least_total
from tauledger.decide.stress import CAUTION_REVERSED
from tauledger.decide.varied import variety_of
from tauledger.decide.ways import ways
from tauledger.decide.worst import each_alone, worst_cases
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.quantity import format_quantity
from tauledger.review.check import REVERSED_VOLTS
from tauledger.review.decisions import Alternative, Choice, FittedRow
from tauledger.version import VERSION

_ROUNDS = 6
_HUGE = 1e6
"""A capacitor so many times larger (smaller, at the high end) is out of the way."""


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
    truth = _whole_analysis(analysis, wish)
    search = replace(search, limit_hz=_limit(wish, worst(bench.circuit)))
    current = bench.low_hz if wish.end == "low" else bench.high_hz
    reason = _obstacle(analysis, search, wish) if current is not None else ""
    found: list[tuple[str, FloatArray]] = []
    if not reason and current is not None:
        search, found = _settled(search, wish, worst, truth)
        reason = "" if found else _no_way(search)
    return Choice(
        title=analysis.circuit.title,
        netlist=analysis.circuit.path,
        version=VERSION,
        end=wish.end,
        target_hz=wish.target_hz,
        margin_asked=wish.margin or None,
        with_tolerance=wish.with_tolerance,
        now_hz=current,
        now_settling_s=_settling(search, search.now_f),
        alternatives=tuple(
            _alternative(search, wish, rule, values, _judged(search, values, worst, truth))
            for rule, values in _distinct(found)
        ),
        infeasible=reason,
        notes=(*_notes(search, wish, current), *_polarity(analysis, search, found)),
        problems=analysis.circuit.problems,
    )


def _settled(
    search: Search, wish: Wish, worst: Ratio, truth: Truth
) -> tuple[Search, list[tuple[str, FloatArray]]]:
    """Search until what was found keeps the target in the whole analysis and its worst case.

    The ratio of worst to nominal corner, which sets the limit of the search, moves a little with
    the values; so does the midband frequency, which the search holds still.
    """
    found = list(ways(search, wish))
    for _ in range(_ROUNDS):
        judged = [_judged(search, values, worst, truth) for _, values in found]
        if all(_keeps(wish, entry.worst_hz) for entry in judged):
            break
        limits = [
            _limit(wish, entry.worst_hz / entry.searched_hz)
            for entry in judged
            if not _keeps(wish, entry.worst_hz) and 0.0 < entry.searched_hz < math.inf
        ]
        if not limits:
            break
        limit = min(limits) * (1 - 1e-6) if wish.end == "low" else max(limits) * (1 + 1e-6)
        search = replace(search, limit_hz=limit)
        found = list(ways(search, wish))
    return search, [
        way for way in found if _keeps(wish, _judged(search, way[1], worst, truth).worst_hz)
    ]


@dataclass(frozen=True, slots=True)
class _Judged:
    """One corner three ways; no corner at all counts as 0 Hz (infinite, at the high end)."""

    searched_hz: float
    exact_hz: float
    worst_hz: float


def _judged(search: Search, values: FloatArray, worst: Ratio, truth: Truth) -> _Judged:
    circuit = _with_values(search.bench.circuit, search.parts, values)
    none = 0.0 if search.end == "low" else math.inf
    searched = float(np.nan_to_num(search.corner(values[:, None])[0], nan=none))
    exact = truth(circuit)
    exact = none if exact is None else exact
    return _Judged(searched, exact, exact * worst(circuit))


def _keeps(wish: Wish, corner_hz: float) -> bool:
    limit = _limit(wish, 1.0)
    return corner_hz <= limit if wish.end == "low" else corner_hz >= limit


def _no_way(search: Search) -> str:
    names = ", ".join(part.name for part in search.parts)
    return (
        f"no values of {names} meet it without a peak in the response or a change of the midband "
        "gain: feedback through capacitors, or a midband too near the corner, binds"
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
) -> Search:
    by_name = {e.name: e for e in analysis.circuit.elements}
    parts = tuple(e for name in names if isinstance(e := by_name[name], Capacitor))
    stocks = tuple(stock_of(part.name, settings, wish.series) for part in parts)
    ideal = _ideal(analysis, parts, wish) if wish.end == "low" else None
    one = _one_end(bench, wish)
    search = Search(one, analysis.network, parts, stocks, ideal, wish.end, wish.target_hz)
    if not parts:
        return search
    # What peaks already may go on peaking.
    return replace(search, highest_peak=max(HIGHEST_PEAK, 1.01 * search.peak(search.now_f)))


def _one_end(bench: Bench, wish: Wish) -> Bench:
    """Searched at this end only, and past the target as well as past where the corner is now."""
    low, high = bench.low_hz, bench.high_hz
    if wish.end == "low":
        return replace(bench, high_hz=None, low_hz=low and min(low, wish.target_hz))
    return replace(bench, low_hz=None, high_hz=high and max(high, wish.target_hz))


def _ideal(analysis: Analysis, parts: Sequence[Capacitor], wish: Wish) -> tuple[float, ...] | None:
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
Truth = Callable[[Circuit], float | None]


def _whole_analysis(analysis: Analysis, wish: Wish) -> Truth:
    """The corner that a report on a circuit shows, whose midband is its own."""
    path = analysis.topology.path
    output = path.output_node
    if path.output_reference != "0":
        output = f"{output},{path.output_reference}"

    def truth(circuit: Circuit) -> float | None:
        corners = corners_of(circuit, path.source, output, wish.midband_hz)
        return corners.low.exact_hz if wish.end == "low" else corners.high.exact_hz

    return truth


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


def _with_values(circuit: Circuit, parts: Sequence[Capacitor], values_f: FloatArray) -> Circuit:
    new = {part.name: float(value) for part, value in zip(parts, values_f, strict=True)}
    elements = tuple(
        replace(e, capacitance_f=new[e.name]) if isinstance(e, Capacitor) and e.name in new else e
        for e in circuit.elements
    )
    return replace(circuit, elements=elements)


# Feasibility --------------------------------------------------------------------------------------


def _obstacle(analysis: Analysis, search: Search, wish: Wish) -> str:
    """Which constraint makes the target infeasible; empty when none does."""
    if not search.parts:
        return (
            f"no capacitor of the netlist limits the {wish.end} end; what does is inside the "
            "transistors or missing"
        )
    if bool(search.met(search.now_f[:, None])[0]):
        return ""
    extreme = -1 if wish.end == "low" else 0
    best = np.array([[stock.values_f[extreme]] for stock in search.stocks])
    if search.reaches(search.corner(best))[0]:
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


def _others(analysis: Analysis, search: Search, wish: Wish) -> str:
    free = {part.name for part in search.parts}
    held = [
        account
        for account in analysis.corners.accounts
        if account.end == wish.end and account.part.name not in free and account.share
    ]
    held.sort(key=lambda account: -(account.share or 0.0))
    return ", ".join(account.part.name for account in held[:3])


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
    search: Search, wish: Wish, rule: str, values: FloatArray, found: _Judged
) -> Alternative:
    judged = found.worst_hz if wish.with_tolerance else found.exact_hz
    margin = 1.0 - judged / wish.target_hz if wish.end == "low" else judged / wish.target_hz - 1.0
    return Alternative(
        rule=rule,
        parts=tuple(_fitted(search, i, float(value)) for i, value in enumerate(values)),
        corner_hz=found.exact_hz,
        worst_hz=found.worst_hz if wish.with_tolerance else None,
        margin=margin,
        peak_db=20.0 * math.log10(search.peak(values)),
        settling_s=_settling(search, values),
        total_f=float(values.sum()),
        values=len({float(v) for v in values}),
    )


def _fitted(search: Search, index: int, value: float) -> FittedRow:
    part, stock = search.parts[index], search.stocks[index]
    unchanged = abs(value - part.capacitance_f) <= 1e-9 * value
    ideal = search.ideal_f[index] if search.ideal_f else None
    series = "unchanged" if unchanged else stock.series_of(value)
    return FittedRow(part.name, part.capacitance_f, value, ideal, series)


def _settling(search: Search, values: FloatArray) -> float | None:
    reactance = search.network.reactance[0].copy()
    new = {part.name: value for part, value in zip(search.parts, values, strict=True)}
    for part in search.network.parts:
        if part.name in new:
            ends = [(part.positive, 1.0), (part.negative, -1.0)]
            for (i, a), (j, b) in itertools.product([e for e in ends if e[0] >= 0], repeat=2):
                reactance[i, j] += a * b * (new[part.name] - part.value[0])
    return settling_time(slowest_pole(search.network.conductance[0], reactance))


def _notes(search: Search, wish: Wish, now_hz: float | None) -> Iterator[str]:
    if now_hz is None:
        yield f"there is no {wish.end} corner to set: the gain holds beyond every frequency"
        return
    if now_hz <= search.limit_hz if wish.end == "low" else now_hz >= search.limit_hz:
        yield "the netlist meets the target as it stands"
    if any(not stock.source for stock in search.stocks):
        yield (
            "values from E6 from 1 µF up, as electrolytics come, and E12 below; --series or the "
            "classes of tauledger.toml choose others"
        )


def _polarity(
    analysis: Analysis, search: Search, found: Sequence[tuple[str, FloatArray]]
) -> Iterator[str]:
    """Which way round the large ones go, when they are electrolytics."""
    if not found:
        return
    largest = np.max([values for _, values in found], axis=0)
    ways, either = [], []
    for part, value in zip(search.parts, largest, strict=True):
        if value < ELECTROLYTIC_F:
            continue
        first, second = part.nodes
        voltage = analysis.point.voltage(first) - analysis.point.voltage(second)
        if abs(voltage) <= REVERSED_VOLTS:
            either.append(part.name)
        else:
            plus = first if voltage > 0.0 else second
            ways.append(f"{part.name} at {plus} ({format_quantity(abs(voltage), 'V')})")
    if ways:
        yield f"plus side of an electrolytic: {', '.join(ways)}. {CAUTION_REVERSED}"
    if either:
        yield (
            f"next to no direct voltage across {', '.join(either)}: the signal would reverse an "
            "electrolytic there, so take one without polarity"
        )
