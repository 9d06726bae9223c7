"""MOS field-effect transistor, SPICE level 3: the semi-empirical short-channel model.

The threshold moves with drain voltage (ETA) and with the short- and narrow-channel factors (XJ,
DELTA); the mobility falls with gate voltage (THETA) and with velocity saturation (VMAX); KAPPA
shortens the channel beyond pinch-off; NFS adds an exponential below threshold. With the overdrive
``v = VGS − VT`` and ``w = min(VDS, VDSAT)``::

    ID = KP·(W/L)·F·w·(v − (1 + FB)·w/2) / (1 − ΔL/L)

Derivatives are those of the current, by forward accumulation (:mod:`tauledger.devices.dual`).

Source: A. Vladimirescu and S. Liu, "The simulation of MOS integrated circuits using SPICE2",
UCB/ERL M80/7 (1980) [M]; agrees with ngspice 39 in tests/devices/test_mosfet3.py [P: its output].
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.devices.dual import Dual, choose, exponential, inputs, larger, root, smaller
from tauledger.devices.interface import ELEMENTARY_CHARGE_C, Card, FloatArray, stack
from tauledger.devices.junction import thermal_voltage
from tauledger.devices.mosfet_common import Channel, Mosfet, depletion_root
from tauledger.devices.mosfet_process import SILICON_F_PER_M, Process, Surroundings
from tauledger.records import dataclass

_DEFAULT_OXIDE_M = 1e-7
_ETA_F_M = 8.15e-22
"""Scale of ETA, fixed by the model."""
_DEPLETION_FIT = (0.0631353, 0.8013292, -0.01110777)
"""Dang's polynomial for the depletion width round a cylindrical junction."""
_LEAST_CONDUCTANCE_S = 1e-12
_TINY = 1e-30


@dataclass(frozen=True, slots=True)
class SemiEmpiricalLaw:
    """Constants of the level-3 channel, arrays (boards or 1, n)."""

    beta: FloatArray
    gamma: FloatArray
    phi_v: FloatArray
    builtin_v: FloatArray
    length_m: FloatArray
    feedback: FloatArray
    """Threshold fall per volt of drain voltage."""
    narrow_v: FloatArray
    """Narrow-channel charge per volt of bulk depletion."""
    junction_m: FloatArray
    diffusion_m: FloatArray
    depletion_m: FloatArray
    """Depletion width per root volt; zero without NSUB."""
    theta_per_v: FloatArray
    mobility_m2: FloatArray
    drift_m_per_s: FloatArray
    kappa: FloatArray
    surface: FloatArray
    """Fast surface states relative to the oxide; zero without NFS."""
    thermal_v: FloatArray


class SemiEmpiricalMosfet(Mosfet[SemiEmpiricalLaw]):
    """The level-3 MOSFET, both polarities."""

    name = "mosfet3"
    default_oxide_m = _DEFAULT_OXIDE_M
    semi_empirical = True
    leakage_tail = True

    def law(
        self, cards: Sequence[Card], channel: Process, around: Surroundings
    ) -> SemiEmpiricalLaw:
        oxide, length = channel.oxide_f_per_m2, channel.length_m
        doping = channel.substrate_per_m3
        safe = np.where(doping > 0.0, doping, 1.0)
        depletion = np.sqrt(2.0 * SILICON_F_PER_M / (ELEMENTARY_CHARGE_C * safe))
        narrow = stack(cards, "delta", 0.0) * 0.5 * np.pi * SILICON_F_PER_M / oxide
        return SemiEmpiricalLaw(
            beta=channel.beta,
            gamma=channel.gamma,
            phi_v=channel.phi_v,
            builtin_v=channel.builtin_v,
            length_m=length,
            feedback=stack(cards, "eta", 0.0) * _ETA_F_M / (oxide * length**3),
            narrow_v=narrow / channel.width_m,
            junction_m=stack(cards, "xj", 0.0),
            diffusion_m=stack(cards, "ld", 0.0),
            depletion_m=np.where(doping > 0.0, depletion, 0.0),
            theta_per_v=stack(cards, "theta", 0.0),
            mobility_m2=channel.mobility_m2,
            drift_m_per_s=stack(cards, "vmax", 0.0),
            kappa=stack(cards, "kappa", 0.2),
            surface=ELEMENTARY_CHARGE_C * stack(cards, "nfs", 0.0) * 1e4 / oxide,
            thermal_v=thermal_voltage(channel.kelvin),
        )

    def channel(
        self, law: SemiEmpiricalLaw, vgs: FloatArray, vds: FloatArray, vbs: FloatArray
    ) -> Channel:
        gate, drain, bulk = inputs(vgs, vds, vbs)
        surface_root = depletion_root(law.phi_v, bulk)
        charge, body = _bulk_charge(law, surface_root)
        threshold = law.builtin_v - law.feedback * drain + charge
        below = 1.0 + law.surface + charge / (2.0 * surface_root * surface_root)
        weak = law.surface > 0.0
        onset = choose(weak, threshold + law.thermal_v * below, threshold)
        overdrive = larger(gate, onset) - threshold
        mobility = 1.0 / (1.0 + law.theta_per_v * overdrive)
        saturation, inverse_critical = _saturation(law, overdrive, body, mobility)
        used = smaller(drain, saturation)
        slowed = 1.0 / (1.0 + used * inverse_critical)
        current = law.beta * mobility * slowed * used * (overdrive - 0.5 * (1.0 + body) * used)
        shortening = _shortening(law, drain, saturation, current, slowed, inverse_critical)
        current = current / (1.0 - shortening / law.length_m)
        falling = smaller((gate - onset) / (law.thermal_v * below), 0.0)
        current = choose(weak, current * exponential(falling), current)
        return Channel(
            current=current.value,
            gm=current.slope[0],
            gds=current.slope[1],
            gmb=current.slope[2],
            threshold=onset.value,
            saturation=saturation.value,
        )


