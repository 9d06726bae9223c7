"""Statistics of many boards: intervals, percentiles, bins, and sums that merge block by block."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from tauledger.records import dataclass

FloatArray = NDArray[np.float64]

PERCENTS = (1.0, 5.0, 25.0, 50.0, 75.0, 95.0, 99.0)
NORMAL_95 = 1.959963984540054
"""Quantile 97.5 % of the normal."""
BINS = 15


def wilson_interval(passed: int, boards: int, z: float = NORMAL_95) -> tuple[float, float]:
    """Confidence interval of a share from a sample.

    E. B. Wilson, J. American Statistical Association 22 (1927) 209-212 (from memory).

    >>> [round(end, 4) for end in wilson_interval(9, 10)]
    [0.5958, 0.9821]
    """
    if boards == 0:
        return 0.0, 1.0
    share, weight = passed / boards, z * z / boards
    centre = share + weight / 2.0
    half = z * math.sqrt(share * (1.0 - share) / boards + weight / (4.0 * boards))
    low, high = (centre - half) / (1.0 + weight), (centre + half) / (1.0 + weight)
    # At the ends rounding leaves 1e-17 in place of nothing.
    return (low if passed else 0.0), (high if passed < boards else 1.0)


def percentiles(values: FloatArray) -> list[tuple[float, float]]:
    """(percent, value) for :data:`PERCENTS`, between boards by a straight line."""
    found = np.percentile(values, PERCENTS)
    return [(percent, float(value)) for percent, value in zip(PERCENTS, found, strict=True)]


def histogram(values: FloatArray, linear: bool = False) -> tuple[list[float], list[int]]:
    """Edges and counts of equal bins in the logarithm, or in the values themselves.

    One bin when all values are the same. A value of zero, as the resistance of an ideal output
    has, allows no logarithm.
    """
    linear = linear or float(values.min()) <= 0.0
    seen = values if linear else np.log(values)
    low, high = float(seen.min()), float(seen.max())
    ends = [low, high] if linear else [math.exp(low), math.exp(high)]
    # Voltages come from an iteration, which leaves their last digits open.
    largest = 1e-3 + max(abs(low), abs(high)) if linear else 1.0
    if high - low < 1e-9 * largest:
        return ends, [int(values.size)]
    counts, edges = np.histogram(seen, BINS)
    shown = edges if linear else np.exp(edges)
    return [float(edge) for edge in shown], [int(count) for count in counts]


@dataclass(frozen=True, slots=True)
class Sums:
    """Sums over boards for the correlation of every draw with one figure.

    ``y`` is the logarithm of the figure less that of the nominal board, ``x`` the deviations.
    """

    count: int
    y: float
    yy: float
    x: FloatArray
    xx: FloatArray
    xy: FloatArray

    @classmethod
    def of(cls, deviations: FloatArray, y: FloatArray) -> Sums:
        """Of (draws, boards) and (boards,); boards where y is NaN are left out."""
        there = ~np.isnan(y)
        x, kept = deviations[:, there], y[there]
        return cls(
            int(there.sum()),
            float(kept.sum()),
            float(kept @ kept),
            x.sum(axis=1),
            (x * x).sum(axis=1),
            x @ kept,
        )

    def __add__(self, other: Sums) -> Sums:
        return Sums(
            self.count + other.count,
            self.y + other.y,
            self.yy + other.yy,
            self.x + other.x,
            self.xx + other.xx,
            self.xy + other.xy,
        )

    def shares(self) -> FloatArray:
        """(draws,): squared correlation; 0 where something does not vary."""
        n = max(self.count, 1)
        variance_y = self.yy - self.y**2 / n
        variance_x = self.xx - self.x**2 / n
        covariance = self.xy - self.x * self.y / n
        product = variance_x * variance_y
        # Rounding leaves a variance of about 1e-16 of the sum of squares where nothing varies.
        varies = (variance_x > 1e-12 * self.xx) & (variance_y > 1e-12 * max(self.yy, 1e-20))
        return np.where(varies, covariance**2 / np.where(varies, product, 1.0), 0.0)
