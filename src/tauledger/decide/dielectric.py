"""What a ceramic capacitor is left with at its voltage and temperature."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.configuration.settings import CapacitorClass
from tauledger.records import dataclass

_LOWEST_C = {"X": -55.0, "Y": -30.0, "Z": 10.0}
_HIGHEST_C = {
    "2": 45.0, "4": 65.0, "5": 85.0, "6": 105.0, "7": 125.0, "8": 150.0, "9": 200.0,
}  # fmt: skip
_CHANGE = {
    "A": (-0.01, 0.01), "B": (-0.015, 0.015), "C": (-0.022, 0.022), "D": (-0.033, 0.033),
    "E": (-0.047, 0.047), "F": (-0.075, 0.075), "P": (-0.1, 0.1), "R": (-0.15, 0.15),
    "S": (-0.22, 0.22), "T": (-0.33, 0.22), "U": (-0.56, 0.22), "V": (-0.82, 0.22),
}  # fmt: skip
"""EIA letters of class 2 (references C4, read on makers' pages; pages differ on 2 and B)."""


@dataclass(frozen=True, slots=True)
class CodeLimits:
    """What the EIA code of a class 2 dielectric promises, without direct voltage."""

    lowest_c: float
    highest_c: float
    change: tuple[float, float]


def code_limits(code: str) -> CodeLimits | None:
    """The promise of a code such as ``X7R``; None for any other text, class 1 included.

    >>> code_limits("Y5V").change
    (-0.82, 0.22)
    """
    letters = code.strip().upper()
    if len(letters) != 3:
        return None
    low, high, change = letters[0], letters[1], letters[2]
    if low not in _LOWEST_C or high not in _HIGHEST_C or change not in _CHANGE:
        return None
    return CodeLimits(_LOWEST_C[low], _HIGHEST_C[high], _CHANGE[change])


@dataclass(frozen=True, slots=True)
class Effective:
    """What is left of the nominal capacitance, and why."""

    factor: float
    basis: str
    beyond: str = ""
    """What lies outside a curve or the code's range; empty when nothing does."""


def effective(found: CapacitorClass, voltage_v: float, temperature_c: float) -> Effective | None:
    """By the curves of the configuration, else the lower limit of the EIA code; None without."""
    factor, basis, beyond = 1.0, [], []
    limits = code_limits(found.dielectric)
    if found.bias_curve:
        factor *= 1.0 + _read(found.bias_curve, abs(voltage_v))
        basis.append("bias curve")
        if abs(voltage_v) > found.bias_curve[-1][0]:
            beyond.append(f"{abs(voltage_v):.3g} V is past the end of the bias curve")
    if found.temperature_curve:
        factor *= 1.0 + _read(found.temperature_curve, temperature_c)
        basis.append("temperature curve")
        first, last = found.temperature_curve[0][0], found.temperature_curve[-1][0]
        if not first <= temperature_c <= last:
            beyond.append(f"{temperature_c:g} °C is outside the temperature curve")
    elif limits is not None:
        factor *= 1.0 + limits.change[0]
        basis.append(f"lower limit of {found.dielectric.upper()}")
        if not limits.lowest_c <= temperature_c <= limits.highest_c:
            beyond.append(f"{temperature_c:g} °C is outside the range of {found.dielectric}")
    return Effective(factor, " and ".join(basis), "; ".join(beyond)) if basis else None


def _read(curve: Sequence[tuple[float, float]], at: float) -> float:
    """On straight lines between the points, level beyond the ends."""
    return float(np.interp(at, [x for x, _ in curve], [y for _, y in curve]))
