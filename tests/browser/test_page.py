"""The HTML report in a browser: it asks for nothing, complains of nothing, and nothing overlaps."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from browser.devtools import Page, browser, find_browser
from tauledger.analysis import analyze, read
from tauledger.illustrating import illustrate, picture
from tauledger.report.html import html_report
from tauledger.review.check import NetlistCheck
from tauledger.review.limits import LimitRow

SAMPLES = Path(__file__).parents[2] / "samples"
NAMES = ("common-emitter", "feedback-pair", "phono-stage", "opamp-stage", "mirror-pair")
WIDTHS = (1280, 390)

CLIPPED = """
[...document.querySelectorAll('svg text')].filter(text => {
  const r = text.getBoundingClientRect(), s = text.ownerSVGElement.getBoundingClientRect();
  return r.width && (r.left < s.left - 1 || r.right > s.right + 1
                     || r.top < s.top - 1 || r.bottom > s.bottom + 1);
}).map(text => text.textContent)
"""
"""Words that run over the edge of their drawing."""
OVERLAPPING = """
[...document.querySelectorAll('svg')].flatMap(svg => {
  const texts = [...svg.querySelectorAll('text')].map(t => [t, t.getBoundingClientRect()])
    .filter(([, r]) => r.width);
  return texts.flatMap(([t, a], i) => texts.slice(i + 1).filter(([, b]) =>
      Math.min(a.right, b.right) - Math.max(a.left, b.left) > 2
      && Math.min(a.bottom, b.bottom) - Math.max(a.top, b.top) > 5)
    .map(([u]) => t.textContent + ' / ' + u.textContent));
})
"""
"""Pairs of words in one drawing that cover each other; 5 pixels are the air in a line's box."""


@pytest.fixture(scope="module")
def page() -> Iterator[Page]:
    path = find_browser()
    if path is None:
        if os.environ.get("CI", "").lower() == "true":
            pytest.fail("no Chromium is installed, and in CI the page may not go unseen")
        pytest.skip("no Chromium is installed")
    with browser(path) as opened:
        yield opened


@pytest.fixture(scope="module")
def addresses(tmp_path_factory: pytest.TempPathFactory) -> dict[str, str]:
    folder = tmp_path_factory.mktemp("pages")
    found = {}
    for name in NAMES:
        analysis = analyze(read(SAMPLES / name / f"{name}.cir"))
        target = folder / f"{name}.html"
        target.write_bytes(picture("html", analysis, analysis.review, None))
        found[name] = target.as_uri()
    analysis = analyze(read(SAMPLES / "microphone-preamp" / "microphone-preamp.cir"))
    limits = tuple(
        LimitRow(figure, 1.0, unit, least, most, "missed", "C1", None)
        for figure, unit, least, most in (
            ("low corner", "Hz", "2 Hz", "40 Hz"),
            ("high corner", "Hz", "20 kHz", "1 MHz"),
            ("midband gain", "dB", "28 dB", "36 dB"),
        )
    )
    checked = NetlistCheck("a.cir", "", analysis.review, limits, ())
    target = folder / "limits.html"
    target.write_text(html_report(checked, illustrate(analysis)), encoding="utf-8")
    found["limits"] = target.as_uri()
    return found


def _complaints(page: Page) -> list[dict[str, Any]]:
    loud = ("Log.entryAdded", "Runtime.consoleAPICalled", "Runtime.exceptionThrown")
    return [event for event in page.events if event.get("method") in loud]


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", [*NAMES, "limits"])
def test_page_is_quiet_whole_and_legible(
    page: Page, addresses: dict[str, str], name: str, width: int
) -> None:
    page.show(addresses[name], width)
    asked = {
        event["params"]["request"]["url"]
        for event in page.events
        if event.get("method") == "Network.requestWillBeSent"
    }
    assert asked == {addresses[name]}
    assert page.evaluate("document.documentElement.scrollWidth - innerWidth") <= 0
    assert page.evaluate(CLIPPED) == []
    assert page.evaluate(OVERLAPPING) == []
    # The page's own style has passed its content policy.
    assert page.evaluate("getComputedStyle(document.body).marginTop") == "0px"
    assert _complaints(page) == []


def test_links_lead_to_their_sections(page: Page, addresses: dict[str, str]) -> None:
    page.show(addresses["common-emitter"], 1280)
    links = page.evaluate("[...document.querySelectorAll('a')].map(a => a.getAttribute('href'))")
    assert len(links) >= 7
    assert all(link.startswith("#") for link in links)
    for number, link in enumerate(links):
        page.evaluate(f"document.querySelectorAll('a')[{number}].click()")
        assert page.evaluate("location.hash") == link
        assert page.evaluate(f"document.querySelector('{link}').getBoundingClientRect().top < 900")
    assert _complaints(page) == []


def test_a_foreign_script_and_picture_are_refused(page: Page, addresses: dict[str, str]) -> None:
    """What the page itself would refuse if a word of a netlist ever became markup."""
    page.show(addresses["common-emitter"], 1280)
    page.evaluate(
        "document.body.insertAdjacentHTML('beforeend',"
        '\'<img src="https://example.invalid/x.png" onerror="window.ran = 1">\''
        "+ '<p style=\"position:fixed\" id=probe>x</p>')"
    )
    assert page.evaluate("getComputedStyle(document.querySelector('#probe')).position") == "static"
    assert page.evaluate("window.ran") is None
    refused = [str(event) for event in _complaints(page)]
    assert any("img-src" in event or "default-src" in event for event in refused)


def test_dark_light_and_paper_differ(page: Page, addresses: dict[str, str]) -> None:
    grounds = []
    for dark, paper in ((False, False), (True, False), (True, True)):
        page.show(addresses["common-emitter"], 1280, dark=dark, paper=paper)
        grounds.append(page.evaluate("getComputedStyle(document.body).backgroundColor"))
    assert grounds == ["rgb(252, 251, 247)", "rgb(21, 25, 29)", "rgb(255, 255, 255)"]
