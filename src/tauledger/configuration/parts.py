"""The tables on parts: tolerances, ratings, what can be bought, how boards differ."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from tauledger.configuration.settings import (
    CapacitorClass,
    DiodeClass,
    Quantity,
    ResistorClass,
    SpreadSettings,
    TransistorClass,
)
from tauledger.configuration.tables import Table
from tauledger.configuration.tolerances import TOLERANCE_LETTERS, Window, letter_window
from tauledger.quantity import parse_si

WINDOW_KEYS = ("min", "max")
CAPACITOR_KEYS = (
    "match", "tolerance", "rated_voltage", "matched", "polarised", "series", "values",
    "dielectric", "bias_curve", "temperature_curve",
)  # fmt: skip
RESISTOR_KEYS = ("match", "tolerance", "rated_power", "matched")
TRANSISTOR_WINDOWS: Mapping[str, str] = {
    "current_gain": "%",
    "base_emitter_voltage": "V",
    "drain_current": "%",
    "pinch_off_voltage": "%",
    "threshold_voltage": "V",
}
"""Key → unit of its window."""
TRANSISTOR_KEYS = ("match", *TRANSISTOR_WINDOWS, "matched", "rated_power")
DIODE_KEYS = ("match", "rated_power")
SPREAD_KEYS = ("distribution", "supply", "temperature")
DISTRIBUTIONS = ("uniform", "normal", "truncated")
SERIES = ("E3", "E6", "E12", "E24", "E48", "E96", "E192")


def capacitors(table: Table) -> Iterator[CapacitorClass]:
    """The classes of capacitors, in the order of the file."""
    for name, inner in table.tables("capacitors", *CAPACITOR_KEYS):
        rated = inner.quantity("rated_voltage", "V", above=0.0)
        yield CapacitorClass(
            name,
            _match(inner, 'match = ["C1", "C2*"]'),
            _tolerance(inner),
            rated.value if rated else None,
            inner.span,
            matched=_matched(inner),
            polarised=_truth(inner, "polarised"),
            series=_word(inner, "series", SERIES),
            values_f=_values(inner),
            dielectric=inner.text("dielectric") or "",
            bias_curve=_curve(inner, "bias_curve", "voltage", "V"),
            temperature_curve=_curve(inner, "temperature_curve", "temperature", "°C"),
        )


def resistors(table: Table) -> Iterator[ResistorClass]:
    """The classes of resistors, in the order of the file."""
    for name, inner in table.tables("resistors", *RESISTOR_KEYS):
        yield ResistorClass(
            name,
            _match(inner, 'match = "R*"'),
            _tolerance(inner),
            _rated_power(inner),
            _matched(inner),
            inner.span,
        )


def transistors(table: Table) -> Iterator[TransistorClass]:
    """The classes of transistors, in the order of the file."""
    for name, inner in table.tables("transistors", *TRANSISTOR_KEYS):
        windows = {key: _window(inner, key, unit) for key, unit in TRANSISTOR_WINDOWS.items()}
        yield TransistorClass(
            name,
            _match(inner, 'match = "Q*"'),
            windows["current_gain"],
            windows["base_emitter_voltage"],
            windows["drain_current"],
            windows["pinch_off_voltage"],
            windows["threshold_voltage"],
            bool(_truth(inner, "matched")),
            inner.span,
            _rated_power(inner),
        )


def diodes(table: Table) -> Iterator[DiodeClass]:
    """The classes of diodes, in the order of the file."""
    for name, inner in table.tables("diodes", *DIODE_KEYS):
        yield DiodeClass(name, _match(inner, 'match = "D*"'), _rated_power(inner), inner.span)


def spread(table: Table) -> SpreadSettings | None:
    """How boards differ beyond their parts."""
    inner = table.table("spread", *SPREAD_KEYS)
    if inner is None:
        return None
    temperature = inner.table("temperature", *WINDOW_KEYS)
    return SpreadSettings(
        _word(inner, "distribution", DISTRIBUTIONS),
        _window(inner, "supply", "%"),
        _ends(temperature, "°C", "temperature") if temperature else None,
        inner.span,
    )


def _match(table: Table, example: str) -> tuple[str, ...]:
    if "match" not in table.content:
        table.missing("match", example)
    return tuple(pattern.lower() for pattern, _ in table.texts("match"))


def _tolerance(table: Table) -> Window | None:
    value = table.content.get("tolerance")
    if isinstance(value, str) and len(value.strip()) == 1 and value.strip().isalpha():
        window = letter_window(value)
        if window is None:
            letters = ", ".join(TOLERANCE_LETTERS)
            table.refuse(
                "tolerance",
                f"found the letter {value.strip()!r}; expected a percentage or one of {letters} "
                "(B, C and D mean picofarads on small capacitors)",
            )
        return window
    return _window(table, "tolerance", "%")


def _window(table: Table, key: str, unit: str) -> Window | None:
    """A symmetric quantity, or a table of min and max."""
    if isinstance(table.content.get(key), dict):
        window = table.table(key, *WINDOW_KEYS)
        assert window is not None
        return _ends(window, unit, key)
    both = table.quantity(key, unit, least=0.0)
    if both is None:
        return None
    if unit == "%" and both.value >= 100.0:
        table.refuse(key, f"{both.text} either way reaches zero; expected min and max")
    return -_scaled(both), _scaled(both)


def _ends(window: Table, unit: str, key: str) -> Window | None:
    bound = {"%": -100.0, "°C": -273.15}.get(unit, float("-inf"))
    low = window.quantity("min", unit, above=bound)
    high = window.quantity("max", unit, above=bound)
    examples = {"%": ("-20 %", "80 %"), "V": ("-30 mV", "30 mV"), "°C": ("0 °C", "50 °C")}
    least, most = examples[unit]
    for end in WINDOW_KEYS:
        if end not in window.content:
            window.missing(end, f'{key} = {{ min = "{least}", max = "{most}" }}')
    if low is None or high is None:
        return None
    if low.value > high.value:
        window.refuse("min", "is above max")
    return _scaled(low), _scaled(high)


def _scaled(quantity: Quantity) -> float:
    return quantity.value / 100.0 if quantity.unit == "%" else quantity.value


def _rated_power(table: Table) -> float | None:
    power = table.quantity("rated_power", "W", above=0.0)
    return power.value if power else None


def _matched(table: Table) -> float | None:
    within = table.quantity("matched", "%", least=0.0)
    return within.value / 100.0 if within else None


def _truth(table: Table, key: str) -> bool | None:
    value = table.content.get(key)
    if value is None or isinstance(value, bool):
        return value
    table.refuse(key, "expected true or false")
    return None


def _word(table: Table, key: str, known: tuple[str, ...]) -> str:
    word = table.text(key)
    if word is not None and word not in known:
        table.refuse(key, f"found {word[:40]!r}; expected one of {', '.join(known)}")
    return word or ""


def _values(table: Table) -> tuple[float, ...]:
    """A list of quantities in farads."""
    found: set[float] = set()
    for text, place in table.texts("values"):
        try:
            value, unit = parse_si(text)
        except ValueError as error:
            value, unit = 0.0, str(error)
        if unit == "F" and value > 0.0:
            found.add(value)
            continue
        message = f"values: found {text[:40]!r}; expected a capacitance such as '4.7 µF'"
        table.log.report("config-unit", message, place, "Correct values.")
    return tuple(sorted(found))


def _curve(table: Table, key: str, axis: str, unit: str) -> tuple[tuple[float, float], ...]:
    """A list of points, each a table of the axis and the change of the capacitance."""
    listed = table.content.get(key, [])
    points: list[tuple[float, float]] = []
    if not isinstance(listed, list) or not all(isinstance(point, dict) for point in listed):
        table.refuse(key, f'expected a list of points such as {{ {axis} = "…", change = "-20 %" }}')
        return ()
    for n, content in enumerate(listed):
        point = Table(table.log, (*table.keys, key, n), content, (axis, "change"))
        at = point.quantity(axis, unit)
        change = point.quantity("change", "%", above=-100.0)
        for name in (axis, "change"):
            if name not in content:
                point.missing(name, f'{name} = "…"')
        if at is not None and change is not None:
            points.append((at.value, change.value / 100.0))
    if [x for x, _ in points] != sorted({x for x, _ in points}):
        table.refuse(key, f"its points do not rise in {axis}")
    return tuple(points)
