"""What pictures need beyond the rows of a review: whole curves, and the value of every symbol."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import field

import numpy as np
from numpy.typing import NDArray

from tauledger.records import dataclass
from tauledger.review.rows import PathRow
from tauledger.smallsignal import Response

POINTS = 361
_BEYOND = 10.0
"""How far the curve goes on beyond the outermost corner of the path."""
_BEYOND_PARTS = 2.0
"""How far beyond the corner of a part that counts."""
_COUNTS = 0.02
"""A part with a smaller share does not widen the picture."""
_MOST_DECADES = 14


@dataclass(frozen=True, slots=True)
class Curve:
    """A frequency response; all three of one length, frequencies rising."""

    frequency_hz: tuple[float, ...]
    magnitude: tuple[float, ...]
    """In the path's ``gain_unit``."""
    phase_deg: tuple[float, ...]
    """Unwrapped, and within ±180° at midband."""


@dataclass(frozen=True, slots=True)
class Illustration:
    """The curves of one signal path, and the symbols its expressions use."""

    exact: Curve
    midband_hz: float
    simulated: Curve | None = None
    simulator: str = ""
    symbols: Mapping[str, float] = field(default_factory=dict)
    """Symbol as the expressions write it (``RC``, ``rπ(Q1)``, ``β``) → value in Ω, S or 1."""


def curve_range(path: PathRow, midband_hz: float) -> tuple[float, float]:
    """Whole decades that hold the band, its corners and the parts that make them, in Hz."""
    low = path.low.exact_hz if path.low else None
    high = path.high.exact_hz if path.high else None
    first = [(low or midband_hz / 100.0) / _BEYOND]
    last = [(high or midband_hz * 100.0) * _BEYOND]
    for row in path.time_constants:
        if row.corner_hz and row.share and row.share >= _COUNTS:
            (first if row.end == "low" else last).append(
                row.corner_hz / _BEYOND_PARTS if row.end == "low" else row.corner_hz * _BEYOND_PARTS
            )
    bottom, top = math.floor(math.log10(min(first))), math.ceil(math.log10(max(last)))
    if top - bottom > _MOST_DECADES:
        bottom = math.floor(math.log10(first[0]))
        top = math.ceil(math.log10(last[0]))
    return 10.0**bottom, 10.0**top


def curve_of(response: Response, first_hz: float, last_hz: float, midband_hz: float) -> Curve:
    """The exact response in :data:`POINTS` equal steps of log frequency."""
    frequency = np.logspace(math.log10(first_hz), math.log10(last_hz), POINTS)
    return sampled(frequency, response.at(frequency), midband_hz)


def sampled(
    frequency_hz: NDArray[np.float64], transfer: NDArray[np.complex128], midband_hz: float
) -> Curve:
    """Magnitude and unwrapped phase of a transfer given point by point, (points,) each."""
    turn = 360.0
    phase = np.degrees(np.unwrap(np.angle(transfer)))
    middle = phase[int(np.argmin(np.abs(np.log(frequency_hz / midband_hz))))]
    phase -= turn * round(float(middle) / turn)
    return Curve(
        tuple(frequency_hz.tolist()), tuple(np.abs(transfer).tolist()), tuple(phase.tolist())
    )
