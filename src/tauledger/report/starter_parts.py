"""Tables on tolerances, ratings and spread for the configuration to start from.

Nothing in them counts before the engineer takes the # away. What the circuit tells is written as
found; what it cannot tell is an example marked so, or left empty, which the reader of the
configuration refuses with the line to fill in.
"""

from __future__ import annotations

import glob
import textwrap
from collections.abc import Iterable, Iterator, Sequence

from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.report.inert import clip, inert
from tauledger.report.toml_text import toml_text

_COLUMNS = 92
_SHOWN = 40
_EXAMPLE = "  # example, replace"


@dataclass(frozen=True, slots=True)
class PartFound:
    """One part of the board; None where a figure does not exist or is not known."""

    name: str
    kind: str
    """``resistor``, ``capacitor``, ``bipolar``, ``jfet``, ``mosfet`` or ``diode``."""
    value: float | None = None
    """Capacitance in F."""
    strain: float | None = None
    """At the operating point: magnitude of the voltage across a capacitor in V, heat in W."""


@dataclass(frozen=True, slots=True)
class _ClassText:
    """A class for all parts of a kind that stand in one pattern."""

    table: str
    kind: str
    keys: tuple[tuple[str, str], ...]
    """Key and example of what strays."""


_CLASSES = (
    _ClassText("resistors.all", "resistor", (("tolerance", "5 %"),)),
    _ClassText(
        "transistors.bipolar",
        "bipolar",
        (("current_gain", "50 %"), ("base_emitter_voltage", "20 mV")),
    ),
    _ClassText(
        "transistors.jfet", "jfet", (("drain_current", "50 %"), ("pinch_off_voltage", "30 %"))
    ),
    _ClassText("transistors.mosfet", "mosfet", (("threshold_voltage", "0.3 V"),)),
    _ClassText("diodes.all", "diode", ()),
)


def part_tables(parts: Sequence[PartFound]) -> Iterator[str]:
    """Lines of classes with patterns of the designators found, and of what differs by board."""
    if not parts:
        return
    yield "# Tolerances are for tauledger spread and choose, ratings for tauledger stress. An"
    yield "# example is no more than that: write what your parts have, then take the # away. Of"
    yield "# several classes of a kind the first that matches a designator counts."
    capacitors = [part for part in parts if part.kind == "capacitor"]
    if capacitors:
        yield ""
        yield from _capacitors(capacitors)
    for text in _CLASSES:
        found = [part for part in parts if part.kind == text.kind]
        if found:
            yield ""
            yield from _class(text, found)
    yield ""
    yield "# [spread]"
    yield '# distribution = "uniform"  # or normal, or truncated'
    yield f'# supply = "5 %"{_EXAMPLE}'
    yield f'# temperature = {{ min = "0 °C", max = "50 °C" }}{_EXAMPLE}'


def _capacitors(found: Sequence[PartFound]) -> Iterator[str]:
    own = [part for part in found if "." not in part.name] or found
    names = [glob.escape(part.name) for part in own[:_SHOWN]]
    yield "# A netlist does not say which capacitors are electrolytic, film or ceramic: leave each"
    yield "# name in the class it belongs to. Of a class with polarised = true, or named for"
    yield "# electrolytic or tantalum parts, the polarity is checked: plus is the first node."
    yield from _listed(own)
    yield "# [capacitors.electrolytic]"
    yield from _wrapped(f"match = [{', '.join(map(toml_text, names))}]")
    yield "# polarised = true"
    yield f'# tolerance = {{ min = "-20 %", max = "50 %" }}{_EXAMPLE}'
    yield f'# rated_voltage = ""  # fill in{_highest(own, "V", "across")}'
    yield "# [capacitors.film]"
    yield from _wrapped(f"match = [{', '.join(map(toml_text, names))}]")
    yield f'# tolerance = "10 %"{_EXAMPLE}'
    yield f'# rated_voltage = ""  # fill in{_highest(own, "V", "across")}'
    yield from _inside(found, own)


def _class(text: _ClassText, found: Sequence[PartFound]) -> Iterator[str]:
    own = [part for part in found if "." not in part.name] or found
    yield f"# [{text.table}]"
    yield from _wrapped(f"match = [{', '.join(map(toml_text, _patterns(own)))}]")
    for key, example in text.keys:
        yield f'# {key} = "{example}"{_EXAMPLE}'
    yield f'# rated_power = ""  # fill in{_highest(own, "W", "in")}'
    yield from _inside(found, own)


def _patterns(parts: Iterable[PartFound]) -> list[str]:
    """``Q*``, or ``X1.Q*`` inside a subcircuit: the path and the letter of the element."""
    found: dict[str, None] = {}
    for part in parts:
        path, dot, own = part.name.rpartition(".")
        found.setdefault(f"{glob.escape(path)}{dot}{glob.escape(own[:1])}*")
    return list(found)[:_SHOWN]


def _inside(found: Sequence[PartFound], own: Sequence[PartFound]) -> Iterator[str]:
    """Parts inside subcircuits may be those of a macromodel: named, but not put in a class."""
    rest = _patterns(part for part in found if part not in own)
    if rest:
        shown = ", ".join(map(toml_text, rest[:6])) + (" …" if len(rest) > 6 else "")
        yield f"# {_comment(f'Inside subcircuits, to be added where they are parts: {shown}')}"


def _highest(parts: Sequence[PartFound], unit: str, word: str) -> str:
    known = [part for part in parts if part.strain is not None]
    if not known:
        return ""
    most = max(known, key=lambda part: part.strain or 0.0)
    figure = format_quantity(most.strain or 0.0, unit)
    return f"; found at most {figure} {word} {clip(inert(most.name), 24)}"


def _listed(parts: Sequence[PartFound]) -> Iterator[str]:
    """Each with its value and the direct voltage across it."""
    words = []
    for part in parts[:_SHOWN]:
        figures = [] if part.value is None else [format_quantity(part.value, "F")]
        if part.strain is not None:
            figures.append(f"{format_quantity(part.strain, 'V')} across it")
        name = clip(inert(part.name), 24)
        words.append(f"{name} ({', '.join(figures)})" if figures else name)
    if len(parts) > _SHOWN:
        words.append(f"{len(parts) - _SHOWN} more")
    yield from textwrap.wrap(
        f"Found: {'; '.join(words)}.", _COLUMNS, initial_indent="# ", subsequent_indent="# "
    )


def _wrapped(line: str) -> Iterator[str]:
    """A list may go on in the next line; a # stands before each."""
    yield from textwrap.wrap(
        line,
        _COLUMNS,
        initial_indent="# ",
        subsequent_indent="#   ",
        break_long_words=False,
        break_on_hyphens=False,
    )


def _comment(text: str) -> str:
    return clip(inert(text), _COLUMNS)
