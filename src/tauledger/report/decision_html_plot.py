"""Histograms and curves of the decisions as small SVGs, told in words as well as drawn."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from html import escape
from itertools import pairwise

from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.report.decision_html_scale import Scale, fitted
from tauledger.report.inert import clip, inert
from tauledger.review.decisions import FigureSpread

WIDTH = 300.0
_LEFT, _RIGHT = 42.0, 290.0
_HEIGHT = 118.0
_LANE = 15.0
_CHARACTER = 7.6
_LEAST_LANES = 2
"""So that the plots of a row stand on one line."""
_TICKS = (8, 7, 6, 5, 4, 3, 2)
_FARTHEST = 0.7
"""Of the boards' own range: so far outside a limit is still drawn at its place."""
_MOST_POINTS = 48

SMALL_STYLE = """
.mult{display:grid;grid-template-columns:repeat(auto-fill,minmax(min(100%,17rem),1fr));
gap:1.8rem 1.4rem;margin-top:.4rem}
.mult figure{min-width:0;break-inside:avoid}
.mult figcaption{font-size:.87rem;line-height:1.4}
.mult figcaption b{display:block;font-weight:600;font-size:.95rem;overflow-wrap:anywhere}
.mult svg{display:block;width:100%;max-width:24rem;height:auto;margin-top:.5rem}
.bar .plain{fill:var(--faint)}
svg .hb.low{fill:var(--low);stroke:none}
svg .hb.high{fill:var(--high);stroke:none}
svg .hb.plain{fill:var(--faint)}
svg .hb.out{fill:var(--alarm);stroke:none}
svg .bey{fill:var(--alarm);opacity:.08}
svg .nom{stroke:var(--ink);stroke-width:1.4;stroke-dasharray:3 2.5}
svg .lim{stroke:var(--limit);stroke-width:1.8}
svg .cv{fill:none;stroke-width:2;stroke-linejoin:round}
svg .cv.plain{stroke:var(--ink)}
svg .cm.low{fill:var(--low);stroke:none}
svg .cm.high{fill:var(--high);stroke:none}
svg .cm.plain{fill:var(--ink)}
""".replace("\n", "")


def colour_of(figure: str) -> str:
    """The ends of the band have colours of their own on every page."""
    return {"low corner": "low", "high corner": "high"}.get(figure, "plain")


# Histograms ---------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Mark:
    """A line across the plot with its words above it."""

    value: float
    words: str
    kind: str
    """``nom`` or ``lim``."""
    leans: str
    """``start`` to stand right of its line where there is room, ``end`` left of it."""


def histogram_svg(figure: FigureSpread, anchor: str) -> str:
    """Boards by value, with the nominal board and the limits; ``anchor`` makes its ids unique."""
    edges = figure.histogram.edges
    marks = [_Mark(figure.nominal, "nominal", "nom", "start")]
    least, most = (figure.kept.least, figure.kept.most) if figure.kept else (None, None)
    for value, words, leans in (
        (least, f"min {figure.kept.minimum}" if figure.kept else "", "end"),
        (most, f"max {figure.kept.maximum}" if figure.kept else "", "start"),
    ):
        if value is not None:
            marks.append(_Mark(value, clip(inert(words), 22), "lim", leans))
    scale = _across(figure, [mark.value for mark in marks])
    lanes = _lanes(scale, marks)
    top = 8.0 + _LANE * max(_LEAST_LANES, 1 + max(lane for lane, _, _ in lanes))
    base = top + _HEIGHT
    content = [
        *_beyond(scale, least, most, top, base),
        *_count_axis(max(figure.histogram.counts), top, base),
        *_bars(figure, scale, least, most, top, base),
        *_lines(scale, marks, lanes, top, base),
        *_value_axis(scale, base, f"{figure.figure}{_unit(scale) or ', V/V'}"),
    ]
    words = f"{figure.figure}: boards by value"
    return _svg(anchor, words, _told(figure, edges), "".join(content), base + 38.0)


def _across(figure: FigureSpread, marked: Sequence[float]) -> Scale:
    """Round the boards, wide enough for the marks that are not far off."""
    low, high = figure.histogram.edges[0], figure.histogram.edges[-1]
    unit = "" if figure.unit == "V/V" else figure.unit
    bare = fitted(low, high, not figure.linear, unit, 0.0, 1.0)
    near = [value for value in marked if _is_near(bare, value)]
    low, high = min(bare.first, *near, math.inf), max(bare.last, *near, -math.inf)
    wide = fitted(low, high, not figure.linear, unit, _LEFT + 6.0, _RIGHT - 6.0)
    return wide


def _is_near(bare: Scale, value: float) -> bool:
    if bare.logarithmic and value <= 0.0:
        return False
    return -_FARTHEST <= bare.at(value) <= 1.0 + _FARTHEST


def _place(scale: Scale, value: float) -> float:
    """Where a value stands; one off the plot at its edge."""
    if scale.logarithmic and value <= 0.0:
        return _LEFT
    return min(max(scale.at(value), _LEFT), _RIGHT)


