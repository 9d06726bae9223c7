"""The limits of a signal path against its figures: one row for each, and a finding when missed."""

from __future__ import annotations

import fnmatch
import math
from collections.abc import Iterable, Iterator

from tauledger.configuration.settings import (
    CapacitorClass,
    Dominance,
    Limit,
    PathSettings,
    Quantity,
)
from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.review.rows import CornerRow, PathRow, Review, TimeConstantRow, TransistorRow

CODES = {
    "limit-missed": (Severity.ERROR, "a figure lies outside its limits"),
    "limit-dominance": (Severity.ERROR, "another part sets the corner than the one asked for"),
    "limit-dominance-tie": (Severity.WARNING, "the part asked for sets the corner with others"),
    "limit-unknown": (Severity.WARNING, "there is no figure to hold against a limit"),
    "limit-subject-unknown": (Severity.ERROR, "a limit names what is not in the circuit"),
}
"""Code → severity and meaning."""

MET, MISSED, TIE, UNKNOWN = "met", "missed", "tie", "unknown"


@dataclass(frozen=True, slots=True)
class LimitRow:
    """One limit and how the circuit stands against it."""

    figure: str
    """As a person reads it: ``low corner``, ``current of Q1``."""
    value: float | None
    """In ``unit``; None for dominance, or when the figure does not exist."""
    unit: str
    minimum: str
    """As written in the configuration; empty when that end is open."""
    maximum: str
    verdict: str
    """``met``, ``missed``, ``tie`` or ``unknown``."""
    part: str
    """What sets the figure: a capacitor, a transistor, several with commas; or empty."""
    problem: Problem | None
    """The finding, unless the limit is met."""


def check_limits(settings: PathSettings, review: Review, path: PathRow) -> tuple[LimitRow, ...]:
    """Hold every limit of a signal path against the figures of ``path``, a row of ``review``.

    Corners are the exact ones of the linear network. Gains, currents and the like are compared by
    magnitude, node voltages and gains in decibels with their sign. A low corner that does not
    exist because the gain holds down to DC counts as 0 Hz. The margin of a capacitor is its rated
    voltage less the magnitude of its DC voltage; signal, ripple and start-up are not in it.
    """
    rows: list[LimitRow] = []
    for limit in settings.limits:
        if limit.figure == "capacitor_voltage_margin":
            rows += _margins(limit, settings.capacitors, path)
        else:
            rows.append(_check(limit, review, path))
    rows += [_check_dominance(asked, path) for asked in settings.dominance]
    return tuple(rows)


def findings(rows: Iterable[LimitRow]) -> tuple[Problem, ...]:
    """The problems of the limits that are not met."""
    return tuple(row.problem for row in rows if row.problem is not None)


# One figure ---------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Figure:
    name: str
    values: dict[str, float]
    """By unit; empty when there is none."""
    part: str = ""
    reason: str = ""
    """Why there is none."""
    advice: str = ""


def _check(limit: Limit, review: Review, path: PathRow) -> LimitRow:
    if limit.figure == "node_voltage":
        figure = _node_voltage(limit.subject, review)
    elif limit.figure == "current":
        figure = _current(limit.subject, review.transistors)
    else:
        figure = _path_figure(limit.figure, path)
    if figure is None:
        return _unknown_subject(limit, review)
    return _judge(limit, figure)


def _path_figure(name: str, path: PathRow) -> _Figure:
    reason = "; ".join(path.notes) or "the path has no passband"
    if name == "midband_gain":
        values = {path.gain_unit: abs(path.gain)} if path.gain is not None else {}
        if path.gain_db is not None and path.gain_unit == "V/V":
            values["dB"] = path.gain_db
        return _Figure("midband gain", values, reason=reason)
    if name == "low_corner":
        return _corner_figure(path.low, path.gain_by_inspection is not None, reason)
    if name == "high_corner":
        return _corner_figure(path.high, False, reason)
    is_input = name == "input_resistance"
    resistance = path.input_resistance_ohm if is_input else path.output_resistance_ohm
    values = {"Ω": abs(resistance)} if resistance is not None else {}
    return _Figure(name.replace("_", " "), values, reason=reason)


