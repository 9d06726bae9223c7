"""Marks on SVG drawings of the schematic: one block of bytes before the root's end tag.

The block stands between two comments, by which the next run replaces it and ``remove_marks``
takes it out. Nothing else of the file is touched, so its layout, encoding, style and line ends
stay. The block holds no script, no id and no reference.
"""

from __future__ import annotations

import statistics
from collections.abc import Callable, Mapping, Sequence
from xml.parsers import expat

from tauledger.annotate.designators import Place, find_places
from tauledger.annotate.geometry import Box
from tauledger.annotate.marks import Legend, Mark
from tauledger.annotate.notes import PartNote, part_notes, summary_of
from tauledger.annotate.placement import Room
from tauledger.annotate.scan import Label, Sheet, drawing_fault, encoding_of, parse, scan
from tauledger.problems import Problem, Severity
from tauledger.records import dataclass
from tauledger.review.rows import Review

_BEGIN, _END = "tauledger:marks", "/tauledger:marks"
_MARK_SIZE = 0.82
"""Text of a mark against that of a designator."""
_PAGE_PART = 90.0
"""Letters of a designator are about this part of a page's longer side, when none is text."""
_SMALLEST, _LARGEST = 1 / 400, 1 / 25
"""Text of a mark against the page's longer side; a designator outside that is no guide."""
_LEGEND_PART = 0.46
"""Of the page that the legend may take along either side."""


@dataclass(frozen=True, slots=True)
class Drawing:
    """A drawing before or after: where it came from, its bytes."""

    path: str
    content: bytes


def annotate_drawings(
    drawings: Sequence[Drawing], review: Review
) -> tuple[tuple[Drawing, ...], tuple[Problem, ...]]:
    """Mark the sheets of one schematic.

    Marks of an earlier run are replaced. A designator that is on none of the sheets is named in
    every legend and in a warning.

    Raises
    ------
    ProblemError
        When a file is no SVG, declares entities, or is too large.
    """
    notes = {note.name: note for note in part_notes(review)}
    bare = [Drawing(d.path, remove_marks(d.content, d.path)) for d in drawings]
    sheets = [scan(d.content, d.path) for d in bare]
    places = [find_places(sheet.labels, notes) for sheet in sheets]
    missing = [name for name in notes if not any(name in found for found in places)]
    marked = tuple(
        Drawing(d.path, _marked(d, sheet, found, notes, missing, review))
        for d, sheet, found in zip(bare, sheets, places, strict=True)
    )
    problems = [problem for sheet in sheets for problem in sheet.problems]
    if missing:
        names = ", ".join(missing)
        problems.append(
            Problem(
                "designator-missing",
                Severity.WARNING,
                f"not found on {' or '.join(d.path for d in drawings)}: {names}",
                advice="Export the drawing with its designators as text, or as labels of the "
                "symbols.",
            )
        )
    return marked, tuple(problems)


def remove_marks(content: bytes, path: str) -> bytes:
    """The drawing without our marks; one that has none comes back as it is.

    Raises ProblemError when a drawing with marks is no longer well-formed.
    """
    if _BEGIN.encode(encoding_of(content)) not in content:
        return content
    for start, end in reversed(_blocks(content, path)):
        content = content[:start] + content[end:]
    return content


def _blocks(content: bytes, path: str) -> list[tuple[int, int]]:
    """Byte ranges of outermost pairs of our comments, right inside the root."""
    depth = 0
    opened: list[int] = []
    found: list[tuple[int, int]] = []
    ending = f"<!--{_END}-->".encode(encoding_of(content))

    def start(*_: object) -> None:
        nonlocal depth
        depth += 1

    def finish(_: object) -> None:
        nonlocal depth
        depth -= 1

    def comment(said: str) -> None:
        at = parser[0].CurrentByteIndex
        if depth != 1:
            return
        if said == _BEGIN:
            opened.append(at)
        elif said == _END and opened and content.startswith(ending, at):
            begun = opened.pop()
            while found and found[-1][0] > begun:
                found.pop()
            found.append((begun, at + len(ending)))

    parser: list[expat.XMLParserType] = []
    handlers: Mapping[str, Callable[..., None]] = {
        "StartElementHandler": start,
        "EndElementHandler": finish,
        "CommentHandler": comment,
    }
    parse(content, path, handlers, parser.append)
    return found