def _is_off(scale: Scale, value: float) -> bool:
    slack = 1e-9 * max(abs(scale.first), abs(scale.last))
    return not scale.first - slack <= value <= scale.last + slack


def _lanes(scale: Scale, marks: Sequence[_Mark]) -> list[tuple[int, float, str]]:
    """Lane, place and anchor of the words of each mark, so that none run into each other."""
    # The name of the other axis stands first.
    placed: list[tuple[int, float, float]] = [(0, 0.0, _LEFT)]
    result = []
    for mark in marks:
        x, width = _place(scale, mark.value), _CHARACTER * len(_words(scale, mark))
        anchor = mark.leans
        if anchor == "start" and x + width > WIDTH:
            anchor = "end"
        elif anchor == "end" and x - width < 0.0:
            anchor = "start"
        left, right = (x, x + width) if anchor == "start" else (x - width, x)
        lane = 0
        while any(at == lane and left < b + 6.0 and right > a - 6.0 for at, a, b in placed):
            lane += 1
        placed.append((lane, left, right))
        result.append((lane, x, anchor))
    return result


def _words(scale: Scale, mark: _Mark) -> str:
    if not _is_off(scale, mark.value):
        return mark.words
    return f"◂ {mark.words}" if mark.value < scale.first else f"{mark.words} ▸"


def _lines(
    scale: Scale,
    marks: Sequence[_Mark],
    lanes: Sequence[tuple[int, float, str]],
    top: float,
    base: float,
) -> Iterator[str]:
    for mark, (lane, x, anchor) in zip(marks, lanes, strict=True):
        y = top - 6.0 - lane * _LANE
        if not _is_off(scale, mark.value):
            yield f'<path class="{mark.kind}" d="M{x:.1f} {y + 2:.1f}V{base:.1f}"/>'
        kind = "ll" if mark.kind == "lim" else "nl"
        side = " end" if anchor == "end" else ""
        shift = -3.0 if anchor == "end" else 3.0
        yield (
            f'<text class="{kind}{side}" x="{x + shift:.1f}" y="{y:.1f}">'
            f"{escape(_words(scale, mark))}</text>"
        )


def _beyond(
    scale: Scale, least: float | None, most: float | None, top: float, base: float
) -> Iterator[str]:
    """Where the limits let no board be."""
    spans = []
    if least is not None:
        spans.append((_LEFT, _place(scale, least)))
    if most is not None:
        spans.append((_place(scale, most), _RIGHT))
    for left, right in spans:
        if right - left > 0.5:
            yield (
                f'<rect class="bey" x="{left:.1f}" y="{top:.1f}" width="{right - left:.1f}" '
                f'height="{base - top:.1f}"/>'
            )


def _bars(
    figure: FigureSpread,
    scale: Scale,
    least: float | None,
    most: float | None,
    top: float,
    base: float,
) -> Iterator[str]:
    """A bar for each bin, cut where a limit crosses it."""
    counts, tallest = figure.histogram.counts, max(figure.histogram.counts)
    low = _LEFT if least is None else _place(scale, least)
    high = _RIGHT if most is None else _place(scale, most)
    colour = colour_of(figure.figure)
    for (start, end), count in zip(pairwise(figure.histogram.edges), counts, strict=True):
        a, b = scale.at(start), scale.at(end)
        if b - a < 3.0:
            a, b = (a + b) / 2.0 - 1.5, (a + b) / 2.0 + 1.5
        height = max((base - top) * 0.94 * count / tallest, 1.0) if count else 0.0
        pieces = (
            (a, min(b, low), "out"), (max(a, low), min(b, high), colour), (max(a, high), b, "out"),
        )  # fmt: skip
        for left, right, kind in pieces:
            if height and right - left > 0.05:
                gap = 1.0 if right == b and right - left > 2.0 else 0.0
                yield (
                    f'<rect class="hb {kind}" x="{left:.1f}" y="{base - height:.1f}" '
                    f'width="{right - left - gap:.1f}" height="{height:.1f}"/>'
                )


def _count_axis(tallest: int, top: float, base: float) -> Iterator[str]:
    scale = Scale(0.0, tallest / 0.94, False, "", base, top)
    yield f'<text class="ax" x="0" y="{top - 6:.1f}">boards</text>'
    for y, label in scale.ticks(4):
        if "." in label:
            continue
        yield f'<path class="gr" d="M{_LEFT:g} {y:.1f}H{_RIGHT:g}"/>'
        yield f'<text class="tk end" x="{_LEFT - 5:g}" y="{y + 4:.1f}">{label}</text>'


def _value_axis(scale: Scale, base: float, words: str) -> Iterator[str]:
    yield f'<path class="gr base" d="M{_LEFT:g} {base:.1f}H{_RIGHT:g}"/>'
    for x, label in _with_room(scale):
        yield f'<path class="gr base" d="M{x:.1f} {base:.1f}v4"/>'
        yield f'<text class="tk mid" x="{x:.1f}" y="{base + 17:.1f}">{label}</text>'
    middle = (_LEFT + _RIGHT) / 2.0
    yield f'<text class="ax mid" x="{middle:.1f}" y="{base + 33:.1f}">{_axis_words(words)}</text>'


