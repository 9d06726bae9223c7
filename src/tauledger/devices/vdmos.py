"""Vertical power MOSFET: square law with a soft threshold, body diode, gate-drain capacitance.

With ``v = KSUBTHRES·ln(1 + exp((VGS − VTO − SUBSHIFT)/KSUBTHRES))`` and
``w = min(MTRIODE·VDS, v)``::

    ID = KP·(1 + LAMBDA·VDS)/(1 + THETA·VGS) · w·(v − w/2)

For VDS < 0 the gate voltage counts from the drain and |VDS| is used in w, while LAMBDA and THETA
still see VDS and VGS, as in ngspice. The body diode, with RB in series, and RDS lie between the
outer drain and source. The gate-drain capacitance is ``y + s·tanh(A·VGD)`` for VGD > 0 and
``y + s·atan(A·VGD)`` below, between CGDMIN and CGDMAX; CGS is constant. With RQ and VQ the
drain resistance grows by ``RQ·V/(VQ + V)``, V being the outer drain-to-source voltage.

Source: the model that ngspice calls VDMOS; agrees with ngspice 39 in tests/devices/test_vdmos.py
[P: its output].

Where ngspice 39 differs: it leaves CGS, CGD and IBV out of the multiplier ``m`` (m=2 shows the
gate capacitance of one device; here of two), and with RQ its small-signal analysis holds the
drain resistance constant (here its dependence on VDS counts). Not modelled: self-heating.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.devices.diode import DIODE, DiodeParameters
from tauledger.devices.fet_common import (
    channel_region,
    conductance,
    drain_step,
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
from tauledger.devices.junction import first_given, quadratic, temperatures
from tauledger.records import dataclass

_TERMINALS = (
    "drain",
    "gate",
    "source",
    "drain_internal",
    "gate_internal",
    "source_internal",
    "source_body_internal",
)
_DRAIN, _GATE, _SOURCE, _INNER_DRAIN, _INNER_GATE, _INNER_SOURCE, _BODY = range(7)
_VGS, _VDS, _VRD, _VRG, _VRS, _VDIODE, _VRB, _VRDS = range(8)
_DIODE_TERMINALS = [_SOURCE, _DRAIN, _BODY]
_DIODE_BRANCHES = [_VDIODE, _VRB]
_DIODE_NAMES = {
    "is": "is", "n": "n", "bv": "bv", "ibv": "ibv", "nbv": "nbv", "rs": "rb", "cjo": "cjo",
    "vj": "vj", "m": "m", "fc": "fc", "tt": "tt", "eg": "eg", "xti": "xti", "trs1": "trb1",
    "trs2": "trb2", "tnom": "tnom",
}  # fmt: skip
"""Parameter of the diode to parameter of the card."""
_DIODE_DEFAULTS = {"vj": 0.8, "ibv": 1e-10, "nbv": 1.0}
_LEAST_FACTOR = 0.1
"""Neither 1 + LAMBDA·VDS nor 1 + THETA·VGS falls below this; a trial voltage may lie anywhere."""


@dataclass(frozen=True, slots=True)
class VerticalMosfetParameters:
    """Parameters at temperature, scaled by the multiplier; each array (boards or 1, n)."""

    sign: FloatArray
    threshold_v: FloatArray
    """VTO in N-type sign."""
    beta: FloatArray
    modulation_per_v: FloatArray
    theta_per_v: FloatArray
    triode_factor: FloatArray
    softness_v: FloatArray
    shift_v: FloatArray
    series_s: FloatArray
    """(boards or 1, n, 3): conductances of RD, RG and RS."""
    quasi_ohm: FloatArray
    """RQ; zero where quasi-saturation is not stated or RD is zero."""
    quasi_v: FloatArray
    shunt_s: FloatArray
    gate_source_f: FloatArray
    gate_drain_step_f: FloatArray
    gate_drain_middle_f: FloatArray
    gate_drain_per_v: FloatArray
    body: DiodeParameters


@dataclass(frozen=True, slots=True)
class _Channel:
    """Magnitude of the channel current and its derivatives, with what they belong to."""

    inverse: BoolArray
    overdrive: FloatArray
    current: FloatArray
    to_gate: FloatArray
    """Through the overdrive."""
    to_drain: FloatArray
    """Through |VDS| in the triode region."""
    to_theta: FloatArray
    """Through VGS in THETA's factor (negative)."""
    to_lambda: FloatArray
    """Through VDS in LAMBDA's factor."""


