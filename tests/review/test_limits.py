"""Limits held against the figures of an amplifier, as written in a ``tauledger.toml``."""

from __future__ import annotations

from pathlib import Path

import pytest

from tauledger.analysis import analyze
from tauledger.configuration.reading import read_configuration
from tauledger.netlist import parse
from tauledger.problems import Severity
from tauledger.review.limits import CODES, LimitRow, check_limits, findings
from tauledger.review.rows import Review

# Wind gauge: one stage, its bypass sets the low corner and Cμ the high one; invented.
STAGE = """\
stage
VCC vcc 0 12
VIN in 0 AC 1
RS in src 600
C1 base src 2.2u
R1 vcc base 68k
R2 base 0 15k
RC vcc coll 3.9k
RE emit 0 1k
CE emit 0 100u
C2 coll out 1u
RL out 0 10k
Q1 coll base emit QW
.model QW NPN (IS=15f BF=260 VAF=85 RB=90 CJE=14p CJC=4.2p TF=0.42n)
.print ac v(out)
"""


@pytest.fixture(scope="module")
def review() -> Review:
    return analyze(parse(STAGE)).review


def _rows(folder: Path, review: Review, limits: str, more: str = "") -> tuple[LimitRow, ...]:
    file = folder / "tauledger.toml"
    head = f"{more}[path.stage]\nnetlist = 'stage.cir'\n[path.stage.limits]\n"
    file.write_text(head + limits, encoding="utf-8")
    (settings,) = read_configuration(file).paths
    return check_limits(settings, review, review.paths[0])


def test_figures_within_their_limits_give_no_finding(tmp_path: Path, review: Review) -> None:
    limits = """\
midband_gain = { min = "41 dB", max = "150 V/V" }
low_corner = { max = "100 Hz" }
high_corner = { min = "500 kHz", max = "1 MHz" }
input_resistance.min = "3 kΩ"
output_resistance = { max = "4 kΩ" }
node_voltage = { COLL = { min = "6 V", max = "7 V" } }
current.q1 = { min = "1 mA", max = "2 mA" }
low_corner_set_by = "ce"
high_corner_set_by = "Q1.Cmu"
"""
    rows = _rows(tmp_path, review, limits)
    assert [row.verdict for row in rows] == ["met"] * 9
    assert findings(rows) == ()


def test_a_missed_limit_names_figure_limit_distance_and_part(
    tmp_path: Path, review: Review
) -> None:
    low = review.paths[0].low
    assert low is not None
    assert low.exact_hz is not None
    (row,) = _rows(tmp_path, review, 'low_corner = { min = "5 Hz", max = "50 Hz" }')
    assert (row.figure, row.verdict, row.part) == ("low corner", "missed", "CE")
    assert row.value == low.exact_hz
    (problem,) = findings([row])
    assert (problem.code, problem.severity) == ("limit-missed", Severity.ERROR)
    above = low.exact_hz - 50.0
    assert problem.message == (
        f"low corner {low.exact_hz:.1f} Hz is above the 50 Hz allowed, by {above:.1f} Hz "
        f"({above * 2:.1f} %); set by CE"
    )
    assert problem.span is not None
    assert problem.span.text[problem.span.column - 1 :].startswith('"50 Hz"')
    assert "CE" in problem.advice
    (row,) = _rows(tmp_path, review, 'low_corner.max = "30 Hz"')
    assert f" ({100.0 * (low.exact_hz / 30.0 - 1.0):.0f} %)" in findings([row])[0].message


@pytest.mark.parametrize(
    ("limit", "start"),
    [
        ('midband_gain.max = "40 dB"', "midband gain 42.0 dB is above the 40 dB allowed, by 2.00"),
        ('midband_gain.min = "200 V/V"', "midband gain 12"),
        (
            'high_corner.min = "2 MHz"',
            "high corner 696 kHz is below the 2 MHz required, by 1.30 MHz",
        ),
        ('input_resistance.min = "1 MΩ"', "input resistance 3."),
        ('output_resistance.max = "1 Ω"', "output resistance 3."),
        ('node_voltage.coll.max = "5 V"', "voltage of coll 6."),
        ('current.Q1.min = "2 mA"', "current of Q1 1."),
    ],
)
def test_every_figure_can_miss(tmp_path: Path, review: Review, limit: str, start: str) -> None:
    (row,) = _rows(tmp_path, review, limit)
    assert row.problem is not None
    assert row.problem.code == "limit-missed"
    assert row.problem.message.startswith(start)


