"""Marks on drawings from any editor: designators found, nothing else touched."""

from __future__ import annotations

import re
from dataclasses import replace
from xml.etree import ElementTree

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from annotate.strategies import drawings
from report.fixtures import ONE_STAGE
from tauledger.annotate import Drawing, annotate_drawings, remove_marks
from tauledger.annotate.designators import find_places
from tauledger.annotate.scan import MAXIMUM_DEPTH, scan
from tauledger.problems import ProblemError

SVG = '<svg xmlns="http://www.w3.org/2000/svg" xmlns:e="urn:editor"'


def marked(*contents: bytes | str) -> list[bytes]:
    sheets = [
        Drawing(f"{number}.svg", c.encode() if isinstance(c, str) else c)
        for number, c in enumerate(contents)
    ]
    return [drawing.content for drawing in annotate_drawings(sheets, ONE_STAGE)[0]]


def places(inside: str, root: str = 'viewBox="0 0 1000 1000"', name: str = "C1") -> list[float]:
    """Left, top, right, bottom of every place of a designator, one after the other."""
    sheet = scan(f"{SVG} {root}>{inside}</svg>".encode(), "a.svg")
    found = find_places(sheet.labels, [name, "C2"]).get(name, [])
    return [
        round(side, 1)
        for place in found
        for side in (place.box.left, place.box.top, place.box.right, place.box.bottom)
    ]


# "C1" at size 10: 0.69 + 0.56 em wide, from 0.76 em above the base line to 0.22 em below.
HERE = [100.0, 92.4, 112.5, 102.2]
TEXT = '<text x="100" y="100" font-size="10">C1</text>'


@pytest.mark.parametrize(
    "inside",
    [
        TEXT,
        TEXT.replace("C1", "\n  c1 "),
        TEXT.replace("C1", "C1 100n").replace("font", "textLength='12' font"),
        '<text x="100" y="100" font-size="10">C<tspan>1</tspan></text>',
        '<text font-size="10"><tspan x="100" y="100">C</tspan><tspan x="107" y="100">1</tspan>'
        "</text>",
        '<text style="font-size:10px" transform="translate(100,100)">C1</text>',
        '<g transform="translate(90 80)"><g transform="scale(2)"><text x="5" y="10" font-size="5">'
        "C1</text></g></g>",
        '<g transform="matrix(-1 0 0 1 200 0)"><text text-anchor="end" x="100" y="100" '
        'font-size="10">C1</text></g>',
        '<style>.n{font-size:10px}</style><text class="n" x="100" y="100">C1</text>',
        f'{TEXT}<g><desc>C1</desc><path d="M100 93h12v7"/></g>',
        f"{TEXT}{TEXT}",
        TEXT.replace("<text", '<text opacity="0"'),
        '<text x="106.25" y="100" font-size="10" text-anchor="middle">C1</text>',
        '<svg x="50" y="50" width="200" height="200" viewBox="0 0 100 100"><text x="25" y="25" '
        'font-size="5">C1</text></svg>',
        f'<defs><g id="s">{TEXT}</g></defs><use href="#s"/>',
    ],
)  # fmt: skip
def test_one_place_however_it_is_written(inside: str) -> None:
    found = places(inside)
    assert len(found) == 4
    if "C1 100n" not in inside:
        assert found == pytest.approx(HERE, abs=1.9)


@pytest.mark.parametrize(
    "label",
    [
        '<title>C1</title>', '<desc>C1</desc>',
        '~aria-label="C1"', '~e:label="C1"', '~data-name="c1"',
    ],
)  # fmt: skip
def test_a_labelled_outline_is_found_where_it_is_drawn(label: str) -> None:
    attribute, child = (label[1:], "") if label[0] == "~" else ("", label)
    shape = '<rect x="10" y="20" width="30" height="40"/><path d="M40 60l5 5"/>'
    inside = f'<g transform="rotate(90)"><g {attribute}>{child}{shape}</g></g>'
    assert places(inside) == [-65.0, 10.0, -20.0, 45.0]


