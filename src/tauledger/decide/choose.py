"""Which standard values to fit so that the exact corner meets a target.

The closed forms of :mod:`tauledger.decide.sizing` start the search; every value that is shown has
been verified with the exact −3 dB frequency of the whole network.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

from tauledger.analysis import Analysis
from tauledger.configuration.settings import PathSettings
from tauledger.decide.asked import Asked
from tauledger.decide.candidates import search_of
from tauledger.decide.choice_notes import notes_of
from tauledger.decide.obstacles import no_way, obstacle
from tauledger.decide.search import FloatArray, Search, Wish
from tauledger.decide.settling import settling_time, slowest_pole
from tauledger.decide.verified import Judge, Verified, judge_of
from tauledger.decide.ways import ways
from tauledger.review.decisions import Alternative, Choice, FittedRow
from tauledger.version import VERSION

Found = list[tuple[str, FloatArray]]
"""The rule each set of (parts,) capacitances in F is by, and the set."""
_ROUNDS = 6


def choose(
    analysis: Analysis,
    wish: Wish,
    settings: PathSettings | None = None,
    asked: Sequence[Asked] = (),
) -> Choice:
    """Find two or three ways to meet a corner.

    The low corner is met by an exact −3 dB frequency at or below the target, the high corner by
    one at or above it, and no margin is kept that ``wish`` does not ask for. ``asked`` are
    tolerances given by hand, for ``wish.with_tolerance``.

    Raises
    ------
    ProblemError
        When there is no passband, a named part is unknown or cannot be chosen, the target lies
        beyond the other corner, or tolerances are asked for and none is known.
    """
    search = search_of(analysis, wish, settings)
    judge = judge_of(analysis, search, wish, settings, asked)
    ratio = judge.ratio(search.bench.circuit)
    search = replace(search, limit_hz=judge.limit_hz(ratio))
    corners = analysis.corners
    now_hz = corners.low.exact_hz if wish.end == "low" else corners.high.exact_hz
    search, found, reason = _found(analysis, search, judge, now_hz)
    return Choice(
        title=analysis.circuit.title,
        netlist=analysis.circuit.path,
        version=VERSION,
        end=wish.end,
        target_hz=wish.target_hz,
        margin_asked=wish.margin or None,
        with_tolerance=wish.with_tolerance,
        now_hz=now_hz,
        now_settling_s=_settling(search, search.now_f),
        alternatives=tuple(
            _alternative(search, judge, rule, values) for rule, values in _distinct(found)
        ),
        infeasible=reason,
        notes=notes_of(
            analysis,
            search,
            wish,
            None if now_hz is None else judge.keeps(now_hz * ratio),
            [values for _, values in found],
        ),
        problems=analysis.circuit.problems,
    )


def _found(
    analysis: Analysis, search: Search, judge: Judge, now_hz: float | None
) -> tuple[Search, Found, str]:
    """The search as it ended, what it found, and why there is nothing where there is not."""
    if now_hz is None:
        return search, [], ""
    reason = obstacle(analysis, search)
    if reason or not search.parts:
        return search, [], reason
    search, found = _settled(search, judge)
    return search, found, "" if found else no_way(search)


def _settled(search: Search, judge: Judge) -> tuple[Search, Found]:
    """Search until what was found keeps the target in the whole analysis and its worst case.

    The ratio of worst to nominal corner, which sets the limit of the search, moves a little with
    the values; so does the midband frequency, which the search holds still. The limit is first let
    out as far as what was found allows, so that no margin is kept unasked, then taken in for those
    that miss the target.
    """
    found = dict(ways(search, judge.wish))
    if limits := _limits(search, judge, found):
        search = replace(search, limit_hz=_extreme(search, limits, tightest=False))
        found |= dict(ways(search, judge.wish))
    for _ in range(_ROUNDS):
        missing = {
            rule: values for rule, values in found.items() if not _is_kept(search, judge, values)
        }
        limits = _limits(search, judge, missing)
        found = {rule: values for rule, values in found.items() if rule not in missing}
        if not limits:
            break
        search = replace(search, limit_hz=_extreme(search, limits, tightest=True))
        found = dict(ways(search, judge.wish)) | found
    return search, [way for way in found.items() if _is_kept(search, judge, way[1])]


def _is_kept(search: Search, judge: Judge, values: FloatArray) -> bool:
    return judge.keeps(judge.verified(search, values).worst_hz)


def _limits(search: Search, judge: Judge, found: Mapping[str, FloatArray]) -> list[float]:
    """What each of these has to meet in the search, in Hz, to meet the target by the judge."""
    entries = (judge.verified(search, values) for values in found.values())
    return [
        judge.limit_hz(entry.worst_hz / entry.searched_hz)
        for entry in entries
        if 0.0 < entry.searched_hz < math.inf and 0.0 < entry.worst_hz < math.inf
    ]


def _extreme(search: Search, limits: Sequence[float], *, tightest: bool) -> float:
    """The tightest or the loosest of some limits, a hair's breadth on for rounding."""
    if (search.end == "low") == tightest:
        return min(limits) * (1 - 1e-6)
    return max(limits) * (1 + 1e-6)


def _distinct(found: Found) -> Found:
    """Each set of values once, under every rule it satisfies."""
    merged: dict[tuple[float, ...], tuple[str, FloatArray]] = {}
    for rule, values in found:
        key = tuple(float(f"{value:.9g}") for value in values)
        rules = f"{merged[key][0]}; {rule}" if key in merged else rule
        merged[key] = (rules, values)
    return list(merged.values())


# Rows ---------------------------------------------------------------------------------------------


def _alternative(search: Search, judge: Judge, rule: str, values: FloatArray) -> Alternative:
    found: Verified = judge.verified(search, values)
    wish = judge.wish
    judged = found.worst_hz if wish.with_tolerance else found.exact_hz
    margin = 1.0 - judged / wish.target_hz if wish.end == "low" else judged / wish.target_hz - 1.0
    settling_s, now_s = _settling(search, values), _settling(search, search.now_f)
    return Alternative(
        rule=rule,
        parts=tuple(_fitted(search, i, float(value)) for i, value in enumerate(values)),
        corner_hz=found.exact_hz,
        worst_hz=found.worst_hz if wish.with_tolerance else None,
        margin=margin,
        peak_db=20.0 * math.log10(search.peak(values)),
        settling_s=settling_s,
        total_f=float(values.sum()),
        values=len({float(f"{value:.9g}") for value in values}),
        settling_ratio=settling_s / now_s if settling_s and now_s else None,
    )


def _fitted(search: Search, index: int, value: float) -> FittedRow:
    part, stock = search.parts[index], search.stocks[index]
    unchanged = abs(value - part.capacitance_f) <= 1e-9 * value
    ideal = search.ideal_f[index] if search.ideal_f else None
    series = "unchanged" if unchanged else stock.series_of(value)
    return FittedRow(part.name, part.capacitance_f, value, ideal, series)


def _settling(search: Search, values: FloatArray) -> float | None:
    """Seconds until 1 % is left, with (parts,) capacitances in F; None when nothing decays."""
    reactance = search.network.reactance[0].copy()
    new = {part.name: value for part, value in zip(search.parts, values, strict=True)}
    for part in search.network.parts:
        if part.name in new:
            ends = [(part.positive, 1.0), (part.negative, -1.0)]
            for (i, a), (j, b) in itertools.product([e for e in ends if e[0] >= 0], repeat=2):
                reactance[i, j] += a * b * (new[part.name] - part.value[0])
    return settling_time(slowest_pole(search.network.conductance[0], reactance))
