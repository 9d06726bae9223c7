"""Preferred values against what IEC 60063 lists (references C1)."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tauledger.decide.series import SERIES, floor, mantissas, nearest, within


def test_coarse_series_are_the_listed_ones() -> None:
    """References C1 [P]."""
    assert mantissas("E3") == (1.0, 2.2, 4.7)
    assert mantissas("E6") == (1.0, 1.5, 2.2, 3.3, 4.7, 6.8)
    assert mantissas("E12") == (1.0, 1.2, 1.5, 1.8, 2.2, 2.7, 3.3, 3.9, 4.7, 5.6, 6.8, 8.2)


def test_fine_series_have_the_one_exception() -> None:
    """References C1 [P]: 920, where the formula gives 919; 453 is in E48, 464 in E48 and E96."""
    fine = mantissas("E192")
    assert len(fine) == len(set(fine)) == 192
    assert 9.2 in fine
    assert 9.19 not in fine
    assert set(mantissas("E48")) < set(mantissas("E96")) < set(fine)
    assert mantissas("E48")[:4] == (1.0, 1.05, 1.1, 1.15)


@settings(deadline=None)
@given(st.sampled_from(SERIES), st.floats(1e-13, 1e6))
def test_neighbours_enclose_the_value_and_are_next_to_each_other(series: str, value: float) -> None:
    least = floor(value, series)
    low, high = within(least, 3.0 * least, series)[:2]
    assert low == least
    assert low <= value * (1 + 1e-9)
    assert high > value * (1 - 1e-9)
    assert nearest(value, series) in (low, high)


@pytest.mark.parametrize("series", SERIES)
def test_a_value_of_the_series_is_its_own_neighbour(series: str) -> None:
    for mantissa in mantissas(series):
        value = float(f"{mantissa}e-9")
        assert floor(value, series) == nearest(value, series) == value


def test_an_unknown_series_is_refused() -> None:
    with pytest.raises(ValueError, match="no E series"):
        mantissas("E5")
    with pytest.raises(ValueError, match="positive"):
        nearest(0.0, "E6")
