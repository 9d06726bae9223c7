"""Spread and temperature as pages: whole, inert, and drawn where the figures are."""

from __future__ import annotations

import base64
import hashlib
import math
import re
import xml.etree.ElementTree as ElementTree
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from report.test_html import HOSTILE, Markup
from tauledger.analysis import analyze, read
from tauledger.command import main
from tauledger.configuration.reading import read_configuration
from tauledger.decide.asked import parse_asked
from tauledger.decide.spread import spread
from tauledger.decide.temperature import steps, temperature_sweep
from tauledger.quantity import format_quantity
from tauledger.report.decision import spread_page
from tauledger.report.decision_html import spread_html
from tauledger.report.decision_html_plot import curve_svg, histogram_svg
from tauledger.report.decision_html_scale import Scale, fitted
from tauledger.report.decision_html_temperature import temperature_html
from tauledger.report.layout import plain
from tauledger.report.page import Page
from tauledger.review.decisions import (
    FigureSpread,
    Histogram,
    Percentile,
    Spread,
    TemperatureSweep,
    WorstCase,
    Yield,
)

SAMPLES = Path(__file__).parents[2] / "samples"
NETLIST = SAMPLES / "common-emitter" / "common-emitter.cir"


@cache
def _spread() -> Spread:
    settings = read_configuration(NETLIST.parent / "tauledger.toml").paths[0]
    return spread(analyze(read(NETLIST), settings=settings), settings, (), 400)


@cache
def _sweep() -> TemperatureSweep:
    return temperature_sweep(analyze(read(NETLIST)), steps(-20.0, 70.0, 5))


def _drawings(page: str) -> list[ElementTree.Element]:
    """Every SVG that is not decoration, read as the XML it is."""
    found = re.findall(r"<svg.*?</svg>", page, re.DOTALL)
    trees = [ElementTree.fromstring(text) for text in found]
    return [tree for tree in trees if tree.get("aria-hidden") != "true"]


def _kinds(drawing: ElementTree.Element, kind: str) -> list[ElementTree.Element]:
    return [e for e in drawing.iter() if kind in (e.get("class") or "").split()]


# Pages --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("which", ["spread", "temperature"])
def test_page_is_whole_inert_and_told_in_words(which: str) -> None:
    text = spread_html(_spread()) if which == "spread" else temperature_html(_sweep())
    page = Markup(text)
    assert page.open == []
    tags = {tag for tag, _ in page.elements}
    assert not tags & {"script", "link", "img", "iframe", "object", "form", "image", "use", "base"}
    for _, attributes in page.elements:
        assert not {key for key in attributes if key.startswith("on") or key in ("src", "style")}
    (style,) = page.words["style"]
    assert not re.search(r"url\(|@import|expression", style)
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    (policy,) = [m["content"] for m in page.named("meta") if m.get("http-equiv")]
    assert policy is not None
    assert policy.startswith(f"default-src 'none'; style-src 'sha256-{digest}';")
    ids = [found for _, attributes in page.elements if (found := attributes.get("id"))]
    assert len(ids) == len(set(ids))
    assert {link["href"] for link in page.named("a")} <= {f"#{found}" for found in ids}
    assert len(page.named("caption")) == len(page.named("table")) >= 2
    drawings = _drawings(text)
    assert len(drawings) == (8 if which == "spread" else 4)
    for drawing in drawings:
        assert drawing.get("role") == "img"
        named = (drawing.get("aria-labelledby") or "").split()
        told = {e.get("id"): e.text for e in drawing if e.tag in ("title", "desc")}
        assert list(told) == named
        assert all(told.values())