def _corner_figure(row: CornerRow | None, reaches_dc: bool, reason: str) -> _Figure:
    if row is None:
        return _Figure("corner", {}, reason=reason)
    name = f"{row.end} corner"
    part = ", ".join(row.set_by)
    if row.exact_hz is None:
        values = {"Hz": 0.0} if reaches_dc else {}
        return _Figure(name, values, part, "; ".join(row.notes) or reason)
    change, effect = ("longer", "lowers") if row.end == "low" else ("shorter", "raises")
    advice = f"A {change} time constant at {part} {effect} it most." if part else ""
    return _Figure(name, {"Hz": row.exact_hz}, part, advice=advice)


def _node_voltage(node: str, review: Review) -> _Figure | None:
    for row in review.nodes:
        if row.node.casefold() == node.casefold():
            return _Figure(f"voltage of {row.node}", {"V": row.voltage_v})
    return None


def _current(name: str, transistors: Iterable[TransistorRow]) -> _Figure | None:
    for row in transistors:
        if row.name.casefold() == name.casefold():
            return _Figure(f"current of {row.name}", {"A": abs(row.current_a)}, row.name)
    return None


def _judge(limit: Limit, figure: _Figure) -> LimitRow:
    ends = [end for end in (limit.minimum, limit.maximum) if end is not None]
    missed = None
    for end in ends:
        value = figure.values.get(end.unit)
        if value is None:
            return _unknown(limit, figure, end)
        if value < end.value if end is limit.minimum else value > end.value:
            missed = end
    shown = missed or ends[0]
    value = figure.values[shown.unit]
    problem = _missed(limit, figure, missed, value) if missed else None
    verdict = MISSED if missed else MET
    return _row(limit, figure, value, shown.unit, verdict, problem)


def _missed(limit: Limit, figure: _Figure, end: Quantity, value: float) -> Problem:
    is_low = end is limit.minimum
    side = f"below the {end.text} required" if is_low else f"above the {end.text} allowed"
    by = format_quantity(abs(value - end.value), _printed(end.unit))
    if end.unit not in ("dB", "%") and end.value and math.isfinite(value):
        by += f" ({format_quantity(abs(value / end.value - 1.0) * 100.0, '%')})"
    source = f"; set by {figure.part}" if figure.part and limit.figure != "current" else ""
    helps = (limit.figure == "low_corner") != is_low and figure.advice
    return _finding(
        "limit-missed",
        f"{figure.name} {format_quantity(value, _printed(end.unit))} is {side}, by {by}{source}",
        end.span,
        figure.advice if helps else "Change the circuit, or the limit if it asks too much.",
    )


def _unknown(limit: Limit, figure: _Figure, end: Quantity) -> LimitRow:
    if figure.values:
        only = " or ".join(figure.values)
        reason = f"it is known in {only}, the limit is in {end.unit}"
    else:
        reason = figure.reason
    problem = _finding(
        "limit-unknown",
        f"{figure.name} cannot be held against {end.text}: {reason}",
        end.span,
        "Remove the limit, or complete what the analysis lacks.",
    )
    return _row(limit, figure, None, end.unit, UNKNOWN, problem)


def _unknown_subject(limit: Limit, review: Review) -> LimitRow:
    is_node = limit.figure == "node_voltage"
    known = [row.node for row in review.nodes] if is_node else [t.name for t in review.transistors]
    what = "node" if is_node else "transistor"
    shown = ", ".join(known[:10]) + (" …" if len(known) > 10 else "")
    problem = _finding(
        "limit-subject-unknown",
        f"there is no {what} {limit.subject[:60]!r} in the circuit",
        limit.span,
        f"Name one of: {shown}." if known else "Remove the limit.",
    )
    figure = _Figure(f"{limit.figure.replace('_', ' ')} of {limit.subject}", {})
    return _row(limit, figure, None, "V" if is_node else "A", UNKNOWN, problem)


def _row(
    limit: Limit,
    figure: _Figure,
    value: float | None,
    unit: str,
    verdict: str,
    problem: Problem | None,
) -> LimitRow:
    return LimitRow(
        figure.name,
        value,
        unit,
        limit.minimum.text if limit.minimum else "",
        limit.maximum.text if limit.maximum else "",
        verdict,
        figure.part,
        problem,
    )


