"""Parameters that every level of MOSFET derives from its cards in the same way.

Oxide and substrate. With an oxide thickness, ``Cox = εox/TOX``, ``KP = UO·Cox`` and, with NSUB,
PHI, GAMMA and the threshold follow from the substrate doping and the gate material unless stated.

Temperature. ``KP`` and the mobility fall as ``T^−1.5``, PHI and PB follow the gap, the threshold
follows PHI and the gap, the bulk junctions' saturation current follows the gap alone.

Source: the MOS models of SPICE (common practice); agrees with ngspice 39 in
tests/devices/test_mosfet.py [P: its output].
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.devices.fet_common import conductance, given
from tauledger.devices.interface import (
    ELEMENTARY_CHARGE_C,
    Card,
    FloatArray,
    Value,
    stack,
)
from tauledger.devices.junction import (
    Depletion,
    depletion_at,
    first_given,
    silicon_gap_ev,
    temperatures,
    thermal_voltage,
)
from tauledger.records import dataclass

VACUUM_F_PER_M = 8.854214871e-12
"""As SPICE's MOS models take it; 3e-6 above the true constant."""
OXIDE_F_PER_M = 3.9 * VACUUM_F_PER_M
SILICON_F_PER_M = 11.7 * VACUUM_F_PER_M
_INTRINSIC_PER_M3 = 1.45e16
"""Carriers in silicon at 27 °C as SPICE takes them."""
_DEFAULT_SIZE_M = 1e-4
"""SPICE's default of both W and L."""


@dataclass(frozen=True, slots=True)
class Process:
    """Channel constants at temperature in N-type sign, arrays (boards or 1, n)."""

    sign: FloatArray
    kelvin: FloatArray
    multiplier: FloatArray
    width_m: FloatArray
    length_m: FloatArray
    """Electrical size: drawn length less twice the lateral diffusion."""
    oxide_f_per_m2: FloatArray
    substrate_per_m3: FloatArray
    """NSUB, zero where the card gives none (or less than silicon has by itself)."""
    transconductance: FloatArray
    """KP at temperature, A/V²."""
    mobility_m2: FloatArray
    gamma: FloatArray
    phi_v: FloatArray
    builtin_v: FloatArray
    """Threshold less GAMMA·√PHI."""

    @property
    def threshold_v(self) -> FloatArray:
        """Threshold without bulk bias, positive for an enhancement device of either polarity."""
        return self.builtin_v + self.gamma * np.sqrt(self.phi_v)

    @property
    def beta(self) -> FloatArray:
        """KP·W/L of all devices in parallel, A/V²."""
        return self.transconductance * self.multiplier * self.width_m / self.length_m

    @property
    def oxide_f(self) -> FloatArray:
        """Capacitance of the whole gate oxide, in F."""
        return self.oxide_f_per_m2 * self.multiplier * self.width_m * self.length_m