def test_spread_page_holds_every_figure_of_the_rows() -> None:
    result = _spread()
    words = Markup(spread_html(result)).text().replace("\u00a0", " ")
    assert result.total is not None
    for shown in (
        f"{100 * result.total.share:.2f} %", "122 V/V", "88.9 Hz", "input resistance",
        "voltage margin of C2", "current of Q1", "low corner set by CE", "Q1 current gain",
        "−40 % to +60 %", "RE low", "40 dB", "150 Hz",
    ):  # fmt: skip
        assert shown in words, shown
    for figure in result.figures:
        unit = figure.unit
        for entry in figure.percentiles[::3]:
            shown = format_quantity(entry.value, "" if unit == "V/V" else unit)
            assert shown in words, (figure.figure, entry.percent)
        assert figure.kept is not None
        assert f"{100 * figure.kept.share:.2f} %" in words
    shares = [c.share for c in result.figures[0].contributions if c.share > 0.01]
    assert all(f"{100 * share:.1f} %" in words for share in shares)


def test_an_end_at_which_a_figure_does_not_exist_has_a_dash() -> None:
    """A resistor at a hundredth of its value may leave no operating point, and so no gain."""
    result = _spread()
    gain, *others = result.figures
    first = replace(gain.contributions[0], at_low=math.nan, at_high=math.inf)
    figures = (replace(gain, contributions=(first, *gain.contributions[1:])), *others)
    torn = replace(result, figures=figures)
    assert not re.search(r"\b(nan|inf)\b", Markup(spread_html(torn)).text())
    assert not re.search(r"\b(nan|inf)\b", plain(spread_page(Page(100, str), torn)))


def test_temperature_page_holds_every_row() -> None:
    sweep = _sweep()
    words = Markup(temperature_html(sweep)).text().replace("\u00a0", " ")
    for shown in ("−20.0 °C", "2.50 °C", "70.0 °C", "gain, dB", "low corner, Hz", "temperature, °C",
                  "high corner, kHz", "current of Q1, mA"):  # fmt: skip
        assert shown in words, shown
    assert words.count("°C") >= 2 * len(sweep.rows)


def test_words_of_a_netlist_stay_words(tmp_path: Path) -> None:
    netlist = tmp_path / "hostile<i>.cir"
    netlist.write_text(HOSTILE, encoding="utf-8")
    analysis = analyze(read(netlist))
    settings_file = tmp_path / "tauledger.toml"
    settings_file.write_text(
        '[path.x]\nnetlist = "hostile<i>.cir"\n[path.x.limits]\n'
        '"low_corner_set_by" = "CE<script>"\n[path.x.limits.node_voltage]\n'
        '"<svg>" = { min = "1 V" }\n"<img src=x>" = { min = "1 V" }\n'
        "[path.x.limits.current]\n\"Q1<s>\" = { max = '1 mA' }\n",
        encoding="utf-8",
    )
    settings = read_configuration(settings_file).paths[0]
    result = spread(analysis, settings, [parse_asked("R*=5%")], 60)
    sweep = temperature_sweep(analysis, [0.0, 30.0])
    for text in (spread_html(result), temperature_html(sweep)):
        page = Markup(text)
        assert page.open == []
        assert not {tag for tag, _ in page.elements} & {"script", "img", "s", "i<"}
        assert "<script>alert(1)</script>" in page.text()
        assert not {"\u202e", "\x1b"} & set(page.text())
        for drawing in _drawings(text):
            known = {"svg", "title", "desc", "path", "rect", "text", "circle"}
            assert {e.tag for e in drawing.iter()} <= known
    assert "<img src=x>" in Markup(spread_html(result)).text()
    assert any("Q1<s>" in "".join(d.itertext()) for d in _drawings(temperature_html(sweep)))