def test_capacitors_keep_their_margin_by_class(tmp_path: Path, review: Review) -> None:
    classes = """\
[capacitors.small]
match = ["C2"]
rated_voltage = "6.3 V"
[capacitors.rest]
match = "c[12]"
rated_voltage = "16 V"
"""
    rows = _rows(tmp_path, review, 'capacitor_voltage_margin.min = "50 %"', classes)
    voltage = {node.node: node.voltage_v for node in review.nodes}
    found = {row.figure: (row.verdict, row.value) for row in rows}
    assert found == {
        "voltage margin of C1": ("met", pytest.approx(100 * (1 - voltage["base"] / 16))),
        "voltage margin of C2": ("missed", pytest.approx(100 * (1 - voltage["coll"] / 6.3))),
        "voltage margin of CE": ("unknown", None),
    }
    assert [problem.code for problem in findings(rows)] == ["limit-unknown", "limit-missed"]


def test_the_load_that_the_configuration_attaches_needs_no_rating(tmp_path: Path) -> None:
    file = tmp_path / "tauledger.toml"
    file.write_text("""\
[capacitors.all]
match = "C[12E]"
rated_voltage = "25 V"
[path.stage]
netlist = "stage.cir"
output = { node = "out", load_capacitance = "220 pF" }
limits.capacitor_voltage_margin = { min = "10 %" }
""")
    (settings,) = read_configuration(file).paths
    analysis = analyze(parse(STAGE), settings=settings)
    (path,) = analysis.review.paths
    assert "Cload" in {row.name for row in path.time_constants}
    rows = check_limits(settings, analysis.review, path)
    assert {row.part for row in rows} == {"C1", "C2", "CE"}
    assert findings(rows) == ()


def test_dominance_names_what_leads_instead(tmp_path: Path, review: Review) -> None:
    rows = _rows(tmp_path, review, 'low_corner_set_by = "C1"\nhigh_corner_set_by = "C9"')
    first, second = findings(rows)
    assert first.code == "limit-dominance"
    assert first.message.startswith("CE sets the low corner, not C1 (CE 7")
    assert second.code == "limit-subject-unknown"


def test_a_tie_is_a_warning(tmp_path: Path) -> None:
    # Without its bypass C1 sees 12.3 kΩ and C2 13.9 kΩ: equal time constants at 2.2 and 1.95 µF.
    twin = STAGE.replace("C2 coll out 1u", "C2 coll out 1.95u").replace("CE emit 0 100u", "")
    review = analyze(parse(twin)).review
    (row,) = _rows(tmp_path, review, 'low_corner_set_by = "C1"')
    assert row.verdict == "tie"
    assert row.problem is not None
    assert row.problem.severity is Severity.WARNING


def test_a_gain_down_to_dc_keeps_any_upper_limit(tmp_path: Path) -> None:
    direct = """\
direct
V1 vcc 0 12
VIN base 0 DC 2 AC 1
RE emit 0 1k
Q1 vcc base emit QW
.model QW NPN (IS=15f BF=260)
"""
    review = analyze(parse(direct), output="emit").review
    rows = _rows(tmp_path, review, 'low_corner.max = "1 Hz"\nhigh_corner.min = "1 MHz"')
    assert [(row.verdict, row.value) for row in rows] == [("met", 0.0), ("unknown", None)]
    (problem,) = findings(rows)
    assert problem.code == "limit-unknown"
    assert "CJE" in problem.message
    (missed,) = findings(_rows(tmp_path, review, 'low_corner.min = "1 Hz"'))
    assert missed.code == "limit-missed"


def test_limits_on_what_does_not_exist_say_so(tmp_path: Path, review: Review) -> None:
    limits = 'node_voltage.colector.max = "5 V"\ncurrent.Q7.max = "1 A"\nmidband_gain.max = "5 Ω"\n'
    rows = _rows(tmp_path, review, limits)
    codes = [problem.code for problem in findings(rows)]
    assert codes == ["limit-unknown", "limit-subject-unknown", "limit-subject-unknown"]
    assert {problem.code for problem in findings(rows)} <= set(CODES)