@pytest.mark.parametrize(
    "inside",
    [
        TEXT.replace("C1", "C10"),
        TEXT.replace("C1", "see C1"),
        TEXT.replace("C1", "C1 is large"),
        f"<defs>{TEXT}</defs>",
        f'<g display="none">{TEXT}</g>',
        f"<metadata>{TEXT}</metadata>",
        '<text x="100" y="100" font-size="10">C<tspan x="300">1</tspan></text>',
        "<title>C1</title>",
    ],
)
def test_what_does_not_name_the_part_is_left(inside: str) -> None:
    assert places(inside) == []


def test_a_part_on_two_sheets_of_one_file_is_marked_on_both() -> None:
    second = TEXT.replace('x="100"', 'x="700"')
    assert len(places(TEXT + second)) == 8


def test_what_is_on_one_of_several_sheets_is_not_missing() -> None:
    names = ["C1", "CE", "C2", "Q1"]
    sheets = [
        Drawing(f"{name}.svg", f"{SVG}>{TEXT.replace('C1', name)}</svg>".encode()) for name in names
    ]
    review = replace(ONE_STAGE, transistors=(replace(ONE_STAGE.transistors[0], name="Q1"),))
    rows = tuple(replace(ONE_STAGE.paths[0].time_constants[0], name=n) for n in names[:3])
    review = replace(review, paths=(replace(ONE_STAGE.paths[0], time_constants=rows),))
    after, problems = annotate_drawings(sheets, review)
    assert problems == ()
    assert not any(b"not on the drawing" in drawing.content for drawing in after)
    _, problems = annotate_drawings(sheets[1:], review)
    assert "CE.svg or C2.svg or Q1.svg: C1" in problems[0].message


@pytest.mark.parametrize(
    ("names", "label", "found"),
    [
        (("CC1",), "C1", "CC1"),
        (("C_C1",), "C1", "C_C1"),
        (("X1.C1",), "C1", "X1.C1"),
        (("X1.C1", "X2.C1"), "C1", None),
        (("CC1", "C1"), "C1", "C1"),
        (("X1.C1", "X2.C1"), "X2.C1", "X2.C1"),
    ],
)
def test_netlister_prefixes(names: tuple[str, ...], label: str, found: str | None) -> None:
    sheet = scan(f"{SVG}>{TEXT.replace('C1', label)}</svg>".encode(), "a.svg")
    assert list(find_places(sheet.labels, names)) == ([found] if found else [])


@pytest.mark.parametrize(
    ("root", "size"),
    [
        ('viewBox="5 6 70 80" width="210mm"', (70, 80)),
        ('width="25.4mm" height="1in"', (96, 96)),
        ('width="300" height="200px"', (300, 200)),
    ],
)
def test_units_of_the_page(root: str, size: tuple[float, float]) -> None:
    page = scan(f"{SVG} {root}>{TEXT}</svg>".encode(), "a.svg").page
    assert (page.width, page.height) == pytest.approx(size)


def test_a_page_without_any_size_is_what_is_drawn() -> None:
    page = scan(f'{SVG} width="100%"><path d="M10 10H90V40"/></svg>'.encode(), "a.svg").page
    assert (page.left, page.top, page.right, page.bottom) == (10, 10, 90, 40)


def test_what_sets_a_corner_is_told_by_shape_and_words() -> None:
    content = marked(f'{SVG} viewBox="0 0 1000 600">{TEXT}</svg>')[0].decode()
    setting = ONE_STAGE.paths[0].low
    assert setting is not None
    name = setting.set_by[0]
    plain = marked(f'{SVG} viewBox="0 0 1000 600">{TEXT.replace("C1", name)}</svg>')[0].decode()
    assert ">sets low corner<" in plain
    assert "font:bold" in plain.split("sets low corner")[0].rsplit("<text", 1)[1]
    assert "low corner " in content
    assert f"not on the drawing: {name}" in content or name == "C1"


def test_active_content_is_left_and_reported() -> None:
    inside = (
        f'<script>alert(1)</script><g onclick="x()">{TEXT}</g>'
        '<image href="https://example.org/a.png" width="5" height="5"/>'
    )
    given = Drawing("a.svg", f"{SVG}>\n{inside}</svg>".encode())
    (after,), problems = annotate_drawings([given], ONE_STAGE)
    said = [problem.message for problem in problems if problem.code == "drawing-active"]
    assert len(said) == 3
    assert "<script>" in said[0]
    assert "onclick" in said[1]
    assert problems[0].span is not None
    assert problems[0].span.line == 2
    assert remove_marks(after.content, "a.svg") == given.content


