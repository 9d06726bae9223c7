"""Sizes of capacitors in closed form, under the sums of time constants.

At the low end Σ 1/(R_i C_i) is the corner, with R_i what capacitor i sees with the others shorted:
halving a corner takes capacitance in every place, and the least of it in the ratio 1/√R_i. At the
high end b1 = Σ R_i C_i is one over the corner, with R_i what it sees with the others open: the sum
is linear, so that a farad counts most at the largest R_i, whatever the others are. Both sums are
estimates of the exact corner (references B1 to B9), and these sizes are where a search starts.
"""

from __future__ import annotations

import math
from collections.abc import Sequence


def least_total(resistances_ohm: Sequence[float], corner_hz: float) -> list[float]:
    """Capacitances in F of the least total with Σ 1/(R_i C_i) = 2π·corner, at the low end.

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
    """Capacitances in F that each give the stated share of Σ 1/(R_i C_i) = 2π·corner."""
    omega = 2.0 * math.pi * corner_hz
    return [1.0 / (omega * share * r) for r, share in zip(resistances_ohm, shares, strict=True)]


def least_change(
    resistances_ohm: Sequence[float], now_f: Sequence[float], held_s: float, corner_hz: float
) -> list[float] | None:
    """Capacitances in F of the least change with Σ R_i C_i + held = 1/(2π·corner), at the high end.

    ``now_f`` are the capacitances to start from, ``held_s`` the time constants of all that stays.
    The sum and the change are linear in C_i, so the optimum is a vertex of what is allowed (linear
    programming): all that is missing is added at the largest R_i; all that is too much is taken
    away there, and where nothing is left, at the next largest. (Derived here, no source.) None
    when what stays is too much by itself.

    >>> [round(1e12 * c, 3) for c in least_change([1e3, 1e4], [100e-12, 10e-12], 0.0, 500e3)]
    [100.0, 21.831]
    >>> [round(1e12 * c, 3) for c in least_change([1e3, 1e4], [100e-12, 10e-12], 0.0, 2e6)]
    [79.577, 0.0]
    """
    sizes = list(now_f)
    have = sum(r * c for r, c in zip(resistances_ohm, sizes, strict=True))
    missing = 1.0 / (2.0 * math.pi * corner_hz) - held_s - have
    for i in sorted(range(len(sizes)), key=lambda i: -resistances_ohm[i]):
        size = max(sizes[i] + missing / resistances_ohm[i], 0.0)
        missing -= resistances_ohm[i] * (size - sizes[i])
        sizes[i] = size
    spare = 1e-12 / corner_hz
    return sizes if missing > -spare else None