@pytest.mark.parametrize("command", ["spread", "temperature"])
def test_command_saves_every_form_and_leaves_stdout_alone(
    command: str, tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    own = ["--boards", "60"] if command == "spread" else ["--range", "0..40", "--steps", "3"]
    starts = {"html": "<!DOCTYPE html>", "json": "{", "text": "Door intercom"}
    for form, start in starts.items():
        target = tmp_path / f"out.{form}"
        arguments = [command, str(NETLIST), *own, "--format", form]
        assert main([*arguments, "--save", str(target)]) == 0
        assert capfd.readouterr().out == ""
        assert main(arguments) == 0
        assert capfd.readouterr().out == target.read_text(encoding="utf-8")
        assert target.read_text(encoding="utf-8").startswith(start)
    nowhere = str(tmp_path / "none" / "page.html")
    assert main([command, str(NETLIST), *own, "--format", "html", "--save", nowhere]) == 2
    assert "page.html: cannot be written" in capfd.readouterr().err


# Drawings -----------------------------------------------------------------------------------------


def _figure(
    edges: tuple[float, ...],
    counts: tuple[int, ...],
    least: float | None = None,
    most: float | None = None,
    linear: bool = True,
    unit: str = "V",
) -> FigureSpread:
    kept = Yield(
        f"{least} {unit}" if least is not None else "",
        f"{most} {unit}" if most is not None else "",
        sum(counts), sum(counts), 1.0, 0.9, 1.0, least, most,
    )  # fmt: skip
    nominal = (edges[0] + edges[-1]) / 2.0
    return FigureSpread(
        "voltage of c", unit, nominal, nominal, 0.1, 0.1, (Percentile(50.0, nominal),),
        WorstCase(edges[0], ()), WorstCase(edges[-1], ()), 0, (), Histogram(edges, counts),
        kept if least is not None or most is not None else None, linear,
    )  # fmt: skip


def _edge(element: ElementTree.Element, *keys: str) -> float:
    return sum(float(element.get(key) or "nan") for key in keys)


def test_bars_stand_for_their_counts_and_are_cut_at_a_limit() -> None:
    figure = _figure((4.0, 5.0, 6.0, 7.0, 8.0), (10, 40, 20, 0), least=4.5)
    drawing = ElementTree.fromstring(histogram_svg(figure, "h"))
    bars = _kinds(drawing, "hb")
    heights = [_edge(bar, "height") for bar in bars]
    # The first bin is cut in two at 4.5 V, the empty one is not drawn.
    assert len(bars) == 4
    assert heights[0] == heights[1] == pytest.approx(heights[2] / 4.0, abs=0.1)
    assert heights[3] == pytest.approx(heights[2] / 2.0, abs=0.1)
    assert [("out" in (bar.get("class") or "")) for bar in bars] == [True, False, False, False]
    (line,) = _kinds(drawing, "lim")
    x = float(re.match(r"M([\d.]+)", line.get("d") or "")[1])  # type: ignore[index]
    assert _edge(bars[0], "x", "width") == pytest.approx(x, abs=1.1)
    assert _edge(bars[1], "x") == pytest.approx(x, abs=0.06)
    # Linear: 4.5 V is midway between the ends of its bin.
    ends = _edge(bars[0], "x"), _edge(bars[2], "x")
    assert x == pytest.approx(sum(ends) / 2.0, abs=0.1)


def test_limits_far_off_are_told_at_the_edge() -> None:
    drawing = ElementTree.fromstring(
        histogram_svg(_figure((-0.69, -0.68, -0.67), (5, 5), least=-20.0, most=3.0), "h")
    )
    words = [e.text for e in _kinds(drawing, "ll")]
    assert words == ["◂ min -20.0 V", "max 3.0 V ▸"]
    assert _kinds(drawing, "lim") == []
    assert all("out" not in (bar.get("class") or "") for bar in _kinds(drawing, "hb"))
    # A limit that cuts all boards off leaves them all beyond it.
    beyond = histogram_svg(_figure((1.0, 1.1, 1.2), (5, 5), most=0.5), "h")
    bars = _kinds(ElementTree.fromstring(beyond), "hb")
    assert bars
    assert all("out" in (bar.get("class") or "") for bar in bars)


def test_words_above_a_histogram_do_not_run_into_each_other() -> None:
    for least, most in ((5.9, 6.1), (4.1, 7.9), (6.0, 6.0), (7.9, 7.95), (4.0, 4.05)):
        figure = _figure((4.0, 5.0, 6.0, 7.0, 8.0), (10, 40, 20, 5), least, most)
        drawing = ElementTree.fromstring(histogram_svg(figure, "h"))
        spans: list[tuple[float, float, float]] = []
        for kind in ("ll", "nl"):
            for words in _kinds(drawing, kind):
                x, y, width = _edge(words, "x"), _edge(words, "y"), 7.0 * len(words.text or "")
                left = x - width if "end" in (words.get("class") or "") else x
                assert left > -6.0
                assert left + width < 306.0
                assert not any(
                    y == other and left < b and left + width > a for a, b, other in spans
                )
                spans.append((left, left + width, y))
        assert len(spans) == 3


def test_a_curve_has_a_point_for_each_temperature_and_a_gap_for_none() -> None:
    values = [1e-3, 1.1e-3, None, 1.3e-3, 1.5e-3]
    text = curve_svg("current of Q1", "A", [0.0, 10.0, 20.0, 30.0, 40.0], values, "plain", "c")
    drawing = ElementTree.fromstring(text)
    dots, lines = _kinds(drawing, "cm"), _kinds(drawing, "cv")
    assert len(dots) == 4
    assert [line.get("d", "").count("L") for line in lines] == [1, 1]
    across = [float(dot.get("cx") or "") for dot in dots]
    # 0, 10, 30 and 40 °C.
    steps_seen = np.diff(across) / (across[1] - across[0])
    assert steps_seen == pytest.approx([1.0, 2.0, 1.0], abs=0.01)
    heights = [float(dot.get("cy") or "") for dot in dots]
    assert np.diff(heights) / (heights[1] - heights[0]) == pytest.approx([1.0, 2.0, 2.0], abs=0.02)
    assert heights[0] > heights[-1]
    assert "1.00 mA at 0 °C to 1.50 mA at 40.0 °C" in text
    assert curve_svg("gain", "dB", [0.0, 1.0], [None, None], "plain", "c") == ""


@given(
    st.floats(-1e6, 1e6), st.floats(1e-4, 1e3), st.booleans(), st.sampled_from(["V", "Hz", "%", ""])
)
def test_labels_stand_at_the_values_they_name(
    low: float, span: float, logarithmic: bool, unit: str
) -> None:
    if logarithmic:
        low = abs(low) + 1e-3
        high = low * (1.0 + span)
    else:
        high = low + span * max(abs(low), 1.0)
    scale = fitted(low, high, logarithmic, unit, 0.0, 100.0)
    assert (scale.at(low), scale.at(high)) == (pytest.approx(0.0, abs=1e-6), pytest.approx(100.0))
    ticks = scale.ticks(8)
    assert len(ticks) <= 8
    prefix = {"m": 1e-3, "µ": 1e-6, "k": 1e3, "M": 1e6, "G": 1e9, "n": 1e-9, "": 1.0}
    word = scale.unit_word.removesuffix(unit) if unit else ""
    for place, label in ticks:
        assert -1e-6 <= place <= 100.0 + 1e-6
        number, own = re.fullmatch(r"([−\d.e+]+)([mµkMGn]?)", label).groups()  # type: ignore[union-attr]
        value = float(number.replace("−", "-")) * prefix[own] * prefix[word]
        # A label has six digits.
        at = scale.at(value) if value > 0.0 or not scale.logarithmic else place
        slack = 100.0 * 1e-5 * abs(value) / (high - low) + 1e-6
        assert at == pytest.approx(place, abs=slack * (1.0 if not logarithmic else 10.0))


def test_labels_over_decades_have_prefixes_of_their_own() -> None:
    scale = Scale(1.0, 1e6, True, "Hz", 0.0, 100.0)
    assert [label for _, label in scale.ticks(7)] == ["1", "10", "100", "1k", "10k", "100k", "1M"]
    assert scale.unit_word == "Hz"
    near = Scale(2e3, 9e3, True, "Hz", 0.0, 100.0)
    assert [label for _, label in near.ticks(8)] == ["2", "3", "4", "5", "6", "7", "8", "9"]
    assert near.unit_word == "kHz"
