"""The Bode plot as SVG of our own.

Written by hand rather than by a plotting library: the page starts in milliseconds, its colours
follow the reader's light or dark setting, its words stay text that can be read aloud and searched,
and every one of them is escaped in one place.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from html import escape

from tauledger.records import dataclass
from tauledger.report.html_style import PLOT_STYLE, THEME
from tauledger.report.inert import clip, inert
from tauledger.report.plot import Axis, BodePlot, Mark, Points, Region, Tick, Trace

WIDE, NARROW = 900.0, 350.0
_PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T"}
_LANE = 17.0
_MOST_LANES = 7
_CHARACTER = 7.4
_MOST_CIRCLES = 48


@dataclass(frozen=True, slots=True)
class _Frame:
    """Where things stand, in user units."""

    plot: BodePlot
    left: float
    right: float
    gain_top: float
    gain_height: float
    phase_top: float
    phase_height: float

    def x(self, frequency_hz: float) -> float:
        first, last = math.log10(self.plot.first_hz), math.log10(self.plot.last_hz)
        return self.left + (self.right - self.left) * (math.log10(frequency_hz) - first) / (
            last - first
        )

    def y_gain(self, height: float) -> float:
        return self.gain_top + self.gain_height * _down(self.plot.gain_axis, height)

    def y_phase(self, degrees: float) -> float:
        return self.phase_top + self.phase_height * _down(self.plot.phase_axis, degrees)


def _down(axis: Axis, value: float) -> float:
    return (axis.last - value) / (axis.last - axis.first)


def bode_svg(plot: BodePlot, width: float, anchor: str) -> str:
    """The plot to stand in a page with its style; ``anchor`` makes its ids unique."""
    content, height = _content(plot, width, anchor)
    return (
        f'<svg class="bode" viewBox="0 0 {width:g} {height:g}" width="{width:g}" '
        f'height="{height:g}" role="img" aria-labelledby="{anchor}-t">'
        f'<title id="{anchor}-t">{escape(plot.summary)}</title>{content}</svg>'
    )


def bode_file(plot: BodePlot, title: str) -> str:
    """The plot as an SVG file that stands alone, light or dark as its reader has it."""
    content, height = _content(plot, WIDE, "bode")
    head = 30.0
    shown = clip(inert(title), 110)
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {WIDE:g} {height + head:g}" '
        f'width="{WIDE:g}" height="{height + head:g}" role="img" aria-labelledby="title summary">\n'
        f'<title id="title">{escape(shown)}</title>'
        f'<desc id="summary">{escape(plot.summary)}</desc>\n'
        f"<style>{THEME}{PLOT_STYLE}</style>\n"
        f'<rect class="pg" width="{WIDE:g}" height="{height + head:g}"/>\n'
        f'<text class="hd" x="14" y="24">{escape(shown)}</text>\n'
        f'<g transform="translate(0 {head:g})">{content}</g>\n</svg>\n'
    )


def _content(plot: BodePlot, width: float, anchor: str) -> tuple[str, float]:
    wide = width >= WIDE
    left, right = (54.0, width - 62.0) if wide else (40.0, width - 46.0)
    legend, legend_height = _legend(plot, left, width)
    gain_height = 270.0 if wide else 210.0
    top = legend_height + 30
    bare = _Frame(plot, left, right, top, gain_height, 0.0, 0.0)
    ticks, ticks_height = _ticks(bare, plot.ticks, width)
    frame = _Frame(
        plot, left, right, top, gain_height, top + gain_height + ticks_height + 32, gain_height / 2
    )
    bottom = frame.phase_top + frame.phase_height
    spacing = 1 if wide else math.ceil(46.0 / ((right - left) / _decades(plot)))
    content = [
        _clip_paths(frame, anchor),
        legend,
        *_grid(frame, spacing),
        *_regions(frame, plot.regions, anchor),
        *(_trace(frame, trace, anchor) for trace in plot.traces),
        *_marks(frame, plot.marks),
        ticks,
        f'<text class="ax" x="{left - 8:g}" y="{top - 12:g}">{escape(plot.gain_label)}</text>',
        f'<text class="ax" x="{left - 8:g}" y="{frame.phase_top - 12:g}">phase, degrees</text>',
        f'<text class="ax mid" x="{(left + right) / 2:g}" y="{bottom + 37:g}">frequency, Hz</text>',
    ]
    return "".join(content), bottom + 46


def _decades(plot: BodePlot) -> float:
    return math.log10(plot.last_hz / plot.first_hz)


def _clip_paths(frame: _Frame, anchor: str) -> str:
    width = frame.right - frame.left
    return (
        f'<clipPath id="{anchor}-g"><rect x="{frame.left:g}" y="{frame.gain_top:g}" '
        f'width="{width:g}" height="{frame.gain_height:g}"/></clipPath>'
        f'<clipPath id="{anchor}-p"><rect x="{frame.left:g}" y="{frame.phase_top:g}" '
        f'width="{width:g}" height="{frame.phase_height:g}"/></clipPath>'
        f'<pattern id="{anchor}-h" width="7" height="7" patternUnits="userSpaceOnUse" '
        'patternTransform="rotate(45)"><path class="ht" d="M0 0V7"/></pattern>'
    )


def _legend(plot: BodePlot, left: float, width: float) -> tuple[str, float]:
    """A sample of each line and each limit with its name, in as many rows as they need."""
    drawn, x, y = [], left, 14.0
    entries = [(trace.kind, trace.label) for trace in plot.traces]
    entries += [(_letter(n), region.label) for n, region in enumerate(plot.regions)]
    for kind, words in entries:
        label = clip(inert(words), 40)
        indent = 36 if len(kind) > 1 else 16
        needed = indent + _CHARACTER * len(label) + 18
        if x > left and x + needed > width:
            x, y = left, y + 20
        drawn.append(_sample(kind, x, y))
        drawn.append(f'<text class="lg" x="{x + indent:g}" y="{y + 4:g}">{escape(label)}</text>')
        x += needed
    return "".join(drawn), y + 8


def _sample(kind: str, x: float, y: float) -> str:
    if len(kind) == 1:
        return f'<text class="ll" x="{x:g}" y="{y + 4:g}">{kind}</text>'
    if kind == "simulated":
        return "".join(
            f'<circle class="c-simulated" cx="{x + k:g}" cy="{y:g}" r="2.6"/>' for k in (6, 20)
        )
    return f'<path class="c-{kind}" d="M{x:g} {y:g}h28"/>'


def _grid(frame: _Frame, spacing: int) -> Iterator[str]:
    plot = frame.plot
    ends = (
        (frame.gain_top, frame.gain_top + frame.gain_height),
        (frame.phase_top, frame.phase_top + frame.phase_height),
    )
    first, last = round(math.log10(plot.first_hz)), round(math.log10(plot.last_hz))
    for power in range(first, last + 1):
        x = frame.x(10.0**power)
        yield "".join(f'<path class="gr" d="M{x:.1f} {a:g}V{b:g}"/>' for a, b in ends)
        if (power - first) % spacing == 0:
            y = ends[1][1] + 17
            yield f'<text class="tk mid" x="{x:.1f}" y="{y:g}">{_decade(power)}</text>'
    axes = ((plot.gain_axis, frame.y_gain), (plot.phase_axis, frame.y_phase))
    for axis, place in axes:
        base = place(axis.first)
        for value in axis.ticks:
            y = place(value)
            yield f'<path class="gr" d="M{frame.left:g} {y:.1f}H{frame.right:g}"/>'
            shown = f"{value:g}".replace("-", "−")
            yield f'<text class="tk end" x="{frame.left - 7:g}" y="{y + 4:.1f}">{shown}</text>'
        yield f'<path class="gr base" d="M{frame.left:g} {base:.1f}H{frame.right:g}"/>'


def _decade(power: int) -> str:
    scale = min(max(power // 3 * 3, -15), 12)
    return f"{10 ** (power - scale)}{_PREFIXES[scale]}"


def _trace(frame: _Frame, trace: Trace, anchor: str) -> str:
    pieces = []
    for points, place, clip_id in (
        (trace.gain, frame.y_gain, "g"),
        (trace.phase, frame.y_phase, "p"),
    ):
        drawn = _circles if trace.kind == "simulated" else _polyline
        pieces.append(f'<g clip-path="url(#{anchor}-{clip_id})">')
        pieces.append(drawn(frame, points, place, trace.kind))
        pieces.append("</g>")
    return "".join(pieces)


def _polyline(frame: _Frame, points: Points, place: Callable[[float], float], kind: str) -> str:
    path = "L".join(f"{frame.x(f):.1f} {place(value):.1f}" for f, value in points)
    return f'<path class="c-{kind}" d="M{path}"/>' if points else ""


def _circles(frame: _Frame, points: Points, place: Callable[[float], float], kind: str) -> str:
    stride = max(1, math.ceil(len(points) / _MOST_CIRCLES))
    return "".join(
        f'<circle class="c-{kind}" cx="{frame.x(f):.1f}" cy="{place(value):.1f}" r="2.6"/>'
        for f, value in points[::stride]
    )


def _regions(frame: _Frame, regions: Sequence[Region], anchor: str) -> Iterator[str]:
    """Hatched strips, each with the letter that the legend explains."""
    axis, plot = frame.plot.gain_axis, frame.plot
    middle = frame.x(math.sqrt(plot.first_hz * plot.last_hz))
    for number, region in enumerate(regions):
        left, right = frame.x(region.left_hz), frame.x(region.right_hz)
        left, right = max(left, frame.left), min(right, frame.right)
        top = frame.y_gain(min(max(region.top_db, axis.first), axis.last))
        bottom = frame.y_gain(max(min(region.bottom_db, axis.last), axis.first))
        if right - left < 1 or bottom - top < 1:
            continue
        # At the end towards midband, away from the curve.
        x = right - 11 if abs(right - middle) < abs(left - middle) else left + 11
        across = left < middle < right
        if right - left < 24 or across:
            x = (left + right) / 2
        # Below a strip inside the band, whose top has the words at the corner.
        y = (top + bottom) / 2 + 4 if region.hangs or across else bottom + 14
        yield (
            f'<rect class="lm" x="{left:.1f}" y="{top:.1f}" width="{right - left:.1f}" '
            f'height="{bottom - top:.1f}" fill="url(#{anchor}-h)"/>'
            f'<text class="ll mid" x="{x:.1f}" y="{y:.1f}">'
            f"{_letter(number)}</text>"
        )


def _letter(number: int) -> str:
    return chr(ord("A") + number % 26)


def _marks(frame: _Frame, marks: Sequence[Mark]) -> Iterator[str]:
    """The −3 dB points; their words stand inside the band, the upper's outside a narrow one."""
    places = [frame.x(mark.frequency_hz) for mark in marks]
    crowded = len(places) == 2 and places[1] - places[0] < 190
    for mark, x in zip(marks, places, strict=True):
        y = frame.y_gain(mark.gain_db)
        rightward = mark.end == "low" or crowded
        side, place = ("", x + 8) if rightward else (" end", x - 8)
        drop = 14 if crowded and mark.end == "high" else 18
        yield f'<circle class="mk" cx="{x:.1f}" cy="{y:.1f}" r="4"/>'
        yield (
            f'<text class="ml{side}" x="{place:.1f}" y="{y + drop:.1f}">{escape(mark.label)}</text>'
        )


