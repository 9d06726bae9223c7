"""What a Bode plot shows, worked out once for every way of drawing it."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from itertools import pairwise

from tauledger.quantity import format_quantity, parse_si
from tauledger.records import dataclass
from tauledger.review.illustration import Curve, Illustration
from tauledger.review.limits import LimitRow
from tauledger.review.rows import PathRow

DEEPEST_DB = 80.0
"""So far below its top the plot reaches at most."""
_HALF_POWER_DB = 10.0 * math.log10(2.0)
_MOST_TICKS = 40
_HEADROOM_DB = 5.0
_STRIP = 0.13
"""Height of a limit's strip over that of the plot."""

Points = tuple[tuple[float, float], ...]


@dataclass(frozen=True, slots=True)
class Trace:
    """One curve: its points are (frequency in Hz, dB) and (frequency in Hz, degrees)."""

    kind: str
    """``exact``, ``estimate`` or ``simulated``."""
    label: str
    gain: Points
    phase: Points


@dataclass(frozen=True, slots=True)
class Tick:
    """The corner of one part on the frequency axis."""

    name: str
    frequency_hz: float
    end: str
    sets: bool
    """Whether it sets the corner of its end."""


@dataclass(frozen=True, slots=True)
class Mark:
    """A −3 dB point of the exact curve."""

    end: str
    label: str
    frequency_hz: float
    gain_db: float


@dataclass(frozen=True, slots=True)
class Region:
    """Where a limit does not let the curve go."""

    label: str
    left_hz: float
    right_hz: float
    bottom_db: float
    top_db: float
    hangs: bool
    """Whether it hangs from above the band, its words at its top."""


@dataclass(frozen=True, slots=True)
class Axis:
    first: float
    last: float
    step: float

    @property
    def ticks(self) -> Iterator[float]:
        for k in range(math.ceil(self.first / self.step), math.floor(self.last / self.step) + 1):
            yield k * self.step


@dataclass(frozen=True, slots=True)
class BodePlot:
    route: str
    gain_label: str
    first_hz: float
    last_hz: float
    gain_axis: Axis
    phase_axis: Axis
    traces: tuple[Trace, ...]
    ticks: tuple[Tick, ...]
    marks: tuple[Mark, ...]
    regions: tuple[Region, ...]
    beyond: int
    """Parts whose corner has no tick: it lies outside the plot, or there are too many."""
    summary: str
    """The plot in a sentence or two."""


def bode_plot(path: PathRow, shown: Illustration, limits: Sequence[LimitRow] = ()) -> BodePlot:
    """Everything drawn for one signal path."""
    exact = _measured("exact", "exact, linear network", shown.exact)
    first, last = shown.exact.frequency_hz[0], shown.exact.frequency_hz[-1]
    gain_axis = _gain_axis(exact)
    traces = [exact]
    if estimate := _estimate(path, shown, first, last):
        traces.append(estimate)
    if shown.simulated is not None:
        traces.append(_measured("simulated", shown.simulator, shown.simulated))
    ticks = [
        Tick(row.name, row.corner_hz, row.end, _sets(path, row.end, row.name))
        for row in sorted(path.time_constants, key=lambda row: -(row.share or 0.0))
        if row.corner_hz and row.end in ("low", "high")
    ]
    inside = tuple(tick for tick in ticks if first <= tick.frequency_hz <= last)[:_MOST_TICKS]
    marks = tuple(_marks(path, exact))
    return BodePlot(
        route=f"{path.input} → {path.output}",
        gain_label="gain, dB" if path.gain_unit == "V/V" else "gain, dB above 1 Ω",
        first_hz=first,
        last_hz=last,
        gain_axis=gain_axis,
        phase_axis=_phase_axis(exact, gain_axis.first),
        traces=tuple(traces),
        ticks=inside,
        marks=marks,
        regions=tuple(
            region
            for region in _regions(path, shown, limits, gain_axis, first, last)
            if region.left_hz < region.right_hz
            and region.bottom_db < gain_axis.last
            and region.top_db > gain_axis.first
        ),
        beyond=len(ticks) - len(inside),
        summary=_summary(path, marks, traces),
    )


def _measured(kind: str, label: str, curve: Curve) -> Trace:
    kept = [k for k, size in enumerate(curve.magnitude) if size > 0.0]
    return Trace(
        kind,
        label,
        tuple((curve.frequency_hz[k], 20.0 * math.log10(curve.magnitude[k])) for k in kept),
        tuple((curve.frequency_hz[k], curve.phase_deg[k]) for k in kept),
    )


def _sets(path: PathRow, end: str, name: str) -> bool:
    corner = path.low if end == "low" else path.high
    return corner is not None and name in corner.set_by


def _gain_axis(exact: Trace) -> Axis:
    heights = [height for _, height in exact.gain] or [0.0]
    top = math.ceil((max(heights) + _HEADROOM_DB) / 10.0) * 10.0
    bottom = max(math.floor(min(heights) / 10.0) * 10.0, top - DEEPEST_DB)
    bottom = min(bottom, top - 20.0)
    if top - bottom <= 50.0:
        return Axis(bottom, top, 10.0)
    return Axis(20.0 * math.floor(bottom / 20.0), top, 20.0)


