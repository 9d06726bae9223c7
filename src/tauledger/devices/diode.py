"""Junction diode with breakdown, recombination, high injection, sidewall and series resistance.

With ``E(x)`` the junction law of :mod:`tauledger.devices.junction` and V the junction voltage::

    bottom     IS·E(V/N·Vt)                                           per area
    sidewall   JSW·E(V/NS·Vt), joined to IS when NS is not stated     per perimeter (PJ)
    recombination  ISR·E(V/NR·Vt)·((1 − V/VJ)² + 0.005)^(M/2)          forward only
    breakdown  −IS·(exp(−(V + VBR)/(NBV·Vt)) − 1)                     below −VBR
    knee       I → I/(1 + √(I/IKF)) forward, the same with IKR in reverse

VBR is chosen so that the reverse current at BV is IBV. Charge: TT times the junction current plus
the depletion charge of bottom (CJO) and sidewall (CJSW).
Source: the SPICE diode (common practice), checked against ngspice 39 in
tests/devices/test_diode.py [P: its output].

Where ngspice 39 differs from the textbook:

* ``gd`` contains gmin (1e-12 S, once whatever ``m``), ``cd`` contains TT·gmin. Same here.
* IBV scales with ``m`` but not with ``area``; NBV is N when not stated, NR is 1. Same here.
* With ISR, ``@d[gd]`` is not the slope of ngspice's own current: for IS=1e-12, ISR=1e-9, VJ=0.7,
  M=0.4, NR=2.1 at 0.3 V it prints 7.799 µS where the current rises by 7.713 µS. Here ``gd`` is the
  slope, confirmed by differences of ngspice's currents; with IKF its error reaches 19 %.
* IKR acts in ngspice only below −3·N·Vt, with a step in the current there (1 % for IS/IKR=1e-4);
  here it acts from 0 V down, without a step.
* ``@d[vd]`` is behind RS; ``vd`` here is the voltage between the outer terminals.

Not modelled: tunnelling (JTUN), TLEV and TLEVC other than 0, self-heating, level 3, noise.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from tauledger.devices import junction
from tauledger.devices.interface import (
    BoolArray,
    Card,
    Device,
    Evaluation,
    FloatArray,
    OperatingValues,
    Value,
    columns,
)
from tauledger.devices.junction import Depletion
from tauledger.records import dataclass

_BOTTOM, _SIDEWALL, _RECOMBINATION = range(3)
_NO_BREAKDOWN_V = 1e9
_BREAKDOWN_RANGE = 200.0
"""Exponents of the breakdown law beyond this continue along the tangent."""
_IBV_A = 1e-3


@dataclass(frozen=True, slots=True)
class DiodeParameters:
    """At temperature, scaled by area and multiplier; arrays (boards or 1, n) unless said."""

    per_volt: FloatArray
    """(boards or 1, n, 3): 1/(emission coefficient · Vt) of bottom, sidewall, recombination."""
    saturation: FloatArray
    """(boards or 1, n, 3), in A."""
    thermal_v: FloatArray
    """N·Vt."""
    critical_v: FloatArray
    breakdown_v: FloatArray
    """VBR; very large without BV."""
    breakdown_per_volt: FloatArray
    """1/(NBV·Vt)."""
    per_knee_forward: FloatArray
    per_knee_reverse: FloatArray
    series_siemens: FloatArray
    """Zero without RS."""
    transit_s: FloatArray
    bottom: Depletion
    sidewall: Depletion
    has_breakdown: bool
    has_recombination: bool
    has_knee: bool


class DiodeDevice(Device[DiodeParameters]):
    """See the module docstring for the equations."""

    name = "diode"
    terminals = ("anode", "cathode", "anode_internal")
    outer = 2
    branches = (("anode_internal", "cathode"), ("anode", "anode_internal"))
    capacitors = (("Cd", "anode_internal", "cathode"),)
    value_units: Mapping[str, str] = {
        "id": "A",
        "vd": "V",
        "gd": "S",
        "r_d": "Ω",
        "cd": "F",
        "power": "W",
    }

    def prepare(
        self, cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
    ) -> DiodeParameters:
        return _prepare(cards, temperature_c, nominal_temperature_c)

    def merged(self, parameters: DiodeParameters) -> BoolArray:
        result: BoolArray = np.all(parameters.series_siemens == 0.0, axis=0)[:, None]
        return result

    def initial(self, parameters: DiodeParameters) -> FloatArray:
        start = np.zeros((*parameters.critical_v.shape, 2))
        start[..., 0] = np.minimum(parameters.critical_v, 1.0)
        return start

    def limit(
        self, parameters: DiodeParameters, proposed: FloatArray, previous: FloatArray
    ) -> FloatArray:
        p = parameters
        new, old = proposed[..., 0], previous[..., 0]
        limited = junction.limited_step(new, old, p.thermal_v, p.critical_v)
        if p.has_breakdown:
            thermal = 1.0 / p.breakdown_per_volt
            mirrored = junction.limited_step(
                -(new + p.breakdown_v), -(old + p.breakdown_v), thermal, p.critical_v
            )
            deep = new < -p.breakdown_v + 10.0 * thermal
            limited = np.where(deep, -(mirrored + p.breakdown_v), limited)
        result = proposed.copy()
        result[..., 0] = limited
        return result

    def evaluate(
        self, parameters: DiodeParameters, voltages: FloatArray, gmin: float
    ) -> Evaluation:
        p = parameters
        through, slope = _junction(p, voltages[..., 0])
        through = through + gmin * voltages[..., 0]
        slope = slope + gmin
        series = p.series_siemens * voltages[..., 1]
        current = np.stack([series, -through, through - series], axis=-1)
        jacobian = np.zeros((*through.shape, 3, 2))
        jacobian[..., 0, 1] = p.series_siemens
        jacobian[..., 1, 0] = -slope
        jacobian[..., 2, 0] = slope
        jacobian[..., 2, 1] = -p.series_siemens
        return Evaluation(current, jacobian)

    def operating(
        self, parameters: DiodeParameters, voltages: FloatArray, gmin: float
    ) -> OperatingValues:
        p = parameters
        inner = voltages[..., 0]
        through, slope = _junction(p, inner)
        current, conductance = through + gmin * inner, slope + gmin
        capacitance = (
            p.transit_s * conductance + p.bottom.capacitance(inner) + p.sidewall.capacitance(inner)
        )
        outer = inner + voltages[..., 1]
        values = {
            "id": current,
            "vd": outer,
            "gd": conductance,
            "r_d": np.where(conductance > 0.0, 1.0 / np.maximum(conductance, 1e-300), np.inf),
            "cd": capacitance,
            "power": current * outer,
        }
        none = np.zeros((*current.shape, 0))
        return OperatingValues(capacitance[..., None], none, values, _regions(p, inner))


DIODE = DiodeDevice()


def _regions(
    p: DiodeParameters, voltage: FloatArray
) -> np.ndarray[tuple[int, ...], np.dtype[np.str_]]:
    """Forward above half the critical voltage (some 0.35 V for silicon), off below it."""
    blocked = np.where(voltage < 0.0, "reverse", "cut off")
    alive = np.where(voltage > 0.5 * p.critical_v, "forward", blocked)
    return np.where(voltage < -p.breakdown_v, "breakdown", alive)


def _junction(p: DiodeParameters, voltage: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Current of the junction without gmin, and its derivative."""
    value, rise = junction.exponential(voltage[..., None] * p.per_volt)
    laws, slopes = value * p.saturation, rise * p.saturation * p.per_volt
    bottom, bottom_slope = laws[..., _BOTTOM], slopes[..., _BOTTOM]
    sidewall, sidewall_slope = laws[..., _SIDEWALL], slopes[..., _SIDEWALL]
    if p.has_breakdown:
        current, slope = _breakdown(p, voltage)
        bottom, bottom_slope = (
            bottom - p.saturation[..., _BOTTOM] * current,
            bottom_slope + p.saturation[..., _BOTTOM] * slope,
        )
        sidewall, sidewall_slope = (
            sidewall - p.saturation[..., _SIDEWALL] * current,
            sidewall_slope + p.saturation[..., _SIDEWALL] * slope,
        )
    if p.has_recombination:
        current, slope = _recombination(
            p, voltage, laws[..., _RECOMBINATION], slopes[..., _RECOMBINATION]
        )
        bottom, bottom_slope = bottom + current, bottom_slope + slope
    total, total_slope = bottom + sidewall, bottom_slope + sidewall_slope
    return _knee(p, total, total_slope) if p.has_knee else (total, total_slope)


