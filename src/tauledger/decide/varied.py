"""What differs from board to board: tolerance tables and a circuit → independent draws.

A *draw* is one independent quantity with its window. A *target* is one value of the circuit and
the draws that move it: parts of a matched class share a draw and have a small one of their own.
"""

from __future__ import annotations

import fnmatch
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from tauledger.circuit.elements import (
    BipolarTransistor,
    Capacitor,
    Circuit,
    Element,
    Inductor,
    JunctionFet,
    MosFet,
    Resistor,
    SemiconductorDevice,
    VoltageSource,
)
from tauledger.configuration.settings import PathSettings, TransistorClass
from tauledger.configuration.tolerances import Window
from tauledger.decide.asked import QUANTITIES, SUPPLY, TEMPERATURE, VALUE, VOLTS, Asked
from tauledger.devices.interface import (
    BOLTZMANN_J_PER_K,
    ELEMENTARY_CHARGE_C,
    ZERO_CELSIUS_K,
)
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass

FloatArray = NDArray[np.float64]


_LEAST = -0.99
"""Relative deviations stop here."""


@dataclass(frozen=True, slots=True)
class Draw:
    """One independent quantity."""

    label: str
    low: float
    high: float
    unit: str
    """Empty for a relative deviation, else ``V`` or ``°C`` for a shift."""


@dataclass(frozen=True, slots=True)
class Target:
    """One value of the circuit; its deviation is the sum of its draws'."""

    part: str
    quantity: str
    draws: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Variety:
    """Everything that differs between boards of a circuit."""

    draws: tuple[Draw, ...]
    targets: tuple[Target, ...]
    fixed: tuple[str, ...]
    """Resistors, capacitors, inductors and transistors for which no tolerance is known."""


def variety_of(
    circuit: Circuit, source: str, settings: PathSettings | None, asked: Sequence[Asked] = ()
) -> Variety:
    """Collect the draws of a circuit whose signal source, which does not vary, is ``source``.

    Raises ProblemError when no tolerance is known for anything, or one fits no part.
    """
    builder = _Builder()
    fixed = []
    used: set[Asked] = set()
    for element in circuit.elements:
        if element.name == source:
            continue
        windows = list(_windows(element, settings, asked, used))
        if not windows and _is_part(element):
            fixed.append(element.name)
        for quantity, window, group, own in windows:
            builder.add(element, quantity, window, group, own)
    builder.add_temperature(_temperature(circuit, settings, asked, used))
    if unused := [entry for entry in asked if entry not in used]:
        raise ProblemError(*map(_unmatched, unused))
    if not builder.draws:
        raise ProblemError(_nothing_known())
    return Variety(tuple(builder.draws), tuple(builder.targets), tuple(fixed))


class _Builder:
    def __init__(self) -> None:
        self.draws: list[Draw] = []
        self.targets: list[Target] = []
        self._shared: dict[str, int] = {}

    def add(self, element: Element, quantity: str, window: Window, group: str, own: float) -> None:
        label, unit = _label(element, quantity), "V" if quantity in VOLTS else ""
        if not group:
            indices = [self._draw(Draw(label, *window, unit))]
        else:
            # Classes of resistors and of capacitors may have one name: they do not stray together.
            what = QUANTITIES.get(quantity) or _MEASURES[type(element)]
            together = f"{group}: {what} of all"
            if together not in self._shared:
                self._shared[together] = self._draw(Draw(together, *window, unit))
            indices = [self._shared[together]]
            if own > 0.0:
                indices.append(self._draw(Draw(f"{label} apart", -own, own, unit)))
        self.targets.append(Target(element.name, quantity, tuple(indices)))

    def add_temperature(self, window: Window | None) -> None:
        if window is not None:
            index = self._draw(Draw(TEMPERATURE, *window, "°C"))
            self.targets.append(Target("", TEMPERATURE, (index,)))

    def _draw(self, draw: Draw) -> int:
        self.draws.append(draw)
        return len(self.draws) - 1


_MEASURES: Mapping[type[Element], str] = {Resistor: "resistance", Capacitor: "capacitance"}


def _label(element: Element, quantity: str) -> str:
    if quantity == SUPPLY:
        return f"supply {element.name}"
    words = QUANTITIES.get(quantity, "")
    return f"{element.name} {words}".strip()


def _is_part(element: Element) -> bool:
    return isinstance(
        element, Resistor | Capacitor | Inductor | BipolarTransistor | JunctionFet | MosFet
    )


Found = tuple[str, Window, str, float]
"""Quantity, window, matched group (or empty), own window within the group."""


