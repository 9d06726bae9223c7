"""The transport equations of the Gummel-Poon transistor: currents, base charge, base resistance.

The equations stand in :mod:`tauledger.devices.bipolar`; voltages and currents here have the sign
of an NPN. Every derivative is the analytic one.
"""

from __future__ import annotations

import numpy as np

from tauledger.devices import junction
from tauledger.devices.bipolar_parameters import BipolarParameters
from tauledger.devices.interface import FloatArray
from tauledger.records import dataclass

BE, BC, SUB = 0, 1, 2
"""Junction voltages in forward polarity."""
_JUNCTION = np.array([BE, BE, BC, BC, SUB])
"""Voltage of each diode law: ideal and leakage of both junctions, substrate."""
_CROWDING_RANGE = (1e-9, 1e9)
"""Bounds of Ib/IRB in the crowding law: below RB, above RBM to all digits."""
_CROWDING_C, _CROWDING_K = 14.59025, 2.4317
_SERIES = (-4.0 / 15.0, -4.0 / 105.0, -8.0 / 1575.0, -4.0 / 6237.0)
"""Coefficients of z², z⁴, z⁶ and z⁸ of the crowding law."""
_SERIES_BELOW = 0.1
_DENOMINATOR_FLOOR = 1e-3
"""1 − Vbc/VAF − Vbe/VAR is held here when a Newton step goes beyond the Early voltages."""


@dataclass(frozen=True, slots=True)
class Transport:
    """Currents and derivatives in forward polarity, each (boards, n)."""

    voltage: FloatArray
    """(boards, n, 3): forward junction voltages."""
    collector: FloatArray
    base: FloatArray
    substrate: FloatArray
    transconductance: FloatArray
    output: FloatArray
    input: FloatArray
    feedback: FloatArray
    substrate_slope: FloatArray
    base_siemens: FloatArray
    base_by_vbe: FloatArray | None
    """d(base conductance)/dVbe in S/V, None when no base resistance is modulated."""
    base_by_vbc: FloatArray | None
    forward: FloatArray
    """Ibe and its slope, Ibc's slope, the base charge and its derivatives: for the charges."""
    forward_slope: FloatArray
    reverse_slope: FloatArray
    charge: FloatArray
    charge_by_vbe: FloatArray
    charge_by_vbc: FloatArray


def forward_voltages(p: BipolarParameters, voltages: FloatArray) -> FloatArray:
    """Junction voltages, positive in forward bias, (boards, n, 3)."""
    result: FloatArray = np.matmul(voltages[..., None, :3], p.selection)[..., 0, :]
    return result


def transport(p: BipolarParameters, voltages: FloatArray, gmin: float) -> Transport:
    volt = forward_voltages(p, voltages)
    value, rise = junction.exponential(volt[..., _JUNCTION] * p.per_volt)
    current, slope = value * p.saturation, rise * p.slope
    vbe, vbc, vsub = volt[..., BE], volt[..., BC], volt[..., SUB]
    shunt = gmin * p.multiplier
    forward, reverse = current[..., 0], current[..., 2]
    forward_slope, reverse_slope = slope[..., 0], slope[..., 2]
    charge, by_vbe, by_vbc = _base_charge(
        p, vbe, vbc, forward, forward_slope, reverse, reverse_slope
    )
    linking = (forward - reverse) / charge
    into_collector = reverse * p.per_reverse_beta + current[..., 3] + shunt * vbc
    base = forward * p.per_forward_beta + current[..., 1] + shunt * vbe + into_collector
    output = (reverse_slope + linking * by_vbc) / charge
    input_slope = forward_slope * p.per_forward_beta + slope[..., 1] + shunt
    feedback = reverse_slope * p.per_reverse_beta + slope[..., 3] + shunt
    siemens, dsiemens = _base_conductance(p, base, charge)
    return Transport(
        voltage=volt,
        collector=linking - into_collector,
        base=base,
        substrate=current[..., 4] + shunt * vsub,
        transconductance=(forward_slope - linking * by_vbe) / charge - output,
        output=output,
        input=input_slope,
        feedback=feedback,
        substrate_slope=slope[..., 4] + shunt,
        base_siemens=siemens,
        base_by_vbe=dsiemens and dsiemens[0] * input_slope + dsiemens[1] * by_vbe,
        base_by_vbc=dsiemens and dsiemens[0] * feedback + dsiemens[1] * by_vbc,
        forward=forward,
        forward_slope=forward_slope,
        reverse_slope=reverse_slope,
        charge=charge,
        charge_by_vbe=by_vbe,
        charge_by_vbc=by_vbc,
    )


