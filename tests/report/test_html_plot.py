"""The Bode plot: its figures, its limits, its names, in all three forms."""

from __future__ import annotations

import builtins
import math
import re
import struct
import xml.etree.ElementTree as ElementTree
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tauledger.analysis import Analysis, analyze, read
from tauledger.illustrating import illustrate, picture
from tauledger.problems import ProblemError
from tauledger.report.plot import Axis, BodePlot, Tick, bode_plot
from tauledger.report.plot_svg import NARROW, WIDE, bode_svg
from tauledger.review.limits import LimitRow

SAMPLES = Path(__file__).parents[2] / "samples"

LOW_PASS = """one pole behind a source, 1 kilohm and 1 microfarad: corner 159.15 Hz
VCC vcc 0 12
VIN in 0 AC 1
R1 in b 1k
C1 b 0 1u
Q1 vcc b out n
RE out vee 10k
VEE vee 0 -12
.model n npn (bf=1e6)
.print ac v(out)
.end
"""


@cache
def _analysis(name: str) -> Analysis:
    return analyze(read(SAMPLES / name / f"{name}.cir"))


def test_curve_of_one_pole(tmp_path: Path) -> None:
    """At the corner of one pole the gain is down by 3.01 dB and the phase by 45°, a decade above
    by 20.04 dB and 84.3°: the textbook's |1/(1 + jx)|."""
    netlist = tmp_path / "pole.cir"
    netlist.write_text(LOW_PASS, encoding="utf-8")
    analysis = analyze(read(netlist))
    shown = illustrate(analysis)
    curve = shown.exact
    assert len(curve.frequency_hz) >= 200
    corner = 1.0 / (2.0 * math.pi * 1e3 * 1e-6)
    plateau = curve.magnitude[0]
    for frequency, size, phase in zip(
        curve.frequency_hz, curve.magnitude, curve.phase_deg, strict=True
    ):
        ratio = frequency / corner
        assert size / plateau == pytest.approx(1.0 / math.hypot(1.0, ratio), rel=1e-3)
        assert phase == pytest.approx(-math.degrees(math.atan(ratio)), abs=0.2)
    estimate = next(t for t in bode_plot(analysis.review.paths[0], shown).traces[1:])
    assert estimate.gain[1][0] == pytest.approx(corner, rel=2e-3)
    assert estimate.phase[-1][1] == pytest.approx(-90.0)


@pytest.mark.parametrize("name", ["common-emitter", "phono-stage", "opamp-stage"])
def test_marks_lie_three_decibels_down(name: str) -> None:
    analysis = _analysis(name)
    path = analysis.review.paths[0]
    plot = bode_plot(path, illustrate(analysis))
    assert path.gain_db is not None
    assert [mark.end for mark in plot.marks] == ["low", "high"]
    for mark in plot.marks:
        # Straight lines between 361 points bend by a few hundredths of a decibel.
        assert mark.gain_db == pytest.approx(path.gain_db - 3.0103, abs=0.03)


@pytest.mark.referee
def test_points_of_ngspice_lie_on_the_exact_curve() -> None:
    from tauledger.simulate import simulate

    analysis = _analysis("common-emitter")
    simulation = simulate(analysis.circuit, analysis.topology.path, analysis.corners.midband_hz)
    shown = illustrate(analysis, simulation)
    plot = bode_plot(analysis.review.paths[0], shown)
    exact, points = plot.traces[0], plot.traces[-1]
    assert points.kind == "simulated"
    assert len(points.gain) > 50
    for of_exact, of_points, tolerance in (
        (exact.gain, points.gain, 0.1),
        (exact.phase, points.phase, 1.0),
    ):
        x = np.log([f for f, _ in of_exact])
        expected = np.interp(np.log([f for f, _ in of_points]), x, [y for _, y in of_exact])
        assert np.abs(expected - [y for _, y in of_points]).max() < tolerance
    drawn = bode_svg(plot, WIDE, "t")
    assert drawn.count('<circle class="c-simulated"') > 40
    assert "ngspice" in drawn


def _limit(figure: str, unit: str, minimum: str = "", maximum: str = "") -> LimitRow:
    return LimitRow(figure, None, unit, minimum, maximum, "met", "", None)


