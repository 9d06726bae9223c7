"""The −3 dB frequencies of many boards, by search on their responses."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Level = Callable[[FloatArray | float], FloatArray]
"""Frequency in Hz, one for all boards or (boards,), to ln|H| of every board."""

_STEP = math.log(10.0) / 4.0
_BEYOND = math.log(1e4)
"""How far past the nominal corner a board's corner is looked for."""
_TOLERANCE = 1e-9


def find_edges(
    level: Level, target: FloatArray, midband_hz: float, nominal_hz: float, upward: bool
) -> tuple[FloatArray, FloatArray]:
    """(boards,) twice: the frequency nearest midband at which ln|H| has fallen to ``target``, NaN
    if there is none, and the highest ln|H| met on the way there.

    Four points a decade outward from midband bracket it (a dip narrower than that passes unseen,
    as it does in the search on one board at twelve), false position narrows the bracket to 1e-9.
    """
    inside, outside, peak = _bracket(level, target, midband_hz, nominal_hz, upward)
    found = ~np.isnan(outside)
    start = math.log(nominal_hz)
    a, b = np.where(found, inside, start), np.where(found, outside, start)
    root = _false_position(level, target, a, b)
    return np.where(found, np.exp(root), np.nan), peak


def _bracket(
    level: Level, target: FloatArray, midband_hz: float, nominal_hz: float, upward: bool
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """ln f of the last point above the target and the first one below (NaN where there is none),
    and the highest level up to there."""
    sign = 1.0 if upward else -1.0
    middle = math.log(midband_hz)
    length = sign * (math.log(nominal_hz) - middle) + _BEYOND
    inside = np.full(target.shape, middle)
    outside = np.full(target.shape, np.nan)
    peak = np.full(target.shape, -np.inf)
    for k in range(1, int(length / _STEP) + 1):
        at = middle + sign * k * _STEP
        here = level(math.exp(at))
        outside[(here < target) & np.isnan(outside)] = at
        searching = np.isnan(outside)
        peak = np.where(searching, np.maximum(peak, here), peak)
        if not searching.any():
            break
        inside[searching] = at
    return inside, outside, peak


def _false_position(level: Level, target: FloatArray, a: FloatArray, b: FloatArray) -> FloatArray:
    """Illinois variant, all boards in step; the level is ≥ target at ``a``, below at ``b``."""
    fa, fb = level(np.exp(a)) - target, level(np.exp(b)) - target
    for _ in range(60):
        gap = fb - fa
        moving = (np.abs(b - a) > _TOLERANCE) & (gap != 0.0) & (np.abs(fb) > 1e-12)
        if not moving.any():
            break
        step = np.where(moving, fb * (b - a) / np.where(gap == 0.0, 1.0, gap), 0.0)
        middle = b - step
        value = level(np.exp(middle)) - target
        crossed = (value < 0.0) != (fb < 0.0)
        a = np.where(moving & crossed, b, a)
        fa = np.where(moving, np.where(crossed, fb, fa / 2.0), fa)
        b = np.where(moving, middle, b)
        fb = np.where(moving, value, fb)
    return b