class VerticalMosfet(Device[VerticalMosfetParameters]):
    """The vertical double-diffused MOSFET, both polarities."""

    name = "vdmos"
    terminals = _TERMINALS
    outer = 3
    branches = (
        ("gate_internal", "source_internal"),
        ("drain_internal", "source_internal"),
        ("drain", "drain_internal"),
        ("gate", "gate_internal"),
        ("source", "source_internal"),
        ("source_body_internal", "drain"),
        ("source", "source_body_internal"),
        ("drain", "source"),
    )
    capacitors = (
        ("Cgs", "gate_internal", "source_internal"),
        ("Cgd", "gate_internal", "drain_internal"),
        ("Cds", "source_body_internal", "drain"),
    )
    value_units = {  # noqa: RUF012 - the interface declares it a plain mapping
        "id": "A",
        "vgs": "V",
        "vds": "V",
        "gm": "S",
        "gds": "S",
        "r_o": "Ω",
        "vth": "V",
        "vdsat": "V",
        "c_gs": "F",
        "c_gd": "F",
        "c_ds": "F",
        "f_t": "Hz",
        "power": "W",
    }

    def prepare(
        self, cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
    ) -> VerticalMosfetParameters:
        kelvin, nominal = temperatures(cards, temperature_c, nominal_temperature_c)
        difference = kelvin - nominal
        sign = np.array([[-1.0 if c.kind in ("vdmosp", "pmos") else 1.0 for c in cards]])
        multiplier = stack(cards, "m", 1.0, instance=True)
        mobility = (kelvin / nominal) ** first_given(cards, ("mu", "bex"), -1.5)
        threshold = sign * first_given(cards, ("vto", "vt0", "vth0"), 0.0)
        warmth = quadratic(cards, "trd", difference)
        warmth = np.where(
            given(cards, "texp0"), (kelvin / nominal) ** stack(cards, "texp0", 1.5), warmth
        )
        drain_ohm = stack(cards, "rd", 0.0) * warmth
        quasi_ohm = stack(cards, "rq", 0.0) * (kelvin / nominal) ** stack(cards, "texp1", 0.3)
        quasi = (drain_ohm > 0.0) & (stack(cards, "vq", 0.0) > 0.0)
        series = [
            conductance(drain_ohm),
            conductance(stack(cards, "rg", 0.0) * quadratic(cards, "trg", difference)),
            conductance(stack(cards, "rs", 0.0) * quadratic(cards, "trs", difference)),
        ]
        low, high = stack(cards, "cgdmin", 0.0), stack(cards, "cgdmax", 0.0)
        step = (high - low) / (1.0 + 0.5 * np.pi)
        softness = stack(cards, "ksubthres", 0.1) * quadratic(cards, "tksubthres", difference)
        return VerticalMosfetParameters(
            sign=sign,
            threshold_v=threshold - first_given(cards, ("tcvth", "vtotc"), 0.0) * difference,
            beta=stack(cards, "kp", 1.0) * multiplier * mobility,
            modulation_per_v=stack(cards, "lambda", 0.0),
            theta_per_v=stack(cards, "theta", 0.0),
            triode_factor=stack(cards, "mtriode", 1.0),
            softness_v=np.maximum(softness, 1e-4),
            shift_v=stack(cards, "subshift", 0.0),
            series_s=np.stack([part * multiplier for part in np.broadcast_arrays(*series)], -1),
            quasi_ohm=np.where(quasi, quasi_ohm, 0.0) / multiplier,
            quasi_v=np.where(quasi, stack(cards, "vq", 0.0), 1.0),
            shunt_s=conductance(stack(cards, "rds", 1e15)) * multiplier,
            gate_source_f=stack(cards, "cgs", 0.0) * multiplier,
            gate_drain_step_f=step * multiplier,
            gate_drain_middle_f=(high - step) * multiplier,
            gate_drain_per_v=stack(cards, "a", 1.0),
            body=DIODE.prepare(
                [_body_card(card) for card in cards], temperature_c, nominal_temperature_c
            ),
        )

    def merged(self, parameters: VerticalMosfetParameters) -> BoolArray:
        series = (parameters.series_s == 0.0).all(axis=0)
        return np.concatenate([series, DIODE.merged(parameters.body)], axis=-1)

    def initial(self, parameters: VerticalMosfetParameters) -> FloatArray:
        """Conducting, short of pinch-off, the body diode blocked."""
        gate = (parameters.threshold_v + 1.0) * parameters.sign
        start = np.zeros((*gate.shape, 8))
        start[..., _VGS] = gate
        start[..., _VDS] = start[..., _VRDS] = 0.5 * parameters.sign
        start[..., _VDIODE] = -0.5 * parameters.sign
        return start

    def limit(
        self, parameters: VerticalMosfetParameters, proposed: FloatArray, previous: FloatArray
    ) -> FloatArray:
        sign = parameters.sign[..., None]
        new, old = proposed * sign, previous * sign
        limited = new.copy()
        limited[..., _VGS] = gate_step(new[..., _VGS], old[..., _VGS], parameters.threshold_v)
        limited[..., _VDS] = drain_step(new[..., _VDS], old[..., _VDS])
        limited[..., _DIODE_BRANCHES] = DIODE.limit(
            parameters.body, new[..., _DIODE_BRANCHES], old[..., _DIODE_BRANCHES]
        )
        limited *= sign
        return limited

    def evaluate(
        self, parameters: VerticalMosfetParameters, voltages: FloatArray, gmin: float
    ) -> Evaluation:
        p = parameters
        volts = voltages * p.sign[..., None]
        channel = _channel(p, volts)
        direction = np.where(channel.inverse, -1.0, 1.0)
        flow = direction * channel.current
        gm = direction * (channel.to_gate + channel.to_theta)
        gds = channel.to_drain + direction * channel.to_lambda
        gds = gds + np.where(channel.inverse, channel.to_gate, 0.0)
        body = DIODE.evaluate(p.body, volts[..., _DIODE_BRANCHES], gmin)

        shape = flow.shape
        jacobian = np.zeros((*shape, 7, 8))
        for row, terminal in enumerate(_DIODE_TERMINALS):
            jacobian[..., terminal, _DIODE_BRANCHES] = body.jacobian[..., row, :]
        for branch, value in ((_VGS, gm), (_VDS, gds)):
            jacobian[..., _INNER_DRAIN, branch] = value
            jacobian[..., _INNER_SOURCE, branch] = -value
        current = np.zeros((*shape, 7))
        current[..., _DIODE_TERMINALS] = body.current
        current[..., _INNER_DRAIN] = flow
        current[..., _INNER_SOURCE] = -flow
        drain_siemens, drain_slope = _drain_conductance(p, volts)
        bending = drain_slope * volts[..., _VRD]
        jacobian[..., _DRAIN, _VRDS] += bending
        jacobian[..., _INNER_DRAIN, _VRDS] -= bending
        pairs = (
            (_DRAIN, _INNER_DRAIN, _VRD, drain_siemens),
            (_GATE, _INNER_GATE, _VRG, p.series_s[..., 1]),
            (_SOURCE, _INNER_SOURCE, _VRS, p.series_s[..., 2]),
            (_DRAIN, _SOURCE, _VRDS, p.shunt_s),
        )
        for first, second, branch, siemens in pairs:
            jacobian[..., first, branch] += siemens
            jacobian[..., second, branch] -= siemens
            current[..., first] += siemens * volts[..., branch]
            current[..., second] -= siemens * volts[..., branch]
        return Evaluation(current * p.sign[..., None], jacobian)

    def operating(
        self, parameters: VerticalMosfetParameters, voltages: FloatArray, gmin: float
    ) -> OperatingValues:
        p = parameters
        volts = voltages * p.sign[..., None]
        channel = _channel(p, volts)
        terminal = self.evaluate(p, voltages, gmin).current
        body = DIODE.operating(p.body, volts[..., _DIODE_BRANCHES], gmin)
        gate_drain = p.gate_drain_per_v * (volts[..., _VGS] - volts[..., _VDS])
        bend = np.where(gate_drain > 0.0, np.tanh(gate_drain), np.arctan(gate_drain))
        shape = channel.current.shape
        c_gs = np.broadcast_to(p.gate_source_f, shape)
        c_gd = p.gate_drain_middle_f + p.gate_drain_step_f * bend
        c_ds = body.capacitance[..., 0]
        gm = channel.to_gate + channel.to_theta
        gds = channel.to_drain + channel.to_lambda
        drain = terminal[..., _DRAIN] + terminal[..., _INNER_DRAIN]
        # All dissipation lies between drain and source: the gate carries no direct current.
        power = voltages[..., _VRDS] * drain
        values = {
            "id": drain,
            "vgs": voltages[..., _VGS],
            "vds": voltages[..., _VDS],
            "gm": gm,
            "gds": gds,
            "r_o": reciprocal(gds),
            "vth": p.sign * p.threshold_v,
            "vdsat": p.sign * channel.overdrive / p.triode_factor,
            "c_gs": c_gs,
            "c_gd": c_gd,
            "c_ds": c_ds,
            "f_t": transit_frequency(gm, c_gs + c_gd),
            "power": power,
        }
        gate = volts[..., _VGS] - np.where(channel.inverse, volts[..., _VDS], 0.0)
        conducting = np.where(gate > p.threshold_v, channel.overdrive / p.triode_factor, 0.0)
        region = channel_region(conducting, np.abs(volts[..., _VDS]))
        return OperatingValues(
            capacitance=np.stack([c_gs, c_gd, c_ds], axis=-1),
            transcapacitance=np.zeros((*shape, 0)),
            values={name: np.broadcast_to(value, shape) for name, value in values.items()},
            region=np.where(body.region == "breakdown", "breakdown", region),
        )