def _base_charge(
    p: BipolarParameters,
    vbe: FloatArray,
    vbc: FloatArray,
    forward: FloatArray,
    forward_slope: FloatArray,
    reverse: FloatArray,
    reverse_slope: FloatArray,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Normalised base charge qb and its derivatives to Vbe and Vbc."""
    early = 1.0 - vbc * p.per_early_forward - vbe * p.per_early_reverse
    inside = early > _DENOMINATOR_FLOOR
    q1 = 1.0 / np.where(inside, early, _DENOMINATOR_FLOOR)
    squared = np.where(inside, q1 * q1, 0.0)
    if not p.has_knee:
        return q1, squared * p.per_early_reverse, squared * p.per_early_forward
    argument = 1.0 + 4.0 * (forward * p.per_knee_forward + reverse * p.per_knee_reverse)
    argument = np.maximum(argument, 1e-12)
    root = argument**p.rolloff_exponent
    half = 0.5 * (1.0 + root)
    per_injection = 2.0 * q1 * p.rolloff_exponent * root / argument
    by_vbe = squared * half * p.per_early_reverse + (
        per_injection * p.per_knee_forward * forward_slope
    )
    by_vbc = squared * half * p.per_early_forward + (
        per_injection * p.per_knee_reverse * reverse_slope
    )
    return q1 * half, by_vbe, by_vbc


def _base_conductance(
    p: BipolarParameters, base: FloatArray, charge: FloatArray
) -> tuple[FloatArray, tuple[FloatArray, FloatArray] | None]:
    """Base conductance and, when modulated, its derivatives to base current and charge."""
    if not p.has_base_resistance:
        return np.zeros_like(base), None
    if not p.is_base_modulated:
        siemens = np.where(p.minimum_base_ohm > 0.0, 1.0, 0.0) / np.where(
            p.minimum_base_ohm > 0.0, p.minimum_base_ohm, 1.0
        )
        return np.broadcast_to(siemens, base.shape), None
    share: FloatArray = 1.0 / charge
    by_charge: FloatArray = -share * share
    by_current: FloatArray = np.zeros_like(share)
    if p.is_crowded:
        crowded = p.per_half_current > 0.0
        crowding, slope = _crowding(base * p.per_half_current)
        share = np.where(crowded, crowding, share)
        by_charge = np.where(crowded, 0.0, by_charge)
        by_current = np.where(crowded, slope * p.per_half_current, 0.0)
    ohm = p.minimum_base_ohm + p.modulated_base_ohm * share
    present = ohm > 0.0
    siemens = np.where(present, 1.0, 0.0) / np.where(present, ohm, 1.0)
    factor = -siemens * siemens * p.modulated_base_ohm
    return siemens, (factor * by_current, factor * by_charge)


def _crowding(ratio: FloatArray) -> tuple[FloatArray, FloatArray]:
    """``3·(tan z − z)/(z·tan² z)`` and its derivative to ``ratio`` = Ib/IRB.

    ``z = (√(1 + c·r) − 1)/(k·√r)``, ``c = 144/π²`` and ``k = 24/π²`` with SPICE's rounding. Below
    ``z = 0.1`` the power series takes over, since ``tan z − z`` cancels there.
    """
    low, high = _CROWDING_RANGE
    r = np.minimum(np.maximum(ratio, low), high)
    root, big = np.sqrt(r), np.sqrt(1.0 + _CROWDING_C * r)
    z = _CROWDING_C / _CROWDING_K * root / (big + 1.0)
    dz = z / (2.0 * r * big)
    wide = np.maximum(z, _SERIES_BELOW)
    t = np.tan(wide)
    square = t * t
    below = wide * square
    value = 3.0 * (t - wide) / below
    slope = 3.0 * (
        (below * square - (t - wide) * (square + 2.0 * wide * t * (1.0 + square))) / (below * below)
    )
    y, (a, b, c, d) = z * z, _SERIES
    series = 1.0 + y * (a + y * (b + y * (c + y * d)))
    series_slope = 2.0 * z * (a + y * (2.0 * b + y * (3.0 * c + y * 4.0 * d)))
    near = z < _SERIES_BELOW
    slope = np.where(near, series_slope, slope) * dz * (r == ratio)
    return np.where(near, series, value), slope
