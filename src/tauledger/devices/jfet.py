"""Junction field-effect transistor, SPICE level 1 with the doping-tail parameter B.

With the overdrive ``v = VGS − VTO`` (zero when negative) and ``w = min(VDS, v)``::

    ID = BETA·(1 + LAMBDA·VDS)·w·(v·(2·B + 3·T·(v − w)) + w·(T·w − B)),   T = (1 − B)/(PB − VTO)

With B = 1 this is Shichman and Hodges' square law. For VDS < 0 drain and source exchange their
parts. Two junctions, gate to source and gate to drain, carry a diode current and a depletion
charge of grading ½.

XTI is 0 unless stated and there is no emission coefficient, as in ngspice 39 (which ignores N).
GM and GDS are the slopes of the drain current to VGS and VDS; with VDS < 0 gm is negative.

Source: the level-1 JFET of SPICE (common practice); agrees with ngspice 39 in
tests/devices/test_jfet.py [P: its output].
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.devices.fet_common import (
    channel_region,
    conductance,
    gate_step,
    given,
    reciprocal,
    transit_frequency,
)
from tauledger.devices.interface import (
    BoolArray,
    Card,
    Device,
    Evaluation,
    FloatArray,
    OperatingValues,
    Value,
    stack,
)
from tauledger.devices.junction import (
    Depletion,
    critical_voltage,
    depletion_at,
    exponential,
    first_given,
    limited_step,
    saturation_factor,
    temperatures,
    thermal_voltage,
)
from tauledger.records import dataclass

_LARGEST_TANGENT = 0.95
_DRAIN, _GATE, _SOURCE, _INNER_DRAIN, _INNER_SOURCE = range(5)
_VGS, _VGD, _VRD, _VRS = range(4)


@dataclass(frozen=True, slots=True)
class JunctionFetParameters:
    """Parameters at temperature, scaled by area and multiplier; each array (boards or 1, n)."""

    sign: FloatArray
    """+1 for an N channel, −1 for a P channel."""
    multiplier: FloatArray
    """Devices in parallel; each brings its own gmin."""
    threshold_v: FloatArray
    """VTO: negative for a depletion device of either polarity."""
    beta: FloatArray
    modulation_per_v: FloatArray
    tail_b: FloatArray
    tail_t: FloatArray
    saturation_a: FloatArray
    thermal_v: FloatArray
    critical_v: FloatArray
    drain_conductance_s: FloatArray
    source_conductance_s: FloatArray
    gate_source: Depletion
    gate_drain: Depletion


@dataclass(frozen=True, slots=True)
class _Channel:
    """Drain current of the conducting direction and its derivatives, and that direction."""

    inverse: BoolArray
    overdrive: FloatArray
    drain_source: FloatArray
    current: FloatArray
    gm: FloatArray
    gds: FloatArray


class JunctionFetDevice(Device[JunctionFetParameters]):
    """The level-1 JFET, both polarities."""

    name = "jfet"
    terminals = ("drain", "gate", "source", "drain_internal", "source_internal")
    outer = 3
    branches = (
        ("gate", "source_internal"),
        ("gate", "drain_internal"),
        ("drain", "drain_internal"),
        ("source", "source_internal"),
    )
    capacitors = (
        ("Cgs", "gate", "source_internal"),
        ("Cgd", "gate", "drain_internal"),
    )
    value_units = {  # noqa: RUF012 - the interface declares it a plain mapping
        "id": "A",
        "ig": "A",
        "vgs": "V",
        "vds": "V",
        "gm": "S",
        "gds": "S",
        "r_o": "Ω",
        "vth": "V",
        "vdsat": "V",
        "c_gs": "F",
        "c_gd": "F",
        "f_t": "Hz",
        "power": "W",
    }

    def prepare(
        self, cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
    ) -> JunctionFetParameters:
        kelvin, nominal = temperatures(cards, temperature_c, nominal_temperature_c)
        multiplier = stack(cards, "m", 1.0, instance=True)
        area = stack(cards, "area", 1.0, instance=True) * multiplier
        thermal = thermal_voltage(kelvin)
        growth = saturation_factor(
            kelvin, nominal, stack(cards, "eg", 1.11), stack(cards, "xti", 0.0)
        )
        saturation = stack(cards, "is", 1e-14) * np.exp(growth)
        nominal_threshold = first_given(cards, ("vto", "vt0"), -2.0)
        potential = stack(cards, "pb", 1.0)
        tail_b = stack(cards, "b", 1.0)

        def junction(name: str) -> Depletion:
            tangent = np.minimum(stack(cards, "fc", 0.5), _LARGEST_TANGENT)
            zero_bias = stack(cards, name, 0.0) * area
            half = np.full_like(tangent, 0.5)
            return depletion_at(zero_bias, potential, half, tangent, kelvin, nominal)

        return JunctionFetParameters(
            sign=np.array([[-1.0 if card.kind == "pjf" else 1.0 for card in cards]]),
            multiplier=multiplier,
            threshold_v=nominal_threshold + _threshold_shift(cards, kelvin - nominal),
            beta=stack(cards, "beta", 1e-4) * area * _beta_growth(cards, kelvin, nominal),
            modulation_per_v=stack(cards, "lambda", 0.0),
            tail_b=tail_b,
            tail_t=(1.0 - tail_b) / (potential - nominal_threshold),
            saturation_a=saturation * area,
            thermal_v=thermal,
            critical_v=critical_voltage(thermal, saturation),
            drain_conductance_s=conductance(stack(cards, "rd", 0.0)) * area,
            source_conductance_s=conductance(stack(cards, "rs", 0.0)) * area,
            gate_source=junction("cgs"),
            gate_drain=junction("cgd"),
        )

    def merged(self, parameters: JunctionFetParameters) -> BoolArray:
        inner = (parameters.drain_conductance_s, parameters.source_conductance_s)
        return np.stack([(conductance == 0.0).all(axis=0) for conductance in inner], axis=-1)

    def initial(self, parameters: JunctionFetParameters) -> FloatArray:
        """Conducting, short of pinch-off, so that no derivative vanishes."""
        gate = np.minimum(parameters.threshold_v + 1.0, 0.5 * np.abs(parameters.threshold_v))
        branches = [gate, gate - 0.5, np.zeros_like(gate), np.zeros_like(gate)]
        return np.stack([branch * parameters.sign for branch in branches], axis=-1)

    def limit(
        self, parameters: JunctionFetParameters, proposed: FloatArray, previous: FloatArray
    ) -> FloatArray:
        sign = parameters.sign[..., None]
        threshold = parameters.threshold_v[..., None]
        old = previous[..., : _VGD + 1] * sign
        new = limited_step(
            proposed[..., : _VGD + 1] * sign,
            old,
            parameters.thermal_v[..., None],
            parameters.critical_v[..., None],
        )
        limited = proposed.copy()
        limited[..., : _VGD + 1] = gate_step(new, old, threshold) * sign
        return limited

    def evaluate(
        self, parameters: JunctionFetParameters, voltages: FloatArray, gmin: float
    ) -> Evaluation:
        p = parameters
        channel = _channel(p, voltages)
        gate_current, gate_slope = _gate_junctions(p, voltages, gmin)
        shape = channel.current.shape
        flow = np.where(channel.inverse, -channel.current, channel.current)
        # In terms of VGS and VGD: the conducting direction drives with one and reads VDS from both.
        driven, opposed = channel.gm + channel.gds, -channel.gds
        to_vgs = np.where(channel.inverse, -opposed, driven)
        to_vgd = np.where(channel.inverse, -driven, opposed)
        gs, gd = gate_slope[..., 0], gate_slope[..., 1]

        jacobian = np.zeros((*shape, 5, 4))
        jacobian[..., _GATE, _VGS] = gs
        jacobian[..., _GATE, _VGD] = gd
        jacobian[..., _INNER_DRAIN, _VGS] = to_vgs
        jacobian[..., _INNER_DRAIN, _VGD] = to_vgd - gd
        jacobian[..., _INNER_SOURCE, _VGS] = -to_vgs - gs
        jacobian[..., _INNER_SOURCE, _VGD] = -to_vgd
        jacobian[..., _DRAIN, _VRD] = p.drain_conductance_s
        jacobian[..., _INNER_DRAIN, _VRD] = -p.drain_conductance_s
        jacobian[..., _SOURCE, _VRS] = p.source_conductance_s
        jacobian[..., _INNER_SOURCE, _VRS] = -p.source_conductance_s

        drain = p.drain_conductance_s * voltages[..., _VRD]
        source = p.source_conductance_s * voltages[..., _VRS]
        current = np.empty((*shape, 5))
        current[..., _DRAIN] = drain
        current[..., _SOURCE] = source
        current[..., _GATE] = p.sign * (gate_current[..., 0] + gate_current[..., 1])
        current[..., _INNER_DRAIN] = p.sign * (flow - gate_current[..., 1]) - drain
        current[..., _INNER_SOURCE] = -p.sign * (flow + gate_current[..., 0]) - source
        return Evaluation(current, jacobian)

    def operating(
        self, parameters: JunctionFetParameters, voltages: FloatArray, gmin: float
    ) -> OperatingValues:
        p = parameters
        channel = _channel(p, voltages)
        sign = p.sign
        vgs, vgd = voltages[..., _VGS], voltages[..., _VGD]
        terminal = self.evaluate(p, voltages, gmin).current
        drain = terminal[..., _DRAIN] + terminal[..., _INNER_DRAIN]
        c_gs = p.gate_source.capacitance(vgs * sign)
        c_gd = p.gate_drain.capacitance(vgd * sign)
        gate = terminal[..., _GATE]
        # Power into all terminals, each voltage taken from the inner source.
        power = (
            vgs * gate
            + (vgs - vgd) * drain
            + voltages[..., _VRD] * terminal[..., _DRAIN]
            + voltages[..., _VRS] * terminal[..., _SOURCE]
        )
        # With drain and source exchanged, VGD drives and VGS at constant VDS moves it along.
        gm = np.where(channel.inverse, -channel.gm, channel.gm)
        gds = np.where(channel.inverse, channel.gm + channel.gds, channel.gds)
        values = {
            "id": drain,
            "ig": gate,
            "vgs": vgs,
            "vds": vgs - vgd,
            "gm": gm,
            "gds": gds,
            "r_o": reciprocal(gds),
            "vth": sign * p.threshold_v,
            "vdsat": sign * channel.overdrive,
            "c_gs": c_gs,
            "c_gd": c_gd,
            "f_t": transit_frequency(gm, c_gs + c_gd),
            "power": power,
        }
        shape = channel.current.shape
        return OperatingValues(
            capacitance=np.stack([c_gs, c_gd], axis=-1),
            transcapacitance=np.zeros((*shape, 0)),
            values={name: np.broadcast_to(value, shape) for name, value in values.items()},
            region=channel_region(channel.overdrive, channel.drain_source),
        )


def _channel(p: JunctionFetParameters, voltages: FloatArray) -> _Channel:
    vgs = voltages[..., _VGS] * p.sign
    vgd = voltages[..., _VGD] * p.sign
    inverse = vgs < vgd
    vds = np.abs(vgs - vgd)
    overdrive = np.maximum(np.maximum(vgs, vgd) - p.threshold_v, 0.0)
    used = np.minimum(vds, overdrive)
    slope = 2.0 * p.tail_b + 3.0 * p.tail_t * (overdrive - used)
    charge = used * (used * (p.tail_t * used - p.tail_b) + overdrive * slope)
    longer = p.beta * (1.0 + p.modulation_per_v * vds)
    return _Channel(
        inverse=inverse,
        overdrive=overdrive,
        drain_source=vds,
        current=longer * charge,
        gm=longer * used * (slope + 3.0 * p.tail_t * overdrive),
        gds=longer * (overdrive - used) * slope + p.beta * p.modulation_per_v * charge,
    )


def _gate_junctions(
    p: JunctionFetParameters, voltages: FloatArray, gmin: float
) -> tuple[FloatArray, FloatArray]:
    """Current out of the gate into source and drain, N-type sign, and conductance: (…, 2)."""
    volts = voltages[..., : _VGD + 1] * p.sign[..., None]
    value, slope = exponential(volts / p.thermal_v[..., None])
    saturation = p.saturation_a[..., None]
    leakage = gmin * p.multiplier[..., None]
    current = saturation * value + leakage * volts
    return current, saturation / p.thermal_v[..., None] * slope + leakage


def _threshold_shift(cards: Sequence[Card], difference_k: FloatArray) -> FloatArray:
    """Either VTOTC (added) or TCV (subtracted) times the rise in temperature."""
    return difference_k * np.where(
        given(cards, "vtotc"), stack(cards, "vtotc", 0.0), -stack(cards, "tcv", 0.0)
    )


def _beta_growth(cards: Sequence[Card], kelvin: FloatArray, nominal: FloatArray) -> FloatArray:
    """Either ``1.01^(BETATCE·ΔT)`` or ``(T/Tnom)^BEX``."""
    percent = 1.01 ** (stack(cards, "betatce", 0.0) * (kelvin - nominal))
    power = (kelvin / nominal) ** stack(cards, "bex", 0.0)
    return np.where(given(cards, "betatce"), percent, power)


JFET = JunctionFetDevice()