def _body_card(card: Card) -> Card:
    """The body diode as a diode of its own."""
    model = dict(_DIODE_DEFAULTS) | {
        own: card.model[name] for own, name in _DIODE_NAMES.items() if name in card.model
    }
    instance = {
        name: card.instance[name] for name in ("m", "temp", "dtemp") if name in card.instance
    }
    return Card(card.name, "d", model, instance)


def _channel(p: VerticalMosfetParameters, volts: FloatArray) -> _Channel:
    vgs, vds = volts[..., _VGS], volts[..., _VDS]
    inverse = vds < 0.0
    gate = vgs - np.where(inverse, vds, 0.0) - p.threshold_v - p.shift_v
    x = gate / p.softness_v
    overdrive = p.softness_v * np.logaddexp(0.0, x)
    onset = np.exp(-np.logaddexp(0.0, -x))
    used = np.minimum(p.triode_factor * np.abs(vds), overdrive)
    charge = used * (overdrive - 0.5 * used)
    longer, longer_slope = _factor(p.modulation_per_v, vds)
    slower, slower_slope = _factor(p.theta_per_v, vgs)
    beta = p.beta * longer / slower
    current = beta * charge
    return _Channel(
        inverse=inverse,
        overdrive=overdrive,
        current=current,
        to_gate=beta * used * onset,
        to_drain=beta * p.triode_factor * (overdrive - used),
        to_theta=-current * slower_slope / slower,
        to_lambda=p.beta / slower * charge * longer_slope,
    )


def _drain_conductance(
    p: VerticalMosfetParameters, volts: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Conductance of RD with quasi-saturation, and its slope to the outer drain voltage."""
    constant = p.series_s[..., 0]
    outer = np.where(volts[..., _VDS] >= 0.0, np.maximum(volts[..., _VRDS], 0.0), 0.0)
    reach = p.quasi_v + outer
    siemens = constant / (1.0 + constant * p.quasi_ohm * outer / reach)
    rising = (volts[..., _VDS] >= 0.0) & (volts[..., _VRDS] > 0.0)
    slope = -(siemens**2) * p.quasi_ohm * p.quasi_v / reach**2
    return siemens, np.where(rising, slope, 0.0)


def _factor(per_volt: FloatArray, voltage: FloatArray) -> tuple[FloatArray, FloatArray]:
    """``1 + coefficient·V``, kept positive, and its slope."""
    value = 1.0 + per_volt * voltage
    return np.maximum(value, _LEAST_FACTOR), np.where(value > _LEAST_FACTOR, per_volt, 0.0)


VDMOS = VerticalMosfet()