def _marked(
    drawing: Drawing,
    sheet: Sheet,
    places: Mapping[str, list[Place]],
    notes: Mapping[str, PartNote],
    missing: Sequence[str],
    review: Review,
) -> bytes:
    room = Room(sheet.page, _usual_size(sheet, places), _text_boxes(sheet), sheet.outlines)
    # Capacitors choose first, by their say; the marks of transistors are larger.
    order = sorted(places, key=lambda name: -(notes[name].share or 0.0))
    elements = [_beside(place, notes[name], room) for name in order for place in places[name]]
    footer = f"tauledger {review.version}, at {review.temperature_c:g} °C"
    elements.append(_legend(Legend(summary_of(review), missing, footer), room))
    head = '<g xmlns="http://www.w3.org/2000/svg" aria-label="results of tauledger">'
    block = "\n".join([f"<!--{_BEGIN}-->", head, *elements, f"</g>\n<!--{_END}-->"])
    encoded = block.encode(encoding_of(drawing.content))
    content = drawing.content[: sheet.end] + encoded + drawing.content[sheet.end :]
    if remove_marks(content, drawing.path) != drawing.content:
        raise drawing_fault(
            "drawing-unmarkable",
            f"{drawing.path}: marks in this file could not be removed again to the byte",
            "Save the drawing as UTF-8.",
        )
    return content


def _legend(legend: Legend, room: Room) -> str:
    """In a clear place, the smaller where there is none large enough."""
    largest = min(
        room.unit,
        _LEGEND_PART * room.page.width / legend.width,
        _LEGEND_PART * room.page.height / legend.height,
    )
    scales = [largest, 0.8 * largest, 0.65 * largest]
    chosen, box = room.anywhere([(legend.width * s, legend.height * s) for s in scales])
    return legend.svg(box, scales[chosen])


def _beside(place: Place, note: PartNote, room: Room) -> str:
    """The mark of one part, in the shape that fits; with its name where it stands apart."""
    size = _readable(_MARK_SIZE * place.size, room.page) if place.size else room.unit
    for named in (False, True):
        shapes = [Mark(note, narrow, named) for narrow in (False, True)]
        sizes = [(shape.width * size, shape.height * size) for shape in shapes]
        chosen, box = room.near(place.box, sizes, opaque=bool(note.sets))
        if named or not room.is_far(place.box, box):
            break
        room.marks.pop()
    return shapes[chosen].svg(box, size, place.box)


def _usual_size(sheet: Sheet, places: Mapping[str, list[Place]]) -> float:
    """Size of a mark's text where its own designator does not give it."""
    sizes = [p.size for found in places.values() for p in found if p.size > 0]
    sizes = sizes or [label.size for label in sheet.labels if label.size > 0]
    usual = statistics.median(sizes) if sizes else _longer(sheet.page) / _PAGE_PART
    return _readable(_MARK_SIZE * usual, sheet.page)


def _readable(size: float, page: Box) -> float:
    return min(max(size, _SMALLEST * _longer(page)), _LARGEST * _longer(page))


def _longer(page: Box) -> float:
    return max(page.width, page.height)


def _text_boxes(sheet: Sheet) -> list[Box]:
    """Every text, and every labelled thing small enough to be one."""
    small = 0.005 * sheet.page.width * sheet.page.height
    return [label.box for label in sheet.labels if _is_text(label, small)]


def _is_text(label: Label, small: float) -> bool:
    return label.size > 0 or label.box.width * label.box.height < small
