"""Preferred values: the E series of IEC 60063.

E24 and its subsets are a list of the standard, not a formula (references C1, read). E48, E96 and
E192 are three digits of 10^(i/n), with the one exception 920 where the formula gives 919
(references C1, read on four pages).
"""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Sequence

E24 = (
    10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91,
)  # fmt: skip
_STEPS = {"E3": 8, "E6": 4, "E12": 2, "E24": 1}
_FINE = {"E48": 48, "E96": 96, "E192": 192}
SERIES = (*_STEPS, *_FINE)


def mantissas(series: str) -> tuple[float, ...]:
    """The values of one decade, 1 ≤ m < 10, ascending.

    Raises ValueError for a name that is not in :data:`SERIES`.

    >>> mantissas("E6")
    (1.0, 1.5, 2.2, 3.3, 4.7, 6.8)
    """
    if series in _STEPS:
        return tuple(value / 10.0 for value in E24[:: _STEPS[series]])
    if series not in _FINE:
        raise ValueError(f"{series!r} is no E series; expected one of {', '.join(SERIES)}")
    count = _FINE[series]
    hundreds = (round(100.0 * 10.0 ** (i / count)) for i in range(count))
    return tuple((920 if value == 919 else value) / 100.0 for value in hundreds)


def floor(value: float, series: str) -> float:
    """The largest value of the series that is not above ``value`` (> 0).

    >>> floor(2.3e-6, "E6")
    2.2e-06
    """
    return _neighbours(value, series)[0]


def nearest(value: float, series: str) -> float:
    """The value of the series nearest in ratio.

    >>> nearest(27.6e-6, "E24")
    2.7e-05
    """
    low, high = _neighbours(value, series)
    return low if value / low <= high / value else high


def within(low: float, high: float, series: str) -> tuple[float, ...]:
    """Every value of the series from ``low`` to ``high``, ascending."""
    powers = range(math.floor(math.log10(low)) - 1, math.floor(math.log10(high)) + 1)
    ladder = (_decimal(m, power) for power in powers for m in mantissas(series))
    return tuple(v for v in ladder if low * (1.0 - 1e-9) <= v <= high * (1.0 + 1e-9))


def _neighbours(value: float, series: str) -> tuple[float, float]:
    """The values just below and above; both the value itself when it is in the series."""
    if not (value > 0.0 and math.isfinite(value)):
        raise ValueError(f"expected a positive value, found {value!r}")
    power = math.floor(math.log10(value))
    scale = mantissas(series)
    ladder = [_decimal(m, p) for p in (power - 1, power, power + 1) for m in scale]
    return _around(value, ladder)


def _decimal(mantissa: float, power: int) -> float:
    """The double nearest to the decimal value, as if written out."""
    return float(f"{mantissa:.2f}e{power}")


def _around(value: float, ladder: Sequence[float]) -> tuple[float, float]:
    near = bisect_left(ladder, value * (1.0 - 1e-9))
    if ladder[near] <= value * (1.0 + 1e-9):
        return ladder[near], ladder[near]
    return ladder[near - 1], ladder[near]
