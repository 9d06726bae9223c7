"""Resistances in symbols: what is written, what it is worth, and what is too small to write."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tauledger.corners.symbols import (
    GROUND,
    NEGLIGIBLE,
    OPEN,
    Term,
    boosted,
    bridging,
    divided,
    increased,
    multiplied,
    parallel,
    series,
    symbol,
)

R1, R2, R3 = symbol("R1", 1e3), symbol("R2", 2e3), symbol("R3", 3e3)
GM = symbol("gm", 0.01)


@pytest.mark.parametrize(
    ("term", "text", "ohms"),
    [
        (series(R1, R2), "R1 + R2", 3e3),
        (parallel(R1, R2), "R1‖R2", 2e3 / 3),
        (parallel(series(R1, R2), R3), "(R1 + R2)‖R3", 1.5e3),
        (series(parallel(R1, R2), R3), "R1‖R2 + R3", 3e3 + 2e3 / 3),
        (multiplied(51.0, "(β+1)", series(R1, R2)), "(β+1)·(R1 + R2)", 153e3),
        (multiplied(51.0, "(β+1)", parallel(R1, R2)), "(β+1)·(R1‖R2)", 34e3),
        (divided(series(R1, R2), 51.0, "(β+1)"), "(R1 + R2)/(β+1)", 3e3 / 51),
        (series(divided(R1, 50.0, "β"), R2), "R1/β + R2", 2020.0),
        (parallel(divided(R1, 50.0, "β"), R1), "R1/β‖R1", 1 / (0.05 + 1e-3)),
        (increased(parallel(R1, R3), 0.2, "RC/ro"), "(R1‖R3)·(1 + RC/ro)", 900.0),
        (boosted(R1, 0.01, "gm", parallel(R2, R3)), "R1·(1 + gm·(R2‖R3))", 13e3),
        # What has no resistance, or no limit, takes the rest with it or leaves no trace.
        (series(R1, GROUND), "R1", 1e3),
        (series(GROUND, GROUND), "0", 0.0),
        (series(R1, OPEN), "∞", math.inf),
        (parallel(R1, OPEN), "R1", 1e3),
        (parallel(OPEN, OPEN), "∞", math.inf),
        (parallel(R1, GROUND), "0", 0.0),
        (series(), "0", 0.0),
        (parallel(), "∞", math.inf),
        (multiplied(51.0, "(β+1)", GROUND), "0", 0.0),
        (multiplied(51.0, "(β+1)", OPEN), "∞", math.inf),
        (divided(OPEN, 51.0, "(β+1)"), "∞", math.inf),
        (divided(GROUND, 51.0, "(β+1)"), "0", 0.0),
        (increased(OPEN, 0.2, "RC/ro"), "∞", math.inf),
        (increased(R1, 0.009, "RC/ro"), "R1", 1e3),
        (boosted(R1, 0.01, "gm", OPEN), "∞", math.inf),
        (boosted(R1, 0.01, "gm", GROUND), "R1", 1e3),
        (bridging(R1, OPEN, GM), "∞", math.inf),
        (bridging(OPEN, R1, GM), "∞", math.inf),
        (bridging(R1, R2, symbol("gm", 1e-9)), "R1 + R2", 3e3),
    ],
)
def test_rules_of_the_trade(term: Term, text: str, ohms: float) -> None:
    assert term.text == text
    assert term.value == pytest.approx(ohms, rel=1e-12)


def test_what_a_capacitor_from_input_to_output_sees() -> None:
    """R_in + R_out + gm·R_in·R_out, with the product worth 1 kΩ·2 kΩ·10 mS."""
    found = bridging(R1, parallel(R2, R2), GM)
    assert found.value == pytest.approx(1e3 + 1e3 + 10e3)
    assert found.text == "R_in + R_out + gm·R_in·R_out [Miller: R_in·(1 + gm·R_out) + R_out]"
    assert found.where == ("R_in = R1", "R_out = R2‖R2")
    weakened = Term(0.005, "gm/(1 + gm·RE)", binding=1)
    found = bridging(R1, R1, weakened)
    assert found.value == pytest.approx(7e3)
    assert found.text == "R_in + R_out + gm'·R_in·R_out [Miller: R_in·(1 + gm'·R_out) + R_out]"
    assert found.where[-1] == "gm' = gm/(1 + gm·RE)"
    # The abbreviations go along with what they stand in, once each.
    both = series(parallel(found, R2), found)
    assert both.where == found.where
    assert both.text.startswith("(R_in + R_out + ")


@pytest.mark.parametrize(("join", "scale"), [(series, 1.0), (parallel, -1.0)])
@given(values=st.lists(st.floats(1.0, 1e7), min_size=1, max_size=6))
def test_what_is_left_out_hardly_counts(join, scale: float, values: list[float]) -> None:  # type: ignore[no-untyped-def]
    """The least first, and never one whose absence is worth a per cent of what is left."""
    term = join(*(symbol(f"R{i}", value) for i, value in enumerate(values)))
    kept = [int(name[1:]) for name in term.text.replace("‖", " + ").split(" + ")]
    weights = [value**scale for value in values]
    assert term.value**scale == pytest.approx(math.fsum(weights[i] for i in kept))
    assert kept == sorted(kept)
    left_out = sorted(set(range(len(values))) - set(kept), key=lambda i: weights[i])
    assert all(weights[i] <= min(weights[k] for k in kept) for i in left_out)
    total = math.fsum(weights)
    for i in left_out:
        assert weights[i] < NEGLIGIBLE * (total - weights[i]) * (1 + 1e-9)
        total -= weights[i]
    if len(kept) > 1:
        least = min(weights[k] for k in kept)
        assert least >= NEGLIGIBLE * (total - least) * (1 - 1e-9)
