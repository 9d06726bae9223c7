"""Formulas shared by every pn junction.

Let ``x = V/(n·Vt)``. The junction current in SPICE is ``I = IS·(eˣ − 1)`` for ``x ≥ −3`` and, in
reverse, ``I = −IS·(1 + (3/(e·x))³)``, which meets the exponential in value and slope at ``x = −3``
and tends to ``−IS``. Depletion charge has the capacitance ``C(V) = CJ·(1 − V/VJ)^−M`` up to
``V = FC·VJ`` and continues along its tangent beyond, so that it stays finite in forward bias.

Source: SPICE junction equations (common practice); constants checked against ngspice 39 in
tests/devices [P: its output, not its text].
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.devices.interface import (
    BOLTZMANN_J_PER_K,
    ELEMENTARY_CHARGE_C,
    ZERO_CELSIUS_K,
    Card,
    FloatArray,
    Value,
    columns,
)
from tauledger.records import dataclass

REFERENCE_K = 300.15
"""SPICE's reference for the temperature laws of silicon: 27 °C."""
SATURATION_FLOOR_A = 1e-60
"""Keeps logarithms and divisions defined for a saturation current of zero."""
_LINEAR_ABOVE = 200.0
"""Beyond this ``x`` the exponential continues along its tangent; e²⁰⁰·IS is never reached."""
_REVERSE_BELOW = -3.0
_REVERSE_SCALE = 3.0 / np.e
_AT_REVERSE = (-_REVERSE_SCALE / _REVERSE_BELOW) ** 3


