"""Parameters of the Gummel-Poon transistor, read from model cards and moved to temperature.

The laws are SPICE's for TLEV = TLEVC = 0 (common practice; checked against ngspice 39 at −40, 27
and 125 °C in tests/devices/test_bipolar.py): IS, IBE, IBC and ISS follow
``exp((T/Tnom − 1)·EG/Vt)·(T/Tnom)^XTI``, ISE and ISC the same to the power 1/NE and 1/NC over the
growth of beta, BF and BR ``(T/Tnom)^XTB``, and most parameters a quadratic in T − Tnom
(TRB1, TRB2 for RB, and so on). Multiplier ``m`` acts as so many devices in parallel.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.devices import junction
from tauledger.devices.interface import Card, FloatArray, Value, columns
from tauledger.devices.junction import Depletion
from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class BipolarParameters:
    """At temperature, scaled by area and multiplier; arrays (boards or 1, n) unless said."""

    polarity: FloatArray
    """+1 for NPN, −1 for PNP."""
    lateral: FloatArray
    """1 where the substrate junction is on the base, else 0."""
    selection: FloatArray
    """(1, n, 3, 3): branch voltages (Vbe, Vbc, Vsc) to forward junction voltages."""
    per_volt: FloatArray
    """(boards or 1, n, 5): 1/(emission coefficient · Vt) of each diode law."""
    saturation: FloatArray
    """(boards or 1, n, 5): saturation current of each diode law, in A."""
    slope: FloatArray
    """(boards or 1, n, 5): product of the two above, in S."""
    junction_thermal: FloatArray
    """(boards or 1, n, 3): n·Vt of the ideal laws, in V."""
    critical: FloatArray
    """(boards or 1, n, 3): voltage above which steps are limited."""
    multiplier: FloatArray
    """m: gmin stands across the junctions of every device in parallel."""
    per_forward_beta: FloatArray
    per_reverse_beta: FloatArray
    per_early_forward: FloatArray
    per_early_reverse: FloatArray
    per_knee_forward: FloatArray
    per_knee_reverse: FloatArray
    rolloff_exponent: FloatArray
    collector_siemens: FloatArray
    emitter_siemens: FloatArray
    minimum_base_ohm: FloatArray
    modulated_base_ohm: FloatArray
    """RB − RBM; both zero where there is no base resistance."""
    per_half_current: FloatArray
    """1/IRB, zero without crowding."""
    emitter_junction: Depletion
    collector_junction: Depletion
    substrate_junction: Depletion
    internal_fraction: FloatArray
    """XCJC: share of the base-collector capacitance on the internal base."""
    forward_transit_s: FloatArray
    reverse_transit_s: FloatArray
    transit_bias: FloatArray
    """XTF."""
    transit_per_volt: FloatArray
    """1/(1.44·VTF)."""
    transit_current: FloatArray
    """ITF in A."""
    has_knee: bool
    has_base_resistance: bool
    is_base_modulated: bool
    is_crowded: bool
    has_lateral: bool


def prepare(
    cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
) -> BipolarParameters:
    """Read all cards at once; temperatures in °C, each one number or (boards,)."""
    kelvin, nominal = junction.temperatures(cards, temperature_c, nominal_temperature_c)
    card = _Reader(cards, kelvin, nominal)
    polarity = np.array([[1.0 if c.kind == "npn" else -1.0 for c in cards]])
    lateral = np.array([[float(_is_lateral(c)) for c in cards]])
    saturation, per_volt = card.junctions(lateral)
    rb = card.scaled("rb", "trb", 0.0) / card.area
    minimum = card.minimum_base() / card.area
    crowding = card.scaled("irb", "tirb", 0.0) * card.area
    resistive = rb > 0.0
    minimum, swing = np.where(resistive, minimum, 0.0), np.where(resistive, rb - minimum, 0.0)
    per_knee = [
        junction.inverse(card.scaled(name, "t" + name, 0.0)) / card.area for name in ("ikf", "ikr")
    ]
    thermal = 1.0 / per_volt[..., [0, 2, 4]]
    critical = junction.critical_voltage(thermal, saturation[..., [0, 2, 4]])
    # Without ISS there is no exponential on the substrate, and no step to limit.
    critical[..., 2] = np.where(saturation[..., 4] > 0.0, critical[..., 2], np.inf)
    return BipolarParameters(
        polarity=polarity,
        lateral=lateral,
        selection=_selection(polarity, lateral),
        per_volt=per_volt,
        saturation=saturation,
        slope=saturation * per_volt,
        junction_thermal=thermal,
        critical=critical,
        multiplier=card.multiplier,
        per_forward_beta=junction.inverse(card.scaled("bf", "tbf", 100.0) * card.beta_growth),
        per_reverse_beta=junction.inverse(card.scaled("br", "tbr", 1.0) * card.beta_growth),
        per_early_forward=junction.inverse(card.scaled("vaf", "tvaf", 0.0, "va")),
        per_early_reverse=junction.inverse(card.scaled("var", "tvar", 0.0, "vb")),
        per_knee_forward=per_knee[0],
        per_knee_reverse=per_knee[1],
        rolloff_exponent=card.model("nkf", 0.5, "nk"),
        collector_siemens=junction.inverse(card.scaled("rc", "trc", 0.0)) * card.area,
        emitter_siemens=junction.inverse(card.scaled("re", "tre", 0.0)) * card.area,
        minimum_base_ohm=minimum,
        modulated_base_ohm=swing,
        per_half_current=junction.inverse(crowding),
        emitter_junction=card.depletion("e", card.area),
        collector_junction=card.depletion("c", card.collector_area(lateral)),
        substrate_junction=card.depletion("s", card.collector_area(1.0 - lateral)),
        internal_fraction=card.model("xcjc", 1.0),
        forward_transit_s=card.scaled("tf", "ttf", 0.0),
        reverse_transit_s=card.scaled("tr", "ttr", 0.0),
        transit_bias=card.model("xtf", 0.0),
        transit_per_volt=junction.inverse(1.44 * card.model("vtf", 0.0)),
        transit_current=card.scaled("itf", "titf", 0.0) * card.area,
        has_knee=bool(np.any(per_knee[0]) or np.any(per_knee[1])),
        has_base_resistance=bool(np.any(resistive)),
        is_base_modulated=bool(np.any(swing)),
        is_crowded=bool(np.any(crowding)),
        has_lateral=bool(np.any(lateral)),
    )


def _is_lateral(card: Card) -> bool:
    """SUBS = −1 is lateral, 1 vertical; unstated, a PNP is lateral, as in ngspice."""
    unstated = 1.0 if card.kind == "npn" else -1.0
    return float(np.ravel(card.model.get("subs", unstated))[0]) < 0.0


def _selection(polarity: FloatArray, lateral: FloatArray) -> FloatArray:
    """Matrix from (Vbe, Vbc, Vsc) to forward junction voltages, (1, n, 3, 3).

    The substrate junction of a lateral device is across Vsc − Vbc.
    """
    matrix = np.zeros((*polarity.shape, 3, 3))
    sign = polarity * (1.0 - 2.0 * lateral)
    matrix[..., 0, 0] = polarity
    matrix[..., 1, 1] = polarity
    matrix[..., 2, 2] = sign
    matrix[..., 1, 2] = -sign * lateral
    return matrix


def _stack_laws(laws: Sequence[FloatArray]) -> FloatArray:
    return np.stack(np.broadcast_arrays(*laws), axis=-1)


class _Reader:
    """The cards of all instances with their temperatures and areas."""

    def __init__(self, cards: Sequence[Card], kelvin: FloatArray, nominal: FloatArray) -> None:
        self.cards = cards
        # A card states a dozen of the hundred names asked for: most questions end here.
        self._stated = frozenset().union(*(card.model for card in cards))
        self.kelvin, self.nominal = kelvin, nominal
        self.difference = kelvin - nominal
        self.multiplier = columns([c.instance.get("m", 1.0) for c in cards])
        area = columns([c.instance.get("area", 1.0) for c in cards])
        self.area = area * self.multiplier
        self._base_area, self._collector_area = (
            columns([c.instance.get(n, c.instance.get("area", 1.0)) for c in cards])
            * self.multiplier
            for n in ("areab", "areac")
        )
        self._emitter_area = area
        self.beta_growth = (kelvin / nominal) ** self.model("xtb", 0.0)

    def model(self, name: str, default: float, *aliases: str) -> FloatArray:
        names = (name, *aliases)
        if self._stated.isdisjoint(names):
            return np.full((1, len(self.cards)), default)
        return junction.first_given(self.cards, names, default)

    def scaled(self, name: str, prefix: str, default: float, *aliases: str) -> FloatArray:
        """A parameter times its quadratic in temperature."""
        value = self.model(name, default, *aliases)
        if self._stated.isdisjoint((prefix, prefix + "1", prefix + "2")):
            return value
        return value * junction.quadratic(self.cards, prefix, self.difference)

    def collector_area(self, lateral: FloatArray) -> FloatArray:
        """Area of the base-collector junction: areab, or areac for a lateral device."""
        return np.where(lateral > 0.0, self._collector_area, self._base_area)

    def minimum_base(self) -> FloatArray:
        """RBM at temperature, RB when not stated."""
        stated = columns([c.model.get("rbm", c.model.get("rb", 0.0)) for c in self.cards])
        return stated * junction.quadratic(self.cards, "trm", self.difference)

    def junctions(self, lateral: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Saturation current and 1/(n·Vt) of the five diode laws."""
        growth = junction.saturation_factor(
            self.kelvin, self.nominal, self.model("eg", 1.11), self.model("xti", 3.0)
        )
        collector = self.collector_area(lateral)
        main = self.model("is", 1e-16) * np.exp(growth)
        laws = [
            self._unless_both("ibe", main, np.exp(growth)) * self.area,
            self.model("ise", 0.0, "c2") * np.exp(growth / self.model("ne", 1.5)) * self.area,
            self._unless_both("ibc", main * self._emitter_area, np.exp(growth)) * collector,
            self.model("isc", 0.0, "c4") * np.exp(growth / self.model("nc", 2.0)) * collector,
            self.model("iss", 0.0) * np.exp(growth) * self.area,
        ]
        laws[1], laws[3] = laws[1] / self.beta_growth, laws[3] / self.beta_growth
        factors = [
            self.scaled("nf", "tnf", 1.0),
            self.scaled("ne", "tne", 1.5),
            self.scaled("nr", "tnr", 1.0),
            self.scaled("nc", "tnc", 2.0),
            self.scaled("ns", "tns", 1.0),
        ]
        thermal = junction.thermal_voltage(self.kelvin)
        return _stack_laws(laws), 1.0 / (_stack_laws(factors) * thermal[..., None])

    def _unless_both(self, name: str, main: FloatArray, growth: FloatArray) -> FloatArray:
        """IBE or IBC where a card states both (ngspice ignores one alone), else from IS."""
        both = np.array([["ibe" in c.model and "ibc" in c.model for c in self.cards]])
        return np.where(both, self.model(name, 0.0) * growth, main)

    def depletion(self, letter: str, area: FloatArray) -> Depletion:
        """Junction ``e``, ``c`` or ``s`` from CJE VJE MJE and their like."""
        capacitance, potential, grading = {
            "e": (("cje",), ("vje", "pe"), ("mje", "me")),
            "c": (("cjc",), ("vjc", "pc"), ("mjc", "mc")),
            "s": (("cjs", "ccs", "csub"), ("vjs", "ps"), ("mjs", "ms")),
        }[letter]
        steepness = 0.0 if letter == "s" else 0.33
        tangent = np.zeros_like(self.kelvin) if letter == "s" else self.model("fc", 0.5)
        return junction.depletion_at(
            self.model(capacitance[0], 0.0, *capacitance[1:]) * area,
            self.model(potential[0], 0.75, *potential[1:]),
            self.model(grading[0], steepness, *grading[1:])
            * junction.quadratic(self.cards, "tm" + "j" + letter, self.difference),
            tangent,
            self.kelvin,
            self.nominal,
        )