def test_limits_hatch_the_side_the_curve_may_not_be_on() -> None:
    analysis = _analysis("common-emitter")
    path = analysis.review.paths[0]
    limits = (
        _limit("low corner", "Hz", "20 Hz", "150 Hz"),
        _limit("high corner", "Hz", "100 kHz", "2 MHz"),
        _limit("midband gain", "V/V", "80", "200 V/V"),
        _limit("current of Q1", "A", "1 mA"),
        _limit("low corner", "Hz", "soon"),
    )
    plot = bode_plot(path, illustrate(analysis), limits)
    assert path.gain_db is not None
    edge = path.gain_db - 3.0103
    found = {region.label: region for region in plot.regions}
    assert set(found) == {
        "low corner ≥ 20 Hz",
        "low corner ≤ 150 Hz",
        "high corner ≥ 100 kHz",
        "high corner ≤ 2 MHz",
        "midband gain ≥ 80",
        "midband gain ≤ 200 V/V",
    }
    assert found["low corner ≥ 20 Hz"].right_hz == pytest.approx(20.0)
    assert found["low corner ≥ 20 Hz"].bottom_db == pytest.approx(edge, abs=0.01)
    assert found["low corner ≤ 150 Hz"].left_hz == pytest.approx(150.0)
    assert found["low corner ≤ 150 Hz"].top_db == pytest.approx(edge, abs=0.01)
    assert found["high corner ≥ 100 kHz"].right_hz == pytest.approx(1e5)
    assert found["high corner ≤ 2 MHz"].left_hz == pytest.approx(2e6)
    assert found["midband gain ≥ 80"].top_db == pytest.approx(20 * math.log10(80))
    assert found["midband gain ≤ 200 V/V"].bottom_db == pytest.approx(20 * math.log10(200))
    # The curve meets its limits here, so it runs through none of their strips.
    exact = plot.traces[0].gain
    for region in plot.regions:
        inside = [y for f, y in exact if region.left_hz < f < region.right_hz]
        assert not any(region.bottom_db + 0.1 < y < region.top_db - 0.1 for y in inside)


def _plot(ticks: tuple[Tick, ...]) -> BodePlot:
    axis = Axis(-20.0, 20.0, 10.0)
    return BodePlot("a → b", "gain, dB", 1.0, 1e6, axis, axis, (), ticks, (), (), 0, "words")


@given(
    st.lists(
        st.tuples(st.floats(0.01, 5.8), st.sampled_from(["C1", "CE", "Q1.Cμ", "X1.Q12.Cμ"])),
        min_size=1,
        max_size=12,
    ),
    st.sampled_from([WIDE, NARROW]),
)
def test_names_of_corners_are_crossed_by_nothing(
    places: list[tuple[float, str]], width: float
) -> None:
    ticks = tuple(Tick(name, 10.0**power, "low", False) for power, name in places)
    drawn = bode_svg(_plot(ticks), width, "t")
    names = re.findall(r'<text class="tn [^"]*" x="([\d.]+)" y="([\d.]+)">([^<]+)</text>', drawn)
    leaders = re.findall(r'<path class="ld" d="M([\d.]+) ([\d.]+)V([\d.]+)"/>', drawn)
    boxes = [(float(x), float(x) + 6.0 * len(word), float(y)) for x, y, word in names]
    assert len(boxes) == len(leaders) >= min(len(ticks), 7)
    for number, (left, right, base) in enumerate(boxes):
        for other_left, other_right, other_base in boxes[number + 1 :]:
            apart = left >= other_right or other_left >= right
            assert apart or abs(base - other_base) >= 15
        for x, top, bottom in leaders:
            assert not (left + 0.2 < float(x) < right and float(top) < base - 4 < float(bottom))


def test_svg_file_stands_alone() -> None:
    analysis = _analysis("microphone-preamp")
    drawn = picture("svg", analysis, analysis.review, None).decode()
    root = ElementTree.fromstring(drawn)
    tags = {element.tag.rpartition("}")[2] for element in root.iter()}
    assert not tags & {"script", "image", "use", "foreignObject", "a"}
    assert not re.search(r'href|@import|url\((?!#)|\bon\w+="', drawn)
    ids = [element.get("id") for element in root.iter() if element.get("id")]
    assert len(ids) == len(set(ids))
    assert set(re.findall(r"url\(#([^)]+)\)", drawn)) <= set(ids)
    assert "low corner 112 Hz" in drawn
    assert drawn == picture("svg", analysis, analysis.review, None).decode()


def test_png_is_a_picture_or_says_what_is_missing(monkeypatch: pytest.MonkeyPatch) -> None:
    analysis = _analysis("common-emitter")
    true_import = builtins.__import__

    def without_matplotlib(name: str, *rest: object) -> object:
        if name.startswith("matplotlib"):
            raise ImportError(name)
        return true_import(name, *rest)  # type: ignore[arg-type]

    with monkeypatch.context() as patched:
        patched.setattr(builtins, "__import__", without_matplotlib)
        with pytest.raises(ProblemError) as caught:
            picture("png", analysis, analysis.review, None)
    assert caught.value.problems[0].code == "matplotlib-missing"
    pytest.importorskip("matplotlib")
    drawn = picture("png", analysis, analysis.review, None)
    assert drawn[:8] == b"\x89PNG\r\n\x1a\n"
    assert struct.unpack(">II", drawn[16:24]) == (1800, 1200)