def _phase_axis(exact: Trace, floor_db: float) -> Axis:
    """Round to the step; where the gain lies below the plot, the phase does not widen it."""
    seen = [
        degrees
        for (_, degrees), (_, height) in zip(exact.phase, exact.gain, strict=True)
        if height >= floor_db
    ] or [0.0]
    spread = max(seen) - min(seen)
    step = 45.0 if spread <= 200.0 else 90.0 if spread <= 500.0 else 180.0
    bottom = math.floor((min(seen) - 5.0) / step) * step
    top = math.ceil((max(seen) + 5.0) / step) * step
    return Axis(bottom, top, step)


# The estimate -------------------------------------------------------------------------------------


def _estimate(path: PathRow, shown: Illustration, first: float, last: float) -> Trace | None:
    """One pole at each end where the sums of time constants put it, in straight lines."""
    gain = path.gain_by_inspection or path.gain
    low = path.low.estimate_hz if path.low else None
    high = path.high.estimate_hz if path.high else None
    if not gain or not (low or high) or (low and high and low >= high):
        return None
    middle = 20.0 * math.log10(abs(gain))
    corners = [f for f in (low, high) if f and first < f < last]
    breaks = {f * k for f in corners for k in (0.1, 10.0)}
    turn = _midband_phase(shown)

    def height(f: float) -> float:
        rise = 20.0 * math.log10(min(f / low, 1.0)) if low else 0.0
        return middle + rise + (20.0 * math.log10(min(high / f, 1.0)) if high else 0.0)

    def phase(f: float) -> float:
        lead = 45.0 * (1.0 - _within(math.log10(f / low))) if low else 0.0
        return turn + lead - (45.0 * (1.0 + _within(math.log10(f / high))) if high else 0.0)

    inner = sorted(f for f in breaks if first < f < last)
    gain_points = tuple((f, height(f)) for f in (first, *corners, last))
    phase_points = tuple((f, phase(f)) for f in (first, *inner, last))
    return Trace("estimate", "estimate, one pole at each end", gain_points, phase_points)


def _within(decades: float) -> float:
    return min(max(decades, -1.0), 1.0)


def _midband_phase(shown: Illustration) -> float:
    """0° or ±180°, whichever the exact curve is nearest to."""
    curve = shown.exact
    place = min(
        range(len(curve.frequency_hz)),
        key=lambda k: abs(math.log(curve.frequency_hz[k] / shown.midband_hz)),
    )
    return 180.0 * round(curve.phase_deg[place] / 180.0)


# Corners and limits -------------------------------------------------------------------------------


def _marks(path: PathRow, exact: Trace) -> Iterator[Mark]:
    for corner in (path.low, path.high):
        if corner is not None and corner.exact_hz:
            height = _height_at(exact.gain, corner.exact_hz)
            label = format_quantity(corner.exact_hz, "Hz")
            yield Mark(corner.end, label, corner.exact_hz, height)


def _height_at(points: Points, frequency: float) -> float:
    for (f1, y1), (f2, y2) in pairwise(points):
        if f1 <= frequency <= f2:
            return y1 + (y2 - y1) * math.log(frequency / f1) / math.log(f2 / f1)
    return points[0][1] if points else 0.0


def _regions(
    path: PathRow,
    shown: Illustration,
    limits: Iterable[LimitRow],
    axis: Axis,
    first: float,
    last: float,
) -> Iterator[Region]:
    """A strip along the boundary of each limit, on the side where the curve may not be."""
    if not path.gain:
        return
    middle, edge = shown.midband_hz, 20.0 * math.log10(abs(path.gain)) - _HALF_POWER_DB
    low = path.low.exact_hz if path.low else None
    high = path.high.exact_hz if path.high else None
    # The gain is judged in the middle of the band, half the way to each corner.
    left, right = math.sqrt(middle * (low or first)), math.sqrt(middle * (high or last))
    depth = _STRIP * (axis.last - axis.first)
    for row in limits:
        for words, is_least in ((row.minimum, True), (row.maximum, False)):
            limit = _limit(words, row.unit)
            if limit is None:
                continue
            place = (left, right)
            height, hangs = edge, not is_least
            if row.figure == "low corner":
                hangs = is_least
                inner = left if limit < left else middle
                place = (first, min(limit, middle)) if is_least else (min(limit, middle), inner)
            elif row.figure == "high corner":
                inner = right if limit > right else middle
                place = (inner, max(limit, middle)) if is_least else (max(limit, middle), last)
            elif row.figure == "midband gain":
                height = limit if row.unit == "dB" else 20.0 * math.log10(limit)
            else:
                continue
            label = f"{row.figure} {'≥' if is_least else '≤'} {words}"
            bottom, top = (height, height + depth) if hangs else (height - depth, height)
            yield Region(label, *place, bottom, top, hangs)


def _limit(words: str, unit: str) -> float | None:
    """A limit as a number; one of a ratio must be positive to stand in decibels."""
    if not words:
        return None
    try:
        value, found = parse_si(words.replace("V/V", "").strip())
    except ValueError:
        return None
    if found and found != unit:
        return None
    return value if unit == "dB" or value > 0.0 else None


def _summary(path: PathRow, marks: Sequence[Mark], traces: Sequence[Trace]) -> str:
    words = []
    if path.gain_db is not None:
        words.append(f"midband gain {format_quantity(path.gain_db, 'dB')}")
    words += [f"{mark.end} corner {mark.label}" for mark in marks]
    kinds = {trace.kind for trace in traces}
    beside = ["the straight lines of the estimate"] if "estimate" in kinds else []
    beside += ["the points of the simulator"] if "simulated" in kinds else []
    drawn = f" Beside the exact curve: {' and '.join(beside)}." if beside else ""
    return f"Gain and phase against frequency: {', '.join(words) or 'no passband'}.{drawn}"