def _printed(unit: str) -> str:
    return "" if unit == "V/V" else unit


def _finding(code: str, message: str, span: SourceSpan, advice: str) -> Problem:
    return Problem(code, CODES[code][0], message, span, advice)


# Capacitors ---------------------------------------------------------------------------------------


def _margins(
    limit: Limit, classes: tuple[CapacitorClass, ...], path: PathRow
) -> Iterator[LimitRow]:
    on_board = {row.name: row for row in path.time_constants if row.dc_voltage_v is not None}
    for row in on_board.values():
        yield _judge(limit, _margin(row, classes))


def _margin(row: TimeConstantRow, classes: tuple[CapacitorClass, ...]) -> _Figure:
    name = f"voltage margin of {row.name}"
    found = class_of(row.name, classes)
    assert row.dc_voltage_v is not None
    if found is None or found.rated_voltage_v is None:
        reason = "no class of [capacitors] gives its rated_voltage"
        return _Figure(name, {}, row.name, reason)
    margin = found.rated_voltage_v - abs(row.dc_voltage_v)
    values = {"V": margin, "%": 100.0 * margin / found.rated_voltage_v}
    return _Figure(name, values, row.name)


def class_of(part: str, classes: Iterable[CapacitorClass]) -> CapacitorClass | None:
    """The first class one of whose patterns matches the designator."""
    lower = part.lower()
    return next(
        (c for c in classes if any(fnmatch.fnmatchcase(lower, p) for p in c.match)),
        None,
    )


# Dominance ----------------------------------------------------------------------------------------


def _check_dominance(asked: Dominance, path: PathRow) -> LimitRow:
    corner = path.low if asked.end == "low" else path.high
    set_by = corner.set_by if corner is not None else ()
    wanted = plain_name(asked.part)
    name = f"{asked.end} corner set by {asked.part}"
    here = [part for part in set_by if plain_name(part) == wanted]
    problem = None
    if wanted not in {plain_name(row.name) for row in path.time_constants}:
        verdict = UNKNOWN
        message = f"there is no capacitor or inductor {asked.part[:60]!r} in the circuit"
        problem = _finding("limit-subject-unknown", message, asked.span, "Correct the name.")
    elif not set_by:
        verdict = UNKNOWN
        why = "; ".join(corner.notes if corner else path.notes) or "the path has no passband"
        message = f"no part sets the {asked.end} corner, {asked.part} included: {why}"
        problem = _finding("limit-unknown", message, asked.span, "Remove the limit.")
    elif not here:
        verdict = MISSED
        message = f"{', '.join(set_by)} sets the {asked.end} corner, not {asked.part}"
        if shares := _shares(asked, set_by[0], path):
            message += f" ({shares})"
        advice = "Change their values until the right one leads."
        problem = _finding("limit-dominance", message, asked.span, advice)
    elif len(set_by) > 1:
        verdict = TIE
        message = f"{asked.part} ties with others at the {asked.end} corner: {', '.join(set_by)}"
        advice = "Set them further apart, or accept that tolerance decides."
        problem = _finding("limit-dominance-tie", message, asked.span, advice)
    else:
        verdict = MET
    return LimitRow(name, None, "", "", "", verdict, ", ".join(set_by), problem)


def _shares(asked: Dominance, leader: str, path: PathRow) -> str:
    shares = {
        plain_name(row.name): row.share
        for row in path.time_constants
        if row.end == asked.end and row.share is not None
    }
    pair = [(name, shares.get(plain_name(name))) for name in (leader, asked.part)]
    return ", ".join(f"{name} {share:.0%} of the sum" for name, share in pair if share is not None)


def plain_name(part: str) -> str:
    """Letter case and the ways to type π and μ do not matter."""
    name = part.casefold().replace("\u00b5", "\u03bc")
    head, dot, last = name.rpartition(".")
    spelled = {"cpi": "cπ", "cmu": "cμ"}.get(last, last)
    return f"{head}{dot}{spelled}"
