"""Tolerance spread: Monte Carlo over many boards, worst cases and sensitivities.

The bias of every board is solved anew. Boards are computed in blocks of :data:`BLOCK`, always the
same ones, so that the figures do not depend on how blocks are shared among workers, to the last
bit.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tauledger.analysis import Analysis
from tauledger.configuration.settings import Limit, PathSettings, Quantity
from tauledger.decide.asked import Asked
from tauledger.decide.bench import Bench, bench_of, measure
from tauledger.decide.sampling import deviations, latin_hypercube, standard_deviation
from tauledger.decide.statistics import Sums, histogram, percentiles, wilson_interval
from tauledger.decide.varied import Variety, board_values, variety_of
from tauledger.decide.worst import FIGURES, Alone, each_alone, worst_cases
from tauledger.review.decisions import (
    Contribution,
    DrawRow,
    FigureSpread,
    Histogram,
    LeaderRow,
    Percentile,
    Spread,
    WorstCase,
    Yield,
)
from tauledger.version import VERSION

FloatArray = NDArray[np.float64]

BLOCK = 1000
"""Boards solved together; small enough for the cache, large enough for the array operations."""
BOARDS = 10_000
MOST_BOARDS = 1_000_000
INSIDE = "a board inside the tolerances"
"""In place of the ends, where a board is worse than every combination of them."""
LIMITS = {"midband_gain": "gain", "low_corner": "low corner", "high_corner": "high corner"}


@dataclass(frozen=True, slots=True)
class Plan:
    """Everything a worker needs; pickles."""

    bench: Bench
    variety: Variety
    boards: int
    seed: int
    distribution: str


@dataclass(frozen=True, slots=True)
class Block:
    """What comes back from a block of boards."""

    figures: Mapping[str, FloatArray]
    sums: Mapping[str, Sums]
    leaders: Mapping[str, Mapping[str, int]]
    """End to part to number of boards."""


def spread(
    analysis: Analysis,
    settings: PathSettings | None = None,
    asked: Sequence[Asked] = (),
    boards: int = BOARDS,
    seed: int = 1,
    distribution: str = "",
    executor: Executor | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Spread:
    """Spread of gain and corners over boards whose parts differ within their tolerances.

    Parameters
    ----------
    analysis
        The nominal board.
    settings
        Tolerances, distribution and limits of the configuration.
    asked
        Tolerances given by hand, which count before the configuration.
    distribution
        ``uniform``, ``normal`` or ``truncated``; empty for the configuration's, else uniform.
    executor
        Shares out the blocks; the figures are the same without one.
    progress
        Called with boards done and boards in all.

    Raises
    ------
    ProblemError
        When there is no passband or no tolerance is known.
    """
    bench = bench_of(analysis)
    variety = variety_of(analysis.circuit, bench.source, settings, asked)
    configured = settings.spread.distribution if settings and settings.spread else ""
    plan = Plan(bench, variety, boards, seed, distribution or configured or "uniform")
    alone = each_alone(bench, variety)
    blocks = list(_run(plan, executor, progress))
    found = {name: np.concatenate([block.figures[name] for block in blocks]) for name in FIGURES}
    nominal = {name: float(alone.nominal.figure(name)[0]) for name in FIGURES}
    unit = "Ω" if analysis.topology.path.source_is_current else "V/V"
    limits = {LIMITS[limit.figure]: limit for limit in _limits(settings, unit)}
    rows = tuple(
        _figure(plan, alone, blocks, name, found[name], limits.get(name), unit)
        for name in FIGURES
        if not np.isnan(nominal[name]) and not np.isnan(found[name]).all()
    )
    return Spread(
        title=analysis.circuit.title,
        netlist=analysis.circuit.path,
        version=VERSION,
        boards=boards,
        seed=seed,
        distribution=plan.distribution,
        failed=int(np.isnan(found["gain"]).sum()),
        draws=tuple(DrawRow(d.label, d.low, d.high, d.unit) for d in variety.draws),
        fixed=variety.fixed,
        figures=rows,
        leaders=tuple(_leaders(blocks)),
        total=_total(found, limits) if limits else None,
        notes=tuple(_notes(settings, limits)),
        problems=analysis.circuit.problems,
    )


# Boards -------------------------------------------------------------------------------------------


def _run(
    plan: Plan, executor: Executor | None, progress: Callable[[int, int], None] | None
) -> Iterator[Block]:
    starts = range(0, plan.boards, BLOCK)
    plans = [plan] * len(starts)
    results = executor.map(run_block, plans, starts) if executor else map(run_block, plans, starts)
    for start, block in zip(starts, results, strict=True):
        if progress is not None:
            progress(min(start + BLOCK, plan.boards), plan.boards)
        yield block


def run_block(plan: Plan, start: int) -> Block:
    """Draw and measure the boards from ``start`` on; the work of one worker."""
    drawn = board_deviations(plan, start, min(start + BLOCK, plan.boards))
    varied, temperature = board_values(plan.bench.circuit, plan.variety, drawn)
    found = measure(plan.bench, varied, temperature, leaders=True)
    figures = {name: found.figure(name) for name in FIGURES}
    reference = {
        "gain": plan.bench.gain, "low corner": plan.bench.low_hz, "high corner": plan.bench.high_hz,
    }  # fmt: skip
    sums = {
        name: Sums.of(drawn, np.log(values / (reference[name] or 1.0)))
        for name, values in figures.items()
    }
    leaders = {
        "low": _count(found.low_leader, found.parts),
        "high": _count(found.high_leader, found.parts),
    }
    return Block(figures, sums, leaders)


def board_deviations(plan: Plan, start: int, stop: int) -> FloatArray:
    """(draws, stop − start): what the boards of a plan deviate by."""
    return np.array(
        [
            deviations(
                latin_hypercube(draw.label, plan.seed, plan.boards, start, stop),
                draw.low,
                draw.high,
                plan.distribution,
            )
            for draw in plan.variety.draws
        ]
    )


def _count(leaders: NDArray[np.intp], parts: Sequence[str]) -> dict[str, int]:
    indices, counts = np.unique(leaders[leaders >= 0], return_counts=True)
    return {parts[i]: int(count) for i, count in zip(indices, counts, strict=True)}


# Rows ---------------------------------------------------------------------------------------------


def _figure(
    plan: Plan,
    alone: Alone,
    blocks: Sequence[Block],
    name: str,
    values: FloatArray,
    limit: Limit | None,
    gain_unit: str,
) -> FigureSpread:
    there = values[~np.isnan(values)]
    low, high = worst_cases(plan.bench, plan.variety, alone, name)
    if plan.distribution != "normal":
        # A figure may have its extreme between the ends (a bridge in balance has); a normal
        # deviation may lie outside them.
        low = min(low, (float(there.min()), (INSIDE,)))
        high = max(high, (float(there.max()), (INSIDE,)))
    edges, counts = histogram(there)
    nominal = float(alone.nominal.figure(name)[0])
    sigma = np.array([standard_deviation(d.low, d.high, plan.distribution) for d in _draws(plan)])
    slopes = np.nan_to_num(alone.slope[name])
    return FigureSpread(
        figure=name,
        unit=gain_unit if name == "gain" else "Hz",
        nominal=nominal,
        mean=float(there.mean()),
        deviation=float(there.std(ddof=1)) if there.size > 1 else 0.0,
        linear_deviation=nominal * float(np.sqrt(((slopes * sigma) ** 2).sum())),
        percentiles=tuple(Percentile(*pair) for pair in percentiles(there)),
        worst_low=WorstCase(*low),
        worst_high=WorstCase(*high),
        missing=int(values.size - there.size),
        contributions=_contributions(plan, alone, blocks, name),
        histogram=Histogram(tuple(edges), tuple(counts)),
        kept=_yield(_kept(values, limit), limit) if limit else None,
    )


def _draws(plan: Plan) -> Sequence[DrawRow]:
    return [DrawRow(d.label, d.low, d.high, d.unit) for d in plan.variety.draws]


def _contributions(
    plan: Plan, alone: Alone, blocks: Sequence[Block], name: str
) -> tuple[Contribution, ...]:
    total = blocks[0].sums[name]
    for block in blocks[1:]:
        total = total + block.sums[name]
    shares = total.shares()
    order = np.argsort(-shares, kind="stable")
    return tuple(
        Contribution(
            draw.label,
            float(shares[i]),
            float(alone.slope[name][i]) if not draw.unit else None,
            float(np.expm1(alone.low[name][i])),
            float(np.expm1(alone.high[name][i])),
        )
        for i in order
        for draw in (plan.variety.draws[i],)
    )


def _leaders(blocks: Sequence[Block]) -> Iterator[LeaderRow]:
    for end in ("low", "high"):
        counts: dict[str, int] = {}
        for block in blocks:
            for part, count in block.leaders[end].items():
                counts[part] = counts.get(part, 0) + count
        whole = sum(counts.values())
        for part, count in sorted(counts.items(), key=lambda entry: (-entry[1], entry[0])):
            yield LeaderRow(end, part, count / whole)


# Limits -------------------------------------------------------------------------------------------


def _limits(settings: PathSettings | None, gain_unit: str) -> Iterator[Limit]:
    """Those of figures that the boards have, in a unit these have."""
    known = {"Hz", "V/V", "dB"} if gain_unit == "V/V" else {"Hz", gain_unit}
    for limit in settings.limits if settings else ():
        ends = [end for end in (limit.minimum, limit.maximum) if end]
        if limit.figure in LIMITS and all(end.unit in known for end in ends):
            yield limit


def _notes(settings: PathSettings | None, judged: Mapping[str, Limit]) -> Iterator[str]:
    left = [e for e in settings.limits if e not in judged.values()] if settings else []
    if left:
        names = ", ".join(sorted({limit.figure.replace("_", " ") for limit in left}))
        yield f"not judged over the boards: the limits of {names}"


def _kept(values: FloatArray, limit: Limit) -> NDArray[np.bool_]:
    """Boards inside the limit; one without the figure is outside."""
    kept = ~np.isnan(values)
    with np.errstate(invalid="ignore"):
        if limit.minimum:
            kept &= _in_unit(values, limit.minimum) >= limit.minimum.value
        if limit.maximum:
            kept &= _in_unit(values, limit.maximum) <= limit.maximum.value
    return kept


def _in_unit(values: FloatArray, end: Quantity) -> FloatArray:
    return 20.0 * np.log10(values) if end.unit == "dB" else values


def _yield(kept: NDArray[np.bool_], limit: Limit | None) -> Yield:
    passed, boards = int(kept.sum()), int(kept.size)
    low, high = wilson_interval(passed, boards)
    return Yield(
        limit.minimum.text if limit and limit.minimum else "",
        limit.maximum.text if limit and limit.maximum else "",
        passed,
        boards,
        passed / boards,
        low,
        high,
    )


def _total(found: Mapping[str, FloatArray], limits: Mapping[str, Limit]) -> Yield:
    kept = np.logical_and.reduce([_kept(found[name], limit) for name, limit in limits.items()])
    return _yield(kept, None)
