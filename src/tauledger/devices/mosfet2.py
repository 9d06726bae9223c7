"""MOS field-effect transistor, SPICE level 2: bulk charge along the channel, from geometry.

The bulk charge varies along the channel, ``b = PHI − VBS``::

    ID = KP·(W/L)·U·((VGS − VBIN − η·w/2)·w − ⅔·γ·((b + w)^1.5 − b^1.5)) / (1 − ΔL/L)

with ``w = min(VDS, VDSAT)``. XJ takes from γ the charge that source and drain control, DELTA adds
the narrow channel's, UCRIT and UEXP lower the mobility with gate voltage, VMAX limits the drift
velocity (VDSAT is then the root of Baum's quartic), LAMBDA or NSUB shorten the channel, NFS adds
an exponential below threshold.

Derivatives are those of the current, by forward accumulation (:mod:`tauledger.devices.dual`).

Source: A. Vladimirescu and S. Liu, "The simulation of MOS integrated circuits using SPICE2",
UCB/ERL M80/7 (1980) [M]; agrees with ngspice 39 in tests/devices/test_mosfet2.py [P: its output].
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.devices.dual import (
    Dual,
    choose,
    exponential,
    inputs,
    larger,
    logarithm,
    root,
    smaller,
)
from tauledger.devices.interface import ELEMENTARY_CHARGE_C, Card, FloatArray, stack
from tauledger.devices.junction import first_given, thermal_voltage
from tauledger.devices.mosfet_common import Channel, Mosfet, depletion_root
from tauledger.devices.mosfet_process import SILICON_F_PER_M, Process, Surroundings
from tauledger.devices.quartic import smallest_positive_root
from tauledger.records import dataclass

_DEFAULT_OXIDE_M = 1e-7
_UNDOPED_LEAST_M = 0.25e-6
"""Channel length at which punch-through is taken up where NSUB is not given."""


@dataclass(frozen=True, slots=True)
class BulkChargeLaw:
    """Constants of the level-2 channel, arrays (boards or 1, n)."""

    beta: FloatArray
    gamma: FloatArray
    phi_v: FloatArray
    builtin_v: FloatArray
    length_m: FloatArray
    narrow: FloatArray
    """Narrow-channel charge per volt of bulk depletion, ``η − 1``."""
    depletion_m: FloatArray
    """Depletion width per root volt; zero without NSUB."""
    junction_m: FloatArray
    critical_v: FloatArray
    """Overdrive above which the mobility falls."""
    critical_exponent: FloatArray
    mobility_m2: FloatArray
    """At the nominal temperature: the velocity limit of level 2 does not follow the device's."""
    drift_m_per_s: FloatArray
    charge_factor: FloatArray
    modulation_per_v: FloatArray
    surface: FloatArray
    """Fast surface states relative to the oxide; zero without NFS."""
    thermal_v: FloatArray
    least_m: FloatArray
    """Channel length below which punch-through is taken up."""


class BulkChargeMosfet(Mosfet[BulkChargeLaw]):
    """The level-2 MOSFET, both polarities."""

    name = "mosfet2"
    default_oxide_m = _DEFAULT_OXIDE_M

    def law(self, cards: Sequence[Card], channel: Process, around: Surroundings) -> BulkChargeLaw:
        oxide, doping = channel.oxide_f_per_m2, channel.substrate_per_m3
        safe = np.where(doping > 0.0, doping, 1.0)
        depletion = np.where(
            doping > 0.0, np.sqrt(2.0 * SILICON_F_PER_M / (ELEMENTARY_CHARGE_C * safe)), 0.0
        )
        narrow = stack(cards, "delta", 0.0) * 0.25 * np.pi * SILICON_F_PER_M / oxide
        least = depletion * np.sqrt(around.drain.bottom.potential_v)
        return BulkChargeLaw(
            beta=channel.beta,
            gamma=channel.gamma,
            phi_v=channel.phi_v,
            builtin_v=channel.builtin_v,
            length_m=channel.length_m,
            narrow=narrow / channel.width_m,
            depletion_m=depletion,
            junction_m=stack(cards, "xj", 0.0),
            critical_v=stack(cards, "ucrit", 1e4) * 100.0 * SILICON_F_PER_M / oxide,
            critical_exponent=stack(cards, "uexp", 0.0),
            mobility_m2=first_given(cards, ("uo", "u0"), 600.0) * 1e-4,
            drift_m_per_s=stack(cards, "vmax", 0.0),
            charge_factor=stack(cards, "neff", 1.0),
            modulation_per_v=stack(cards, "lambda", 0.0),
            surface=ELEMENTARY_CHARGE_C * stack(cards, "nfs", 0.0) * 1e4 / oxide,
            thermal_v=thermal_voltage(channel.kelvin),
            least_m=np.where(doping > 0.0, least, _UNDOPED_LEAST_M),
        )

    def channel(
        self, law: BulkChargeLaw, vgs: FloatArray, vds: FloatArray, vbs: FloatArray
    ) -> Channel:
        gate, drain, bulk = inputs(vgs, vds, vbs)
        source_root = depletion_root(law.phi_v, bulk)
        gamma, fall = _body(law, source_root, depletion_root(law.phi_v, bulk - drain), bulk)
        eta = 1.0 + law.narrow
        builtin = law.builtin_v + law.narrow * (law.phi_v - bulk)
        threshold = builtin + gamma * source_root
        weak = law.surface > 0.0
        below = law.thermal_v * (1.0 + law.surface + law.narrow - fall)
        onset = choose(weak, threshold + below, threshold)
        driven = larger(gate, onset)
        mobility = _mobility(law, gate - onset)
        swing = (driven - builtin) / eta
        saturation = _saturation(law, swing, gamma / eta, mobility, bulk, source_root)

        used = smaller(drain, saturation)
        end = depletion_root(law.phi_v, bulk - used)
        charge = end * end * end - source_root * source_root * source_root
        current = (driven - builtin - 0.5 * eta * used) * used - gamma * charge / 1.5
        length = _effective_length(law, drain, saturation, mobility)
        current = law.beta * law.length_m * mobility * current / length
        falling = smaller((gate - onset) / below, 0.0)
        conducting = (gate.value > onset.value) | weak & (saturation.value > 0.0)
        current = choose(conducting, current * exponential(falling), 0.0)
        return Channel(
            current=current.value,
            gm=current.slope[0],
            gds=current.slope[1],
            gmb=current.slope[2],
            threshold=onset.value,
            saturation=np.where(conducting, saturation.value, 0.0),
        )


