"""ngspice's figures in the reports, from a simulation made by hand."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

from report.fixtures import ONE_STAGE, TWO_STAGES
from tauledger.report.inert import display_width
from tauledger.report.json_report import json_report
from tauledger.report.terminal import text_report
from tauledger.simulate import Simulation, beside

SIMULATION = Simulation(
    version="45",
    nodes={"out": 0.0},
    transconductance_s={"Q1": 40.0e-3},
    frequency_hz=np.array([1.0, 8930.0]),
    transfer=np.array([0.1j, -118.4 + 1j]),
    midband_hz=8930.0,
    gain=-120.0 + 0j,
    low_hz=60.3,
    high_hz=None,
)
TABLE = """\
Beside ngspice 45 ──────────────────────────────────────────────────────────────────────────────────
 figure        estimate     exact  ngspice 45  against exact
 midband gain  -118 V/V  -118 V/V    -120 V/V        +1.35 %
 low corner     67.4 Hz   60.3 Hz     60.3 Hz        <0.01 %
 high corner   1.92 MHz  1.93 MHz           —              —
 gm of Q1             —   39.6 mS     40.0 mS        +1.01 %
"""


def test_text_report_has_a_section_of_its_own() -> None:
    text = text_report(beside(ONE_STAGE, SIMULATION))
    assert TABLE in text
    # Everything else stays as it was.
    assert text.replace(TABLE + "\n", "") == text_report(ONE_STAGE)


def test_json_report_has_every_figure_with_its_difference() -> None:
    [path] = json.loads(json_report(beside(ONE_STAGE, SIMULATION)))["paths"]
    assert path["simulated"]["simulator"] == "ngspice 45"
    low = path["simulated"]["figures"][1]
    assert low == {
        "figure": "low corner",
        "part": "",
        "unit": "Hz",
        "estimate": 67.4,
        "exact": 60.3,
        "simulated": 60.3,
        "difference": 0.0,
    }


def test_a_gain_of_the_other_sign_is_no_agreement() -> None:
    review = beside(ONE_STAGE, replace(SIMULATION, gain=118.4 + 0j))
    simulated = review.paths[0].simulated
    assert simulated is not None
    assert simulated.figures[0].difference == pytest.approx(-2.0)


def test_missing_figures_of_ours_are_dashes() -> None:
    text = text_report(beside(TWO_STAGES, replace(SIMULATION, transconductance_s={"J1": 3.9e-3})))
    assert "low corner" in text
    assert " gm of J1" in text
    assert "X1.Q2" not in text.partition("Beside")[2].partition("\n\n")[0]


def test_many_transistors_with_long_names_stay_within_the_page() -> None:
    names = [f"X{k}.\x1b[2Jname" + "x" * 60 for k in range(90)]
    [transistor] = ONE_STAGE.transistors
    review = replace(ONE_STAGE, transistors=tuple(replace(transistor, name=name) for name in names))
    text = text_report(
        beside(review, replace(SIMULATION, transconductance_s=dict.fromkeys(names, 1)))
    )
    assert "33 more figures: --format json lists all" in text
    section = text.partition("Beside")[2].partition("\n\n")[0]
    assert all(display_width(line) <= 100 and line.isprintable() for line in section.split("\n"))
