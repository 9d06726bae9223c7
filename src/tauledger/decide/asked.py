"""Tolerances given by hand: ``R*=5%``, ``C1=-20..+80%``, ``Q*.base_emitter_voltage=20mV``."""

from __future__ import annotations

from tauledger.configuration.tolerances import Window, letter_window
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.quantity import parse_si
from tauledger.records import dataclass

VALUE, SUPPLY, TEMPERATURE = "value", "supply", "temperature"
QUANTITIES = {
    "current_gain": "current gain",
    "base_emitter_voltage": "VBE",
    "drain_current": "IDSS",
    "pinch_off_voltage": "pinch-off",
    "threshold_voltage": "threshold",
}
"""Key of a transistor's table → how its draw is called."""
VOLTS = frozenset(("base_emitter_voltage", "threshold_voltage"))
"""Shifts in volts; every other deviation is relative, except the temperature."""


@dataclass(frozen=True, slots=True)
class Asked:
    """A window given by hand, which counts before the configuration."""

    pattern: str
    """Lower-case pattern of designators, or ``supply`` or ``temperature``."""
    quantity: str
    """``value`` or a key of :data:`QUANTITIES`."""
    window: Window


def unparsable(text: str, reason: str) -> ProblemError:
    """The error for a tolerance given by hand."""
    return ProblemError(
        Problem(
            "tolerance-unreadable",
            Severity.ERROR,
            f"{text[:60]!r}: {reason}",
            None,
            "Write it as 'R*=5%', 'C1=-20..+80%', 'C*=M', 'Q*.base_emitter_voltage=20mV', "
            "'supply=5%' or 'temperature=0..50'.",
        )
    )


def parse_asked(text: str) -> Asked:
    """A tolerance given by hand; raises ProblemError with what was expected.

    >>> parse_asked("C*=-20..+80%")
    Asked(pattern='c*', quantity='value', window=(-0.2, 0.8))
    """
    left, equals, right = text.partition("=")
    pattern, quantity = left.strip(), VALUE
    head, dot, tail = pattern.rpartition(".")
    if dot and tail in QUANTITIES:
        pattern, quantity = head, tail
    if pattern.lower() in (SUPPLY, TEMPERATURE):
        pattern = quantity = pattern.lower()
    if not equals or not pattern:
        raise unparsable(text, "expected PATTERN=TOLERANCE")
    window = letter_window(right) if quantity == VALUE else None
    return Asked(pattern.lower(), quantity, window or _parse_window(text, right, quantity))


def _parse_window(text: str, right: str, quantity: str) -> Window:
    unit = "V" if quantity in VOLTS else "°C" if quantity == TEMPERATURE else "%"
    ends = right.replace("…", "..").split("..")
    if len(ends) > 2 or (len(ends) == 1 and quantity == TEMPERATURE):
        raise unparsable(text, "expected two ends with .. between")
    last_unit = _quantity(text, ends[-1], unit)[1]
    numbers = [_quantity(text, end, last_unit)[0] for end in ends]
    scaled = [number / 100.0 if unit == "%" else number for number in numbers]
    low, high = (-abs(scaled[0]), abs(scaled[0])) if len(scaled) == 1 else scaled
    if unit == "°C" and not -273.15 < low < high < 1000.0:
        raise unparsable(text, "expected temperatures that rise, above −273.15 °C")
    if low > high or (unit == "%" and low <= -1.0):
        raise unparsable(text, "expected a window from low to high, above −100 %")
    return low, high


def _quantity(text: str, written: str, unit: str) -> tuple[float, str]:
    bare = written.strip().removesuffix("C") if unit == "°C" else written.strip()
    try:
        value, found = parse_si(bare.removesuffix("°"))
    except ValueError as error:
        raise unparsable(text, str(error)) from None
    if found not in ("", unit):
        raise unparsable(text, f"the unit is {found}; expected {unit}")
    if not found and unit == "V":
        raise unparsable(text, "expected volts, such as 20mV")
    return value, unit