def _windows(
    element: Element, settings: PathSettings | None, asked: Sequence[Asked], used: set[Asked]
) -> Iterator[Found]:
    quantities = _quantities(element)
    by_hand: dict[str, Window] = {}
    for quantity in quantities:
        for entry in asked:
            if entry.quantity == quantity and _fits(element.name, (entry.pattern,)):
                used.add(entry)
                by_hand.setdefault(quantity, entry.window)
            if quantity == SUPPLY and (entry.pattern == SUPPLY or _names_source(element, entry)):
                used.add(entry)
                by_hand.setdefault(quantity, entry.window)
    for quantity, window in by_hand.items():
        yield quantity, window, "", 0.0
    if settings is not None:
        for found in _configured(element, settings):
            if found[0] not in by_hand and found[0] in quantities:
                yield found


def _names_source(element: Element, entry: Asked) -> bool:
    """Whether a pattern is for voltage sources: ``*`` alone is for parts."""
    own = entry.pattern.rpartition(".")[2]
    return entry.quantity == VALUE and own.startswith("v") and _fits(element.name, (entry.pattern,))


def _quantities(element: Element) -> tuple[str, ...]:
    match element:
        case Resistor() | Capacitor() | Inductor():
            return (VALUE,)
        case VoltageSource(dc=dc) if dc != 0.0:
            return (SUPPLY,)
        case BipolarTransistor():
            return ("current_gain", "base_emitter_voltage")
        case JunctionFet():
            return ("drain_current", "pinch_off_voltage")
        case MosFet(model=model) if _threshold_key(model.parameters):
            return ("threshold_voltage",)
    return ()


def _configured(element: Element, settings: PathSettings) -> Iterator[Found]:
    if isinstance(element, VoltageSource):
        if settings.spread and settings.spread.supply:
            yield SUPPLY, settings.spread.supply, "", 0.0
        return
    if isinstance(element, Resistor | Capacitor):
        classes = settings.resistors if isinstance(element, Resistor) else settings.capacitors
        for entry in classes:
            if _fits(element.name, entry.match):
                if entry.tolerance:
                    group = entry.name if entry.matched is not None else ""
                    # Two parts differ most with each half the difference off, either way.
                    yield VALUE, entry.tolerance, group, (entry.matched or 0.0) / 2.0
                return
    if isinstance(element, SemiconductorDevice):
        for kind in settings.transistors:
            if _fits(element.name, kind.match):
                group = kind.name if kind.matched else ""
                for quantity, window in _transistor_windows(kind).items():
                    if window:
                        yield quantity, window, group, 0.0
                return


def _transistor_windows(kind: TransistorClass) -> Mapping[str, Window | None]:
    return {
        "current_gain": kind.current_gain,
        "base_emitter_voltage": kind.base_emitter_voltage_v,
        "drain_current": kind.drain_current,
        "pinch_off_voltage": kind.pinch_off,
        "threshold_voltage": kind.threshold_voltage_v,
    }


def _temperature(
    circuit: Circuit, settings: PathSettings | None, asked: Sequence[Asked], used: set[Asked]
) -> Window | None:
    """As a shift from the circuit's temperature."""
    window = settings.spread.temperature_c if settings and settings.spread else None
    for entry in asked:
        if entry.pattern == TEMPERATURE:
            used.add(entry)
            window = entry.window
    if window is None:
        return None
    return window[0] - circuit.temperature_c, window[1] - circuit.temperature_c


def _fits(name: str, patterns: Iterable[str]) -> bool:
    lower = name.lower()
    return any(fnmatch.fnmatchcase(lower, pattern) for pattern in patterns)


def _unmatched(entry: Asked) -> Problem:
    what = entry.pattern if entry.quantity == VALUE else f"{entry.pattern}.{entry.quantity}"
    return Problem(
        "tolerance-unmatched",
        Severity.ERROR,
        f"the tolerance of {what!r} fits no part of this circuit",
        None,
        "Name a designator or pattern of the netlist, such as 'R*' or 'Q1.current_gain'.",
    )


def _nothing_known() -> Problem:
    return Problem(
        "tolerances-missing",
        Severity.ERROR,
        "no tolerance is known for any part, so there is nothing to vary",
        None,
        "Give them in tauledger.toml ([resistors.NAME], [capacitors.NAME], [transistors.NAME]) or "
        "by hand: --tolerance 'R*=5%' --tolerance 'C*=20%' --tolerance 'Q*.current_gain=-50..+100%'"
        ".",
    )


# Boards -------------------------------------------------------------------------------------------


