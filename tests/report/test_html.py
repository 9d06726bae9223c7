"""The HTML page as markup: whole, inert, with every drawing and table told in words."""

from __future__ import annotations

import base64
import hashlib
import re
from dataclasses import replace
from functools import cache
from html.parser import HTMLParser
from pathlib import Path

import pytest

from tauledger.analysis import Analysis, analyze, read
from tauledger.command import main
from tauledger.illustrating import illustrate, picture
from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.report.html import html_report
from tauledger.report.html_style import DARK, LIGHT, STYLE
from tauledger.review.check import Finding, NetlistCheck

SAMPLES = Path(__file__).parents[2] / "samples"
NAMES = sorted(path.parent.name for path in SAMPLES.glob("*/*.cir"))
VOID = {"meta", "br", "wbr", "rect", "path", "circle"}


@cache
def _analysis(name: str) -> Analysis:
    return analyze(read(SAMPLES / name / f"{name}.cir"))


@cache
def _page(name: str) -> str:
    analysis = _analysis(name)
    return picture("html", analysis, analysis.review, None).decode()


class Markup(HTMLParser):
    """Every element of a page, its text, and the elements left open."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.words: dict[str, list[str]] = {}
        self.open: list[str] = []
        self.feed(page)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open, f"</{tag}> closes nothing"
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.words.setdefault(self.open[-1] if self.open else "", []).append(data)

    def named(self, tag: str) -> list[dict[str, str | None]]:
        return [attributes for name, attributes in self.elements if name == tag]

    def text(self) -> str:
        return " ".join(word for words in self.words.values() for word in words)


@pytest.mark.parametrize("name", NAMES)
def test_page_is_whole_and_told_in_words(name: str) -> None:
    page = Markup(_page(name))
    assert page.open == []
    ids = [found for _, attributes in page.elements if (found := attributes.get("id"))]
    assert len(ids) == len(set(ids))
    targets = {link["href"] for link in page.named("a")}
    assert targets >= {"#main", "#verdict", "#response", "#low-end", "#high-end", "#bias"}
    assert targets <= {f"#{found}" for found in ids}
    for drawing in page.named("svg"):
        if drawing.get("aria-hidden") != "true":
            assert drawing["role"] == "img"
            assert drawing.get("aria-label") or drawing.get("aria-labelledby") in ids
    assert len(page.named("caption")) == len(page.named("table")) > 2
    assert {head.get("scope") for head in page.named("th")} == {"col", "row"}
    assert [tag for tag, _ in page.elements if tag in ("h1", "main", "nav", "footer")] == [
        "h1",
        "nav",
        "main",
        "footer",
    ]


@pytest.mark.parametrize("name", NAMES)
def test_every_expression_is_drawn(name: str) -> None:
    """A drawing is made only where its own values give the resistance; on the samples all do."""
    rows = _analysis(name).review.paths[0].time_constants
    expected = sum(bool(row.expression) and row.end in ("low", "high") for row in rows)
    assert _page(name).count('<svg class="sch"') == expected > 0


def test_page_runs_and_fetches_nothing() -> None:
    page = Markup(_page("common-emitter"))
    tags = {tag for tag, _ in page.elements}
    assert not tags & {"script", "link", "img", "iframe", "object", "form", "image", "use", "base"}
    for _, attributes in page.elements:
        assert not {key for key in attributes if key.startswith("on") or key in ("src", "style")}
    (style,) = page.words["style"]
    assert style == STYLE
    assert not re.search(r"url\(|@import|expression", style)
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    policies = [m["content"] for m in page.named("meta") if m.get("http-equiv")]
    assert policies == [
        f"default-src 'none'; style-src 'sha256-{digest}'; base-uri 'none'; form-action 'none'"
    ]


HOSTILE = """</title><script>alert(1)</script> "quoted' \u202e &amp; <s>
* a common-emitter stage whose names try to be markup
VCC vcc 0 12
VIN in<i> 0 AC 1
RS in<i> src 1k
C1 src b&ltu 4.7u
R1 vcc b&ltu 68k
R2 b&ltu 0 15k
RC&#39 vcc <svg> 3.9k
RE e` 0 1k
CE<script> e` 0 100u
Q1<s> <svg> b&ltu e` n<m>
C2&nbsp <svg> out 1u
RL out 0 10k
.model n<m> npn (bf=200 vaf=80 cje=10p cjc=3p tf=0.4n)
.print ac v(out)
.end
"""


def test_words_of_a_netlist_stay_words(tmp_path: Path) -> None:
    netlist = tmp_path / "hostile<i>.cir"
    netlist.write_text(HOSTILE, encoding="utf-8")
    analysis = analyze(read(netlist))
    span = SourceSpan("a<b>.cir", 3, 4, 8, "RC <script>alert(1)</script>\x1b[2J")
    found = Problem("odd", Severity.ERROR, "<img src=x onerror=alert(2)>", span, "</pre><script>")
    checked = NetlistCheck("n", "", analysis.review, (), (Finding("n", found),))
    page = Markup(html_report(checked, illustrate(analysis)))
    tags = {tag for tag, _ in page.elements}
    assert page.open == []
    assert not tags & {"script", "img", "s", "n<m>"}
    assert not {key for _, attributes in page.elements for key in attributes if key[:2] == "on"}
    text = page.text()
    assert "<script>alert(1)</script>" in text
    assert "\\u202e" in text
    assert not {"\u202e", "\x1b"} & set(text)
    assert "<img src=x onerror=alert(2)>" in text


def test_verdict_comes_first_and_names_what_sets_each_corner() -> None:
    page = _page("common-emitter")
    verdict = page.index('id="verdict"')
    assert all(verdict < page.index(f'id="{other}"') for other in ("path", "response", "bias"))
    shown = re.sub(r"<[^>]*>", " ", page[verdict : page.index('id="path"')])
    words = ["−122\u00a0V/V", "88.9\u00a0Hz", "CE", "760\u00a0kHz", "Q1.Cμ"]
    assert [word for word in words if word in shown] == words


def test_problems_stand_with_their_source_line() -> None:
    analysis = _analysis("common-emitter")
    span = SourceSpan("amp.cir", 9, 12, 3, "RC vcc col 4k7 ; collector")
    problem = Problem("value", Severity.WARNING, "4k7 is read as 4000", span, "Write 4.7k.")
    checked = NetlistCheck("amp.cir", "", analysis.review, (), (Finding("amp.cir", problem),))
    page = html_report(checked, illustrate(analysis))
    assert "9  RC vcc col <mark>4k7</mark> ; collector" in page
    assert "amp.cir, line 9" in page
    assert "Write 4.7k." in page


def test_a_review_without_a_path_is_a_page_too() -> None:
    analysis = _analysis("common-emitter")
    bare = replace(analysis.review, paths=(), nodes=(), transistors=())
    page = Markup(html_report(NetlistCheck("n", "", bare, (), ()), illustrate(analysis)))
    assert page.open == []
    assert "No signal path: bias only." in page.text()


def test_command_saves_the_page_and_leaves_stdout_alone(
    tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    netlist = SAMPLES / "common-emitter" / "common-emitter.cir"
    target = tmp_path / "page.html"
    assert main(["report", str(netlist), "--format", "html", "--save", str(target)]) == 0
    assert target.read_text(encoding="utf-8").startswith("<!DOCTYPE html>")
    assert capfd.readouterr().out == ""
    assert main(["report", str(netlist), "--format", "html"]) == 0
    assert capfd.readouterr().out == target.read_text(encoding="utf-8")
    nowhere = str(tmp_path / "none" / "page.html")
    assert main(["report", str(netlist), "--format", "svg", "--save", nowhere]) == 2
    assert "page.html: cannot be written" in capfd.readouterr().err


def _luminance(colour: str) -> float:
    parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("theme", [LIGHT, DARK])
def test_every_colour_of_words_can_be_read(theme: dict[str, str]) -> None:
    """Contrast of at least 4.5 to both grounds (WCAG 2.1, success criterion 1.4.3 [M])."""
    for ground in ("paper", "inset"):
        for ink in ("ink", "faint", "low", "high", "limit", "alarm"):
            light, dark = sorted((_luminance(theme[ground]), _luminance(theme[ink])), reverse=True)
            assert (light + 0.05) / (dark + 0.05) >= 4.5, (ground, ink)
