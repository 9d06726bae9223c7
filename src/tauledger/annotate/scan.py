"""An SVG drawing, read for three things: labels with their places, what is occupied, and where
the bytes of a block of marks go.

The parser is expat of the standard library: it tells byte offsets, fetches nothing, and is
stopped at the first entity declaration, so that no entity is ever expanded.
"""

from __future__ import annotations

import codecs
from collections.abc import Callable, Mapping
from dataclasses import field
from xml.parsers import expat

from tauledger.annotate.active import ActiveContent
from tauledger.annotate.geometry import (
    Affine,
    Box,
    Point,
    box_around,
    corners_of,
    length,
    transform,
)
from tauledger.annotate.shapes import SHAPES, nested_map, view_box_of
from tauledger.annotate.style import INHERITED, StyleSheet, is_none, specified
from tauledger.annotate.textline import Chunk, TextElement
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass

MAXIMUM_DEPTH = 500
MAXIMUM_ELEMENTS = 500_000
MAXIMUM_LABELS = 50_000
MAXIMUM_POINTS = 1_000_000
MAXIMUM_NAMES = 20
"""Labels that one element may carry in attributes and titles."""
LONGEST_LABEL = 200
DEFAULT_SIZE = 16.0
"""Of text without a font size, in user units: CSS ``medium``."""

# fmt: off
_NOT_DRAWN = frozenset((
    "defs", "symbol", "clipPath", "mask", "pattern", "marker", "metadata", "linearGradient",
    "radialGradient", "filter", "foreignObject", "script", "style", "font",
))
_LABEL_ATTRIBUTES = frozenset((
    "aria-label", "label", "title", "data-label", "data-name", "data-ref", "data-reference",
    "data-designator",
))
# fmt: on


@dataclass(frozen=True, slots=True)
class Label:
    """A text of the drawing that may name a part."""

    text: str
    box: Box
    """Around the text, or around what an attribute or title describes; root user units."""
    size: float
    """Font size in root user units; 0 for a label that is not text."""


@dataclass(frozen=True, slots=True)
class Sheet:
    """What a drawing holds."""

    page: Box
    labels: tuple[Label, ...]
    outlines: tuple[tuple[Point, ...], ...]
    """Every visible line, as points in root user units."""
    end: int
    """Byte offset of the root's end tag."""
    problems: tuple[Problem, ...]


def scan(content: bytes, path: str) -> Sheet:
    """Read a drawing.

    Raises
    ------
    ProblemError
        ``drawing-unreadable`` for what is no SVG, ``drawing-entities``, ``drawing-too-large``.
    """
    reading = _Reading(path)
    parse(content, path, reading.handlers(), reading.attach)
    return reading.sheet(content)


def parse(
    content: bytes,
    path: str,
    handlers: Mapping[str, Callable[..., None]],
    attach: Callable[[expat.XMLParserType], None],
) -> None:
    """Run expat with handlers by name; faults of the XML are raised as ProblemError."""

    def refuse(*_: object) -> None:
        raise drawing_fault(
            "drawing-entities",
            f"{path}: declares entities, which are not read",
            "Export the drawing as plain SVG, or save it without the entity declarations.",
        )

    parser = expat.ParserCreate()
    parser.buffer_text = True
    parser.EntityDeclHandler = refuse
    for name, handler in handlers.items():
        setattr(parser, name, handler)
    attach(parser)
    try:
        parser.Parse(content, True)
    except expat.ExpatError as error:
        reason = f"line {error.lineno}, column {error.offset + 1}: {expat.ErrorString(error.code)}"
    except (LookupError, ValueError):
        reason = "its character encoding is not known"
    else:
        return
    raise drawing_fault(
        "drawing-unreadable",
        f"{path}: is not well-formed XML ({reason})",
        "Export the drawing again as SVG.",
    )


def encoding_of(content: bytes) -> str:
    """The codec to write ASCII text with: UTF-16, or anything else that has ASCII in it."""
    if content.startswith((codecs.BOM_UTF16_LE, b"<\x00")):
        return "utf-16-le"
    if content.startswith((codecs.BOM_UTF16_BE, b"\x00<")):
        return "utf-16-be"
    return "ascii"


def drawing_fault(code: str, message: str, advice: str) -> ProblemError:
    return ProblemError(Problem(code, Severity.ERROR, message, advice=advice))


@dataclass(slots=True)
class _Frame:
    """An open element."""

    tag: str
    map: Affine
    style: dict[str, str]
    size: float
    """Font size in its own user units."""
    drawn: bool
    visible: bool
    view: Box | None
    id: str = ""
    names: list[str] = field(default_factory=list)
    points: list[Point] = field(default_factory=list)
    """Two opposite corners of what it holds, in root user units."""
    labels: list[Label] = field(default_factory=list)
    """Only inside definitions, for ``use``."""
    text: TextElement | None = None
    characters: list[str] = field(default_factory=list)


