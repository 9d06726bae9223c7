"""Sizes of capacitors in closed form, under the sum of time constants."""

from __future__ import annotations

import math
from collections.abc import Sequence


def least_total(resistances_ohm: Sequence[float], corner_hz: float) -> list[float]:
    """Capacitances of the least total with Σ 1/(R_i C_i) = 2π·corner.

    With a multiplier for the constraint, 1 = λ/(R_i C_i²): C_i is proportional to 1/√R_i, and so
    C_i = Σ_j(1/√R_j) / (ω √R_i). (Derived here, no source.)

    >>> [round(1e6 * c, 3) for c in least_total([100.0, 400.0], 100.0)]
    [23.873, 11.937]
    """
    omega = 2.0 * math.pi * corner_hz
    total = sum(1.0 / math.sqrt(r) for r in resistances_ohm)
    return [total / (omega * math.sqrt(r)) for r in resistances_ohm]


def by_shares(
    resistances_ohm: Sequence[float], shares: Sequence[float], corner_hz: float
) -> list[float]:
    """Capacitances that each give the stated share of Σ 1/(R_i C_i) = 2π·corner."""
    omega = 2.0 * math.pi * corner_hz
    return [1.0 / (omega * share * r) for r, share in zip(resistances_ohm, shares, strict=True)]
