"""Basic shapes and viewports of SVG, as points and maps."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping

from tauledger.annotate.geometry import (
    Affine,
    Box,
    Point,
    box_around,
    corners_of,
    length,
    numbers,
    path_points,
    view_map,
)


def view_box_of(attributes: Mapping[str, str]) -> Box | None:
    """The ``viewBox``, where there is a usable one."""
    values = numbers(attributes.get("viewBox", ""))
    if len(values) != 4 or values[2] <= 0 or values[3] <= 0:
        return None
    left, top, width, height = values
    return box_around([(left, top), (left + width, top + height)])


def nested_map(attributes: Mapping[str, str], outer: Box) -> Affine:
    """From the user units inside an ``svg`` element to those around it."""
    port = Box(
        left := length(attributes.get("x"), 0.0, outer.width),
        top := length(attributes.get("y"), 0.0, outer.height),
        left + length(attributes.get("width"), outer.width, outer.width),
        top + length(attributes.get("height"), outer.height, outer.height),
    )
    view = view_box_of(attributes)
    if view is None:
        return Affine(e=port.left, f=port.top)
    return view_map(view, port, attributes.get("preserveAspectRatio", ""))


def _sized(*names: str) -> Callable[[Mapping[str, str]], list[float]]:
    return lambda attributes: [length(attributes.get(name)) for name in names]


def _rectangle(attributes: Mapping[str, str]) -> list[Point | None]:
    x, y, width, height = _sized("x", "y", "width", "height")(attributes)
    return list(corners_of(x, y, width, height))


def _ellipse(attributes: Mapping[str, str]) -> list[Point | None]:
    x, y, r, rx, ry = _sized("cx", "cy", "r", "rx", "ry")(attributes)
    angles = [math.tau * step / 24 for step in range(25)]
    return [(x + (r or rx) * math.cos(a), y + (r or ry) * math.sin(a)) for a in angles]


def _line(attributes: Mapping[str, str]) -> list[Point | None]:
    x1, y1, x2, y2 = _sized("x1", "y1", "x2", "y2")(attributes)
    return [(x1, y1), (x2, y2)]


def _polyline(attributes: Mapping[str, str]) -> list[Point | None]:
    values = numbers(attributes.get("points", ""))
    return list(zip(values[::2], values[1::2], strict=False))


def _polygon(attributes: Mapping[str, str]) -> list[Point | None]:
    points = _polyline(attributes)
    return [*points, *points[:1]]


SHAPES: Mapping[str, Callable[[Mapping[str, str]], list[Point | None]]] = {
    "path": lambda attributes: list(path_points(attributes.get("d", ""))),
    "line": _line,
    "polyline": _polyline,
    "polygon": _polygon,
    "rect": _rectangle,
    "image": _rectangle,
    "circle": _ellipse,
    "ellipse": _ellipse,
}
"""Element name → its outline from its attributes; None begins a new line."""