def board_values(
    circuit: Circuit, variety: Variety, deviations: FloatArray
) -> tuple[dict[str, FloatArray], FloatArray | None]:
    """Variations and temperature for the bias solver from (draws, boards) deviations."""
    elements = {element.name: element for element in circuit.elements}
    varied: dict[str, FloatArray] = {}
    temperature = None
    for target in variety.targets:
        shift = np.asarray(deviations[list(target.draws)].sum(axis=0))
        if target.quantity == TEMPERATURE:
            temperature = circuit.temperature_c + shift
            continue
        if target.quantity not in VOLTS:
            # The tail of a normal would turn a wide tolerance into a negative value.
            shift = np.maximum(shift, _LEAST)
        _apply(circuit, elements[target.part], target.quantity, shift, varied)
    return varied, temperature


def _apply(
    circuit: Circuit,
    element: Element,
    quantity: str,
    shift: FloatArray,
    varied: dict[str, FloatArray],
) -> None:
    name = element.name.lower()
    match element:
        case Resistor(resistance_ohm=value) | Capacitor(capacitance_f=value):
            varied[name] = value * (1.0 + shift)
        case Inductor(inductance_h=value) | VoltageSource(dc=value):
            varied[name] = value * (1.0 + shift)
        case SemiconductorDevice(model=model):
            _TRANSISTOR[quantity](circuit, name, model.parameters, shift, varied)


Change = Callable[[Circuit, str, Mapping[str, float], FloatArray, dict[str, FloatArray]], None]


def _current_gain(
    circuit: Circuit,
    name: str,
    card: Mapping[str, float],
    shift: FloatArray,
    varied: dict[str, FloatArray],
) -> None:
    varied[f"{name}.bf"] = card.get("bf", 100.0) * (1.0 + shift)


def _base_emitter_voltage(
    circuit: Circuit,
    name: str,
    card: Mapping[str, float],
    shift: FloatArray,
    varied: dict[str, FloatArray],
) -> None:
    """VBE = n·(kT/q)·ln(I/IS): a shift at constant currents is a factor of IS.

    So it is for the leakage ISE with its own n: else a shift of VBE would change the current gain.
    """
    thermal = BOLTZMANN_J_PER_K * (circuit.temperature_c + ZERO_CELSIUS_K) / ELEMENTARY_CHARGE_C
    main = ("ibe", "ibc") if card.keys() >= {"ibe", "ibc"} else ("is",)
    leakage = next((key for key in ("ise", "c2") if key in card), "")
    for key in main:
        factor = np.exp(-shift / (card.get("nf", 1.0) * thermal))
        varied[f"{name}.{key}"] = card.get(key, 1e-16) * factor
    if leakage:
        factor = np.exp(-shift / (card.get("ne", 1.5) * thermal))
        varied[f"{name}.{leakage}"] = card[leakage] * factor


def _drain_current(
    circuit: Circuit,
    name: str,
    card: Mapping[str, float],
    shift: FloatArray,
    varied: dict[str, FloatArray],
) -> None:
    key = f"{name}.beta"
    varied[key] = varied.get(key, np.full(shift.shape, card.get("beta", 1e-4))) * (1.0 + shift)


def _pinch_off(
    circuit: Circuit,
    name: str,
    card: Mapping[str, float],
    shift: FloatArray,
    varied: dict[str, FloatArray],
) -> None:
    """IDSS stays, so β falls as VTO² grows."""
    threshold = _threshold_key(card) or "vto"
    nominal = np.asarray(card.get(threshold, -2.0))
    moved = nominal * (1.0 + shift)
    varied[f"{name}.{threshold}"] = moved
    key = f"{name}.beta"
    beta = varied.get(key, np.full(shift.shape, card.get("beta", 1e-4)))
    varied[key] = beta * _per_beta(card, nominal) / _per_beta(card, moved)


def _per_beta(card: Mapping[str, float], threshold: FloatArray) -> FloatArray:
    """IDSS/β = v²·(B + (1 − B)·v/(PB + v)) with v = −VTO: see :mod:`tauledger.devices.jfet`."""
    tail, reach = card.get("b", 1.0), -threshold
    curved = (1.0 - tail) * reach / (card.get("pb", 1.0) + reach)
    return np.asarray(reach**2 * (tail + curved))


def _threshold_voltage(
    circuit: Circuit,
    name: str,
    card: Mapping[str, float],
    shift: FloatArray,
    varied: dict[str, FloatArray],
) -> None:
    key = _threshold_key(card)
    varied[f"{name}.{key}"] = card[key] + shift


_TRANSISTOR: Mapping[str, Change] = {
    "current_gain": _current_gain,
    "base_emitter_voltage": _base_emitter_voltage,
    "drain_current": _drain_current,
    "pinch_off_voltage": _pinch_off,
    "threshold_voltage": _threshold_voltage,
}


def _threshold_key(card: Mapping[str, float]) -> str:
    return next((key for key in ("vto", "vt0", "vth0") if key in card), "")
