"""MOS field-effect transistor round its channel law: what levels 1, 2 and 3 share.

A level states the drain current of the conducting direction (VDS ≥ 0, N-type sign). Here drain
and source exchange for VDS < 0, the bulk junctions and series resistances are added, and the gate
capacitances follow Meyer (:func:`gate_capacitance`).

Source: J. E. Meyer, "MOS models and circuit simulation", RCA Review 32 (1971) [M]; SPICE's use of
it (common practice); agrees with ngspice 39 in tests/devices/test_mosfet.py [P: its output].
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Sequence
from typing import Generic, TypeVar

import numpy as np

from tauledger.devices.dual import Dual, choose, larger, root, smaller
from tauledger.devices.fet_common import (
    channel_region,
    drain_step,
    gate_step,
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
)
from tauledger.devices.junction import (
    critical_voltage,
    exponential,
    limited_step,
    thermal_voltage,
)
from tauledger.devices.mosfet_process import Process, Surroundings, process, surroundings
from tauledger.records import dataclass

_DRAIN, _GATE, _SOURCE, _BULK, _INNER_DRAIN, _INNER_SOURCE = range(6)
_VGS, _VDS, _VBS, _VRD, _VRS = range(5)

_LINEAR_ABOVE = 200.0
"""Thermal voltages beyond which a bulk junction continues along its tangent."""
_LEAST_PINCH_V = 0.025
"""Keeps the passage to zero drain voltage smooth below threshold, as ngspice does."""

L = TypeVar("L")


@dataclass(frozen=True, slots=True)
class MosfetParameters(Generic[L]):
    """Everything at temperature; arrays (boards or 1, n)."""

    sign: FloatArray
    threshold_v: FloatArray
    phi_v: FloatArray
    oxide_f: FloatArray
    thermal_v: FloatArray
    critical_v: FloatArray
    around: Surroundings
    law: L
    """Constants of the level's channel law."""


@dataclass(frozen=True, slots=True)
class Channel:
    """Drain current of the conducting direction, its exact derivatives, and its landmarks."""

    current: FloatArray
    gm: FloatArray
    gds: FloatArray
    gmb: FloatArray
    threshold: FloatArray
    """Gate voltage where conduction sets in (the level's ``von``), V."""
    saturation: FloatArray
    """Drain voltage of pinch-off or velocity saturation, V."""