@dataclass(frozen=True, slots=True)
class BulkJunction:
    """One of the two junctions to the bulk, all devices in parallel."""

    saturation_a: FloatArray
    bottom: Depletion
    side: Depletion

    def capacitance(self, voltage: FloatArray) -> FloatArray:
        """Depletion capacitance in F of bottom and side wall, bulk-to-diffusion voltage in V."""
        return self.bottom.capacitance(voltage) + self.side.capacitance(voltage)


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What lies round the channel: overlaps, series resistances, bulk junctions."""

    overlap_gs_f: FloatArray
    overlap_gd_f: FloatArray
    overlap_gb_f: FloatArray
    drain_conductance_s: FloatArray
    source_conductance_s: FloatArray
    drain: BulkJunction
    source: BulkJunction


def process(
    cards: Sequence[Card],
    temperature_c: Value,
    nominal_temperature_c: Value,
    *,
    default_oxide_m: float = 0.0,
    semi_empirical: bool = False,
) -> Process:
    """Channel constants of every card.

    ``default_oxide_m`` is TOX where a card gives none; 0 leaves the oxide out, as level 1 does.
    ``semi_empirical`` adds what only level 3 knows: the intrinsic density follows TNOM, XL, XW and
    WD correct the drawn size, DELVTO shifts the threshold.
    """
    kelvin, nominal = temperatures(cards, temperature_c, nominal_temperature_c)
    sign = np.array([[-1.0 if card.kind == "pmos" else 1.0 for card in cards]])
    thickness = stack(cards, "tox", default_oxide_m)
    oxide = np.where(thickness > 0.0, OXIDE_F_PER_M / np.where(thickness > 0.0, thickness, 1), 0.0)
    mobility = first_given(cards, ("uo", "u0"), 600.0) * 1e-4
    transconductance = np.where(
        given(cards, "kp") | (oxide == 0.0), stack(cards, "kp", 2e-5), mobility * oxide
    )
    substrate = np.where(oxide > 0.0, stack(cards, "nsub", 0.0) * 1e6, 0.0)
    intrinsic = _INTRINSIC_PER_M3 * (_intrinsic_growth(nominal) if semi_empirical else 1)
    substrate = np.where(substrate > intrinsic, substrate, 0.0)
    gamma, phi, threshold = _substrate(cards, sign, nominal, oxide, substrate, intrinsic)

    width = stack(cards, "w", _DEFAULT_SIZE_M, instance=True)
    length = stack(cards, "l", _DEFAULT_SIZE_M, instance=True) - 2.0 * stack(cards, "ld", 0.0)
    if semi_empirical:
        width = width + stack(cards, "xw", 0.0) - 2.0 * stack(cards, "wd", 0.0)
        length = length + stack(cards, "xl", 0.0)
        threshold = threshold + sign * first_given(cards, ("delvto", "delvt0"), 0.0)

    half = np.full_like(phi, 0.5)
    phi_now = depletion_at(0.0 * phi, phi, half, half, kelvin, nominal).potential_v
    gap_fall = 0.5 * (silicon_gap_ev(nominal) - silicon_gap_ev(kelvin))
    flat = threshold - gamma * np.sqrt(phi)
    slowing = (kelvin / nominal) ** -1.5
    return Process(
        sign=sign,
        kelvin=kelvin,
        multiplier=stack(cards, "m", 1.0, instance=True),
        width_m=width,
        length_m=length,
        oxide_f_per_m2=oxide,
        substrate_per_m3=substrate,
        transconductance=transconductance * slowing,
        mobility_m2=mobility * slowing,
        gamma=gamma,
        phi_v=phi_now,
        builtin_v=flat + sign * gap_fall + 0.5 * (phi_now - phi),
    )


def surroundings(
    cards: Sequence[Card],
    channel: Process,
    temperature_c: Value,
    nominal_temperature_c: Value,
    *,
    side_grading: float,
) -> Surroundings:
    """Overlaps, resistances and bulk junctions; ``side_grading`` is MJSW where none is given."""
    kelvin, nominal = temperatures(cards, temperature_c, nominal_temperature_c)
    gap = silicon_gap_ev(nominal) / thermal_voltage(nominal)
    growth = np.exp(gap - silicon_gap_ev(kelvin) / thermal_voltage(kelvin))
    density = stack(cards, "js", 0.0)
    areas = [stack(cards, name, 0.0, instance=True) for name in ("ad", "as")]
    by_area = (density > 0.0) & (areas[0] > 0.0) & (areas[1] > 0.0)
    tangent = np.clip(stack(cards, "fc", 0.5), 0.0, 0.95)
    potential = stack(cards, "pb", 0.8)

    def depletion(zero_bias: FloatArray, grading: FloatArray) -> Depletion:
        scaled = zero_bias * channel.multiplier
        return depletion_at(scaled, potential, grading, tangent, kelvin, nominal)

    def junction(area: FloatArray, total: str, perimeter: str) -> BulkJunction:
        saturation = np.where(by_area, density * area, stack(cards, "is", 1e-14))
        bottom = np.where(
            given(cards, total), stack(cards, total, 0.0), stack(cards, "cj", 0.0) * area
        )
        side = stack(cards, "cjsw", 0.0) * stack(cards, perimeter, 0.0, instance=True)
        return BulkJunction(
            saturation_a=saturation * channel.multiplier * growth,
            bottom=depletion(bottom, stack(cards, "mj", 0.5)),
            side=depletion(side, stack(cards, "mjsw", side_grading)),
        )

    def series(stated: str, squares: str) -> FloatArray:
        sheet = stack(cards, "rsh", 0.0) * stack(cards, squares, 1.0, instance=True)
        resistance = np.where(given(cards, stated), stack(cards, stated, 0.0), sheet)
        return conductance(resistance) * channel.multiplier

    width = channel.width_m * channel.multiplier
    return Surroundings(
        overlap_gs_f=stack(cards, "cgso", 0.0) * width,
        overlap_gd_f=stack(cards, "cgdo", 0.0) * width,
        overlap_gb_f=stack(cards, "cgbo", 0.0) * channel.length_m * channel.multiplier,
        drain_conductance_s=series("rd", "nrd"),
        source_conductance_s=series("rs", "nrs"),
        drain=junction(areas[0], "cbd", "pd"),
        source=junction(areas[1], "cbs", "ps"),
    )


def _substrate(
    cards: Sequence[Card],
    sign: FloatArray,
    nominal: FloatArray,
    oxide: FloatArray,
    substrate: FloatArray,
    intrinsic: FloatArray | float,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """GAMMA, PHI and threshold (N-type sign) at the nominal temperature, stated or derived."""
    doped = substrate > 0.0
    safe = np.where(doped, substrate, 1e21)
    from_doping = np.maximum(2.0 * thermal_voltage(nominal) * np.log(safe / intrinsic), 0.1)
    phi = np.where(given(cards, "phi") | ~doped, stack(cards, "phi", 0.6), from_doping)
    phi = np.maximum(phi, 0.1)
    body = np.sqrt(2.0 * SILICON_F_PER_M * ELEMENTARY_CHARGE_C * safe)
    per_oxide = 1.0 / np.where(oxide > 0.0, oxide, 1.0)
    gamma = np.where(given(cards, "gamma") | ~doped, stack(cards, "gamma", 0.0), body * per_oxide)
    # Work functions: silicon's affinity is 3.25 V in SPICE, an aluminium gate (TPG=0) lies at 3.2.
    gap = silicon_gap_ev(nominal)
    gate_type = stack(cards, "tpg", 1.0)
    polysilicon = 3.25 + 0.5 * gap - sign * gate_type * 0.5 * gap
    gate = np.where(gate_type == 0.0, 3.2, polysilicon)
    difference = gate - (3.25 + 0.5 * gap + sign * 0.5 * phi)
    surface = stack(cards, "nss", 0.0) * 1e4 * ELEMENTARY_CHARGE_C * per_oxide
    derived = sign * (difference - surface) + gamma * np.sqrt(phi) + phi
    stated = given(cards, "vto", "vt0") | ~doped
    threshold = np.where(stated, sign * first_given(cards, ("vto", "vt0"), 0.0), derived)
    return gamma, phi, threshold


def _intrinsic_growth(nominal: FloatArray) -> FloatArray:
    """Intrinsic density at the nominal temperature relative to 300 K."""
    gap = silicon_gap_ev(nominal)
    warm = 0.5 * gap * (1.0 / thermal_voltage(np.asarray(300.0)) - 1.0 / thermal_voltage(nominal))
    growth: FloatArray = (nominal / 300.0) ** 1.5 * np.exp(warm)
    return growth
