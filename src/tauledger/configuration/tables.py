"""One table of a TOML file at a time: typed values out, a problem for whatever does not fit."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from tauledger.configuration.codes import near, problem
from tauledger.configuration.positions import Keys, Positions
from tauledger.configuration.settings import Quantity
from tauledger.problems import Problem, SourceSpan
from tauledger.quantity import format_quantity, parse_si

EXAMPLES = {
    "Hz": "20 Hz", "V": "12 V", "A": "1.5 mA", "Ω": "10 kΩ", "F": "220 pF", "dB": "26 dB",
    "%": "20 %", "°C": "25 °C", "V/V": "20 V/V", "W": "0.25 W",
}  # fmt: skip
_KINDS = {
    dict: "a table", list: "a list", str: "text", bool: "true or false", int: "a number",
    float: "a number",
}  # fmt: skip


class Log:
    """Where things stand, and what was wrong."""

    def __init__(self, positions: Positions) -> None:
        self.positions = positions
        self.problems: list[Problem] = []

    def report(self, code: str, message: str, span: SourceSpan, advice: str) -> None:
        self.problems.append(problem(code, message, span, advice))


class Table:
    """A table whose keys are taken one by one; a method returns None after reporting a fault.

    With ``known`` every other key is a fault; without it the keys are names the user chose.
    """

    def __init__(
        self, log: Log, keys: Keys, content: Mapping[str, Any], known: Sequence[str] | None = None
    ) -> None:
        self.log = log
        self.keys = keys
        self.content = content
        for key in content if known is not None else ():
            if known is not None and key not in known:
                where = f" in [{_dotted(keys)}]" if keys else " at the top of the file"
                log.report(
                    "config-key-unknown",
                    f"unknown key {_shown(key)}{where}{near(key, list(known))}",
                    log.positions.key((*keys, key)),
                    f"Known here: {', '.join(known)}.",
                )

    @property
    def span(self) -> SourceSpan:
        """Where the table's name stands."""
        return self.log.positions.key(self.keys)

    def place(self, key: str) -> SourceSpan:
        return self.log.positions.value((*self.keys, key))

    def quantity(
        self,
        key: str,
        *units: str,
        least: float = -math.inf,
        above: float = -math.inf,
        most: float = math.inf,
    ) -> Quantity | None:
        """A quantity in one of ``units``, from ``least`` to ``most`` and above ``above``."""
        if key not in self.content:
            return None
        value = self.content[key]
        example = f"expected a quantity such as {EXAMPLES[units[0]]!r}"
        if not isinstance(value, str):
            self.refuse(key, f"found {_found(value)}; {example}, in quotes and with its unit")
            return None
        try:
            number, unit = _parse(value)
        except ValueError as error:
            self.refuse(key, str(error), "config-unit")
            return None
        if unit not in units:
            found = f"has the unit {unit}" if unit else "has no unit"
            expected = " or ".join(units)
            self.refuse(
                key, f"{_shown(value)} {found}; expected {expected}, {example[9:]}", "config-unit"
            )
            return None
        bound = ""
        if number < least:
            bound = f"at least {least:g} {unit}"
        elif number > most:
            bound = f"at most {format_quantity(most, unit, 1)}"
        elif number <= above:
            bound = f"more than {above:g} {unit}"
        if bound:
            self.refuse(key, f"{_shown(value)} makes no sense here; expected {bound}")
            return None
        return Quantity(number, unit, value.strip(), self.place(key))

    def text(self, key: str) -> str | None:
        value = self.content.get(key)
        if isinstance(value, str) and value.strip():
            return value.strip()
        if key in self.content:
            self.refuse(key, f"found {_found(value)}; expected text in quotes")
        return None

    def texts(self, key: str) -> list[tuple[str, SourceSpan]]:
        """One text or a list of them, each with its place."""
        value = self.content.get(key, [])
        if isinstance(value, str):
            value = [value]
            places = [self.place(key)]
        elif isinstance(value, list):
            places = [
                self.log.positions.value((*self.keys, key, index)) for index in range(len(value))
            ]
        if not isinstance(value, list) or not all(isinstance(v, str) and v.strip() for v in value):
            self.refuse(key, f"found {_found(value)}; expected text, or a list of texts")
            return []
        return [(text.strip(), place) for text, place in zip(value, places, strict=True)]

    def one_or_two(self, key: str) -> tuple[str, ...]:
        """One net or a list of two."""
        found = self.texts(key)
        if len(found) > 2 or (found and len({net.casefold() for net, _ in found}) < len(found)):
            self.refuse(key, "expected one net, or a list of two different ones")
            return ()
        return tuple(net for net, _ in found)

    def table(self, key: str, *known: str) -> Table | None:
        """A table with these keys; with none named, its keys are free."""
        value = self.content.get(key)
        if isinstance(value, dict):
            return Table(self.log, (*self.keys, key), value, known or None)
        if key in self.content:
            self.refuse(key, f"found {_found(value)}; expected a table")
        return None

    def tables(self, key: str, *known: str) -> Iterator[tuple[str, Table]]:
        """The tables inside a table of free names."""
        outer = self.table(key)
        for name in outer.content if outer else ():
            assert outer is not None
            inner = outer.table(name, *known)
            if inner is not None:
                yield name, inner

    def missing(self, key: str, example: str) -> None:
        self.log.report(
            "config-key-missing",
            f"[{_dotted(self.keys)}] has no {key}",
            self.span,
            f"Add a line such as: {example}",
        )

    def refuse(self, key: str, message: str, code: str = "config-value") -> None:
        self.log.report(code, f"{key}: {message}", self.place(key), f"Correct {key}.")


def _parse(text: str) -> tuple[float, str]:
    bare = text.strip()
    if bare.endswith("V/V"):
        value, unit = parse_si(bare[:-3])
        if unit:
            raise ValueError(f"{_shown(text)} has two units")
        return value, "V/V"
    return parse_si(bare)


def _found(value: object) -> str:
    if isinstance(value, bool | int | float):
        return str(value).lower()[:40]
    if isinstance(value, str):
        return _shown(value)
    return _KINDS.get(type(value), "a date or time")


def _shown(text: str) -> str:
    return repr(text if len(text) <= 40 else text[:39] + "…")


def _dotted(keys: Keys) -> str:
    return ".".join(str(key) for key in keys)