class Mosfet(Device[MosfetParameters[L]]):
    """A MOSFET of any level: a subclass adds its channel law."""

    terminals = ("drain", "gate", "source", "bulk", "drain_internal", "source_internal")
    outer = 4
    branches = (
        ("gate", "source_internal"),
        ("drain_internal", "source_internal"),
        ("bulk", "source_internal"),
        ("drain", "drain_internal"),
        ("source", "source_internal"),
    )
    capacitors = (
        ("Cgs", "gate", "source_internal"),
        ("Cgd", "gate", "drain_internal"),
        ("Cgb", "gate", "bulk"),
        ("Cbd", "bulk", "drain_internal"),
        ("Cbs", "bulk", "source_internal"),
    )
    value_units = {  # noqa: RUF012 - the interface declares it a plain mapping
        "id": "A",
        "vgs": "V",
        "vds": "V",
        "vbs": "V",
        "gm": "S",
        "gds": "S",
        "gmb": "S",
        "r_o": "Ω",
        "vth": "V",
        "vdsat": "V",
        "c_gs": "F",
        "c_gd": "F",
        "c_gb": "F",
        "c_bd": "F",
        "c_bs": "F",
        "f_t": "Hz",
        "power": "W",
    }
    default_oxide_m = 0.0
    side_grading = 0.33
    semi_empirical = False
    leakage_tail = False
    """Whether the bulk junctions' reverse current creeps up to IS as a diode's does in SPICE."""

    @abstractmethod
    def law(self, cards: Sequence[Card], channel: Process, around: Surroundings) -> L:
        """Constants of the channel law."""

    @abstractmethod
    def channel(self, law: L, vgs: FloatArray, vds: FloatArray, vbs: FloatArray) -> Channel:
        """The channel law at ``vds ≥ 0``, N-type sign."""

    def prepare(
        self, cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
    ) -> MosfetParameters[L]:
        channel = process(
            cards,
            temperature_c,
            nominal_temperature_c,
            default_oxide_m=self.default_oxide_m,
            semi_empirical=self.semi_empirical,
        )
        around = surroundings(
            cards,
            channel,
            temperature_c,
            nominal_temperature_c,
            side_grading=self.side_grading,
        )
        thermal = thermal_voltage(channel.kelvin)
        largest = np.maximum(around.drain.saturation_a, around.source.saturation_a)
        return MosfetParameters(
            sign=channel.sign,
            threshold_v=channel.threshold_v,
            phi_v=channel.phi_v,
            oxide_f=channel.oxide_f,
            thermal_v=thermal,
            critical_v=critical_voltage(thermal, largest),
            around=around,
            law=self.law(cards, channel, around),
        )

    def merged(self, parameters: MosfetParameters[L]) -> BoolArray:
        around = parameters.around
        inner = (around.drain_conductance_s, around.source_conductance_s)
        return np.stack([(conductance == 0.0).all(axis=0) for conductance in inner], axis=-1)

    def initial(self, parameters: MosfetParameters[L]) -> FloatArray:
        """Conducting, short of pinch-off, so that no derivative vanishes."""
        gate = (parameters.threshold_v + 1.0) * parameters.sign
        drain = np.broadcast_to(0.5 * parameters.sign, gate.shape)
        rest = [np.zeros_like(gate)] * 3
        return np.stack([gate, drain, *rest], axis=-1)

    def limit(
        self, parameters: MosfetParameters[L], proposed: FloatArray, previous: FloatArray
    ) -> FloatArray:
        sign = parameters.sign
        new, old = proposed * sign[..., None], previous * sign[..., None]
        inverse = old[..., _VDS] < 0.0
        # The gate is limited against the end that conducts; its step carries the other end along.
        old_swap = np.where(inverse, old[..., _VDS], 0.0)
        new_swap = np.where(inverse, new[..., _VDS], 0.0)
        gate = gate_step(
            new[..., _VGS] - new_swap, old[..., _VGS] - old_swap, parameters.threshold_v
        )
        moved = gate + new_swap - new[..., _VGS]
        drain = drain_step(new[..., _VDS] + np.where(inverse, -moved, moved), old[..., _VDS])
        bulk_swap = np.where(drain < 0.0, drain, 0.0)
        old_bulk_swap = np.where(drain < 0.0, old[..., _VDS], 0.0)
        bulk = limited_step(
            new[..., _VBS] - bulk_swap,
            old[..., _VBS] - old_bulk_swap,
            parameters.thermal_v,
            parameters.critical_v,
        )
        limited = proposed.copy()
        limited[..., _VDS] = drain * sign
        limited[..., _VGS] = (gate + np.where(inverse, drain, 0.0)) * sign
        limited[..., _VBS] = (bulk + bulk_swap) * sign
        return limited

    def evaluate(
        self, parameters: MosfetParameters[L], voltages: FloatArray, gmin: float
    ) -> Evaluation:
        p, around = parameters, parameters.around
        volts = voltages * p.sign[..., None]
        channel, inverse = self._conducting(p, volts)
        bulk_source, source_slope = self._bulk_current(
            p, volts[..., _VBS], around.source.saturation_a, gmin
        )
        bulk_drain, drain_slope = self._bulk_current(
            p, volts[..., _VBS] - volts[..., _VDS], around.drain.saturation_a, gmin
        )
        flow = np.where(inverse, -channel.current, channel.current)
        gm = np.where(inverse, -channel.gm, channel.gm)
        gmb = np.where(inverse, -channel.gmb, channel.gmb)
        gds = channel.gds + np.where(inverse, channel.gm + channel.gmb, 0.0)

        shape = flow.shape
        jacobian = np.zeros((*shape, 6, 5))
        jacobian[..., _INNER_DRAIN, _VGS] = gm
        jacobian[..., _INNER_SOURCE, _VGS] = -gm
        jacobian[..., _INNER_DRAIN, _VDS] = gds + drain_slope
        jacobian[..., _INNER_SOURCE, _VDS] = -gds
        jacobian[..., _BULK, _VDS] = -drain_slope
        jacobian[..., _INNER_DRAIN, _VBS] = gmb - drain_slope
        jacobian[..., _INNER_SOURCE, _VBS] = -gmb - source_slope
        jacobian[..., _BULK, _VBS] = drain_slope + source_slope
        jacobian[..., _DRAIN, _VRD] = around.drain_conductance_s
        jacobian[..., _INNER_DRAIN, _VRD] = -around.drain_conductance_s
        jacobian[..., _SOURCE, _VRS] = around.source_conductance_s
        jacobian[..., _INNER_SOURCE, _VRS] = -around.source_conductance_s

        drain = around.drain_conductance_s * voltages[..., _VRD]
        source = around.source_conductance_s * voltages[..., _VRS]
        current = np.zeros((*shape, 6))
        current[..., _DRAIN] = drain
        current[..., _SOURCE] = source
        current[..., _BULK] = p.sign * (bulk_source + bulk_drain)
        current[..., _INNER_DRAIN] = p.sign * (flow - bulk_drain) - drain
        current[..., _INNER_SOURCE] = -p.sign * (flow + bulk_source) - source
        return Evaluation(current, jacobian)

    def operating(
        self, parameters: MosfetParameters[L], voltages: FloatArray, gmin: float
    ) -> OperatingValues:
        p = parameters
        volts = voltages * p.sign[..., None]
        channel, inverse = self._conducting(p, volts)
        vds = np.abs(volts[..., _VDS])
        gate = volts[..., _VGS] - np.where(inverse, volts[..., _VDS], 0.0)
        capacitance = self._capacitances(p, volts, channel, gate, inverse)
        terminal = self.evaluate(p, voltages, gmin).current
        drain = terminal[..., _DRAIN] + terminal[..., _INNER_DRAIN]
        # Power into all terminals, each voltage taken from the inner source.
        power = (
            voltages[..., _VDS] * drain
            + voltages[..., _VBS] * terminal[..., _BULK]
            + voltages[..., _VRD] * terminal[..., _DRAIN]
            + voltages[..., _VRS] * terminal[..., _SOURCE]
        )
        c_gs, c_gd, c_gb, c_bd, c_bs = np.moveaxis(capacitance, -1, 0)
        values = {
            "id": drain,
            "vgs": voltages[..., _VGS],
            "vds": voltages[..., _VDS],
            "vbs": voltages[..., _VBS],
            "gm": channel.gm,
            "gds": channel.gds,
            "gmb": channel.gmb,
            "r_o": reciprocal(channel.gds),
            "vth": p.sign * channel.threshold,
            "vdsat": p.sign * channel.saturation,
            "c_gs": c_gs,
            "c_gd": c_gd,
            "c_gb": c_gb,
            "c_bd": c_bd,
            "c_bs": c_bs,
            "f_t": transit_frequency(channel.gm, c_gs + c_gd + c_gb),
            "power": power,
        }
        region = channel_region(np.where(gate > channel.threshold, channel.saturation, 0.0), vds)
        return OperatingValues(
            capacitance=capacitance,
            transcapacitance=np.zeros((*drain.shape, 0)),
            values=values,
            region=region,
        )

    def _conducting(self, p: MosfetParameters[L], volts: FloatArray) -> tuple[Channel, BoolArray]:
        """The channel seen from the end that acts as source, and where that is the drain."""
        vds = volts[..., _VDS]
        inverse = vds < 0.0
        shift = np.where(inverse, vds, 0.0)
        channel = self.channel(
            p.law, volts[..., _VGS] - shift, np.abs(vds), volts[..., _VBS] - shift
        )
        return channel, inverse

    def _bulk_current(
        self, p: MosfetParameters[L], voltage: FloatArray, saturation: FloatArray, gmin: float
    ) -> tuple[FloatArray, FloatArray]:
        """Current from the bulk into a diffusion, N-type sign, and its slope."""
        x = voltage / p.thermal_v
        value, slope = exponential(x) if self.leakage_tail else plain_exponential(x)
        return saturation * value + gmin * voltage, saturation / p.thermal_v * slope + gmin

    def _capacitances(
        self,
        p: MosfetParameters[L],
        volts: FloatArray,
        channel: Channel,
        gate: FloatArray,
        inverse: BoolArray,
    ) -> FloatArray:
        around = p.around
        near, far, bulk = gate_capacitance(
            gate - channel.threshold,
            np.abs(volts[..., _VDS]),
            channel.saturation,
            p.phi_v,
            p.oxide_f,
        )
        parts = [
            np.where(inverse, far, near) + around.overlap_gs_f,
            np.where(inverse, near, far) + around.overlap_gd_f,
            bulk + around.overlap_gb_f,
            around.drain.capacitance(volts[..., _VBS] - volts[..., _VDS]),
            around.source.capacitance(volts[..., _VBS]),
        ]
        return np.stack(np.broadcast_arrays(*parts), axis=-1)


