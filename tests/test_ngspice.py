"""The referee itself, against circuits whose answer is a formula."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

import ngspice

pytestmark = pytest.mark.referee

BAND_PASS = """Band pass of two independent first-order sections
V1 in 0 DC 3 AC 1
C1 in a 1u
R1 a 0 1k
E1 b 0 a 0 2
R2 b out 10k
C2 out 0 100p
.end
V2 out 0 DC 5
"""


def band_pass(frequency_hz: float) -> complex:
    s = 2j * math.pi * frequency_hz
    return 2 * (s * 1e-3 / (1 + s * 1e-3)) / (1 + s * 1e-6)


@pytest.fixture
def netlist(tmp_path: Path) -> Path:
    path = tmp_path / "band-pass.cir"
    path.write_text(BAND_PASS)
    return path


def test_sweep_is_the_formula(netlist: Path) -> None:
    sweep = ngspice.sweep(netlist, "OUT", "ac dec 3 1 1meg")
    expected = [band_pass(frequency) for frequency in sweep.frequency_hz]
    assert len(expected) == 19
    np.testing.assert_allclose(sweep.response, expected, rtol=1e-9)


def test_difference_of_two_nodes(netlist: Path) -> None:
    sweep = ngspice.sweep(netlist, "b,out", "ac lin 1 1k 1k")
    s = 2j * math.pi * 1e3
    assert sweep.response[0] == pytest.approx(band_pass(1e3) * s * 1e-6, rel=1e-9)


def test_corners_are_good_to_five_digits(netlist: Path) -> None:
    band = ngspice.band(netlist, "out", 5e3)
    level = abs(band_pass(5e3)) * math.sqrt(0.5)
    assert band.gain == pytest.approx(band_pass(5e3), rel=1e-9)
    assert band.low_hz is not None
    assert band.high_hz is not None
    assert 158 < band.low_hz < 160
    assert 158e3 < band.high_hz < 160e3
    assert abs(band_pass(band.low_hz)) == pytest.approx(level, rel=1e-5)
    assert abs(band_pass(band.high_hz)) == pytest.approx(level, rel=1e-5)


def test_no_corner_where_the_gain_does_not_fall(tmp_path: Path) -> None:
    path = tmp_path / "divider.cir"
    path.write_text("Divider\nV1 in 0 DC 1 AC 1\nR1 in out 1k\nR2 out 0 1k\n")
    assert ngspice.band(path, "out", 1e3) == ngspice.Band(0.5, None, None)


def test_operating_point_stops_at_end(netlist: Path) -> None:
    point = ngspice.operating_point(netlist, ["@R2[i]"])
    assert point.voltages == pytest.approx({"in": 3, "a": 0, "b": 0, "out": 0}, abs=1e-9)
    assert point.figures == pytest.approx({"@r2[i]": 0}, abs=1e-15)


def test_a_failed_analysis_is_not_answered_with_the_one_before() -> None:
    asked = [("op", "v(in)"), ("alter nowhere = 2\nac lin 0 5 1", "v(in)")]
    with pytest.raises(ngspice.RefereeError, match=r"1\.raw"):
        ngspice.run(BAND_PASS, asked)


def test_failure_says_what_ngspice_said(tmp_path: Path) -> None:
    path = tmp_path / "broken.cir"
    path.write_text("Missing model\nV1 a 0 1\nR1 a b 1k\nQ1 a b 0 NOWHERE\n")
    with pytest.raises(ngspice.RefereeError, match=r"(?i)nowhere"):
        ngspice.operating_point(path)