def _body(law: BulkChargeLaw, source_root: Dual, drain_root: Dual, bulk: Dual) -> tuple[Dual, Dual]:
    """γ less what the junctions control, and the derivative of ``γ·√(PHI − VBS)`` to VBS."""
    shared = (law.junction_m > 0.0) & (law.depletion_m > 0.0)
    depth = np.where(shared, law.junction_m, 1.0)
    width = np.where(shared, law.depletion_m, 0.0)
    source_side = root(1.0 + 2.0 * width / depth * source_root)
    drain_side = root(1.0 + 2.0 * width / depth * drain_root)
    share = 0.5 * depth / law.length_m * (source_side + drain_side - 2.0)
    gamma = law.gamma * (1.0 - share)
    source_slope = _root_slope(law.phi_v, source_root, bulk.value <= 0.0)
    drain_slope = -0.5 / drain_root
    growth = source_slope / source_side + drain_slope / drain_side
    gamma_slope = -0.5 * law.gamma * width / law.length_m * growth
    return gamma, gamma * source_slope + gamma_slope * source_root


def _root_slope(phi: FloatArray, value: Dual, reverse: np.ndarray) -> Dual:
    """Derivative of :func:`depletion_root` to the bulk voltage, itself with derivatives."""
    return choose(reverse, -0.5 / value, -0.5 / phi**1.5 * (value * value))


def _mobility(law: BulkChargeLaw, overdrive: Dual) -> Dual:
    """Mobility relative to its low-field value: ``(critical/overdrive)^UEXP`` above critical."""
    ratio = larger(overdrive, law.critical_v) / law.critical_v
    return exponential(-law.critical_exponent * logarithm(ratio))


def _saturation(
    law: BulkChargeLaw,
    swing: Dual,
    gamma: Dual,
    mobility: Dual,
    bulk: Dual,
    source_root: Dual,
) -> Dual:
    """Drain voltage of pinch-off (Grove and Frohman), or with VMAX of velocity saturation."""
    depletion = law.phi_v - bulk
    total = larger(swing + depletion, 0.0)
    # γ²·(1 − √(1 + 4·total/γ²))/2, written so that γ = 0 needs no case of its own.
    pinch = 0.5 * gamma * (gamma - root(gamma * gamma + 4.0 * total))
    pinch = larger(choose(swing.value + depletion.value > 0.0, swing + pinch, 0.0), 0.0)
    fast = law.drift_m_per_s > 0.0
    if not fast.any():
        return pinch
    drift = np.where(fast, law.drift_m_per_s, 1.0)
    critical = drift * law.length_m / law.mobility_m2 / mobility
    reach = swing + depletion
    cube = source_root * source_root * source_root
    edge, found = smallest_positive_root(
        4.0 / 3.0 * gamma,
        -2.0 * (reach + critical),
        -2.0 * (gamma * critical),
        2.0 * (reach * (depletion + critical)) - depletion * depletion - 4.0 / 3.0 * (gamma * cube),
    )
    return choose(fast & found, edge * edge - depletion, pinch)


def _effective_length(law: BulkChargeLaw, drain: Dual, saturation: Dual, mobility: Dual) -> Dual:
    """Channel length less what the drain's depletion takes, in m."""
    excess = drain - saturation
    quarter = 0.25 * excess
    smooth = root(quarter + root(1.0 + quarter * quarter))
    lag = np.where(law.drift_m_per_s > 0.0, law.drift_m_per_s, 1.0) * 0.5 / law.mobility_m2
    width = law.depletion_m / np.sqrt(law.charge_factor)
    lost = width * (lag * width / mobility)
    reach = root(lost * lost / np.maximum(width, 1e-30) ** 2 + larger(excess, 0.0)) * width - lost
    from_doping = choose(law.drift_m_per_s > 0.0, reach, law.depletion_m * smooth)
    stated = law.modulation_per_v * law.length_m * drain
    length = law.length_m - choose(law.modulation_per_v > 0.0, stated, from_doping)
    short = smaller(length, law.least_m)
    punch_through = law.least_m / (1.0 + (law.least_m - short) / law.least_m)
    return choose(length.value < law.least_m, punch_through, length)


MOSFET2 = BulkChargeMosfet()
