"""The page as lines of styled pieces, before any thought of where they are printed.

A :class:`Piece` is text with the name of a style; :mod:`tauledger.report.terminal` turns lines
of them into plain text or into colours. Tables never exceed the page: columns marked flexible
give way and wrap.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import NamedTuple

from tauledger.records import dataclass
from tauledger.report.inert import clip, display_width


class Piece(NamedTuple):
    """Text in one style; ``style`` is a key of the style table, empty for ordinary text."""

    text: str
    style: str = ""


Line = tuple[Piece, ...]
BLANK: Line = ()
_INDENT = 1
_GAP = "  "
_WIDE_GAP = "     "
_NARROWEST_COLUMN = 8


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a table; a flexible one wraps when the page is too narrow."""

    heading: str
    right: bool = False
    flexible: bool = False
    style: str = ""


@dataclass(frozen=True, slots=True)
class Row:
    """Cells of one table row, its details on lines of their own below, and a style for all."""

    cells: tuple[str, ...]
    details: tuple[str, ...] = ()
    style: str = ""


def text_width(line: Line) -> int:
    """Columns a line takes."""
    return sum(display_width(piece.text) for piece in line)


def heading(text: str, width: int, rule: str) -> Line:
    """A section heading, followed by a rule to the right margin."""
    room = width - display_width(text) - 1
    return (Piece(text, "heading"), Piece(" "), Piece(rule * room, "faint"))


def wrap(text: str, width: int) -> list[str]:
    """The text in lines of at most ``width`` columns, broken at spaces, else inside words."""
    lines: list[str] = []
    current = ""
    for word in text.split(" "):
        joined = f"{current} {word}" if current else word
        if display_width(joined) <= width:
            current = joined
            continue
        if current:
            lines.append(current)
        while display_width(word) > width:
            cut = _fitting_length(word, width)
            lines.append(word[:cut])
            word = word[cut:]
        current = word
    return [*lines, current] if current or not lines else lines


def _fitting_length(word: str, width: int) -> int:
    length = min(len(word), width)
    while length > 1 and display_width(word[:length]) > width:
        length -= 1
    return max(length, 1)


def paragraph(
    text: str, width: int, indent: str = "", first: str = "", style: str = ""
) -> list[Line]:
    """Wrapped text; ``first`` replaces the indent of the first line (a bullet, a label)."""
    lead = first or indent
    room = width - max(display_width(lead), display_width(indent))
    lines = wrap(text, room)
    return [(Piece(lead if n == 0 else indent), Piece(line, style)) for n, line in enumerate(lines)]


def table(
    columns: Sequence[Column], rows: Sequence[Row], width: int, beside: Sequence[Row] = ()
) -> list[Line]:
    """Headings, rows and details as lines within ``width``; no lines when there are no rows.

    The columns also make room for the rows of another table, ``beside`` which this one stands.
    """
    if not rows:
        return []
    room = width - _INDENT - len(_GAP) * (len(columns) - 1)
    widths = _column_widths(columns, [*rows, *beside], room)
    heads = tuple(column.heading for column in columns)
    lines = _row_lines(columns, Row(heads, style="column"), widths)
    for row in rows:
        lines += _row_lines(columns, row, widths)
        margin = " " * (_INDENT + widths[0] + len(_GAP))
        for detail in row.details:
            lines += paragraph(detail, width, margin, style="faint")
    return lines


def _column_widths(columns: Sequence[Column], rows: Sequence[Row], room: int) -> list[int]:
    """Natural widths, cut to ``room``: first flexible columns down to their longest words, then
    down to a floor, last the first column, whose names are then clipped."""
    texts = [[column.heading, *(row.cells[n] for row in rows)] for n, column in enumerate(columns)]
    widths = [max(map(display_width, column)) for column in texts]
    flexible = [n for n, column in enumerate(columns) if column.flexible]
    words = {
        n: max(display_width(word) for text in texts[n] for word in text.split(" "))
        for n in flexible
    }
    _shrink(widths, words, room)
    _shrink(widths, dict.fromkeys(flexible, _NARROWEST_COLUMN), room)
    _shrink(widths, {0: _NARROWEST_COLUMN}, room)
    return widths


def _shrink(widths: list[int], floors: dict[int, int], room: int) -> None:
    """Narrow the widest of the columns that have a floor until all fit or stand on it."""
    while sum(widths) > room:
        above = [n for n, floor in floors.items() if widths[n] > floor]
        if not above:
            return
        widths[max(above, key=lambda n: widths[n])] -= 1


def _row_lines(columns: Sequence[Column], row: Row, widths: Sequence[int]) -> list[Line]:
    wrapped = [
        wrap(cell, width) if column.flexible else [clip(cell, width)]
        for column, cell, width in zip(columns, row.cells, widths, strict=True)
    ]
    lines: list[Line] = []
    for level in range(max(map(len, wrapped))):
        pieces = [Piece(" " * _INDENT)]
        for n, (column, cell) in enumerate(zip(columns, wrapped, strict=True)):
            text = cell[level] if level < len(cell) else ""
            blank = " " * (widths[n] - display_width(text))
            style = column.style or row.style
            pieces += (
                [Piece(blank), Piece(text, style)]
                if column.right
                else [
                    Piece(text, style),
                    Piece(blank),
                ]
            )
            pieces.append(Piece(_GAP))
        lines.append(_trimmed(pieces))
    return lines


def _trimmed(pieces: Iterable[Piece]) -> Line:
    """The line without trailing blanks and empty pieces."""
    kept = [piece for piece in pieces if piece.text]
    while kept and not kept[-1].text.strip():
        kept.pop()
    return tuple(kept)


def plain(lines: Iterable[Line]) -> str:
    """The lines as text, each ended by a line feed, with no trailing blanks."""
    return "".join("".join(piece.text for piece in line).rstrip() + "\n" for line in lines)


def pairs(items: Sequence[tuple[str, str]], width: int) -> list[Line]:
    """Names with their values in as many equal columns as fit, read along the rows."""
    if not items:
        return []
    names = max(display_width(name) for name, _ in items)
    values = max(display_width(value) for _, value in items)
    cell = names + len(_GAP) + values
    across = max((width - _INDENT + len(_WIDE_GAP)) // (cell + len(_WIDE_GAP)), 1)
    lines: list[Line] = []
    for start in range(0, len(items), across):
        cells = []
        for name, value in items[start : start + across]:
            blank = " " * (cell - display_width(name) - display_width(value))
            cells.append(name + blank + value)
        lines.append((Piece(" " * _INDENT + _WIDE_GAP.join(cells)),))
    return lines