def _breakdown(p: DiodeParameters, voltage: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Reverse current beyond −VBR over IS, and minus its derivative to V."""
    x = np.maximum(-(voltage + p.breakdown_v) * p.breakdown_per_volt, 0.0)
    inside = np.minimum(x, _BREAKDOWN_RANGE)
    growth = np.exp(inside)
    value = growth - 1.0 + growth * (x - inside)
    return value, np.where(x > 0.0, growth, 0.0) * p.breakdown_per_volt


def _recombination(
    p: DiodeParameters, voltage: FloatArray, current: FloatArray, slope: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Recombination current weighted by the shrinking depletion width."""
    forward = voltage > -3.0 * p.thermal_v
    gap = 1.0 - voltage / p.bottom.potential_v
    base = gap * gap + 0.005
    factor = base ** (0.5 * p.bottom.grading)
    factor_slope = -p.bottom.grading * gap / p.bottom.potential_v * factor / base
    return (
        np.where(forward, current * factor, 0.0),
        np.where(forward, slope * factor + current * factor_slope, 0.0),
    )


def _knee(
    p: DiodeParameters, current: FloatArray, slope: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """High injection: ``I/(1 + √(|I|/IK))``, slope ``(1 + √/2)/(1 + √)²`` times the old one."""
    per_knee = np.where(current > 0.0, p.per_knee_forward, p.per_knee_reverse)
    root = np.sqrt(np.abs(current) * per_knee)
    factor = 1.0 / (1.0 + root)
    return current * factor, slope * (1.0 + 0.5 * root) * factor * factor


def _prepare(
    cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
) -> DiodeParameters:
    def model(default: float, *names: str) -> FloatArray:
        return junction.first_given(cards, names, default)

    kelvin, nominal = junction.temperatures(cards, temperature_c, nominal_temperature_c)
    difference = kelvin - nominal
    multiplier = columns([card.instance.get("m", 1.0) for card in cards])
    area = _size(cards, "area", 1.0) * multiplier
    perimeter = _size(cards, "pj", 0.0) * multiplier
    emission = model(1.0, "n")
    growth = junction.saturation_factor(kelvin, nominal, model(1.11, "eg"), model(3.0, "xti"))
    own_sidewall = np.array([["ns" in card.model for card in cards]])
    sidewall_emission = np.where(own_sidewall, model(1.0, "ns"), emission)
    recombination_emission = model(1.0, "nr")
    saturation = np.stack(
        np.broadcast_arrays(
            model(1e-14, "is", "js") * np.exp(growth / emission) * area,
            model(0.0, "jsw") * np.exp(growth / model(1.0, "ns")) * perimeter,
            model(0.0, "isr") * np.exp(growth / recombination_emission) * area,
        ),
        axis=-1,
    )
    thermal = junction.thermal_voltage(kelvin)
    emissions = np.stack(
        np.broadcast_arrays(
            emission * thermal, sidewall_emission * thermal, recombination_emission * thermal
        ),
        axis=-1,
    )
    own_breakdown = np.array([["nbv" in card.model for card in cards]])
    breakdown_thermal = np.where(own_breakdown, model(1.0, "nbv"), emission) * thermal
    breakdown, has_breakdown = _breakdown_voltage(
        cards, saturation[..., _BOTTOM], breakdown_thermal, thermal, multiplier, difference
    )
    knees = [junction.inverse(model(0.0, *names)) / area for names in (("ikf", "ik"), ("ikr",))]
    grading = model(0.5, "m", "mj") * junction.quadratic(cards, "tm", difference)
    return DiodeParameters(
        per_volt=1.0 / emissions,
        saturation=saturation,
        thermal_v=emission * thermal,
        critical_v=junction.critical_voltage(emission * thermal, saturation[..., _BOTTOM]),
        breakdown_v=breakdown,
        breakdown_per_volt=1.0 / breakdown_thermal,
        per_knee_forward=knees[0],
        per_knee_reverse=knees[1],
        series_siemens=junction.inverse(
            model(0.0, "rs") * junction.quadratic(cards, "trs", difference)
        )
        * area,
        transit_s=model(0.0, "tt") * junction.quadratic(cards, "ttt", difference),
        bottom=junction.depletion_at(
            model(0.0, "cjo", "cj0", "cj") * area,
            model(1.0, "vj", "pb"),
            grading,
            model(0.5, "fc"),
            kelvin,
            nominal,
        ),
        sidewall=junction.depletion_at(
            model(0.0, "cjp", "cjsw") * perimeter,
            model(1.0, "php"),
            model(0.33, "mjsw"),
            model(0.5, "fcs"),
            kelvin,
            nominal,
        ),
        has_breakdown=has_breakdown,
        has_recombination=bool(np.any(saturation[..., _RECOMBINATION])),
        has_knee=bool(np.any(knees[0]) or np.any(knees[1])),
    )


def _size(cards: Sequence[Card], name: str, default: float) -> FloatArray:
    """Area or perimeter: the instance's, else the model's."""
    return columns([card.instance.get(name, card.model.get(name, default)) for card in cards])


def _breakdown_voltage(
    cards: Sequence[Card],
    saturation: FloatArray,
    thermal: FloatArray,
    plain_thermal: FloatArray,
    multiplier: FloatArray,
    difference: FloatArray,
) -> tuple[FloatArray, bool]:
    """Solve ``IS·(exp((BV − VBR)/(NBV·Vt)) − 1 + VBR/Vt) = IBV·m`` for VBR.

    As in ngspice, IBV does not scale with area.
    """
    stated = np.array([["bv" in card.model for card in cards]])
    if not stated.any():
        return np.full(saturation.shape, _NO_BREAKDOWN_V), False
    voltage = junction.first_given(cards, ("bv",), _NO_BREAKDOWN_V)
    voltage = voltage - junction.first_given(cards, ("tcv",), 0.0) * difference
    knee = junction.first_given(cards, ("ibv", "ib"), _IBV_A) * multiplier
    safe = np.maximum(saturation, junction.SATURATION_FLOOR_A)
    result = voltage - thermal * np.log(1.0 + knee / safe)
    for _ in range(25):
        inside = np.maximum(knee / safe + 1.0 - result / plain_thermal, 1.0)
        result = voltage - thermal * np.log(inside)
    return np.where(stated, result, _NO_BREAKDOWN_V), True
