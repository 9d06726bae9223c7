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
_LINE_COST, _OPAQUE_COST = 2.2, 4.4
"""For each em of line covered, by a mark it shows through and by one it does not."""
_FAR_COST = 0.6
"""For each em between a designator and its mark."""
_BESIDE = 1.6
"""Em between the two up to which no line need tie them."""
_LEADER_COST, _ACROSS_TEXT, _ACROSS_LINE = 1.0, 6.0, 1.6
"""Of that line: for itself, and for each half em of text or lines it crosses."""
_STEPS = (0.3, 0.55, 0.85, 1.3, 1.8, 2.4, 3.1, 3.8, 4.6, 5.5, 6.5, 8.0, 10.0, 13.0, 17.0)
"""Em from a designator at which places are tried."""
_CLEAR = 0.5
"""What a place may cost and still count as clear."""
_PLACES = 60
"""Tried along each side of a page."""
_LATER_COST = 0.4
"""For each size a mark would rather not take."""

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

    def near(
        self, label: Box, sizes: Sequence[tuple[float, float]], *, opaque: bool
    ) -> tuple[int, Box]:
        """Which of some sizes fits best beside a label, and where; it is taken from then on.

        The first size is for choice.
        """
        chosen, best, least = 0, label, math.inf
        for index, (width, height) in enumerate(sizes):
            for box in self._around(label, width, height):
                # Far places are many and dear to weigh: most drop out on their distance alone.
                cost = _LATER_COST * index + _FAR_COST * label.gap(box) / self.unit
                if cost < least:
                    cost += self.covered(box.grown(0.2 * self.unit), opaque)
                if cost < least and self.is_far(label, box):
                    cost += self._crossed(label, box)
                if cost < least:
                    chosen, best, least = index, box, cost
        self.marks.append(best)
        return chosen, best

    def is_far(self, label: Box, box: Box) -> bool:
        """Whether a mark needs a line to the label it belongs to."""
        return label.gap(box) > _BESIDE * self.unit

    def anywhere(self, sizes: Sequence[tuple[float, float]]) -> tuple[int, Box]:
        """The first size with a clear place on the page, the lower right for choice; then taken.

        Where no size has one, the last at the place where it covers least.
        """
        margin = 0.6 * self.unit
        chosen, best = 0, self.page
        for index, (width, height) in enumerate(sizes):
            chosen, least = index, math.inf
            for box in self._on_page(width, height, margin):
                cost = self.covered(box.grown(0.5 * margin))
                if cost < least:
                    best, least = box, cost
                if cost == 0.0:
                    break
            if least < _CLEAR:
                break
        self.marks.append(best)
        return chosen, best

    def _on_page(self, width: float, height: float, margin: float) -> Iterable[Box]:
        """From the lower right to the upper left."""
        page = self.page.grown(-margin)
        across = np.linspace(max(page.right - width, page.left), page.left, _PLACES)
        down = np.linspace(max(page.bottom - height, page.top), page.top, _PLACES)
        for both in range(2 * _PLACES - 1):
            for i in range(max(0, both - _PLACES + 1), min(both, _PLACES - 1) + 1):
                yield _box(float(across[both - i]), float(down[i]), width, height)

    def covered(self, box: Box, opaque: bool = False) -> float:
        """How much a box would cover, weighted; 0 for a clear place on the page."""
        square = self.unit * self.unit
        text = self._count(self.texts, box) * self.cell * self.cell / square
        line = self._count(self.lines, box) * self.cell / self.unit
        outside = (box.width * box.height - box.overlap(self.page)) / square
        wide = box.grown(0.2 * self.unit)
        marks = math.fsum(wide.overlap(mark) for mark in self.marks) / square
        cost = _TEXT_COST * text + (_OPAQUE_COST if opaque else _LINE_COST) * line
        return cost + _MARK_COST * marks + _OUTSIDE_COST * outside

    def _crossed(self, label: Box, box: Box) -> float:
        """The cost of a line between the two: what it runs across."""
        (x1, y1), (x2, y2) = label.link(box)
        steps = min(40, 1 + round(math.hypot(x2 - x1, y2 - y1) / (0.5 * self.unit)))
        cost = _LEADER_COST
        for step in range(1, steps):
            part = step / steps
            x, y = x1 + part * (x2 - x1), y1 + part * (y2 - y1)
            spot = Box(x, y, x, y).grown(0.5 * self.cell)
            cost += _ACROSS_TEXT * (self._count(self.texts, spot) > 0)
            cost += _ACROSS_LINE * (self._count(self.lines, spot) > 0)
            cost += _ACROSS_TEXT * any(spot.overlap(mark) > 0 for mark in self.marks)
        return cost

    def _around(self, label: Box, width: float, height: float) -> Iterable[Box]:
        """Right, below, above, left; then the same further out and shifted along."""
        for step in _STEPS:
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