def _with_room(scale: Scale) -> list[tuple[float, str]]:
    """As many labels as stand apart from each other."""
    for most in _TICKS:
        ticks = scale.ticks(most)
        if all(
            b - a > _CHARACTER * (len(first) + len(second)) / 2.0 + 7.0
            for (a, first), (b, second) in pairwise(ticks)
        ):
            break
    return ticks


def _axis_words(words: str) -> str:
    return escape(clip(inert(words), 40))


def _unit(scale: Scale) -> str:
    return f", {scale.unit_word}" if scale.unit_word else ""


def _told(figure: FigureSpread, edges: Sequence[float]) -> str:
    """The histogram in a sentence or two."""
    unit = "" if figure.unit == "V/V" else figure.unit
    low, high, nominal = (format_quantity(v, unit) for v in (edges[0], edges[-1], figure.nominal))
    mode = max(range(len(figure.histogram.counts)), key=lambda k: figure.histogram.counts[k])
    busiest = " to ".join(format_quantity(edges[k], unit) for k in (mode, mode + 1))
    words = (
        f"{sum(figure.histogram.counts)} boards from {low} to {high}, most of them at {busiest}; "
        f"nominal {nominal}."
    )
    if figure.kept is not None:
        ends = [
            f"{word} {text}"
            for word, text in (("at least", figure.kept.minimum), ("at most", figure.kept.maximum))
            if text
        ]
        words += f" Limit {' and '.join(ends)}: {100 * figure.kept.share:.2f} % keep it."
    return words


# Curves -------------------------------------------------------------------------------------------


def curve_svg(
    words: str,
    unit: str,
    across: Sequence[float],
    values: Sequence[float | None],
    colour: str,
    anchor: str,
) -> str:
    """A figure over temperature in °C; where it does not exist the line has a gap."""
    known = [value for value in values if value is not None]
    if not known:
        return ""
    top, base = 24.0, 24.0 + _HEIGHT
    bottom, height = min(known), max(known)
    margin = 0.08 * (height - bottom)
    is_wide = bottom > 0.0 and height / bottom > 20.0
    if is_wide:
        upward = fitted(bottom / 1.2, height * 1.2, True, unit, base, top)
    else:
        upward = fitted(bottom - margin, height + margin, False, unit, base, top)
    sideways = fitted(across[0], across[-1], False, "°C", _LEFT + 6.0, _RIGHT - 8.0)
    content = [
        *_rungs(upward),
        *_value_axis(sideways, base, "temperature, °C"),
        *_curve(sideways, upward, across, values, colour),
        f'<text class="ax" x="2" y="13">{_axis_words(words + _unit(upward))}</text>',
    ]
    told = f"From {_at(across, values, unit, 0)} to {_at(across, values, unit, -1)}."
    return _svg(anchor, f"{words} over temperature", told, "".join(content), base + 38.0)


def _at(across: Sequence[float], values: Sequence[float | None], unit: str, index: int) -> str:
    pairs = [(t, value) for t, value in zip(across, values, strict=True) if value is not None]
    temperature, value = pairs[index]
    return f"{format_quantity(value, unit)} at {format_quantity(temperature, '°C')}"


def _rungs(scale: Scale) -> Iterator[str]:
    for y, label in scale.ticks(6):
        yield f'<path class="gr" d="M{_LEFT:g} {y:.1f}H{_RIGHT:g}"/>'
        yield f'<text class="tk end" x="{_LEFT - 5:g}" y="{y + 4:.1f}">{label}</text>'


def _curve(
    sideways: Scale,
    upward: Scale,
    across: Sequence[float],
    values: Sequence[float | None],
    colour: str,
) -> Iterator[str]:
    pieces: list[list[str]] = [[]]
    dots = []
    for t, value in zip(across, values, strict=True):
        if value is None:
            pieces.append([])
            continue
        x, y = sideways.at(t), upward.at(value)
        pieces[-1].append(f"{x:.1f} {y:.1f}")
        dots.append(f'<circle class="cm {colour}" cx="{x:.1f}" cy="{y:.1f}" r="2.6"/>')
    for piece in pieces:
        if len(piece) > 1:
            yield f'<path class="cv {colour}" d="M{"L".join(piece)}"/>'
    # Between gaps a point alone is all there is to see.
    if len(dots) <= _MOST_POINTS or any(len(piece) == 1 for piece in pieces):
        yield "".join(dots)


def _svg(anchor: str, title: str, told: str, content: str, height: float) -> str:
    return (
        f'<svg viewBox="0 0 {WIDTH:g} {height:.1f}" width="{WIDTH:g}" height="{height:.1f}" '
        f'role="img" aria-labelledby="{anchor}-t {anchor}-d">'
        f'<title id="{anchor}-t">{escape(clip(inert(title), 90))}</title>'
        f'<desc id="{anchor}-d">{escape(inert(told))}</desc>{content}</svg>'
    )