@pytest.mark.parametrize(
    ("content", "code"),
    [
        (b"", "drawing-unreadable"),
        (b"<svg><g></svg>", "drawing-unreadable"),
        (b"<html/>", "drawing-unreadable"),
        (b'<?xml version="1.0" encoding="no-such"?><svg></svg>', "drawing-unreadable"),
        (b"<svg/>", "drawing-empty"),
        (b'<!DOCTYPE svg [<!ENTITY a "x">]><svg>&a;</svg>', "drawing-entities"),
        (
            b'<!DOCTYPE svg [<!ENTITY a SYSTEM "file:///etc/hostname">]><svg><text>&a;</text></svg>',
            "drawing-entities",
        ),
        (b'<!DOCTYPE svg [<!ENTITY % p SYSTEM "a.dtd">]><svg></svg>', "drawing-entities"),
        (b"<svg>" + b"<g>" * MAXIMUM_DEPTH, "drawing-too-large"),
        (
            b'<svg><defs><g id="a"><text>x</text><text>y</text></g>'
            + b"".join(
                b'<g id="%s"><use href="#%s"/><use href="#%s"/></g>' % (new, old, old)
                for old, new in zip(b"abcdefghijklmnopqrst", b"bcdefghijklmnopqrstu", strict=True)
                for old, new in [(bytes([old]), bytes([new]))]
            )
            + b"</defs></svg>",
            "drawing-too-large",
        ),
    ],
)
def test_what_cannot_be_read_safely_is_refused(content: bytes, code: str) -> None:
    with pytest.raises(ProblemError) as caught:
        marked(content)
    assert [problem.code for problem in caught.value.problems] == [code]


def test_a_doctype_is_harmless() -> None:
    doctype = '<!DOCTYPE svg PUBLIC "-//W3C//DTD SVG 1.1//EN" "http://127.0.0.1:9/svg11.dtd">'
    content = f"{doctype}{SVG}>{TEXT}&#65;&amp;</svg>"
    assert remove_marks(marked(content)[0], "a.svg") == content.encode()


def _outcome(content: bytes) -> tuple[bytes | None, list[str]]:
    try:
        return marked(content)[0], []
    except ProblemError as error:
        return None, [problem.code for problem in error.problems]


_REACTIVE = re.compile(rb"<(?:script|foreignObject|image|use|animate|set|a)\b|\son\w+=|href|url\(")


@settings(suppress_health_check=[HealthCheck.too_slow], deadline=None, max_examples=50)
@given(drawings())
def test_any_drawing_is_marked_once_and_comes_back(content: bytes) -> None:
    once, codes = _outcome(content)
    if once is None:
        assert codes == ["drawing-unreadable"]  # characters XML does not have
        return
    bare = remove_marks(content, "a.svg")
    assert remove_marks(once, "a.svg") == bare
    assert remove_marks(bare, "a.svg") == bare
    assert marked(once) == [once]
    ElementTree.fromstring(once)
    start = next(i for i in range(len(bare) + 1) if once[i : i + 1] != bare[i : i + 1])
    added = once[start : start + len(once) - len(bare)]
    assert once[:start] + once[start + len(added) :] == bare
    assert not _REACTIVE.search(added.replace(b"\x00", b""))


@given(st.binary(max_size=200))
def test_bytes_that_are_no_drawing_are_refused_in_one_message(content: bytes) -> None:
    for given_bytes in (content, b"<svg>" + content + b"</svg>"):
        once, codes = _outcome(given_bytes)
        if once is None:
            assert len(codes) == 1
        else:
            assert remove_marks(once, "a.svg") == remove_marks(given_bytes, "a.svg")


def test_names_cannot_break_out_of_the_marks() -> None:
    forged = "--></g><script>alert(1)</script>\x07"
    row = replace(ONE_STAGE.transistors[0], name=forged)
    review = replace(ONE_STAGE, transistors=(row,))
    drawing = Drawing("a.svg", f"{SVG}>{TEXT}</svg>".encode())
    (after,), _ = annotate_drawings([drawing], review)
    assert b"<script" not in after.content
    assert after.content.count(b"-->") == 2
    ElementTree.fromstring(after.content)