class _Reading:
    """What one run of the parser gathers."""

    def __init__(self, path: str) -> None:
        self.path = path
        self.stack: list[_Frame] = []
        self.styles = StyleSheet()
        self.labels: list[Label] = []
        self.outlines: list[tuple[Point, ...]] = []
        self.points = self.elements = self.uses = 0
        self.definitions: dict[str, _Frame] = {}
        self.page: Box | None = None
        self.content: Box | None = None
        self.end = 0
        self.active = ActiveContent()

    def attach(self, parser: expat.XMLParserType) -> None:
        self.parser = parser

    def handlers(self) -> Mapping[str, Callable[..., None]]:
        return {
            "StartElementHandler": self.start,
            "EndElementHandler": self.finish,
            "CharacterDataHandler": self.characters,
        }

    def sheet(self, content: bytes) -> Sheet:
        if not content.startswith("</".encode(encoding_of(content)), self.end):
            raise drawing_fault(
                "drawing-empty", f"{self.path}: the drawing is empty", "Export the sheet again."
            )
        page = self.page or self.content
        if page is None or page.width <= 0 or page.height <= 0:
            page = Box(0.0, 0.0, 300.0, 150.0)  # what a browser takes for want of a size
        return Sheet(
            page,
            tuple(self.labels),
            tuple(self.outlines),
            self.end,
            self.active.problems(self.path),
        )

    # Elements -------------------------------------------------------------------------------------

    def start(self, name: str, given: dict[str, str]) -> None:
        self.elements += 1
        if len(self.stack) >= MAXIMUM_DEPTH or self.elements > MAXIMUM_ELEMENTS:
            raise drawing_fault(
                "drawing-too-large",
                f"{self.path}: more than {MAXIMUM_ELEMENTS} elements, or nested deeper than "
                f"{MAXIMUM_DEPTH}",
                "Export one sheet at a time.",
            )
        tag = name.rpartition(":")[2]
        attributes = {key.rpartition(":")[2]: value for key, value in given.items()}
        self.active.look(tag, attributes, self.parser.CurrentLineNumber)
        frame = self.child(tag, attributes) if self.stack else self.root(tag, attributes)
        self.stack.append(frame)
        if frame.tag in SHAPES:
            self.shape(frame, SHAPES[frame.tag](attributes))
        elif frame.tag == "use":
            self.use(frame, attributes)
        frame.names += [
            value.strip()
            for key, value in attributes.items()
            if key in _LABEL_ATTRIBUTES and 0 < len(value) <= LONGEST_LABEL
        ]

    def root(self, tag: str, attributes: dict[str, str]) -> _Frame:
        if tag != "svg":
            raise drawing_fault(
                "drawing-unreadable",
                f"{self.path}: expected an SVG drawing, found XML that begins with <{tag[:40]}>",
                "Export the schematic as SVG and give that file.",
            )
        style = specified(self.styles, tag, attributes)
        view = view_box_of(attributes)
        if view is None:
            width, height = (
                0.0 if "%" in attributes.get(side, "") else length(attributes.get(side))
                for side in ("width", "height")
            )
            if width > 0 and height > 0:
                view = box_around([(0.0, 0.0), (width, height)])
        self.page = view
        size = length(style.get("font-size"), DEFAULT_SIZE, DEFAULT_SIZE)
        return _Frame(tag, Affine(), style, size, True, not is_none(style.get("opacity")), view)

    def child(self, tag: str, attributes: dict[str, str]) -> _Frame:
        parent = self.stack[-1]
        own = specified(self.styles, tag, attributes)
        style = {key: value for key, value in parent.style.items() if key in INHERITED} | own
        size = length(own.get("font-size"), parent.size, parent.size)
        place = parent.map
        if "transform" in own:
            place = place @ transform(own["transform"])
        if tag == "svg":
            place = place @ nested_map(attributes, parent.view or Box(0, 0, 100, 100))
        frame = _Frame(
            tag,
            place,
            style,
            size,
            parent.drawn and tag not in _NOT_DRAWN and own.get("display") != "none",
            parent.visible and not is_none(own.get("opacity")),
            view_box_of(attributes) or parent.view if tag == "svg" else parent.view,
            attributes.get("id", ""),
        )
        if tag == "text":
            frame.text = TextElement()
        elif parent.text is not None and tag in ("tspan", "a", "textPath"):
            frame.text = parent.text
        if frame.text is not None:
            frame.text.move(attributes, size, style.get("text-anchor", "start"))
        return frame

    def finish(self, name: str) -> None:
        frame = self.stack.pop()
        if not self.stack:
            self.end = self.parser.CurrentByteIndex
            self.content = box_around(frame.points)
            return
        parent = self.stack[-1]
        if frame.tag == "style":
            self.styles.add("".join(frame.characters))
            self.active.look_at_style("".join(frame.characters), self.parser.CurrentLineNumber)
        elif frame.tag in ("title", "desc"):
            said = " ".join("".join(frame.characters).split())
            if 0 < len(said) <= LONGEST_LABEL:
                parent.names.append(said)
        elif frame.tag == "text" and frame.text is not None:
            self.text(frame, frame.text)
        self.name(frame)
        if frame.id and not frame.drawn and len(self.definitions) < MAXIMUM_LABELS:
            self.definitions[frame.id] = frame
        if frame.drawn or not parent.drawn:
            parent.labels += frame.labels
            _extend(parent.points, frame.points)

    def name(self, frame: _Frame) -> None:
        """Labels in attributes and titles stand where the element's own drawing stands."""
        box = box_around(frame.points)
        if box is None or len(self.stack) < 1:
            return
        for text in dict.fromkeys(frame.names[:MAXIMUM_NAMES]):
            self.label(frame, Label(text, box, 0.0))

    def label(self, frame: _Frame, label: Label) -> None:
        if len(self.labels) + self.uses >= MAXIMUM_LABELS:
            raise drawing_fault(
                "drawing-too-large",
                f"{self.path}: more than {MAXIMUM_LABELS} texts",
                "Export one sheet at a time.",
            )
        if frame.drawn:
            self.labels.append(label)
        else:
            self.uses += 1
            frame.labels.append(label)

    # Text -----------------------------------------------------------------------------------------

    def characters(self, data: str) -> None:
        frame = self.stack[-1]
        if frame.text is not None:
            frame.text.add(data)
        elif frame.tag in ("title", "desc", "style"):
            frame.characters.append(data)

    def text(self, frame: _Frame, element: TextElement) -> None:
        for line in element.lines():
            corners = [frame.map.apply(point) for point in _line_box(line, frame.style)]
            box = box_around(corners)
            if box is None or not 0 < len(line.text) <= LONGEST_LABEL:
                continue
            size = line.size * frame.map.scale
            _extend(frame.points, corners)
            if size > 0:
                self.label(frame, Label(line.text, box, size))

    # Shapes ---------------------------------------------------------------------------------------

    def shape(self, frame: _Frame, points: list[Point | None]) -> None:
        """None in the list begins a new line."""
        self.points += len(points)
        if self.points > MAXIMUM_POINTS:
            raise drawing_fault(
                "drawing-too-large",
                f"{self.path}: lines with more than {MAXIMUM_POINTS} points",
                "Export one sheet at a time.",
            )
        line: list[Point] = []
        lines = [line]
        for point in points:
            if point is None:
                line = []
                lines.append(line)
            else:
                line.append(frame.map.apply(point))
        kept = [tuple(line) for line in lines if box_around(line) is not None]
        _extend(frame.points, [point for line in kept for point in line])
        unseen = is_none(frame.style.get("fill", "black")) and is_none(
            frame.style.get("stroke", "none")
        )
        hidden = frame.style.get("visibility") in ("hidden", "collapse")
        if frame.drawn and frame.visible and not unseen and not hidden:
            self.outlines += kept

    def use(self, frame: _Frame, attributes: dict[str, str]) -> None:
        corner = (length(attributes.get("x")), length(attributes.get("y")))
        place = frame.map @ Affine(e=corner[0], f=corner[1])
        found = self.definitions.get(attributes.get("href", "").removeprefix("#"))
        if found is None:
            _extend(frame.points, [frame.map.apply(corner)])
            return
        box = box_around(found.points)
        if box is not None:
            outline = corners_of(box.left, box.top, box.width, box.height)
            _extend(frame.points, [place.apply(point) for point in outline])
        for label in found.labels:
            outline = corners_of(label.box.left, label.box.top, label.box.width, label.box.height)
            moved = box_around(place.apply(point) for point in outline)
            if moved is not None:
                self.label(frame, Label(label.text, moved, label.size * place.scale))


def _extend(known: list[Point], more: list[Point]) -> None:
    """Keep two corners of everything, not every point."""
    if more and (box := box_around([*known, *more])) is not None:
        known[:] = [(box.left, box.top), (box.right, box.bottom)]


def _line_box(line: Chunk, style: Mapping[str, str]) -> tuple[Point, ...]:
    baseline = style.get("dominant-baseline", "")
    shift = {"middle": 0.3, "central": 0.35, "hanging": 0.76, "text-before-edge": 0.8}
    top, bottom = line.extent(shift.get(baseline, 0.0))
    return corners_of(line.left, top, line.right - line.left, bottom - top)
