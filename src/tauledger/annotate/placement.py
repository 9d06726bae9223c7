"""Room on a drawing: where a mark covers neither text nor lines, as near as possible to its part.

Lines and texts are drawn into two coarse grids; sums over any rectangle then take four look-ups
(a summed-area table).
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

from tauledger.annotate.geometry import Box, Point

_CELLS = 1200
"""Along the longer side of the grid, at most."""
_MOST_SAMPLES = 4_000_000
_TEXT_COST, _MARK_COST, _OUTSIDE_COST = 12.0, 14.0, 40.0
"""For each square em covered, or off the page."""
_LINE_COST = 1.6
"""For each em of line covered."""
_FAR_COST = 0.4
"""For each em between a designator and its mark."""

Grid = NDArray[np.int64]


class Room:
    """What is occupied on one page."""

    def __init__(
        self,
        page: Box,
        unit: float,
        texts: Iterable[Box],
        outlines: Sequence[tuple[Point, ...]],
    ) -> None:
        """``unit`` is the size of the marks' text, in user units."""
        self.page = page
        self.unit = unit
        self.cell = max(0.25 * unit, max(page.width, page.height) / _CELLS)
        self.shape = (
            max(1, math.ceil(page.height / self.cell)),
            max(1, math.ceil(page.width / self.cell)),
        )
        self.texts = _summed(self._filled(texts))
        self.lines = _summed(self._drawn(outlines))
        self.marks: list[Box] = []

    def near(self, label: Box, width: float, height: float) -> Box:
        """The best place for a mark of this size beside a label; it is taken from then on."""
        best = min(self._around(label, width, height), key=lambda box: self._cost(box, label))
        self.marks.append(best)
        return best

    def anywhere(self, width: float, height: float) -> Box:
        """The clearest place of this size on the page, the lower right for choice; then taken."""
        margin = 0.6 * self.unit
        page = self.page.grown(-margin)
        across = np.linspace(max(page.right - width, page.left), page.left, 60)
        down = np.linspace(max(page.bottom - height, page.top), page.top, 60)
        best, least = Box(page.left, page.top, page.left + width, page.top + height), math.inf
        for i, top in enumerate(down):
            for j, left in enumerate(across):
                box = Box(float(left), float(top), float(left) + width, float(top) + height)
                cost = self.covered(box.grown(0.5 * margin)) + 0.02 * (i + j)
                if cost < least:
                    best, least = box, cost
        self.marks.append(best)
        return best

    def covered(self, box: Box) -> float:
        """How much a box would cover, weighted; 0 for a clear place on the page."""
        square = self.unit * self.unit
        text = self._count(self.texts, box) * self.cell * self.cell / square
        line = self._count(self.lines, box) * self.cell / self.unit
        outside = (box.width * box.height - box.overlap(self.page)) / square
        marks = sum(box.overlap(mark) for mark in self.marks) / square
        cost = _TEXT_COST * text + _LINE_COST * line + _MARK_COST * marks
        return cost + _OUTSIDE_COST * outside

    def _cost(self, box: Box, label: Box) -> float:
        away = box.gap(label) / self.unit
        return self.covered(box.grown(0.15 * self.unit)) + _FAR_COST * away

    def _around(self, label: Box, width: float, height: float) -> Iterable[Box]:
        """Right, below, above, left; then the same further out and shifted along."""
        for step in (0.3, 1.0, 2.0, 3.2, 4.6, 6.2, 8.0, 10.0, 13.0, 17.0):
            gap = step * self.unit
            for part in (0.5, 0.0, 1.0, 0.25, 0.75, -0.5, 1.5, -1.2, 2.2):
                top = label.top - part * (height - label.height)
                left = label.left - part * (width - label.width)
                yield _box(label.right + gap, top, width, height)
                yield _box(left, label.bottom + gap, width, height)
                yield _box(left, label.top - gap - height, width, height)
                yield _box(label.left - gap - width, top, width, height)

    # Grids ----------------------------------------------------------------------------------------

    def _filled(self, boxes: Iterable[Box]) -> Grid:
        grid: Grid = np.zeros(self.shape, dtype=np.int64)
        for box in boxes:
            top, bottom, left, right = self._cells(box)
            grid[top:bottom, left:right] = 1
        return grid

    def _drawn(self, outlines: Sequence[tuple[Point, ...]]) -> Grid:
        """Points along every line, one a cell."""
        grid: Grid = np.zeros(self.shape, dtype=np.int64)
        pieces = [
            np.hstack((line[:-1], line[1:]))
            for line in (np.asarray(points, dtype=float) for points in outlines)
            if len(line) > 1
        ]
        if not pieces:
            return grid
        ends = np.vstack(pieces)
        # Lines that leave the page by far would take all samples there are.
        origin = (self.page.left, self.page.top, self.page.left, self.page.top)
        ends = np.clip((ends - origin) / self.cell, -10.0, max(self.shape) + 10.0)
        counts = np.ceil(np.hypot(ends[:, 2] - ends[:, 0], ends[:, 3] - ends[:, 1])).astype(int) + 1
        kept = np.cumsum(counts) <= _MOST_SAMPLES
        ends, counts = ends[kept], counts[kept]
        which = np.repeat(np.arange(len(counts)), counts)
        step = np.arange(len(which)) - np.repeat(np.cumsum(counts) - counts, counts)
        part = (step / np.maximum(counts[which] - 1, 1))[:, None]
        points = np.floor(ends[which, :2] * (1.0 - part) + ends[which, 2:] * part).astype(int)
        inside = ((points >= 0) & (points < (self.shape[1], self.shape[0]))).all(axis=1)
        grid[points[inside, 1], points[inside, 0]] = 1
        return grid

    def _cells(self, box: Box) -> tuple[int, int, int, int]:
        rows, columns = self.shape
        top = math.floor((box.top - self.page.top) / self.cell)
        bottom = math.ceil((box.bottom - self.page.top) / self.cell)
        left = math.floor((box.left - self.page.left) / self.cell)
        right = math.ceil((box.right - self.page.left) / self.cell)
        return (
            min(max(top, 0), rows),
            min(max(bottom, 0), rows),
            min(max(left, 0), columns),
            min(max(right, 0), columns),
        )

    def _count(self, table: Grid, box: Box) -> int:
        """Occupied cells under a box."""
        top, bottom, left, right = self._cells(box)
        if bottom <= top or right <= left:
            return 0
        return int(
            table[bottom, right] - table[top, right] - table[bottom, left] + table[top, left]
        )


def _summed(grid: Grid) -> Grid:
    table: Grid = np.zeros((grid.shape[0] + 1, grid.shape[1] + 1), dtype=np.int64)
    table[1:, 1:] = grid.cumsum(axis=0).cumsum(axis=1)
    return table


def _box(left: float, top: float, width: float, height: float) -> Box:
    return Box(left, top, left + width, top + height)
