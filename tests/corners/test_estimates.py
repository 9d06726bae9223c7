"""Better estimates, bounds, exact pull and consequences of a corner."""

from __future__ import annotations

import importlib.util
import math
import re
from pathlib import Path

import pytest

from tauledger.analysis import analyze
from tauledger.netlist import parse
from tauledger.review.rows import CornerRow, PathRow

_SPEC = importlib.util.spec_from_file_location(
    "estimate_table", Path(__file__).parents[1] / "benchmarks" / "estimates.py"
)
assert _SPEC
assert _SPEC.loader
table = importlib.util.module_from_spec(_SPEC)
_SPEC.loader.exec_module(table)


def path_of(text: str, output: str = "out") -> PathRow:
    return analyze(parse(text + "\n.end\n"), output=output).review.paths[0]


def corner(path: PathRow, end: str) -> CornerRow:
    found = path.low if end == "low" else path.high
    assert found is not None
    return found


def test_better_estimates_hold_on_published_and_sample_circuits() -> None:
    rows = list(table.corners())
    assert len(rows) >= 70
    off = [(name, c) for name, c in rows if abs(c.improved_error) > 0.05]
    assert len(off) <= 0.1 * len(rows)
    # Where it is further off, the report says why.
    assert all(c.notes for _, c in off)


def ladder(resistances: list[float], end: str) -> str:
    """Buffered RC sections, so that every pole is known: R·C with C = 1 µF or 1 nF."""
    lines = ["sections", "VS n0 0 AC 1"]
    for i, resistance in enumerate(resistances):
        lines.append(f"E{i} m{i} 0 n{i} 0 1")
        if end == "low":
            lines += [f"C{i} m{i} n{i + 1} 1u", f"R{i} n{i + 1} 0 {resistance}"]
        else:
            lines += [f"R{i} m{i} n{i + 1} {resistance}", f"C{i} n{i + 1} 0 1n"]
    last = len(resistances)
    return "\n".join([*lines, f"EO out 0 n{last} 0 1", "RO out 0 1k"])


@pytest.mark.parametrize("end", ["low", "high"])
def test_equal_real_poles_shrink_the_band_as_references_b10_say(end: str) -> None:
    found = corner(path_of(ladder([1e3] * 3, end)), end)
    single = 1 / (2 * math.pi * 1e3 * (1e-6 if end == "low" else 1e-9))
    factor = math.sqrt(2 ** (1 / 3) - 1)
    expected = single / factor if end == "low" else single * factor
    assert found.exact_hz == pytest.approx(expected, rel=1e-3)
    assert found.improved_hz == pytest.approx(expected, rel=1e-2)
    assert found.lowest_hz <= expected <= found.highest_hz
    # Every section moves the corner by a third of its own change.
    assert set(found.set_by) == {"C0", "C1", "C2"}


def test_exact_pull_adds_up_to_one() -> None:
    path = path_of(ladder([1e3, 2e3, 7e3, 30e3], "low"))
    moves = [t.exact_move for t in path.time_constants if t.end == "low"]
    assert sum(moves) == pytest.approx(-1.0, abs=2e-3)


def test_doubling_a_part_does_what_was_said() -> None:
    resistances = [1e3, 2.5e3, 7e3]
    found = corner(path_of(ladder(resistances, "low")), "low")
    said = next(change for change in found.changes if change.startswith("C0 × 2"))
    value, unit = re.search(r"→ ([\d.]+) (\w+)", said).groups()
    doubled = ladder(resistances, "low").replace("C0 m0 n1 1u", "C0 m0 n1 2u")
    again = corner(path_of(doubled), "low").exact_hz
    assert float(value) * {"Hz": 1, "kHz": 1e3}[unit] == pytest.approx(again, rel=5e-3)


def test_rise_time_droop_and_settling_of_one_pole() -> None:
    path = path_of(
        """rc
VS in 0 AC 1
RS in a 1k
C1 a out 1u
RL out 0 9k
CL out 0 10p"""
    )
    # ln 9·τ, 3.09 % at f = 100 f_L, ln 100·τ: references B12 and B13.
    assert any("19.8 ns" in text for text in corner(path, "high").timing)
    low = corner(path, "low").timing
    assert any("3.1 %" in text for text in low)
    assert any("46.1 ms" in text for text in low)


def test_droop_of_a_given_square_wave() -> None:
    text = """rc
VS in 0 AC 1
C1 in out 1u
RL out 0 10k
.end
"""
    low = analyze(parse(text), output="out", square_wave_hz=159.1549).corners.low
    # 1 − exp(−π f_L/f) with f_L = 15.92 Hz.
    assert any("159 Hz droops by 27.0 %" in note for note in low.timing)


def test_rules_of_one_pole_are_withheld_where_several_interact() -> None:
    timing = corner(path_of(ladder([1e3] * 3, "high")), "high").timing
    assert any("no simple rule" in text for text in timing)
    assert not any("ns" in text for text in timing)


def test_peak_is_told_in_db() -> None:
    path = path_of(
        """resonant output
VS in 0 AC 1
RS in a 10
L1 a out 10u
CL out 0 1n
RL out 0 1k"""
    )
    notes = " ".join(corner(path, "high").notes)
    quality = 1 / (10 * math.sqrt(1e-9 / 10e-6) + math.sqrt(10e-6 / 1e-9) / 1e3)
    height = 20 * math.log10(quality)
    found = re.search(r"peaks by ([\d.]+) dB", notes)
    assert found
    assert float(found[1]) == pytest.approx(height, abs=0.5)
    assert "complex poles" in notes


def test_given_midband_reports_equaliser_parts_as_in_band() -> None:
    text = """equaliser
VS in 0 AC 1
C0 in a 10u
RA a 0 100k
E1 b 0 a 0 1
R1 b c 100k
R2 c d 11k
C1 d 0 33n
E2 out 0 c 0 1
RO out 0 1k
C9 c 0 100p
.end
"""
    plain = analyze(parse(text), output="out").review.paths[0]
    judged = analyze(parse(text), output="out", midband_hz=1e3).review.paths[0]
    assert next(t for t in judged.time_constants if t.name == "C1").end == "in-band"
    assert next(t for t in plain.time_constants if t.name == "C1").end != "in-band"
    assert judged.midband_hz == 1e3
