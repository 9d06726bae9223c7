"""The text report: plain when piped, in colours on a terminal, from one layout.

``rich`` is imported only for a terminal: it costs a fifth of the start-up time that a piped
report has.
"""

from __future__ import annotations

import os
import shutil
from collections.abc import Callable, Iterable, Sequence
from typing import TextIO

from tauledger.report.alphabet import alphabet
from tauledger.report.layout import Line, plain
from tauledger.report.page import BOUND, Page
from tauledger.report.sections import report_lines
from tauledger.review.rows import Review

WIDTH = 100
"""Columns of the page, less on a narrower terminal."""
_NARROWEST = 72
_STYLES = {
    "": "",
    "title": "bold",
    "verdict": "bold",
    "heading": "bold blue",
    "column": "dim",
    "faint": "dim",
    "strong": "bold",
    "bar": "blue",
    "alarm": "bold red",
}


def text_report(review: Review, width: int = WIDTH, encoding: str | None = "utf-8") -> str:
    """The report as plain text, at most ``width`` columns, in letters ``encoding`` has."""
    return page_text(lambda page: report_lines(page, review), width, encoding)


def page_text(
    draw: Callable[[Page], Sequence[Line]], width: int = WIDTH, encoding: str | None = "utf-8"
) -> str:
    """A page as plain text, as :func:`text_report`."""
    return plain(draw(Page(width, alphabet(encoding)))).replace(BOUND, " ")


def write_text_report(review: Review, stream: TextIO) -> None:
    """Write the report to the stream; as :func:`write_page`."""
    write_page(lambda page: report_lines(page, review), stream)


def write_page(draw: Callable[[Page], Sequence[Line]], stream: TextIO) -> None:
    """Write a page to the stream, coloured when it is a terminal that wants colour.

    Raises OSError when the stream cannot be written, BrokenPipeError among them.
    """
    width = WIDTH
    if stream.isatty():
        columns = shutil.get_terminal_size((WIDTH, 24)).columns
        width = min(WIDTH, max(columns, _NARROWEST))
    lines = draw(Page(width, alphabet(stream.encoding)))
    if _wants_colour(stream):
        _write_coloured(lines, stream)
    else:
        stream.write(plain(lines).replace(BOUND, " "))


def _wants_colour(stream: TextIO) -> bool:
    """NO_COLOR (no-color.org: any value but the empty one) and TERM=dumb are respected."""
    plain_asked = bool(os.environ.get("NO_COLOR")) or os.environ.get("TERM") == "dumb"
    return stream.isatty() and not plain_asked


def _write_coloured(lines: Iterable[Line], stream: TextIO) -> None:
    from rich.console import Console
    from rich.text import Text

    console = Console(file=stream, highlight=False, markup=False, emoji=False)
    for line in lines:
        text = Text()
        for piece in line:
            text.append(piece.text.replace(BOUND, " "), _STYLES[piece.style])
        console.print(text, soft_wrap=True)
