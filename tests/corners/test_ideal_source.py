"""What is seen at a node that an ideal source holds is no resistance, and no rounding residue."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tauledger.analysis import Analysis, analyze
from tauledger.netlist import parse

# An amplifier of one pole that drives a bridge of its own and a loop; behind its ideal source
# stands a resistor, outside the feedback or inside it.
LOOP = """loop
VS in 0 AC 1
RS in p {source}
C1 p q 1u
RP q 0 47k
GM 0 pole q n {transconductance}
RO pole 0 {inner}
CO pole 0 1n
EO drive 0 pole 0 1
RD drive out {behind}
RF {tap} n {feedback}
RG n 0 1.3k
RX drive x 10k
RY x 0 22k
RL out 0 2k
.print ac v({shown})
.end
"""
RESISTANCES = st.floats(1.0, 6.0).map(lambda power: 10.0**power)


def loop(**values: object) -> Analysis:
    given = {"source": 1.5e3, "transconductance": 1e-3, "inner": 1e8, "feedback": 33e3} | values
    return analyze(parse(LOOP.format(**given)))


@settings(max_examples=25, deadline=None)
@given(source=RESISTANCES, feedback=RESISTANCES, inner=RESISTANCES, behind=RESISTANCES)
def test_behind_an_ideal_source_there_is_exactly_none(
    source: float, feedback: float, inner: float, behind: float
) -> None:
    values = {"source": source, "feedback": feedback, "inner": inner, "behind": behind}
    (path,) = loop(**values, tap="out", shown="drive").review.paths
    assert path.output_resistance_ohm == 0.0


@pytest.mark.parametrize("behind", [1e-3, 1.0, 1e3])
def test_a_small_resistance_outside_the_loop_is_seen(behind: float) -> None:
    (path,) = loop(behind=behind, tap="drive", shown="out").review.paths
    assert path.output_resistance_ohm == pytest.approx(behind, rel=1e-9)


def test_a_resistance_that_the_loop_divides_is_seen() -> None:
    """1 Ω over one plus the loop gain of 1e5·1.3/34.3 and more: closed form by hand."""
    (path,) = loop(behind=1.0, tap="out", shown="out").review.paths
    beta = 1.3 / 34.3
    expected = 1.0 / ((1.0 + 1e5 * beta) / 1.0 + 1.0 / 34.3e3)
    assert path.output_resistance_ohm == pytest.approx(expected, rel=1e-6)
