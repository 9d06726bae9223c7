"""Tolerance spread: Monte Carlo over many boards, worst cases and sensitivities.

The bias of every board is solved anew. Boards are computed in blocks of :data:`BLOCK`, always the
same ones, so that the figures do not depend on how blocks are shared among workers, to the last
bit.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import field, replace

import numpy as np
from numpy.typing import NDArray

from tauledger.analysis import Analysis
from tauledger.configuration.settings import Limit, PathSettings
from tauledger.decide.apart import add_others, linear_names
from tauledger.decide.asked import Asked
from tauledger.decide.bench import Bench, bench_of, measure, measure_solution
from tauledger.decide.judged import demands_of, wanted_of
from tauledger.decide.sampling import deviations, latin_hypercube, standard_deviation
from tauledger.decide.statistics import Sums, histogram, percentiles
from tauledger.decide.varied import Variety, board_values, variety_of
from tauledger.decide.worst import FIGURES, Alone, Extreme, each_alone, worst_cases
from tauledger.decide.yields import demand_rows, kept_by, total_yield, yield_of
from tauledger.records import dataclass
from tauledger.review.decisions import (
    Contribution,
    DrawRow,
    FigureSpread,
    Histogram,
    LeaderRow,
    Percentile,
    Spread,
    WorstCase,
)
from tauledger.version import VERSION

FloatArray = NDArray[np.float64]

BLOCK = 1000
"""Boards solved together; small enough for the cache, large enough for the array operations."""
BOARDS = 10_000
MOST_BOARDS = 1_000_000
INSIDE = "values inside their tolerances"
"""In place of the ends, where a board is worse than every combination of them."""
_UNIT = {"V": 1.0, "A": 1e-3, "%": 1.0}
"""What differences are counted in, so that their squares stay well above rounding."""


@dataclass(frozen=True, slots=True)
class Plan:
    """Everything a worker needs; pickles."""

    bench: Bench
    variety: Variety
    boards: int
    seed: int
    distribution: str
    others: Mapping[str, float] = field(default_factory=dict)
    """Figures beside gain and corners, and what they are on the nominal board."""

    @property
    def names(self) -> tuple[str, ...]:
        """Everything measured on every board."""
        return (*FIGURES, *self.bench.wanted.names)

    def nominal(self, name: str, alone: Alone) -> float:
        return self.others[name] if name in self.others else float(alone.nominal.figure(name)[0])


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
    demands = demands_of(analysis, settings)
    plain = bench_of(analysis)
    bench = replace(plain, wanted=wanted_of(demands, analysis))
    variety = variety_of(analysis.circuit, bench.source, settings, asked)
    configured = settings.spread.distribution if settings and settings.spread else ""
    apart = replace(bench, responds=False)
    nominal = measure_solution(apart, analysis.solution).others
    plan = Plan(
        bench,
        variety,
        boards,
        seed,
        distribution or configured or "uniform",
        {figure.name: float(nominal[figure.name][0]) for figure in demands.figures},
    )
    alone = add_others(each_alone(plain, variety), apart, variety)
    blocks = list(_run(plan, executor, progress))
    found = {name: np.concatenate([block.figures[name] for block in blocks]) for name in plan.names}
    unit = "Ω" if analysis.topology.path.source_is_current else "V/V"
    units = {"gain": unit} | {figure.name: figure.unit for figure in demands.figures}
    limits = dict(reversed(demands.limits))
    known = [
        name
        for name in (*FIGURES, *plan.others)
        if np.isfinite(plan.nominal(name, alone)) and np.isfinite(found[name]).any()
    ]
    worst = worst_cases(plain, variety, alone, [name for name in known if name in FIGURES])
    worst |= worst_cases(apart, variety, alone, [name for name in known if name not in FIGURES])
    rows = tuple(
        _figure(
            plan, alone, blocks, name, found[name], worst[name], limits.get(name),
            units.get(name, "Hz"),
        )
        for name in known
    )  # fmt: skip
    notes = "; ".join(demands.unjudged)
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
        total=total_yield(demands, found),
        notes=(f"not judged over the boards: {notes}",) if notes else (),
        problems=analysis.circuit.problems,
        demands=tuple(demand_rows(demands, found, {row.figure for row in rows})),
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
    figures = {name: found.figure(name) for name in plan.names}
    sums = {
        name: Sums.of(drawn, _from_nominal(plan, name, figures[name]))
        for name in (*FIGURES, *plan.others)
    }
    leaders = {
        "low": _count(found.low_leader, found.parts),
        "high": _count(found.high_leader, found.parts),
    }
    return Block(figures, sums, leaders)


def _from_nominal(plan: Plan, name: str, values: FloatArray) -> FloatArray:
    """How far each board is from the nominal one, as the correlations count it; else NaN."""
    if name in (linear := linear_names(plan.bench)):
        return (values - plan.others[name]) / _UNIT[linear[name]]
    reference = {
        "gain": plan.bench.gain, "low corner": plan.bench.low_hz, "high corner": plan.bench.high_hz,
        **plan.others,
    }  # fmt: skip
    with np.errstate(divide="ignore", invalid="ignore"):
        logs = np.log(values / (reference[name] or 1.0))
    return np.where(np.isfinite(logs), logs, np.nan)


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
    worst: tuple[Extreme, Extreme],
    limit: Limit | None,
    unit: str,
) -> FigureSpread:
    there = values[np.isfinite(values)]
    linear = name in linear_names(plan.bench)
    low, high = worst
    edges, counts = histogram(there, linear)
    if plan.distribution != "normal" and len(counts) > 1:
        # A figure may have its extreme between the ends (a bridge in balance has); a normal
        # deviation may lie outside them.
        # Asked so that it is true as well where no combination of ends has the figure.
        if not float(there.min()) >= low[0]:
            low = float(there.min()), (INSIDE,)
        if not float(there.max()) <= high[0]:
            high = float(there.max()), (INSIDE,)
    nominal = plan.nominal(name, alone)
    sigma = np.array([standard_deviation(d.low, d.high, plan.distribution) for d in _draws(plan)])
    deviation = float(np.sqrt(((np.nan_to_num(alone.slope[name]) * sigma) ** 2).sum()))
    return FigureSpread(
        figure=name,
        unit=unit,
        nominal=nominal,
        mean=float(there.mean()),
        deviation=float(there.std(ddof=1)) if there.size > 1 else 0.0,
        linear_deviation=deviation if linear else nominal * deviation,
        percentiles=tuple(Percentile(*pair) for pair in percentiles(there)),
        worst_low=WorstCase(*low),
        worst_high=WorstCase(*high),
        missing=int(values.size - there.size),
        contributions=_contributions(plan, alone, blocks, name, linear),
        histogram=Histogram(tuple(edges), tuple(counts)),
        kept=yield_of(kept_by(values, limit), limit) if limit else None,
        linear=linear,
    )


def _draws(plan: Plan) -> Sequence[DrawRow]:
    return [DrawRow(d.label, d.low, d.high, d.unit) for d in plan.variety.draws]


def _contributions(
    plan: Plan, alone: Alone, blocks: Sequence[Block], name: str, linear: bool
) -> tuple[Contribution, ...]:
    total = blocks[0].sums[name]
    for block in blocks[1:]:
        total = total + block.sums[name]
    shares = total.shares()
    order = np.argsort(-shares, kind="stable")
    at_ends = [alone.low[name], alone.high[name]]
    low, high = at_ends if linear else map(np.expm1, at_ends)
    return tuple(
        Contribution(
            draw.label,
            float(shares[i]),
            float(alone.slope[name][i]) if not draw.unit else None,
            float(low[i]),
            float(high[i]),
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
