"""Plane geometry of SVG: affine maps, boxes, lengths, the points of a path.

The rules are those of SVG 1.1, chapters 7 and 8 [M]. Whatever cannot be read counts as absent: a
drawing is only looked at to find a place beside a designator.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Iterator

from tauledger.records import dataclass

Point = tuple[float, float]

_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,4})?")
_TRANSFORM = re.compile(r"([A-Za-z]+)\s*\(([^()]*)\)")
_PATH = re.compile(r"[MmZzLlHhVvCcSsQqTtAa]|" + _NUMBER.pattern)
_LENGTH = re.compile(rf"\s*({_NUMBER.pattern})([a-z%]*)", re.I)

# CSS: 96 px to the inch.
_PIXELS = {
    "": 1.0,
    "px": 1.0,
    "pt": 4 / 3,
    "pc": 16.0,
    "in": 96.0,
    "cm": 96 / 2.54,
    "mm": 96 / 25.4,
}
_FARTHEST = 1e12
_LONGEST_PATH = 1_000_000
"""Characters of a path that are read; what lies behind is taken for free space."""
_RELATIVE = {"em": 1.0, "ex": 0.5, "rem": 1.0, "%": 0.01}


@dataclass(frozen=True, slots=True)
class Affine:
    """x' = a x + c y + e, y' = b x + d y + f."""

    a: float = 1.0
    b: float = 0.0
    c: float = 0.0
    d: float = 1.0
    e: float = 0.0
    f: float = 0.0

    def __matmul__(self, inner: Affine) -> Affine:
        """First ``inner``, then this one."""
        return Affine(
            self.a * inner.a + self.c * inner.b,
            self.b * inner.a + self.d * inner.b,
            self.a * inner.c + self.c * inner.d,
            self.b * inner.c + self.d * inner.d,
            self.a * inner.e + self.c * inner.f + self.e,
            self.b * inner.e + self.d * inner.f + self.f,
        )

    def apply(self, point: Point) -> Point:
        x, y = point
        return self.a * x + self.c * y + self.e, self.b * x + self.d * y + self.f

    @property
    def scale(self) -> float:
        """Square root of the factor by which areas grow."""
        return math.sqrt(abs(self.a * self.d - self.b * self.c))


@dataclass(frozen=True, slots=True)
class Box:
    """An upright rectangle."""

    left: float
    top: float
    right: float
    bottom: float

    @property
    def width(self) -> float:
        return self.right - self.left

    @property
    def height(self) -> float:
        return self.bottom - self.top

    @property
    def centre(self) -> Point:
        return (self.left + self.right) / 2, (self.top + self.bottom) / 2

    def overlap(self, other: Box) -> float:
        """Area in common."""
        width = min(self.right, other.right) - max(self.left, other.left)
        height = min(self.bottom, other.bottom) - max(self.top, other.top)
        return width * height if width > 0 and height > 0 else 0.0

    def grown(self, margin: float) -> Box:
        return Box(self.left - margin, self.top - margin, self.right + margin, self.bottom + margin)

    def gap(self, other: Box) -> float:
        """Distance between the two; 0 when they touch."""
        across = max(self.left - other.right, other.left - self.right, 0.0)
        down = max(self.top - other.bottom, other.top - self.bottom, 0.0)
        return math.hypot(across, down)

    def link(self, other: Box) -> tuple[Point, Point]:
        """The nearest points of the two, this one's first; in the middle where sides face."""
        x1, x2 = _facing(self.left, self.right, other.left, other.right)
        y1, y2 = _facing(self.top, self.bottom, other.top, other.bottom)
        return (x1, y1), (x2, y2)


def _facing(low: float, high: float, other_low: float, other_high: float) -> tuple[float, float]:
    shared_low, shared_high = max(low, other_low), min(high, other_high)
    if shared_low <= shared_high:
        middle = (shared_low + shared_high) / 2
        return middle, middle
    return (high, other_low) if high < other_low else (low, other_high)


def box_around(points: Iterable[Point]) -> Box | None:
    """The smallest box with all points; None without one, or when one is out of all bounds."""
    across, down = [], []
    for x, y in points:
        across.append(x)
        down.append(y)
    # One sum tells whether any is not finite; comparisons would overlook a NaN.
    if not across or not math.isfinite(sum(across) + sum(down)):
        return None
    box = Box(min(across), min(down), max(across), max(down))
    outermost = max(-box.left, -box.top, box.right, box.bottom)
    return box if outermost < _FARTHEST else None


