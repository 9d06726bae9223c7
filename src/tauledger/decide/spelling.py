"""A capacitance written the way a netlist writes the one it replaces."""

from __future__ import annotations

import re
from decimal import Decimal

_DIGITS = 10
"""More than a value at hand has, fewer than rounding spoils."""
_POWERS = {"t": 12, "g": 9, "k": 3, "m": -3, "u": -6, "µ": -6, "n": -9, "p": -12, "f": -15}
_SUFFIXES = ((0, ""), (-6, "u"), (-9, "n"), (-12, "p"), (-15, "f"))
_NUMBER = re.compile(
    r"[+]?(?P<digits>[0-9]+\.?[0-9]*|\.[0-9]+)"
    r"(?:(?P<e>[eEdD])[+-]?(?P<exponent>[0-9]+)|(?P<suffix>[tTgGkKmMuUµnNpPfF]?))"
    r"(?P<unit>[A-Za-z]*)"
)


def spice_value(value_f: float) -> str:
    """A capacitance in F as a netlist writes it; millifarads as microfarads (common practice).

    >>> [spice_value(value) for value in (4.7e-7, 2.2e-3)]
    ['470n', '2200u']
    """
    power = _engineering(value_f)
    return _digits(value_f, power) + dict(_SUFFIXES)[power]


def written_like(value_f: float, old: str) -> str:
    """The same with the exponent, unit and letter case of ``old``; its suffix where that suits.

    A letter-and-digit code gets a decimal point, since ngspice drops the digits behind the letter
    (references C8, measured); the Greek micro sign, which it ignores, becomes u.

    >>> [written_like(2.2e-6, old) for old in ("10uF", "100N", "1E-6", "0.1u", "4u7")]
    ['2.2uF', '2.2U', '2.2E-6', '2.2u', '2.2u']
    >>> [written_like(2.2e-7, old) for old in ("10UF", "0.1u", "0.0000001", "1e-7")]
    ['220NF', '0.22u', '0.00000022', '220e-9']
    """
    match = _NUMBER.fullmatch(old)
    if match is None or _is_scaled_by_unit(match["e"], match["unit"]):
        return spice_value(value_f)
    unit = match["unit"]
    if match["e"]:
        power = _engineering(value_f)
        return f"{_digits(value_f, power)}{match['e']}{power}{unit}"
    suffix = match["suffix"]
    if not suffix:
        return f"{Decimal(f'{value_f:.{_DIGITS}g}'):f}" + unit
    power = _POWERS[suffix.lower()]
    shown = value_f / 10.0**power
    if _suits(shown, float(match["digits"])):
        return _digits(value_f, power) + suffix + unit
    new = spice_value(value_f)
    return (new.upper() if suffix.isupper() else new) + unit


def _is_scaled_by_unit(exponent: str | None, unit: str) -> bool:
    """Whether the unit is read as a suffix, as F is behind an exponent and in ``1Farad``."""
    if exponent:
        return unit != "" and unit[0].lower() in _POWERS
    return unit.lower().startswith("arad")


def _suits(shown: float, before: float) -> bool:
    """Whether a number goes with the old suffix: from 1 to 1000, or as far off as the old one."""
    rounded = float(f"{shown:.4g}")
    return min(1.0, before / 10.0) <= rounded < max(1000.0, before * 10.0) and rounded >= 0.001


def _engineering(value_f: float) -> int:
    return next((p for p, _ in _SUFFIXES if value_f >= 10.0**p * (1 - 1e-9)), -15)


def _digits(value_f: float, power: int) -> str:
    number = float(f"{value_f / 10.0**power:.{_DIGITS}g}")
    return f"{number:.12f}".rstrip("0").rstrip(".")
