"""Where the passband is, and its exact edges, from the response of the whole network."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from tauledger.records import dataclass
from tauledger.smallsignal.modes import ComplexArray
from tauledger.smallsignal.network import FloatArray
from tauledger.smallsignal.response import Response

TWO_PI = 2.0 * math.pi
HALF_POWER = 1.0 / math.sqrt(2.0)
"""−3.0103 dB, as IUPAC and ISO define level differences (references C5, read)."""
HALF_POWER_DB = 20.0 * math.log10(math.sqrt(2.0))
POINTS_PER_DECADE = 12
SHORTEST_PASSBAND_DECADES = 1.0
DEEPEST_PASSBAND_DB = 30.0
"""A flat stretch further below the maximum is the skirt of a resonance, not a passband."""
LOWEST_HZ, HIGHEST_HZ = 1e-7, 1e14


@dataclass(frozen=True, slots=True)
class Sweep:
    """The exact response on a logarithmic grid that reaches beyond every natural frequency."""

    frequency_hz: FloatArray
    transfer: ComplexArray

    @property
    def level_db(self) -> FloatArray:
        floor = np.finfo(float).tiny
        return np.asarray(20.0 * np.log10(np.maximum(np.abs(self.transfer), floor)))


@dataclass(frozen=True, slots=True)
class Passband:
    """A stretch of the sweep within ±3 dB, of at least a decade when ``flat``."""

    midband_hz: float
    flat: bool


def sweep_response(response: Response, natural_frequencies: ComplexArray) -> Sweep:
    """Sweep from two decades below the slowest pole to one above the fastest."""
    sizes = np.abs(natural_frequencies) / (2.0 * math.pi)
    sizes = sizes[(sizes > LOWEST_HZ) & (sizes < HIGHEST_HZ)]
    low, high = (sizes.min(), sizes.max()) if sizes.size else (1e3, 1e3)
    start, stop = math.log10(low) - 2.0, math.log10(high) + 1.5
    points = int((stop - start) * POINTS_PER_DECADE) + 2
    grid = np.logspace(start, stop, points)
    frequency = np.unique(np.concatenate([grid, _resonances(natural_frequencies)]))
    return Sweep(frequency, response.at(frequency))


def _resonances(natural_frequencies: ComplexArray) -> FloatArray:
    """Points across every lightly damped pole pair, which a plain grid would step over."""
    spread = np.linspace(-8.0, 8.0, 33)
    points = [
        (pole.imag + spread * abs(pole.real)) / (2.0 * math.pi)
        for pole in natural_frequencies
        if pole.imag > 2.0 * abs(pole.real)
    ]
    frequency = np.concatenate([*points, np.zeros(0)])
    return np.asarray(frequency[(frequency > LOWEST_HZ) & (frequency < HIGHEST_HZ)])


def find_passband(sweep: Sweep, *, cut: bool = False) -> Passband:
    """The highest stretch of the response that stays within ±3 dB for a decade or more.

    The highest, not the widest: below its bypass capacitor's zero a stage is flat too, down to
    DC, but that is not where it is used. A resonance is higher still, but narrow.
    Without such a stretch the passband is what lies within 3 dB of the maximum, its middle the
    maximum itself. ``cut`` says that the response goes on beyond the last point of the sweep.
    """
    level, decades = sweep.level_db, np.log10(sweep.frequency_hz)
    last = level.size - 1
    begins, ends = _extents(level)
    # A stretch that runs off the grid goes on beyond it, unless it slopes there as a skirt does.
    goes_on = np.abs(np.gradient(level, decades)) < HALF_POWER_DB
    length = decades[ends] - decades[begins]
    length += (begins == 0) * goes_on[0] + (ends == last) * (goes_on[last] and not cut)
    flat = (length >= SHORTEST_PASSBAND_DECADES) & (level > level.max() - DEEPEST_PASSBAND_DB)
    candidates = np.flatnonzero(flat) if flat.any() else np.arange(level.size)
    best = int(candidates[np.argmax(level[candidates])])
    begin, end = int(begins[best]), int(ends[best])
    return Passband(
        midband_hz=_middle(sweep.frequency_hz, begin, end, last + cut)
        if flat.any()
        else float(sweep.frequency_hz[best]),
        flat=bool(flat.any()),
    )


def _extents(level: FloatArray) -> tuple[np.ndarray, np.ndarray]:
    """For every point, how far the response stays within ±3 dB of it on either side."""
    outside = np.abs(level[None, :] - level[:, None]) > HALF_POWER_DB
    before, after = np.tril(outside, -1), np.triu(outside, 1)
    last = level.size - 1
    left = np.where(before.any(axis=1), last - before[:, ::-1].argmax(axis=1) + 1, 0)
    right = np.where(after.any(axis=1), after.argmax(axis=1) - 1, last)
    return left, right


def _middle(frequency: FloatArray, begin: int, end: int, last: int) -> float:
    if begin == 0 and end == last:
        return float(math.sqrt(frequency[begin] * frequency[end]))
    if begin == 0:
        return float(frequency[end] / 1e3)
    if end == last:
        return float(frequency[begin] * 1e3)
    return float(math.sqrt(frequency[begin] * frequency[end]))


def find_edge(response: Response, sweep: Sweep, midband_hz: float, *, upward: bool) -> float | None:
    """The frequency nearest midband at which the gain has fallen by 3 dB, to 1e-9 relative.

    None when the gain does not fall so far within the sweep.
    """
    target = response.magnitude(midband_hz) * HALF_POWER
    frequency, size = sweep.frequency_hz, np.abs(sweep.transfer)
    beyond = frequency > midband_hz if upward else frequency < midband_hz
    below = np.flatnonzero(beyond & (size < target))
    if not below.size:
        return None
    outer = int(below[0] if upward else below[-1])
    neighbour = outer - 1 if upward else outer + 1
    inside = frequency[neighbour] if 0 <= neighbour < frequency.size else midband_hz
    if (inside < midband_hz) == upward:
        inside = midband_hz

    def excess(log_frequency: float) -> float:
        return math.log(max(response.magnitude(math.exp(log_frequency)), 1e-300) / target)

    a, b = math.log(inside), math.log(float(frequency[outer]))
    root = _polished_edge(response, excess, target, a, b)
    return math.exp(false_position(excess, a, b) if root is None else root)


def _polished_edge(
    response: Response,
    excess: Callable[[float], float],
    target: float,
    inside: float,
    outside: float,
) -> float | None:
    """ln f of the edge by the modes, then two steps by direct solutions; None where that fails."""
    modes = response.modes
    if modes is None:
        return None

    def nearly(log_frequency: float) -> float:
        return math.log(max(modes.magnitude(TWO_PI * math.exp(log_frequency)), 1e-300) / target)

    root = false_position(nearly, inside, outside)
    slope = (nearly(root + 1e-3) - nearly(root - 1e-3)) / 2e-3
    for _ in range(2):
        rest = excess(root)
        if abs(rest) < 1e-12 or abs(rest) > 1e-3 * abs(slope):
            break
        root -= rest / slope
    return root if abs(rest) < 1e-9 * abs(slope) else None


def false_position(function: Callable[[float], float], inside: float, outside: float) -> float:
    """Illinois variant of the false-position method; ``function`` is ≥ 0 inside, < 0 outside."""
    a, b = inside, outside
    fa, fb = function(a), function(b)
    for _ in range(60):
        if abs(b - a) < 1e-10 or fa == fb:
            break
        middle = b - fb * (b - a) / (fb - fa)
        value = function(middle)
        if (value < 0) != (fb < 0):
            a, fa = b, fb
        else:
            fa /= 2.0
        b, fb = middle, value
        if abs(value) < 1e-12:
            break
    return b