def _ticks(frame: _Frame, ticks: Sequence[Tick], width: float) -> tuple[str, float]:
    """A tick for each part's corner under the gain, named in lanes so that no word is crossed.

    From the right, a name that would run over the line of a later one goes a lane lower.
    """
    axis = frame.gain_top + frame.gain_height
    placed: list[tuple[float, int, Tick, str]] = []
    for tick in sorted(ticks, key=lambda tick: -tick.frequency_hz):
        x = frame.x(tick.frequency_hz)
        room = int((width - x - 5) / _CHARACTER)
        label = clip(inert(tick.name), min(14, max(room, 4)))
        reach = x + 12 + _CHARACTER * len(label)
        lane = max((lane + 1 for at, lane, _, _ in placed if at < reach), default=0)
        placed.append((x, lane, tick, label))
    named = [entry for entry in placed if entry[1] < _MOST_LANES]
    drawn = [_tick(x, axis, lane, tick, label) for x, lane, tick, label in named]
    drawn += [_triangle(x, axis, tick) for x, lane, tick, _ in placed if lane >= _MOST_LANES]
    lanes = max((lane for _, lane, _, _ in named), default=-1) + 1
    return "".join(drawn), lanes * _LANE + (10 if placed else 0)


def _tick(x: float, axis: float, lane: int, tick: Tick, label: str) -> str:
    y = axis + 20 + lane * _LANE
    strong = " st" if tick.sets else ""
    return (
        f'<path class="ld" d="M{x:.1f} {axis + 8:.1f}V{y - 1:.1f}"/>{_triangle(x, axis, tick)}'
        f'<text class="tn {tick.end}{strong}" x="{x + 4:.1f}" y="{y:.1f}">{escape(label)}</text>'
    )


def _triangle(x: float, axis: float, tick: Tick) -> str:
    """Filled where the part sets its corner."""
    strong = " st" if tick.sets else ""
    return f'<path class="tr {tick.end}{strong}" d="M{x:.1f} {axis:.1f}l4.5 8h-9z"/>'
