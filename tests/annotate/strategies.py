"""Netlists and drawings of any make, with a review about parts that may be in them."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

from hypothesis import strategies as st

from report.fixtures import ONE_STAGE
from tauledger.annotate.comments import MARKER
from tauledger.problems import SourceSpan
from tauledger.review.rows import Review

PATH = ONE_STAGE.paths[0]
ORDINARY = [row for row in PATH.time_constants if row.role != "device"]
NAMES = (*(row.name for row in ORDINARY), *(row.name for row in ONE_STAGE.transistors))


def review_about(names: Iterable[str]) -> Review:
    """Every name a capacitor with the figures of the fixture's first one."""
    rows = tuple(replace(ORDINARY[0], name=name) for name in names)
    return replace(
        ONE_STAGE, netlist="a.cir", transistors=(), paths=(replace(PATH, time_constants=rows),)
    )


ENDS = st.sampled_from(["\n", "\r\n", "\r"])
LINES = st.one_of(
    st.text(st.characters(min_codepoint=32, max_codepoint=255), max_size=30),
    st.sampled_from(["+ 1 2", "  + x", MARKER, MARKER + "old", "*tauledger", "", ".control"]),
)
ENCODINGS = st.sampled_from(["latin-1", "utf-8", "utf-8-sig", "utf-16"])


@st.composite
def netlists(draw: st.DrawFn) -> tuple[bytes, dict[str, SourceSpan]]:
    """A file in any encoding with any line ends, and parts on some of its lines."""
    bodies = draw(st.lists(LINES, min_size=1, max_size=12))
    ends = [draw(ENDS) for _ in bodies]
    encoding = draw(ENCODINGS)
    for row in range(1, len(bodies)):
        if bodies[row].startswith(MARKER):
            ends[row] = ends[row - 1]  # as we write them
        if not bodies[row] and ends[row - 1] == "\r" and ends[row] == "\n":
            ends[row] = "\r"  # it would make one line end with the one before
    if draw(st.booleans()) and not (len(bodies) > 1 and bodies[-1].startswith(MARKER)):
        ends[-1] = ""
    places = {}
    for row, body in enumerate(bodies):
        part = row > 0 and body and not body.lstrip().startswith("+")
        if part and not body.startswith(MARKER) and draw(st.booleans()):
            places[f"C{row}"] = SourceSpan("a.cir", row + 1, 1, 1, body)
    text = "".join(body + end for body, end in zip(bodies, ends, strict=True))
    return text.encode(encoding), places


LABELS = st.one_of(
    st.sampled_from([*NAMES, *(name.lower() for name in NAMES), "C1 100n", "note", "{}"]),
    st.text(st.characters(min_codepoint=32, max_codepoint=0x2FFF), max_size=8),
)
NUMBERS = st.one_of(
    st.integers(-50, 400).map(str),
    st.sampled_from(["", "1e9", "-3.5mm", "2em", "1e999", "nan", "50%", "1 2 3", "1e-30"]),
)
TRANSFORMS = st.one_of(
    st.sampled_from(
        ["", "scale(-1,1)", "rotate(90)", "rotate(30 5 5)", "matrix(0 1 1 0 9 9)", "scale(0)",
         "skewX(90)", "translate(1e300)", "matrix(1 2", "nonsense(4)"]
    ),
    NUMBERS.map(lambda number: f"translate({number} {number})"),
)  # fmt: skip
PATHS = st.sampled_from(["M0 0L9 9", "m1 1h5v5z", "M0 0C1 2 3 4 5 6A1 1 0 0 0 9 9", "M1", "z5", ""])
COMMENTS = st.sampled_from(["tauledger:marks", "/tauledger:marks", "a comment"])


def _quoted(text: str) -> str:
    for character, entity in (("&", "&amp;"), ("<", "&lt;"), (">", "&gt;"), ('"', "&quot;")):
        text = text.replace(character, entity)
    return text


@st.composite
def _attributes(draw: st.DrawFn) -> str:
    given = {
        name: draw(values)
        for name, values in (
            ("x", NUMBERS), ("y", NUMBERS), ("width", NUMBERS), ("height", NUMBERS),
            ("font-size", NUMBERS), ("transform", TRANSFORMS), ("d", PATHS),
            ("aria-label", LABELS), ("id", st.sampled_from("ab")), ("href", st.just("#a")),
            ("style", st.sampled_from(["fill:none", "opacity:0", "font-size:3px", ";;:"])),
            ("class", st.just("k")), ("text-anchor", st.sampled_from(["middle", "end"])),
            ("viewBox", st.sampled_from(["0 0 9 9", "0 0 0 0", "1", "-5 -5 1e6 2"])),
        )
        if draw(st.integers(0, 3)) == 0
    }  # fmt: skip
    return "".join(f' {name}="{_quoted(value)}"' for name, value in given.items())


def _element(children: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
    tags = st.sampled_from(
        ["g", "text", "tspan", "svg", "title", "desc", "defs", "use", "path", "rect", "circle",
         "symbol", "a", "style", "x:g"]
    )  # fmt: skip
    return st.builds(
        lambda tag, attributes, inside: f"<{tag}{attributes}>{''.join(inside)}</{tag}>",
        tags,
        _attributes(),
        st.lists(children, max_size=4),
    )


CONTENT = st.recursive(
    st.one_of(
        LABELS.map(_quoted),
        COMMENTS.map(lambda said: f"<!--{said}-->"),
        st.just(".k{fill:none} text{font-size:9px}"),
    ),
    _element,
    max_leaves=15,
)


@st.composite
def drawings(draw: st.DrawFn) -> bytes:
    """Well-formed SVG in some encoding."""
    name, codec = draw(
        st.sampled_from([("UTF-8", "utf-8"), ("UTF-16", "utf-16"), ("ISO-8859-1", "latin-1")])
    )
    head = draw(st.sampled_from(["", "<!DOCTYPE svg>", "<!-- tauledger:marks -->\r\n"]))
    inside = "".join(draw(st.lists(st.one_of(CONTENT, _element(CONTENT)), max_size=6)))
    text = (
        f'<?xml version="1.0" encoding="{name}"?>{head}<svg xmlns="http://www.w3.org/2000/svg" '
        f'xmlns:x="urn:x"{draw(_attributes()).replace(" href", " x:href")}>{inside}</svg>'
        + draw(st.sampled_from(["", "\n", "\r\n<!--tauledger:marks-->"]))
    )
    return text.encode(codec, "xmlcharrefreplace")
