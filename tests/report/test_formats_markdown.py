"""The Markdown report, read by a renderer: complete, inert, within its length."""

from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from markdown_it import MarkdownIt
from markdown_it.token import Token

from report.amplifier import LIMITS, NETLIST, SMALL_BYPASS, checked, checked_files, write
from report.fixtures import ONE_STAGE, TWO_STAGES
from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.report.bode import bode_sketch
from tauledger.report.markdown import MOST_CHARACTERS, markdown_report
from tauledger.review.check import Finding, NetlistCheck
from tauledger.review.limits import LimitRow
from tauledger.review.rows import NodeRow, ResponsePoint, Review

_HOSTILE = st.text(st.characters(codec=None), max_size=30) | st.sampled_from(
    [
        "| a | b |\n|---|---|\n",
        "\\| x \\\\| y",
        "`x` ``y`` ```",
        "`*a*` ``*b*`` ` <img src=x>",
        "```\n# heading\n```",
        "@everyone and @team/x",
        "#12 GH-12 a/b#3 !4 &5 %6 ~7",
        "[x](http://evil.example) ![p](x.png) <http://evil.example>",
        "www.evil.example https://evil.example mail@evil.example",
        "</details><script>alert(1)</script><img src=x onerror=y>",
        "<!-- ",
        "&lt;b&gt; &#64;team",
        "$x$ $`x`$ :tada: **bold** _it_ ~~no~~",
        "*/ ]]> -->",
    ]
)
_TAGS = {"details", "summary", "code", "span"}