def _bulk_charge(law: SemiEmpiricalLaw, surface_root: Dual) -> tuple[Dual, Dual]:
    """Bulk charge over the oxide in V, and its growth FB along the channel."""
    gamma = law.gamma * _short_channel(law, surface_root)
    body = gamma / (4.0 * surface_root) + law.narrow_v
    charge = gamma * surface_root + law.narrow_v * (surface_root * surface_root)
    return charge, body


def _short_channel(law: SemiEmpiricalLaw, surface_root: Dual) -> Dual:
    """Share of the bulk charge the gate controls; one without XJ or NSUB."""
    shared = (law.junction_m > 0.0) & (law.depletion_m > 0.0)
    depth = np.where(shared, law.junction_m, 1.0)
    width = law.depletion_m / depth * surface_root
    constant, linear, square = _DEPLETION_FIT
    round_corner = constant + width * (linear + square * width)
    below_junction = width / (1.0 + width)
    side = law.diffusion_m / depth
    left = root(1.0 - below_junction * below_junction)
    factor = 1.0 - depth / law.length_m * ((round_corner + side) * left - side)
    return choose(shared, factor, 1.0)


def _saturation(
    law: SemiEmpiricalLaw, overdrive: Dual, body: Dual, mobility: Dual
) -> tuple[Dual, Dual]:
    """Drain voltage of saturation, and the inverse of the critical voltage of VMAX (or 0)."""
    pinch = overdrive / (1.0 + body)
    fast = law.drift_m_per_s > 0.0
    drift = np.where(fast, law.drift_m_per_s, 1.0)
    critical = law.length_m * drift / (law.mobility_m2 * mobility)
    with_drift = pinch + critical - root(pinch * pinch + critical * critical)
    return choose(fast, with_drift, pinch), choose(fast, 1.0 / critical, 0.0)


def _shortening(
    law: SemiEmpiricalLaw,
    drain: Dual,
    saturation: Dual,
    current: Dual,
    slowed: Dual,
    inverse_critical: Dual,
) -> Dual:
    """Length by which the drain's depletion shortens the channel, in m."""
    strength = law.kappa * law.depletion_m**2
    saturated = drain.value > saturation.value
    end = choose(saturation.value > _TINY, saturation, 1.0)
    excess = larger(drain - saturation, 0.0)
    # Without VMAX the shortening starts in the triode region, with the fourth power of VDS/VDSAT.
    ratio = choose(saturated, 1.0, drain / end)
    before = ratio * ratio
    gentle = root(strength * (excess + 0.125 * saturation)) * (before * before)

    conductance = current * (1.0 - slowed) * inverse_critical
    field_m = law.kappa * current / (law.length_m * larger(conductance, _LEAST_CONDUCTANCE_S))
    half = 0.5 * law.depletion_m**2 * field_m
    abrupt = choose(saturated, root(half * half + strength * excess) - half, 0.0)

    length = choose(law.drift_m_per_s > 0.0, abrupt, gentle)
    limit = 0.5 * law.length_m
    punch_through = law.length_m - law.length_m**2 / (4.0 * larger(length, limit))
    return choose(length.value > limit, punch_through, length)


MOSFET3 = SemiEmpiricalMosfet()
