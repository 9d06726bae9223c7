"""Draws and statistics against what is known of them exactly."""

from __future__ import annotations

import statistics

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tauledger.decide.sampling import (
    deviations,
    latin_hypercube,
    normal_quantile,
    standard_deviation,
)
from tauledger.decide.statistics import wilson_interval


@settings(deadline=None)
@given(st.integers(1, 3000), st.integers(0, 2**40))
def test_every_stratum_is_drawn_once(boards: int, seed: int) -> None:
    draws = latin_hypercube("R1", seed, boards, 0, boards)
    assert sorted(np.floor(draws * boards).astype(int)) == list(range(boards))


def test_any_part_of_the_boards_can_be_drawn_alone() -> None:
    whole = latin_hypercube("R1", 7, 5000, 0, 5000)
    parts = [latin_hypercube("R1", 7, 5000, i, i + 617) for i in range(0, 5000, 617)]
    assert np.array_equal(np.concatenate(parts)[:5000], whole)
    assert not np.array_equal(whole, latin_hypercube("R1", 8, 5000, 0, 5000))


def test_two_quantities_are_independent() -> None:
    draws = np.array([latin_hypercube(f"R{i}", 1, 10_000, 0, 10_000) for i in range(12)])
    correlation = np.corrcoef(draws) - np.eye(12)
    assert np.abs(correlation).max() < 0.04  # four standard deviations of 1/√10000


def test_quantile_is_that_of_the_standard_library() -> None:
    probabilities = np.array([1e-15, 1e-9, 1e-3, 0.07, 0.075, 0.3, 0.5, 0.8, 0.99, 1 - 1e-12])
    normal = statistics.NormalDist()
    expected = [normal.inv_cdf(float(p)) for p in probabilities]
    assert normal_quantile(probabilities) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("window", [(-0.2, 0.2), (-0.2, 0.8), (0.0, 0.8)])
@pytest.mark.parametrize("distribution", ["uniform", "normal", "truncated"])
def test_spread_of_the_draws_is_the_stated_one(
    distribution: str, window: tuple[float, float]
) -> None:
    draws = latin_hypercube("C1", 3, 20_000, 0, 20_000)
    found = deviations(draws, *window, distribution)
    assert found.std() == pytest.approx(standard_deviation(*window, distribution), rel=1e-3)
    if window == (-0.2, 0.2):
        assert found.mean() == pytest.approx(0.0, abs=1e-4)
    if distribution != "normal":
        assert found.min() >= window[0]
        assert found.max() <= window[1]


def test_a_lopsided_window_keeps_its_ends() -> None:
    draws = latin_hypercube("C1", 3, 20_000, 0, 20_000)
    found = deviations(draws, -0.2, 0.8, "truncated")
    assert found.min() == pytest.approx(-0.2, abs=1e-3)
    assert found.max() == pytest.approx(0.8, abs=3e-3)
    assert np.median(found) == pytest.approx(0.0, abs=1e-3)


def test_wilson_interval_is_where_the_score_test_ends() -> None:
    """Its definition: |p − share|/√(p(1 − p)/n) = z at both ends."""
    for passed, boards in ((9, 10), (0, 50), (9_930, 10_000)):
        for end in wilson_interval(passed, boards):
            if 1e-12 < end < 1.0:
                score = abs(end - passed / boards) / np.sqrt(end * (1 - end) / boards)
                assert score == pytest.approx(1.959963984540054, rel=1e-9)
    assert wilson_interval(0, 50)[0] == 0.0
