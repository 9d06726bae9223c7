"""A ``tauledger.toml`` → :class:`Configuration`, with every problem of the file in one run."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

from tauledger.configuration.codes import problem
from tauledger.configuration.files import (
    check_pattern,
    find_model_files,
    from_here,
    read_text,
)
from tauledger.configuration.parts import (
    CAPACITOR_KEYS,
    DIODE_KEYS,
    RESISTOR_KEYS,
    SPREAD_KEYS,
    TRANSISTOR_KEYS,
    WINDOW_KEYS,
    capacitors,
    diodes,
    resistors,
    spread,
    transistors,
)
from tauledger.configuration.positions import Positions
from tauledger.configuration.settings import (
    HIGHEST_MIDBAND_HZ,
    LOWEST_MIDBAND_HZ,
    Configuration,
    Dominance,
    GenericModels,
    Input,
    Limit,
    ModelFile,
    Output,
    PathSettings,
    Quantity,
    Supply,
)
from tauledger.configuration.tables import EXAMPLES, Log, Table
from tauledger.problems import Problem, ProblemError, SourceSpan

__all__ = [
    "CAPACITOR_KEYS",
    "DIODE_KEYS",
    "RESISTOR_KEYS",
    "SPREAD_KEYS",
    "TRANSISTOR_KEYS",
    "read_configuration",
]

SHARED_KEYS = (
    "supplies", "models", "temperature", "generic_models", "capacitors", "resistors",
    "transistors", "diodes", "spread",
)  # fmt: skip
"""May stand at the top, for all paths, or in a path, which then counts first."""
TOP_KEYS = ("path", *SHARED_KEYS)
PATH_KEYS = ("netlist", "input", "output", "midband", *SHARED_KEYS, "limits")
INPUT_KEYS = ("source", "node", "resistance")
OUTPUT_KEYS = ("node", "load_resistance", "load_capacitance")
FIGURE_UNITS = {
    "midband_gain": ("dB", "V/V", "Ω"),
    "low_corner": ("Hz",),
    "high_corner": ("Hz",),
    "input_resistance": ("Ω",),
    "output_resistance": ("Ω",),
    "capacitor_voltage_margin": ("V", "%"),
}
SUBJECT_UNITS = {"node_voltage": "V", "current": "A"}
"""Figures with a window for each node or transistor."""
DOMINANCE_KEYS = {"low_corner_set_by": "low", "high_corner_set_by": "high"}
LIMIT_KEYS = (*FIGURE_UNITS, *SUBJECT_UNITS, *DOMINANCE_KEYS)
MODEL_KINDS = ("npn", "pnp", "njf", "pjf", "nmos", "pmos", "d")

_TOML_PLACE = re.compile(r"(.*?)\s*\(at line (\d+), column (\d+)\)")


def read_configuration(path: Path) -> Configuration:
    """Read and check a whole file.

    Raises ProblemError with everything that is wrong in it, each with its line and column.
    """
    text = read_text(path)
    shown = from_here(path)
    positions = Positions("", shown)
    try:
        content = tomllib.loads(text)
        positions = Positions(text, shown)
    except RecursionError:
        raise _invalid("nested too deeply", positions.place(1, 1)) from None
    except ValueError as error:
        raise _syntax_error(text, shown, str(error)) from None
    log = Log(positions)
    configuration = _configuration(log, path, content)
    if log.problems:
        raise ProblemError(*sorted(log.problems, key=_place))
    return configuration


def _syntax_error(text: str, path: str, message: str) -> ProblemError:
    lines = text.split("\n")
    row, column = len(lines), len(lines[-1]) + 1
    message = message.removesuffix(" (at end of document)")
    if place := _TOML_PLACE.fullmatch(message):
        message = place[1]
        row, column = min(max(int(place[2]), 1), len(lines)), int(place[3])
    span = SourceSpan(path, row, column, 1, lines[row - 1].rstrip("\r"))
    return _invalid(message[:200], span)


def _place(entry: Problem) -> tuple[int, int]:
    return (entry.span.line, entry.span.column) if entry.span else (0, 0)


def _invalid(found: str, span: SourceSpan) -> ProblemError:
    message = f"this is not valid TOML: {found[:1].lower()}{found[1:]}"
    return ProblemError(
        problem("config-syntax", message, span, "Text and quantities stand in quotes.")
    )


def _configuration(log: Log, path: Path, content: dict[str, Any]) -> Configuration:
    top = Table(log, (), content, TOP_KEYS)
    folder = path.parent
    shared = _shared(top, folder)
    paths = [_path(name, table, folder, shared) for name, table in top.tables("path", *PATH_KEYS)]
    return Configuration(path, tuple(paths))


def _shared(table: Table, folder: Path) -> PathSettings:
    return PathSettings(
        supplies=tuple(_supplies(table)),
        models=tuple(_models(table, folder)),
        temperature=table.quantity("temperature", "°C", above=-273.15),
        generic=_generic(table),
        capacitors=tuple(capacitors(table)),
        resistors=tuple(resistors(table)),
        transistors=tuple(transistors(table)),
        diodes=tuple(diodes(table)),
        spread=spread(table),
    )


def _path(name: str, table: Table, folder: Path, shared: PathSettings) -> PathSettings:
    own = _shared(table, folder)
    netlist = table.text("netlist")
    if netlist is not None:
        refused = check_pattern(netlist, folder, table.place("netlist"))
        table.log.problems.extend([refused] if refused else [])
    elif "netlist" not in table.content:
        table.missing("netlist", 'netlist = "amplifier.cir"')
    nets = {supply.node.casefold() for supply in own.supplies}
    limits = table.table("limits", *LIMIT_KEYS)
    return replace(
        own,
        name=name,
        netlist=netlist or "",
        input=_input(table),
        output=_output(table),
        midband=table.quantity("midband", "Hz", least=LOWEST_MIDBAND_HZ, most=HIGHEST_MIDBAND_HZ),
        supplies=(*own.supplies, *(s for s in shared.supplies if s.node.casefold() not in nets)),
        models=(*shared.models, *own.models),
        temperature=own.temperature or shared.temperature,
        generic=own.generic if "generic_models" in table.content else shared.generic,
        capacitors=(*own.capacitors, *shared.capacitors),
        resistors=(*own.resistors, *shared.resistors),
        transistors=(*own.transistors, *shared.transistors),
        diodes=(*own.diodes, *shared.diodes),
        spread=own.spread or shared.spread,
        limits=tuple(_limits(limits)) if limits else (),
        dominance=tuple(_dominance(limits)) if limits else (),
        span=table.span,
    )


def _supplies(table: Table) -> Iterator[Supply]:
    supplies = table.table("supplies")
    seen: set[str] = set()
    for node in supplies.content if supplies else ():
        assert supplies is not None
        if node.casefold() in (*seen, "0", "gnd"):
            supplies.refuse(node, "expected a net once only, and not ground")
            continue
        seen.add(node.casefold())
        voltage = supplies.quantity(node, "V")
        if voltage is not None:
            yield Supply(node, voltage.value, supplies.log.positions.key((*supplies.keys, node)))


def _input(table: Table) -> Input | None:
    if isinstance(table.content.get("input"), str):
        source = table.text("input")
        return Input(source, (), 0.0, table.place("input")) if source else None
    inner = table.table("input", *INPUT_KEYS)
    if inner is None:
        return None
    source = inner.text("source")
    nodes = inner.one_or_two("node")
    resistance = inner.quantity("resistance", "Ω", least=0.0)
    if "source" in inner.content and ("node" in inner.content or "resistance" in inner.content):
        inner.refuse("source", "stands beside node or resistance, which attach another source")
    elif "source" not in inner.content and "node" not in inner.content:
        inner.missing("node", 'input = { node = "IN", resistance = "600 Ω" }')
    return Input(source or "", nodes, resistance.value if resistance else 0.0, inner.span)


def _output(table: Table) -> Output | None:
    if isinstance(table.content.get("output"), str | list):
        nodes = table.one_or_two("output")
        return Output(nodes, None, None, table.place("output")) if nodes else None
    inner = table.table("output", *OUTPUT_KEYS)
    if inner is None:
        return None
    if "node" not in inner.content:
        inner.missing("node", 'output = { node = "OUT", load_resistance = "10 kΩ" }')
    resistance = inner.quantity("load_resistance", "Ω", above=0.0)
    capacitance = inner.quantity("load_capacitance", "F", above=0.0)
    return Output(
        inner.one_or_two("node"),
        resistance.value if resistance else None,
        capacitance.value if capacitance else None,
        inner.span,
    )


def _models(table: Table, folder: Path) -> Iterator[ModelFile]:
    for pattern, place in table.texts("models"):
        refused = check_pattern(pattern, folder, place)
        if refused is None and "**" in pattern:
            message = f"{pattern!r} has a **; expected one * for each folder"
            refused = problem("config-value", message, place, "Name the folders.")
        if refused is not None:
            table.log.problems.append(refused)
            continue
        try:
            for file in find_model_files(pattern, folder, place):
                yield ModelFile(file, folder, place)
        except ProblemError as error:
            table.log.problems.extend(error.problems)


def _generic(table: Table) -> GenericModels | None:
    value = table.content.get("generic_models", False)
    if isinstance(value, bool):
        return GenericModels() if value else None
    kinds = table.table("generic_models")
    if kinds is None:
        return None
    found = {name: kinds.text(name) for name in kinds.content}
    for name, kind in found.items():
        if kind is not None and kind.lower() not in MODEL_KINDS:
            kinds.refuse(name, f"found {kind[:40]!r}; expected one of {', '.join(MODEL_KINDS)}")
    return GenericModels({name.lower(): kind.lower() for name, kind in found.items() if kind})


def _limits(table: Table) -> Iterator[Limit]:
    for figure, units in FIGURE_UNITS.items():
        window = table.table(figure, *WINDOW_KEYS)
        if window is not None:
            yield _limit(window, figure, "", units)
    for figure, unit in SUBJECT_UNITS.items():
        for subject, window in table.tables(figure, *WINDOW_KEYS):
            yield _limit(window, figure, subject, (unit,))


def _limit(window: Table, figure: str, subject: str, units: tuple[str, ...]) -> Limit:
    # A gain in decibels and a voltage may be negative; no other figure can.
    least = 0.0 if units != ("V",) else float("-inf")
    ends: list[Quantity | None] = []
    for key in WINDOW_KEYS:
        end = window.quantity(key, *units)
        if end is not None and end.unit not in ("dB", "%") and end.value < least:
            window.refuse(key, f"{end.text!r} is negative; limits of {figure} are magnitudes")
        ends.append(end)
    minimum, maximum = ends
    if not window.content:
        window.missing("min or max", f'min = "{EXAMPLES[units[0]]}"')
    if minimum and maximum and minimum.unit == maximum.unit and minimum.value > maximum.value:
        window.refuse("min", f"{minimum.text} is above max, {maximum.text}")
    if figure == "capacitor_voltage_margin" and "max" in window.content:
        window.refuse("max", "a margin has only a lower limit; expected min")
    return Limit(figure, subject, minimum, maximum, window.span)


def _dominance(table: Table) -> Iterator[Dominance]:
    for key, end in DOMINANCE_KEYS.items():
        part = table.text(key)
        if part is not None:
            yield Dominance(end, part, table.place(key))
