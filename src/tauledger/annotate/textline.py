"""The lines of a ``text`` element, put together from however many spans it is split into."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace

from tauledger.annotate.geometry import length
from tauledger.annotate.metrics import ASCENT, DESCENT, text_width
from tauledger.records import dataclass

_TOUCHING = 0.25
"""Space between spans of one word, in em."""
_SAME_LINE = 2.5
"""Space between words of one line, in em; a wider one parts two labels."""
_RAISED = 0.7
"""A subscript or superscript leaves the base line by less than this, in em."""
_MOST_CHUNKS = 500
_LONGEST = 500
"""Bounds on the spans of one text and the characters of one span; a label is far shorter."""


@dataclass(frozen=True, slots=True)
class Chunk:
    """Characters in a row with one start, in the text's own user units."""

    text: str
    x: float
    y: float
    size: float
    anchor: str
    width: float | None = None

    @property
    def left(self) -> float:
        return self.x - self._width * {"middle": 0.5, "end": 1.0}.get(self.anchor, 0.0)

    @property
    def right(self) -> float:
        return self.left + self._width

    @property
    def _width(self) -> float:
        return text_width(self.text) * self.size if self.width is None else self.width

    def extent(self, shift: float) -> tuple[float, float]:
        """Top and bottom."""
        base = self.y + shift * self.size
        return base - ASCENT * self.size, base + DESCENT * self.size


class TextElement:
    """Gathers the spans as the parser meets them."""

    def __init__(self) -> None:
        self._chunks: list[Chunk] = []

    def move(self, attributes: Mapping[str, str], size: float, anchor: str) -> None:
        """Begin a span: at a place of its own, or where the last one ended."""
        last = self._chunks[-1] if self._chunks else None
        moved = any(name in attributes for name in ("x", "y", "dx", "dy"))
        if last is not None and (not moved or len(self._chunks) >= _MOST_CHUNKS):
            return
        flowing = last is not None and "x" not in attributes
        x = last.right if flowing and last is not None else length(attributes.get("x"), 0.0, size)
        y = length(attributes.get("y"), last.y if last is not None else 0.0, size)
        x += length(attributes.get("dx"), 0.0, size)
        y += length(attributes.get("dy"), 0.0, size)
        self._chunks.append(Chunk("", x, y, size, "start" if flowing else anchor))

    def add(self, data: str) -> None:
        last = self._chunks[-1]
        if len(last.text) < _LONGEST:
            self._chunks[-1] = replace(last, text=last.text + data[:_LONGEST])

    def lines(self) -> Iterator[Chunk]:
        """Whole lines; white space is collapsed as a browser does."""
        line: Chunk | None = None
        for chunk in self._chunks:
            chunk = replace(chunk, text=" ".join(chunk.text.split()))
            if not chunk.text:
                continue
            if line is not None and (joined := _joined(line, chunk)) is not None:
                line = joined
                continue
            if line is not None:
                yield line
            line = chunk
        if line is not None:
            yield line


def _joined(line: Chunk, chunk: Chunk) -> Chunk | None:
    size = max(line.size, chunk.size)
    gap = (chunk.left - line.right) / size if size > 0 else 0.0
    if abs(chunk.y - line.y) > _RAISED * size or not -1.0 < gap < _SAME_LINE:
        return None
    space = " " if gap > _TOUCHING else ""
    width = max(chunk.right, line.right) - line.left
    return Chunk(line.text + space + chunk.text, line.left, line.y, size, "start", width)
