"""Bipolar transistor: the complete Gummel-Poon model, NPN and PNP, vertical and lateral.

With every voltage taken positive in forward bias (signs flipped for a PNP), ``E(x)`` the junction
law of :mod:`tauledger.devices.junction` and Vt the thermal voltage::

    Ibe = IS·E(Vbe/NF·Vt)      Iben = ISE·E(Vbe/NE·Vt) + gmin·Vbe
    Ibc = IS·E(Vbc/NR·Vt)      Ibcn = ISC·E(Vbc/NC·Vt) + gmin·Vbc
    q1  = 1/(1 − Vbc/VAF − Vbe/VAR),   q2 = Ibe/IKF + Ibc/IKR,   qb = q1·(1 + (1 + 4·q2)^NKF)/2
    Ic  = (Ibe − Ibc)/qb − Ibc/BR − Ibcn        Ib = Ibe/BF + Iben + Ibc/BR + Ibcn

The base resistance is ``RBM + (RB − RBM)/qb``, or with IRB the crowding law
``RBM + 3·(RB − RBM)·(tan z − z)/(z·tan² z)``. The substrate junction (ISS, NS, CJS) stands
against the internal collector, or for a lateral device against the internal base.
Source: the Gummel-Poon model as SPICE defines it (common practice), checked against ngspice 39 in
tests/devices/test_bipolar.py [P: its output].

Where ngspice 39 differs from the textbook, and what is done here:

* ``gm = ∂Ic/∂Vbe − go`` with ``go = −∂(transport current)/∂Vbc``: the transconductance at constant
  Vce, not Ic/Vt. For IS=1e-15, VAF=80, Vbe=0.7 V, Vce=5 V it is 23.094 mS against
  Ic/Vt = 23.101 mS; in saturation it may be negative. Same here.
* ``gpi`` and ``gmu`` contain gmin (1e-12 S), so r_mu never exceeds 1 TΩ. Same here.
* The saturation current of the base-collector junction is IS·area·areab (areac when lateral), so
  that area=2 alone gives four times IS in reverse: Vce(sat) shifts by Vt·ln(area), 18 mV for
  area=2. Same here, since ngspice is the referee; a model that states both IBE and IBC
  (one alone is ignored) gets IBE·area and IBC·areab.
* The substrate diode scales with ``area``, its capacitance with areac (areab when lateral).
* A PNP without SUBS is lateral.
* ``@q[is]`` adds the substrate capacitance in farads to the current in amperes (it prints
  −5.6e-12 for 2 pA and 3.6 pF); ``isub`` here is the current alone.
* ngspice's AC analysis takes the base resistance at its bias value, which is not the slope of its
  own DC curve. ``r_x`` is that value; the Jacobian here differentiates it (the tests confirm it by
  differences of ngspice's currents). With RB=10, RBM=2, IRB=0.1 mA driven by a voltage source the
  AC collector current differs by 0.002 dB at 1.2 mA, 0.014 dB at 7 mA and 0.08 dB at 0.2 A; with
  RB=300, RBM=20 by 0.05 dB at 1.1 mA and 1.1 dB at 44 mA.
* ngspice's AC analysis leaves out the conductance of the substrate diode (zero where 459 µS is
  the slope of its DC current); it is in the Jacobian here. It matters only in forward bias.
* ``vbe``, ``vbc``, ``vce`` here are between the outer terminals with their real signs; ngspice's
  ``@q[vbe]`` is between the inner ones and positive in forward bias for both polarities.
* ``f_t = gm/(2π(Cπ + Cμ + Cμx))``, NaN for a model without any capacitance; ``beta_dc`` and
  ``beta_ac`` are NaN where the denominator is zero. ngspice has no such figures.

Not modelled: quasi-saturation (RCO), excess phase (PTF), TLEV and TLEVC other than 0, noise.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from tauledger.devices import junction
from tauledger.devices.bipolar_parameters import BipolarParameters, prepare
from tauledger.devices.bipolar_transport import BC, BE, SUB, Transport, forward_voltages, transport
from tauledger.devices.interface import (
    BoolArray,
    Card,
    Device,
    Evaluation,
    FloatArray,
    OperatingValues,
    Value,
)

_VBE, _VBC, _VSC, _VRB, _VRC, _VRE = range(6)
_C, _B, _E, _S, _CI, _BI, _EI = range(7)


class BipolarDevice(Device[BipolarParameters]):
    """See the module docstring for the equations."""

    name = "bjt"
    terminals = (
        "collector",
        "base",
        "emitter",
        "substrate",
        "collector_internal",
        "base_internal",
        "emitter_internal",
    )
    outer = 4
    branches = (
        ("base_internal", "emitter_internal"),
        ("base_internal", "collector_internal"),
        ("substrate", "collector_internal"),
        ("base", "base_internal"),
        ("collector", "collector_internal"),
        ("emitter", "emitter_internal"),
    )
    capacitors = (
        ("Cπ", "base_internal", "emitter_internal"),
        ("Cμ", "base_internal", "collector_internal"),
        ("Cμx", "base", "collector_internal"),
        ("Ccs", "collector_internal", "substrate"),
        ("Cbs", "base_internal", "substrate"),
    )
    """``Ccs`` is zero for a lateral device, ``Cbs`` for a vertical one."""
    transcapacitors = (
        ("base_internal", "emitter_internal", "base_internal", "collector_internal"),
    )
    value_units: Mapping[str, str] = {
        **dict.fromkeys(("ic", "ib", "ie", "isub"), "A"),
        **dict.fromkeys(("vbe", "vbc", "vce"), "V"),
        "gm": "S",
        **dict.fromkeys(("r_pi", "r_o", "r_mu", "r_x"), "Ω"),
        **dict.fromkeys(("beta_dc", "beta_ac"), ""),
        **dict.fromkeys(("c_pi", "c_mu", "c_mu_x", "c_sub"), "F"),
        "f_t": "Hz",
        "power": "W",
    }

    def prepare(
        self, cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
    ) -> BipolarParameters:
        return prepare(cards, temperature_c, nominal_temperature_c)

    def merged(self, parameters: BipolarParameters) -> BoolArray:
        p = parameters
        base = p.minimum_base_ohm + p.modulated_base_ohm
        columns = (p.collector_siemens, base, p.emitter_siemens)
        return np.stack([np.all(column == 0.0, axis=0) for column in columns], axis=-1)

    def initial(self, parameters: BipolarParameters) -> FloatArray:
        p = parameters
        start = np.zeros((*np.broadcast_shapes(p.polarity.shape, p.critical.shape[:2]), 6))
        start[..., _VBE] = p.polarity * p.critical[..., BE]
        return start

    def limit(
        self, parameters: BipolarParameters, proposed: FloatArray, previous: FloatArray
    ) -> FloatArray:
        p = parameters
        forward = junction.limited_step(
            forward_voltages(p, proposed),
            forward_voltages(p, previous),
            p.junction_thermal,
            p.critical,
        )
        result = proposed.copy()
        result[..., _VBE] = p.polarity * forward[..., BE]
        result[..., _VBC] = p.polarity * forward[..., BC]
        sign = p.selection[..., _VSC, SUB]
        result[..., _VSC] = sign * forward[..., SUB] + p.lateral * result[..., _VBC]
        return result

    def evaluate(
        self, parameters: BipolarParameters, voltages: FloatArray, gmin: float
    ) -> Evaluation:
        p = parameters
        t = transport(p, voltages, gmin)
        current = _currents(p, t, voltages)
        jacobian = np.zeros((*current.shape, 6))
        _fill_junctions(jacobian, p, t)
        _fill_resistances(jacobian, p, t, voltages)
        return Evaluation(current, jacobian)

    def operating(
        self, parameters: BipolarParameters, voltages: FloatArray, gmin: float
    ) -> OperatingValues:
        p = parameters
        t = transport(p, voltages, gmin)
        capacitance, transcapacitance = _capacitances(p, t, voltages)
        values = _values(p, t, voltages, capacitance)
        return OperatingValues(capacitance, transcapacitance, values, _regions(p, t))


BIPOLAR = BipolarDevice()


def _currents(p: BipolarParameters, t: Transport, voltages: FloatArray) -> FloatArray:
    collector = p.polarity * t.collector
    base = p.polarity * t.base
    substrate = p.selection[..., _VSC, SUB] * t.substrate
    through_rb = t.base_siemens * voltages[..., _VRB]
    through_rc = p.collector_siemens * voltages[..., _VRC]
    through_re = p.emitter_siemens * voltages[..., _VRE]
    current = np.empty((*collector.shape, 7))
    current[..., _C] = through_rc
    current[..., _B] = through_rb
    current[..., _E] = through_re
    current[..., _S] = substrate
    current[..., _CI] = collector - through_rc - (1.0 - p.lateral) * substrate
    current[..., _BI] = base - through_rb - p.lateral * substrate
    current[..., _EI] = -collector - base - through_re
    return current


def _fill_junctions(jacobian: FloatArray, p: BipolarParameters, t: Transport) -> None:
    by_vbe = t.transconductance + t.output
    jacobian[..., _CI, _VBE] = by_vbe
    jacobian[..., _CI, _VBC] = -t.output - t.feedback
    jacobian[..., _BI, _VBE] = t.input
    jacobian[..., _BI, _VBC] = t.feedback
    jacobian[..., _EI, _VBE] = -by_vbe - t.input
    jacobian[..., _EI, _VBC] = t.output
    jacobian[..., _S, _VSC] = t.substrate_slope
    if not p.has_lateral:
        jacobian[..., _CI, _VSC] = -t.substrate_slope
        return
    on_base = p.lateral * t.substrate_slope
    jacobian[..., _CI, _VSC] = on_base - t.substrate_slope
    jacobian[..., _BI, _VSC] = -on_base
    jacobian[..., _S, _VBC] = -on_base
    jacobian[..., _BI, _VBC] += on_base


def _fill_resistances(
    jacobian: FloatArray, p: BipolarParameters, t: Transport, voltages: FloatArray
) -> None:
    jacobian[..., _C, _VRC] = p.collector_siemens
    jacobian[..., _CI, _VRC] = -p.collector_siemens
    jacobian[..., _E, _VRE] = p.emitter_siemens
    jacobian[..., _EI, _VRE] = -p.emitter_siemens
    jacobian[..., _B, _VRB] = t.base_siemens
    jacobian[..., _BI, _VRB] = -t.base_siemens
    if t.base_by_vbe is None or t.base_by_vbc is None:
        return
    drop = p.polarity * voltages[..., _VRB]
    by_vbe, by_vbc = drop * t.base_by_vbe, drop * t.base_by_vbc
    jacobian[..., _B, _VBE] = by_vbe
    jacobian[..., _B, _VBC] = by_vbc
    jacobian[..., _BI, _VBE] -= by_vbe
    jacobian[..., _BI, _VBC] -= by_vbc


def _diffusion(p: BipolarParameters, t: Transport) -> tuple[FloatArray, FloatArray]:
    """Forward diffusion capacitance dQ/dVbe and transcapacitance dQ/dVbc, in F.

    ``Q = TF·Ibe·(1 + XTF·(Ibe/(Ibe + ITF))²·exp(Vbc/(1.44·VTF)))/qb``, zero for Vbe ≤ 0.
    """
    vbc = t.voltage[..., BC]
    rise = p.transit_bias * np.exp(np.minimum(vbc * p.transit_per_volt, 100.0))
    bent = p.transit_current > 0.0
    total = np.where(bent, t.forward + p.transit_current, 1.0)
    ratio = np.where(bent, t.forward / np.where(total > 0.0, total, 1.0), 1.0)
    extra = rise * np.where(bent, ratio * ratio, 1.0)
    extra_slope = extra * np.where(bent, 3.0 - 2.0 * ratio, 1.0)
    charge = t.forward * (1.0 + extra) / t.charge
    by_vbe = (t.forward_slope * (1.0 + extra_slope) - charge * t.charge_by_vbe) / t.charge
    by_vbc = (t.forward * extra * p.transit_per_volt - charge * t.charge_by_vbc) / t.charge
    on = t.voltage[..., BE] > 0.0
    by_vbe = np.where(on, by_vbe, t.forward_slope)
    return p.forward_transit_s * by_vbe, p.forward_transit_s * np.where(on, by_vbc, 0.0)


def _capacitances(
    p: BipolarParameters, t: Transport, voltages: FloatArray
) -> tuple[FloatArray, FloatArray]:
    diffusion, across = _diffusion(p, t)
    vbe, vbc, vsub = t.voltage[..., BE], t.voltage[..., BC], t.voltage[..., SUB]
    outer = vbc + p.polarity * voltages[..., _VRB]
    inner_share, collector = p.internal_fraction, p.collector_junction
    substrate = p.substrate_junction.capacitance(vsub)
    capacitance = np.stack(
        [
            diffusion + p.emitter_junction.capacitance(vbe),
            p.reverse_transit_s * t.reverse_slope + inner_share * collector.capacitance(vbc),
            (1.0 - inner_share) * collector.capacitance(outer),
            (1.0 - p.lateral) * substrate,
            p.lateral * substrate,
        ],
        axis=-1,
    )
    return capacitance, across[..., None]


def _resistance(siemens: FloatArray) -> FloatArray:
    """Reciprocal; infinite for zero."""
    present = siemens != 0.0
    return np.where(present, 1.0 / np.where(present, siemens, 1.0), np.inf)


def _ratio(numerator: FloatArray, denominator: FloatArray) -> FloatArray:
    """Quotient; NaN where the denominator is zero."""
    present = denominator != 0.0
    return np.where(present, numerator / np.where(present, denominator, 1.0), np.nan)


def _values(
    p: BipolarParameters, t: Transport, voltages: FloatArray, capacitance: FloatArray
) -> Mapping[str, FloatArray]:
    substrate = p.selection[..., _VSC, SUB] * t.substrate
    ic = p.polarity * t.collector - (1.0 - p.lateral) * substrate
    ib = p.polarity * t.base - p.lateral * substrate
    vbe = voltages[..., _VBE] + voltages[..., _VRB] - voltages[..., _VRE]
    vbc = voltages[..., _VBC] + voltages[..., _VRB] - voltages[..., _VRC]
    vce = vbe - vbc
    vse = voltages[..., _VSC] - voltages[..., _VRC] + vce
    c_pi, c_mu, c_mu_x = (capacitance[..., k] for k in range(3))
    siemens = t.base_siemens
    return {
        "ic": ic,
        "ib": ib,
        "ie": -ic - ib - substrate,
        "isub": substrate,
        "vbe": vbe,
        "vbc": vbc,
        "vce": vce,
        "gm": t.transconductance,
        "r_pi": _resistance(t.input),
        "r_o": _resistance(t.output),
        "r_mu": _resistance(t.feedback),
        "r_x": np.where(siemens > 0.0, 1.0 / np.where(siemens > 0.0, siemens, 1.0), 0.0),
        "beta_dc": _ratio(ic, ib),
        "beta_ac": _ratio(t.transconductance, t.input),
        "c_pi": c_pi,
        "c_mu": c_mu,
        "c_mu_x": c_mu_x,
        "c_sub": capacitance[..., 3] + capacitance[..., 4],
        "f_t": _ratio(t.transconductance, 2.0 * np.pi * (c_pi + c_mu + c_mu_x)),
        "power": ic * vce + ib * vbe + substrate * vse,
    }


def _regions(p: BipolarParameters, t: Transport) -> np.ndarray[tuple[int, ...], np.dtype[np.str_]]:
    """A junction counts as on above half its critical voltage, some 0.36 V for small silicon."""
    on = t.voltage[..., :2] > 0.5 * p.critical[..., :2]
    emitter, collector = on[..., BE], on[..., BC]
    return np.where(
        emitter,
        np.where(collector, "saturated", "active"),
        np.where(collector, "reverse", "cut off"),
    )