class _Tags(HTMLParser):
    """Tags of raw HTML, with their attributes."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.found: set[str] = set()
        self.feed(text)

    def handle_starttag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        self.found.add(" ".join([tag, *(name for name, _ in attributes)]))

    def handle_comment(self, data: str) -> None:
        self.found.add("comment")

    def unknown_decl(self, data: str) -> None:
        self.found.add("declaration")


def _tokens(text: str) -> list[Token]:
    reader = MarkdownIt("commonmark", {"html": True}).enable(["table", "strikethrough"])
    return [
        token
        for block in reader.parse(text)
        for token in (block, *(block.children or ()))
        if token.type != "inline"
    ]


def _shape(text: str) -> list[str]:
    """Everything but the words: a netlist must not be able to change it."""
    return [token.type for token in _tokens(text) if token.type not in _WORDS]


_WORDS = {"text", "code_inline", "html_inline", "softbreak", "text_special"}


def _check(word: str) -> NetlistCheck:
    """A review in which every word that a netlist can bring is ``word``."""
    path = ONE_STAGE.paths[0]
    rows = tuple(
        replace(row, name=word, role=word, reason=word, expression=word)
        for row in path.time_constants
    )
    corner = path.low
    assert corner is not None
    path = replace(
        path,
        input=word,
        output=word,
        time_constants=rows,
        low=replace(corner, set_by=(word,), notes=(word,)),
        response=tuple(ResponsePoint(10.0**k, 100.0 / (1 + k)) for k in range(6)),
    )
    transistors = tuple(
        replace(row, name=word, model=word, configuration=word, region=word)
        for row in ONE_STAGE.transistors
    )
    review = replace(
        ONE_STAGE,
        title=word,
        netlist=word,
        nodes=(NodeRow(word, 1.0),),
        transistors=transistors,
        paths=(path,),
    )
    problem = Problem("limit-missed", Severity.ERROR, word, SourceSpan(word, 1, 1, 1, word), word)
    row = LimitRow(word, 1.0, "Hz", word, word, "missed", word, problem)
    return NetlistCheck(word, word, review, (row,), (Finding(word, problem, word),))


_PLAIN_SHAPE = _shape(markdown_report([_check("x")], Severity.ERROR))


@settings(deadline=None)
@given(word=_HOSTILE)
def test_no_netlist_changes_the_shape_or_reaches_out(word: str) -> None:
    assume(word != "active")  # the one region that is not set in bold
    text = markdown_report([_check(word)], Severity.ERROR)
    assert _shape(text) == _PLAIN_SHAPE
    for token in _tokens(text):
        if token.type.startswith("html_"):
            assert _Tags(token.content).found <= _TAGS
        if token.type == "text":
            # What hosts make links and notifications of, outside code.
            assert not re.search(r"@\w|[#!&%~$]\w|://|\bwww\.|\bgh-\d", token.content, re.I)


def test_the_verdict_comes_first_then_paths_and_limits(tmp_path: Path) -> None:
    text = markdown_report(checked(tmp_path, SMALL_BYPASS, LIMITS), Severity.ERROR)
    lines = text.splitlines()
    assert lines[0] == "## Amplifier review: fails (1 error, 0 warnings)"
    assert lines[2].startswith("- **error**")
    order = [text.index(words) for words in ("| netlist |", "### Limits", "### What sets", "Bias")]
    assert order == sorted(order)
    assert "| low corner | 367\u00a0Hz | — | 120 Hz | **missed** | `CE` |" in text
    kinds = {token.type for token in _tokens(text)}
    assert {"table_open", "fence", "html_block", "heading_open"} <= kinds


def test_a_green_report_says_so(tmp_path: Path) -> None:
    text = markdown_report(checked(tmp_path, NETLIST, LIMITS), Severity.ERROR)
    assert text.startswith("## Amplifier review: passes (0 errors, 0 warnings)\n")
    assert "3 met" in text


@pytest.mark.parametrize("review", [ONE_STAGE, TWO_STAGES])
def test_missing_figures_are_dashes(review: Review) -> None:
    check = NetlistCheck(review.netlist, "", review, (), ())
    text = markdown_report([check], Severity.ERROR)
    assert "None" not in text
    assert "nan" not in text


def test_it_is_cut_at_a_section(tmp_path: Path) -> None:
    one = checked(tmp_path, SMALL_BYPASS, LIMITS)[0]
    many = [replace(one, netlist=f"board{i}.cir") for i in range(100)]
    text = markdown_report(many, Severity.ERROR)
    assert len(text) <= MOST_CHARACTERS
    assert "sections are left out" in text
    assert text.index("## Amplifier") == 0
    assert text.count("<details>") == text.count("</details>")
    assert text.count("```") % 2 == 0
    assert "Cut here" not in markdown_report(many[:3], Severity.ERROR)


def test_many_netlists_keep_the_verdict(tmp_path: Path) -> None:
    files = [write(tmp_path, SMALL_BYPASS, LIMITS), tmp_path / "gone.cir"]
    text = markdown_report(checked_files(files), Severity.ERROR)
    assert text.startswith("## Amplifier review: unusable input (2 errors, 0 warnings)")
    assert "not checked" in text


# The sketch ---------------------------------------------------------------------------------------

_CHART = re.compile(
    r"```mermaid\n"
    r"%%\{init: \{.*\}\}%%\n"
    r"xychart-beta\n"
    r'  x-axis "[^"]*" \[(?P<x>"[^"]*"(?:, "[^"]*")*)\]\n'
    r'  y-axis "[^"]*" (?P<low>-?\d+) --> (?P<high>-?\d+)\n'
    r"  line \[(?P<y>-?\d+\.\d(?:, -?\d+\.\d)*)\]\n"
    r"```\n"
)


def test_the_sketch_is_a_chart_of_the_response(tmp_path: Path) -> None:
    row = checked(tmp_path, NETLIST)[0].path_row
    assert row is not None
    chart = _CHART.fullmatch(bode_sketch(row))
    assert chart is not None
    labels = chart["x"].split(", ")
    heights = [float(height) for height in chart["y"].split(", ")]
    # Two labels alike would put two points in one place.
    assert len(set(labels)) == len(labels) == len(heights)
    assert 20 <= len(heights) <= 41
    assert row.gain_db is not None
    assert max(heights) == pytest.approx(row.gain_db, abs=0.2)
    assert float(chart["low"]) <= min(heights) <= max(heights) <= float(chart["high"])
    decades = [label.strip('"') for label in labels if label.strip('"\u200b')]
    assert decades == ["1", "10", "100", "1k", "10k", "100k", "1M", "10M"][-len(decades) :]
    # Three decibels below midband between the two decades that hold the low corner.
    first, last = labels.index('"10"'), labels.index('"100"')
    assert heights[first] < row.gain_db - 3.0 < heights[last]


@given(gains=st.lists(st.floats(min_value=0.0, allow_infinity=False, allow_nan=False), max_size=41))
def test_any_response_makes_a_chart_or_none(gains: list[float]) -> None:
    points = tuple(ResponsePoint(10.0 ** (k / 5), gain) for k, gain in enumerate(gains))
    text = bode_sketch(replace(ONE_STAGE.paths[0], response=points))
    assert text == "" or _CHART.fullmatch(text)


def test_a_long_expression_loses_its_second_form_and_not_its_middle() -> None:
    path = TWO_STAGES.paths[0]
    sees = "R_in + R_out + gm·R_in·R_out [Miller: R_in·(1 + gm·R_out) + R_out], R_in = rb + RS‖R2"
    row = replace(path.time_constants[0], expression=sees, expression_deviation=-0.0004)
    review = replace(TWO_STAGES, paths=(replace(path, time_constants=(row,)),))
    text = markdown_report([NetlistCheck("amp.cir", "", review, (), ())], Severity.ERROR)
    assert "| `R_in + R_out + gm·R_in·R_out, R_in = rb + RS‖R2` |" in text
