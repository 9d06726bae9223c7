"""What each draw does alone, and the worst of all together: real solves, not extrapolation.

Only the slopes at the nominal board need none; they come from :mod:`tauledger.decide.slopes`.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from tauledger.decide.bench import Bench, Figures, measure
from tauledger.decide.slopes import figure_slopes
from tauledger.decide.varied import Draw, Variety, board_values
from tauledger.records import dataclass

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.intp]

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
    """d ln(figure) / d(deviation) at the nominal board; empty where nobody asked."""


FIGURES = ("gain", "low corner", "high corner")


def measure_deviations(bench: Bench, variety: Variety, deviations: FloatArray) -> Figures:
    """Figures of the boards with the given (draws, boards) deviations."""
    return measure(bench, *board_values(bench.circuit, variety, deviations))


def each_alone(bench: Bench, variety: Variety) -> Alone:
    """Solve the nominal board and each draw at its ends; slopes from the nominal board."""
    return replace(ends_alone(bench, variety), slope=figure_slopes(bench, variety))


def ends_alone(bench: Bench, variety: Variety) -> Alone:
    """The same without slopes, which a worst case does not need."""
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
    return Alone(found, low, high, {})


Extreme = tuple[float, tuple[str, ...]]
"""A figure, and the ends of the leading draws that give it."""


def worst_cases(
    bench: Bench, variety: Variety, alone: Alone, figures: Sequence[str]
) -> dict[str, tuple[Extreme, Extreme]]:
    """The lowest and the highest each figure gets.

    Every draw stands at the end that is worse for the figure by itself; the leading ones are
    then tried at both ends in every combination, since what one does may depend on another.
    NaN when the figure does not exist on any of these boards. All boards are solved together.
    """
    ends = np.array([[draw.low, draw.high] for draw in variety.draws])
    trials = [_trials(alone, figure) for figure in figures]
    if not trials:
        return {}
    chosen = np.concatenate([sides for _, both in trials for sides in both], axis=1)
    found = measure_deviations(bench, variety, np.take_along_axis(ends, chosen, axis=1))
    results, start = {}, 0
    for figure, (leading, both) in zip(figures, trials, strict=True):
        values = found.figure(figure)
        extremes: list[Extreme] = []
        for sides, pick in zip(both, (np.nanargmin, np.nanargmax), strict=True):
            part = values[start : start + sides.shape[1]]
            start += sides.shape[1]
            if np.isnan(part).all():
                extremes.append((float("nan"), ()))
                continue
            best = int(pick(part))
            names = _named(variety.draws, leading, sides[:, best])
            extremes.append((float(part[best]), names))
        results[figure] = extremes[0], extremes[1]
    return results


def _trials(alone: Alone, figure: str) -> tuple[IntArray, tuple[IntArray, IntArray]]:
    """The leading draws, and (draws, combinations) of ends to try for the lowest and highest."""
    effects = np.nan_to_num(np.stack([alone.low[figure], alone.high[figure]], axis=1))
    strength = np.abs(effects).max(axis=1)
    leading = np.argsort(-strength, kind="stable")[:LEADING]
    leading = leading[strength[leading] > 0.0]
    lowest, highest = (_sides(effects, leading, highest=highest) for highest in (False, True))
    return leading, (lowest, highest)


def _sides(effects: FloatArray, leading: IntArray, *, highest: bool) -> IntArray:
    """(draws, combinations): 0 for the low end, 1 for the high one."""
    pick = effects if highest else -effects
    base = np.argmax(pick, axis=1)
    combinations = np.array(list(itertools.product((0, 1), repeat=len(leading))), dtype=np.intp)
    table = np.repeat(base[:, None], len(combinations), axis=1)
    if len(leading):
        table[leading] = combinations.T
    return table


def _named(draws: Sequence[Draw], leading: IntArray, sides: IntArray) -> tuple[str, ...]:
    return tuple(f"{draws[i].label} {'high' if sides[i] else 'low'}" for i in leading)