def exponential(x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Junction law for unit saturation current: value and derivative to ``x``, any shape.

    >>> value, slope = exponential(np.array([0.0, -1e3, 1.0]))
    >>> np.round(value, 6).tolist(), np.round(slope, 6).tolist()
    ([0.0, -1.0, 1.718282], [1.0, 0.0, 2.718282])
    """
    low = np.minimum(x, _REVERSE_BELOW)
    growth = np.exp(np.minimum(np.maximum(x, _REVERSE_BELOW), _LINEAR_ABOVE))
    root = -_REVERSE_SCALE / low
    tail = root * root * root
    slope = np.where(x < _REVERSE_BELOW, -3.0 * tail / low, growth)
    value = growth - 1.0 + (tail - _AT_REVERSE)
    beyond = np.maximum(x, _LINEAR_ABOVE) - _LINEAR_ABOVE
    return value + growth * beyond, slope


def limited_step(
    proposed: FloatArray, previous: FloatArray, thermal_v: FloatArray, critical_v: FloatArray
) -> FloatArray:
    """Junction voltage to evaluate at, so that a Newton step never overshoots the exponential.

    Above the critical voltage a step larger than two thermal voltages is taken in the logarithm
    of the current instead (the rule of SPICE2, common practice). All shapes broadcast.
    """
    step = (proposed - previous) / thermal_v
    active = (proposed > critical_v) & (np.abs(step) > 2.0)
    if not active.any():  # most steps: the last ones of every solution
        return np.broadcast_to(proposed, active.shape)
    rising = previous + thermal_v * (2.0 + np.log(np.maximum(step - 2.0, 1.0)))
    falling = previous - thermal_v * (2.0 + np.log(np.maximum(2.0 - step, 1.0)))
    warm = np.where(step > 0.0, rising, falling)
    cold = thermal_v * np.log(np.maximum(proposed / thermal_v, 1.0))
    limited = np.where(previous > 0.0, warm, cold)
    return np.where(active, limited, proposed)


def critical_voltage(thermal_v: FloatArray, saturation_a: FloatArray) -> FloatArray:
    """Voltage of least radius of curvature of the exponential, ``Vt·ln(Vt/(√2·IS))``."""
    floor = np.maximum(saturation_a, SATURATION_FLOOR_A)
    result: FloatArray = thermal_v * np.log(thermal_v / (np.sqrt(2.0) * floor))
    return result


@dataclass(frozen=True, slots=True)
class Depletion:
    """Depletion capacitance at temperature; each array (boards or 1, n)."""

    zero_bias_f: FloatArray
    potential_v: FloatArray
    grading: FloatArray
    tangent_at: FloatArray
    """FC, the fraction of the potential beyond which the tangent takes over."""

    def capacitance(self, voltage: FloatArray) -> FloatArray:
        """Farads at the junction voltage."""
        ratio = voltage / self.potential_v
        inside = np.minimum(ratio, self.tangent_at)
        base = (1.0 - inside) ** -self.grading
        excess = (ratio - inside) * self.grading / (1.0 - self.tangent_at)
        return self.zero_bias_f * base * (1.0 + excess)


def thermal_voltage(temperature_k: FloatArray) -> FloatArray:
    """``kT/q`` in V."""
    return temperature_k * (BOLTZMANN_J_PER_K / ELEMENTARY_CHARGE_C)


def temperatures(
    cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
) -> tuple[FloatArray, FloatArray]:
    """Device and nominal temperature in K, (boards or 1, n).

    An instance ``temp`` replaces the circuit's temperature, ``dtemp`` is added to it (ignored
    beside ``temp``), and a model ``tnom`` (``tref``) replaces the nominal temperature.
    """
    device = [
        card.instance["temp"]
        if "temp" in card.instance
        else np.asarray(temperature_c) + np.asarray(card.instance.get("dtemp", 0.0))
        for card in cards
    ]
    nominal = [
        card.model.get("tnom", card.model.get("tref", nominal_temperature_c)) for card in cards
    ]
    return columns(device) + ZERO_CELSIUS_K, columns(nominal) + ZERO_CELSIUS_K


def first_given(cards: Sequence[Card], names: Sequence[str], default: Value) -> FloatArray:
    """Model parameter under the first of its spellings that a card states, (boards or 1, n)."""
    return columns(
        [next((c.model[name] for name in names if name in c.model), default) for c in cards]
    )


def inverse(value: FloatArray) -> FloatArray:
    """Reciprocal, with zero (SPICE's word for a parameter without effect) left at zero."""
    stated = value != 0.0
    return np.where(stated, 1.0 / np.where(stated, value, 1.0), 0.0)


def quadratic(cards: Sequence[Card], prefix: str, difference_k: FloatArray) -> FloatArray:
    """``1 + TC1·ΔT + TC2·ΔT²`` with the coefficients ``prefix1`` (``prefix``), ``prefix2``."""
    names = (prefix + "1", prefix, prefix + "2")
    if not any(name in card.model for card in cards for name in names):
        return np.ones((1, len(cards)))
    first = first_given(cards, names[:2], 0.0)
    second = first_given(cards, names[2:], 0.0)
    return 1.0 + first * difference_k + second * difference_k**2


def saturation_factor(
    temperature_k: FloatArray, nominal_k: FloatArray, gap_ev: FloatArray, exponent: FloatArray
) -> FloatArray:
    """Logarithm of the growth of IS: ``(T/Tnom − 1)·EG/Vt + XTI·ln(T/Tnom)``."""
    ratio = temperature_k / nominal_k
    result: FloatArray = (ratio - 1.0) * gap_ev / thermal_voltage(
        temperature_k
    ) + exponent * np.log(ratio)
    return result


def silicon_gap_ev(temperature_k: FloatArray) -> FloatArray:
    """Energy gap of silicon as SPICE takes it, ``1.16 − 7.02e−4·T²/(T + 1108)``."""
    return 1.16 - 7.02e-4 * temperature_k**2 / (temperature_k + 1108.0)


def _potential_shift(temperature_k: FloatArray) -> FloatArray:
    """Shift of a built-in potential between the reference and ``temperature_k``, in V."""
    gap = silicon_gap_ev(temperature_k) / thermal_voltage(temperature_k)
    gap_at_reference = 1.1150877 / thermal_voltage(np.asarray(REFERENCE_K))
    return thermal_voltage(temperature_k) * (
        gap - gap_at_reference - 3.0 * np.log(temperature_k / REFERENCE_K)
    )


def depletion_at(
    capacitance_f: FloatArray,
    potential_v: FloatArray,
    grading: FloatArray,
    tangent_at: FloatArray,
    temperature_k: FloatArray,
    nominal_k: FloatArray,
) -> Depletion:
    """Zero-bias capacitance and potential moved from nominal to device temperature.

    The law of SPICE: ``VJ`` follows the gap and the intrinsic density, ``CJ`` follows ``VJ`` and a
    dielectric term of 4e−4 per kelvin (common practice; agrees with ngspice 39 to 1e-6 in
    tests/devices).
    """
    at_reference = (potential_v - _potential_shift(nominal_k)) * REFERENCE_K / nominal_k
    at_temperature = at_reference * temperature_k / REFERENCE_K + _potential_shift(temperature_k)
    at_temperature = np.maximum(at_temperature, 1e-3)

    def growth(kelvin: FloatArray, potential: FloatArray) -> FloatArray:
        relative = potential / at_reference - 1.0
        return 1.0 + grading * (4e-4 * (kelvin - REFERENCE_K) - relative)

    moved = capacitance_f * growth(temperature_k, at_temperature) / growth(nominal_k, potential_v)
    return Depletion(moved, at_temperature, grading, np.minimum(tangent_at, 0.9999))