def gate_capacitance(
    overdrive: FloatArray,
    drain_source: FloatArray,
    saturation: FloatArray,
    phi: FloatArray,
    oxide_f: FloatArray,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Meyer's gate capacitances to the conducting source, the drain and the bulk, in F.

    Below threshold the oxide stands in series with the depleted bulk; between −PHI/2 and the
    threshold the channel takes over; above it two thirds of the oxide lie to the source in
    saturation, one half to each end without drain voltage.
    """
    depth = -np.minimum(overdrive, 0.0) / phi
    full = np.where(depth >= 0.5, 0.0, np.maximum(2.0 / 3.0 - 4.0 / 3.0 * depth, 0.0)) * oxide_f
    bulk = np.where(overdrive >= 0.0, 0.0, np.minimum(depth, 1.0)) * oxide_f
    pinch = np.maximum(saturation, _LEAST_PINCH_V)
    left = np.maximum(pinch - drain_source, 0.0)
    both = pinch + left
    return full * (1.0 - (left / both) ** 2), full * (1.0 - (pinch / both) ** 2), bulk


def depletion_root(phi: FloatArray, bulk: Dual) -> Dual:
    """``√(PHI − VBS)``, continued by a hyperbola for forward bias of the bulk."""
    reverse = root(phi - smaller(bulk, 0.0))
    forward = np.sqrt(phi) / (1.0 + larger(bulk, 0.0) / (2.0 * phi))
    return choose(bulk.value <= 0.0, reverse, forward)


def plain_exponential(x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """``eˣ − 1`` and its slope, continued along the tangent far out."""
    inside = np.minimum(x, _LINEAR_ABOVE)
    growth = np.exp(inside)
    return growth * (1.0 + x - inside) - 1.0, growth