def corners_of(x: float, y: float, width: float, height: float) -> tuple[Point, ...]:
    """The outline of a rectangle, closed."""
    return (x, y), (x + width, y), (x + width, y + height), (x, y + height), (x, y)


def numbers(text: str) -> list[float]:
    return [float(match) for match in _NUMBER.findall(text)]


def length(text: str | None, default: float = 0.0, base: float = 16.0) -> float:
    """A CSS length in user units, of a list the first; ``base`` is what ``1em``, ``100%`` are."""
    match = _LENGTH.match(text) if text else None
    if match is None:
        return default
    unit = match[2].lower()
    factor = _PIXELS.get(unit) or _RELATIVE.get(unit, 0.0) * base
    return float(match[1]) * factor if factor else default


def transform(text: str) -> Affine:
    """The map of a ``transform`` attribute or property; units px and deg may be written."""
    whole = Affine()
    for name, inside in _TRANSFORM.findall(text[:10_000]):
        whole = whole @ _single(name, numbers(inside))
    return whole


def _single(name: str, values: list[float]) -> Affine:
    count = len(values)
    match name:
        case "matrix" if count == 6:
            return Affine(*values)
        case "translate" if count in (1, 2):
            return Affine(e=values[0], f=values[1] if count == 2 else 0.0)
        case "scale" if count in (1, 2):
            return Affine(a=values[0], d=values[-1])
        case "rotate" if count in (1, 3):
            angle = math.radians(values[0])
            turn = Affine(math.cos(angle), math.sin(angle), -math.sin(angle), math.cos(angle))
            if count == 1:
                return turn
            x, y = values[1:]
            return Affine(e=x, f=y) @ turn @ Affine(e=-x, f=-y)
        case "skewX" if count == 1:
            return Affine(c=math.tan(math.radians(values[0])))
        case "skewY" if count == 1:
            return Affine(b=math.tan(math.radians(values[0])))
    return Affine()


def view_map(view_box: Box, port: Box, keep_ratio: str) -> Affine:
    """From the user units of a ``viewBox`` to the rectangle it is shown in.

    ``keep_ratio`` is preserveAspectRatio; alignments other than the middle are read too.
    """
    if view_box.width <= 0 or view_box.height <= 0:
        return Affine()
    across, down = port.width / view_box.width, port.height / view_box.height
    if not keep_ratio.strip().startswith("none"):
        across = down = (max if "slice" in keep_ratio else min)(across, down)
    spare_x = port.width - across * view_box.width
    spare_y = port.height - down * view_box.height
    part_x = 0.0 if "xMin" in keep_ratio else 1.0 if "xMax" in keep_ratio else 0.5
    part_y = 0.0 if "YMin" in keep_ratio else 1.0 if "YMax" in keep_ratio else 0.5
    return Affine(
        a=across,
        d=down,
        e=port.left + part_x * spare_x - across * view_box.left,
        f=port.top + part_y * spare_y - down * view_box.top,
    )


_TAKES = {"M": 2, "L": 2, "T": 2, "H": 1, "V": 1, "C": 6, "S": 4, "Q": 4, "A": 7, "Z": 0}


def path_points(text: str) -> Iterator[Point | None]:
    """The points of a path, curves as their control polygons; None before each new subpath."""
    tokens = _PATH.findall(text[:_LONGEST_PATH])
    at: Point = (0.0, 0.0)
    start = at
    command, index = "", 0
    while index < len(tokens):
        if tokens[index].isalpha():
            command = tokens[index]
            index += 1
        takes = _TAKES.get(command.upper(), 0)
        if command in "Zz":
            at = start
            yield at
            if index < len(tokens) and not tokens[index].isalpha():
                return  # numbers after a closed path: the rest is not read
            continue
        values = tokens[index : index + takes]
        if len(values) < takes or any(value.isalpha() for value in values):
            return
        index += takes
        points = _step(command, [float(value) for value in values], at)
        at = points[-1]
        if command in "Mm":
            yield None
            start = at
            command = "l" if command == "m" else "L"
        yield from points


def _step(command: str, values: list[float], at: Point) -> list[Point]:
    base = at if command.islower() else (0.0, 0.0)
    match command.upper():
        case "H":
            return [(base[0] + values[0], at[1])]
        case "V":
            return [(at[0], base[1] + values[0])]
        case "A":
            return [(base[0] + values[5], base[1] + values[6])]
    return [(base[0] + x, base[1] + y) for x, y in zip(values[::2], values[1::2], strict=True)]
