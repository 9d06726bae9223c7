"""What each draw does alone, and the worst of all together: real solves, not extrapolation.

Only the slopes at the nominal board need none; they come from :mod:`tauledger.decide.slopes`.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from tauledger.decide.bench import Bench, Figures, measure
from tauledger.decide.slopes import figure_slopes
from tauledger.decide.varied import Draw, Variety, board_values
from tauledger.records import dataclass

FloatArray = NDArray[np.float64]

LEADING = 6
"""So many of the strongest draws are tried at both ends in every combination."""


@dataclass(frozen=True, slots=True)
class Alone:
    """Figures with one draw at a time off nominal; logarithms relative to the nominal board."""

    nominal: Figures
    low: dict[str, FloatArray]
    """Figure to (draws,): ln(figure / nominal) with the draw at its low end."""
    high: dict[str, FloatArray]
    slope: dict[str, FloatArray]
    """d ln(figure) / d(deviation) at the nominal board."""


FIGURES = ("gain", "low corner", "high corner")


def measure_deviations(bench: Bench, variety: Variety, deviations: FloatArray) -> Figures:
    """Figures of the boards with the given (draws, boards) deviations."""
    return measure(bench, *board_values(bench.circuit, variety, deviations))


def each_alone(bench: Bench, variety: Variety) -> Alone:
    """Solve the nominal board and each draw at its ends; slopes from the nominal board."""
    draws = variety.draws
    size = len(draws)
    deviations = np.zeros((size, 1 + 2 * size))
    diagonal = np.arange(size)
    deviations[diagonal, 1 + diagonal] = [draw.low for draw in draws]
    deviations[diagonal, 1 + size + diagonal] = [draw.high for draw in draws]
    found = measure_deviations(bench, variety, deviations)
    low, high = {}, {}
    for figure in FIGURES:
        with np.errstate(invalid="ignore"):
            logs = np.log(found.figure(figure))
        low[figure], high[figure] = (logs[1:] - logs[0]).reshape(2, size)
    return Alone(found, low, high, figure_slopes(bench, variety))


def worst_cases(
    bench: Bench, variety: Variety, alone: Alone, figure: str
) -> tuple[tuple[float, tuple[str, ...]], tuple[float, tuple[str, ...]]]:
    """The lowest and the highest a figure gets, each with the ends of the leading draws.

    Every draw stands at the end that is worse for the figure by itself; the leading ones are
    then tried at both ends in every combination, since what one does may depend on another.
    NaN when the figure does not exist on any of these boards.
    """
    ends = np.array([[draw.low, draw.high] for draw in variety.draws])
    effects = np.nan_to_num(np.stack([alone.low[figure], alone.high[figure]], axis=1))
    strength = np.abs(effects).max(axis=1)
    leading = np.argsort(-strength, kind="stable")[:LEADING]
    leading = leading[strength[leading] > 0.0]
    sides = [_sides(effects, leading, highest=highest) for highest in (False, True)]
    chosen = np.concatenate(sides, axis=1)
    deviations = np.take_along_axis(ends, chosen, axis=1)
    found = measure_deviations(bench, variety, deviations).figure(figure)
    count = sides[0].shape[1]
    results: list[tuple[float, tuple[str, ...]]] = []
    for part, pick in ((slice(0, count), np.nanargmin), (slice(count, None), np.nanargmax)):
        values = found[part]
        if np.isnan(values).all():
            results.append((float("nan"), ()))
            continue
        best = int(pick(values))
        column = chosen[:, part][:, best]
        results.append((float(values[best]), _named(variety.draws, leading, column)))
    return results[0], results[1]


def _sides(effects: FloatArray, leading: NDArray[np.intp], *, highest: bool) -> NDArray[np.intp]:
    """(draws, combinations): 0 for the low end, 1 for the high one."""
    pick = effects if highest else -effects
    base = np.argmax(pick, axis=1)
    combinations = np.array(list(itertools.product((0, 1), repeat=len(leading))), dtype=np.intp)
    table = np.repeat(base[:, None], len(combinations), axis=1)
    if len(leading):
        table[leading] = combinations.T
    return table


def _named(
    draws: Sequence[Draw], leading: NDArray[np.intp], sides: NDArray[np.intp]
) -> tuple[str, ...]:
    return tuple(f"{draws[i].label} {'high' if sides[i] else 'low'}" for i in leading)
