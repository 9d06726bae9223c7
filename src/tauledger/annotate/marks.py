"""The marks themselves, as SVG: shapes and weights that read without colour.

A part that sets a corner stands in a dark plate with heavy light text and says so in words; other
capacitors have plain text over a bar as long as their share; transistors have a rule at the left.
Every element carries its whole style, since the drawing's own style sheet would reach it
otherwise. Text is fitted to its measured length, whatever face the viewer has.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence

from tauledger.annotate.geometry import Box
from tauledger.annotate.metrics import ASCENT, text_width
from tauledger.annotate.notes import PartNote, Summary
from tauledger.records import dataclass

INK, PAPER, GREY = "#16324f", "#ffffff", "#8a99a8"
_LEADING = 1.22
_PAD = 0.35
_BAR = 0.22
_BOLD = 1.08
"""How much wider heavy text runs (estimate)."""
_LEGEND_COLUMNS = 46
_MOST_MISSING = 16


@dataclass(frozen=True, slots=True)
class Mark:
    """What stands beside one part; sizes in em of its text."""

    note: PartNote
    narrow: bool = False
    named: bool = False
    """With the designator, where the mark cannot stand right beside it."""

    @property
    def rows(self) -> list[str]:
        rows = list(self.note.narrow if self.narrow else self.note.mark)
        return [f"{self.note.name}: {rows[0]}", *rows[1:]] if self.named else rows

    @property
    def width(self) -> float:
        weight = _BOLD if self.note.sets else 1.0
        return max(text_width(row) for row in self.rows) * weight + 2 * _PAD

    @property
    def height(self) -> float:
        bar = _BAR + 0.15 if self.note.share is not None else 0.0
        return len(self.rows) * _LEADING + 2 * _PAD * 0.6 + bar

    def svg(self, box: Box, size: float, label: Box) -> str:
        """The mark in its box, for text of ``size``; a named one is tied to its label."""
        note = self.note
        front, back = (PAPER, INK) if note.sets else (INK, PAPER)
        parts = [_leader(label, box, size)] if self.named else []
        parts.append(_plate(box, back, 1.0 if note.sets else 0.82))
        if note.sets:
            parts.append(_frame(box, 0.08 * size, PAPER))
        if note.transistor and not note.sets:
            parts.append(_plate(Box(box.left, box.top, box.left + 0.12 * size, box.bottom), INK))
        left, top = box.left + _PAD * size, box.top + _PAD * 0.6 * size
        for row, line in enumerate(self.rows):
            base = top + (row * _LEADING + ASCENT + 0.13) * size
            parts.append(text(line, left, base, size, front, bold=bool(note.sets)))
        if note.share is not None:
            under = top + (len(self.rows) * _LEADING + 0.1) * size
            parts += _bar(left, under, box.width - 2 * _PAD * size, note.share, size, front)
        title = f"<title>{escape(note.name + ': ' + ', '.join(note.facts))}</title>"
        return f"<g>{title}{''.join(parts)}</g>"


@dataclass(frozen=True, slots=True)
class Legend:
    """Gain, corners, key, and what was not found; sizes in em."""

    summary: Summary
    missing: Sequence[str]
    footer: str

    @property
    def rows(self) -> list[str]:
        """Lines of text; one that begins with a blank is indented."""
        said = [self.summary.gain]
        for figure, *rest in self.summary.corners:
            said += [", ".join([figure, *rest[:1]]), *("  " + part for part in rest[1:])]
        wrapped = (
            textwrap.wrap(line, _LEGEND_COLUMNS, subsequent_indent="  ")
            for line in (*said, *self._missing())
        )
        return [line for lines in wrapped for line in lines]

    def _missing(self) -> Iterable[str]:
        if not self.missing:
            return
        names = ", ".join(self.missing[:_MOST_MISSING])
        more = len(self.missing) - _MOST_MISSING
        yield f"not on the drawing: {names}" + (f" and {more} more" if more > 0 else "")

    @property
    def width(self) -> float:
        widest = max(
            text_width(self.summary.path) * _BOLD,
            *(text_width(row) for row in (*self.rows, *_KEY)),
            text_width(self.footer) * 0.8,
        )
        return widest + 2.4

    @property
    def height(self) -> float:
        return (len(self.rows) + len(_KEY) + 2) * 1.35 + 1.5

    def svg(self, box: Box, size: float) -> str:
        left, step = box.left + 0.8 * size, 1.35 * size
        base = box.top + 1.5 * size
        parts = [
            _plate(box, PAPER, 0.9),
            _frame(box, 0.06 * size),
            text(self.summary.path, left, base, size, INK, bold=True),
        ]
        for row in self.rows:
            base += step
            indent = 0.8 * size if row.startswith(" ") else 0.0
            parts.append(text(row.strip(), left + indent, base, size, INK))
        base += 0.4 * size
        for row, sample in zip(_KEY, _SAMPLES, strict=True):
            base += step
            parts.append(sample(left, base, size))
            parts.append(text(row.strip(), left + 2.4 * size, base, size, INK))
        parts.append(text(self.footer, left, base + step, 0.8 * size, GREY_TEXT))
        return f"<g>{''.join(parts)}</g>"


GREY_TEXT = "#4d5b69"
_KEY = (
    "      sets a corner",
    "      share of the sum at its end",
    "      transistor: use and bias",
)


def _sample_plate(left: float, base: float, size: float) -> str:
    return _plate(Box(left, base - 0.8 * size, left + 1.7 * size, base + 0.15 * size), INK)


def _sample_bar(left: float, base: float, size: float) -> str:
    return "".join(_bar(left, base - 0.45 * size, 1.7 * size, 0.6, size, INK))


def _sample_rule(left: float, base: float, size: float) -> str:
    return _plate(
        Box(left + 0.8 * size, base - 0.85 * size, left + 0.92 * size, base + 0.2 * size), INK
    )


_SAMPLES = (_sample_plate, _sample_bar, _sample_rule)


def text(
    content: str, left: float, base: float, size: float, fill: str, *, bold: bool = False
) -> str:
    """One line of text with its full style, fitted to the width it was measured at."""
    width = text_width(content) * size * (_BOLD if bold else 1.0)
    style = (
        f"font:{'bold' if bold else 'normal'} {_n(size)}px sans-serif;fill:{fill};fill-opacity:1;"
        "stroke:none;opacity:1;text-anchor:start;letter-spacing:normal;word-spacing:normal;"
        "dominant-baseline:auto;writing-mode:horizontal-tb;text-decoration:none;"
        "text-transform:none;visibility:visible;display:inline;white-space:pre;filter:none;"
        "transform:none"
    )
    return (
        f'<text x="{_n(left)}" y="{_n(base)}" textLength="{_n(width)}" '
        f'lengthAdjust="spacingAndGlyphs" style="{style}">{escape(content)}</text>'
    )


def _path(data: str, style: str) -> str:
    common = "opacity:1;visibility:visible;display:inline;filter:none;transform:none;marker:none"
    return f'<path d="{data}" style="{style};{common}"/>'


def _plate(box: Box, fill: str, opacity: float = 1.0) -> str:
    data = f"M{_n(box.left)} {_n(box.top)}h{_n(box.width)}v{_n(box.height)}h{_n(-box.width)}z"
    return _path(data, f"fill:{fill};fill-opacity:{_n(opacity)};stroke:none")


def _frame(box: Box, width: float, colour: str = INK) -> str:
    data = f"M{_n(box.left)} {_n(box.top)}h{_n(box.width)}v{_n(box.height)}h{_n(-box.width)}z"
    return _path(data, _stroke(colour, width))


def _stroke(colour: str, width: float) -> str:
    return (
        f"fill:none;stroke:{colour};stroke-width:{_n(width)};stroke-opacity:1;"
        "stroke-dasharray:none;stroke-linecap:butt;vector-effect:none"
    )


def _bar(
    left: float, top: float, width: float, share: float, size: float, colour: str
) -> Iterable[str]:
    """A thin line for the whole, a thick one for the share."""
    middle, thick = top + _BAR / 2 * size, _BAR * size
    yield _path(f"M{_n(left)} {_n(middle)}h{_n(width)}", _stroke(GREY, 0.05 * size))
    part = width * min(max(share, 0.0), 1.0)
    yield _path(f"M{_n(left)} {_n(middle)}h{_n(part)}", _stroke(colour, thick))


def _leader(label: Box, box: Box, size: float) -> str:
    (x1, y1), (x2, y2) = label.link(box)
    data = f"M{_n(x1)} {_n(y1)}L{_n(x2)} {_n(y2)}"
    # Light beside dark, so that the line shows on a sheet of either.
    return _path(data, _stroke(PAPER, 0.15 * size)) + _path(data, _stroke(INK, 0.07 * size))


def escape(content: str) -> str:
    """Text for XML, in ASCII; what XML does not allow becomes a question mark."""
    return "".join(_escaped(character) for character in content)


def _escaped(character: str) -> str:
    if character in "<>&\"'" or not character.isascii():
        if "\ud800" <= character <= "\udfff" or character in "\ufffe\uffff":
            return "?"
        return f"&#{ord(character)};"
    return character if character.isprintable() else "?"


def _n(value: float) -> str:
    """A number short enough for a file and exact enough for the smallest unit in use."""
    return f"{value:.6g}" if abs(value) < 1e6 else f"{value:.0f}"
