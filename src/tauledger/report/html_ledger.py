"""The two ledgers of time constants as bars, and the circuit that each part sees."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping

from tauledger.quantity import format_quantity
from tauledger.report.expressions import Bridge, HandExpression, parse_hand
from tauledger.report.html_text import (
    NAME_COLUMNS,
    Head,
    bar,
    listing,
    name,
    number,
    percent,
    quantity,
    roots,
    section,
    set_node,
    symbol,
    table,
    text,
)
from tauledger.report.schematic import Drawing, draw_seen
from tauledger.review.rows import CornerRow, PathRow, TimeConstantRow

_ROWS_SHOWN = 200
_DRAWN = 40
_BROAD = 420.0
"""A drawing wider than this takes a row for itself."""
_FITS = 350.0
"""A drawing no wider than this needs no scrolling on a telephone."""
_CLOSE = 0.0005
"""An expression this near is not said to deviate."""
_FAR = 100.0
"""Ratio to the corner beyond which a zero is left to the JSON report."""
_ENDS = {
    "low": ("Low end", "Short-circuit time constants: each part with the others of its end short."),
    "high": ("High end", "Open-circuit time constants: each part with the others of its end open."),
}
_SUMS = {"low": "sum of corners", "high": "corner of summed τ"}


def ledger(path: PathRow, end: str, symbols: Mapping[str, float]) -> str:
    """The section of one end: bars, sums, notes, drawings."""
    corner = path.low if end == "low" else path.high
    rows = [row for row in path.time_constants if row.end == end]
    rows.sort(key=lambda row: -(row.share or 0.0))
    heading, aside = _ENDS[end]
    body = _table(rows[:_ROWS_SHOWN], corner, end) if rows else "<p>No part counts at this end.</p>"
    body += _more(len(rows) - _ROWS_SHOWN, "parts")
    if corner is not None:
        body += _sums(corner) + listing(_notes(corner))
    figures = [
        _seen(row, corner, symbols, f"see-{end}-{place}")
        for place, row in enumerate(rows[:_DRAWN])
        if row.resistance_ohm is not None
    ]
    if figures:
        body += (
            f'<h3>What each part sees</h3><div class="seen {end}-end">{"".join(figures)}</div>'
            + _more(len(rows) - _DRAWN, "parts")
        )
    return section(f"{end}-end", heading, body, aside)


def _table(rows: Iterable[TimeConstantRow], corner: CornerRow | None, end: str) -> str:
    heads = (
        Head("part"),
        Head("share of the sum"),
        Head("corner", True),
        Head("value", True),
        Head("sees", True),
        Head("τ", True),
        Head("pull on the<br>exact corner", True),
        Head("role"),
    )
    sets = corner.set_by if corner is not None else ()
    cells = [
        (
            f'<span class="sets">{name(row.name)}</span>' if row.name in sets else name(row.name),
            f'<span class="n">{bar(row.share, end)}{percent(row.share)}</span>',
            quantity(row.corner_hz, "Hz"),
            quantity(row.value, row.unit),
            quantity(row.resistance_ohm, "Ω"),
            quantity(row.tau_s, "s"),
            percent(None if row.exact_move is None else -row.exact_move),
            text(row.role),
        )
        for row in rows
    ]
    caption = f"Time constants of the {end} end"
    if sets:
        caption += "; marked: what sets the corner"
    return table(caption, heads, cells)


def _sums(corner: CornerRow) -> str:
    entries: list[tuple[str, str]] = []
    if corner.estimate_hz is not None:
        error = ""
        if corner.estimate_error is not None:
            error = f" ({percent(corner.estimate_error, signed=True)} against exact)"
        entries.append((_SUMS[corner.end], quantity(corner.estimate_hz, "Hz") + error))
    if corner.improved_hz is not None and corner.improved_hz != corner.estimate_hz:
        error = ""
        if corner.improved_error is not None:
            error = f" ({percent(corner.improved_error, signed=True)})"
        method = f", by {text(corner.improved_method)}" if corner.improved_method else ""
        entries.append(("better estimate", quantity(corner.improved_hz, "Hz") + error + method))
    bounds = [
        f"{word} {quantity(value, 'Hz')}"
        for word, value in (("above", corner.lowest_hz), ("below", corner.highest_hz))
        if value is not None
    ]
    if bounds:
        entries.append(("bounds, real poles", " and ".join(bounds)))
    entries.append(("exact", f"<b>{quantity(corner.exact_hz, 'Hz')}</b>"))
    for words, values in (("poles", corner.poles_hz), ("zeros", corner.zeros_hz)):
        if values:
            entries.append((words, roots(values)))
    shown = "".join(f"<dt>{words}</dt><dd>{value}</dd>" for words, value in entries)
    return f'<dl class="sums">{shown}</dl>'


def _notes(corner: CornerRow) -> Iterator[str]:
    if any(pole.real > 0 for pole in corner.poles_hz):
        yield '<span class="alarm">a pole with a positive real part: not stable</span>'
    for words in (*corner.notes, *corner.changes, *corner.timing):
        yield text(words)


# What a part sees ---------------------------------------------------------------------------------


def _seen(
    row: TimeConstantRow, corner: CornerRow | None, symbols: Mapping[str, float], anchor: str
) -> str:
    value = format_quantity(row.value, row.unit)
    drawing = None
    if row.expression:
        drawing = draw_seen(
            row.expression, row.name, value, _ends(row), row.resistance_ohm, symbols, anchor
        )
    facts = [f"<b>{name(row.name)}</b> sees {quantity(row.resistance_ohm, 'Ω')}"]
    if row.role != "device":
        facts[0] += f", {name(row.nodes[0])} to {name(row.nodes[1])}"
    if row.dc_voltage_v is not None:
        facts.append(f"{quantity(row.dc_voltage_v, 'V')} DC across it")
    if row.zero_hz is not None and _matters(row.zero_hz, corner):
        facts.append(f"zero at {quantity(row.zero_hz, 'Hz')}")
    lines = [f"<p>{'; '.join(facts)}</p>"]
    if row.expression:
        lines.append(f'<p class="ex">= {_expression(row)}</p>')
    elif row.expression_reason:
        lines.append(f'<p class="small">no expression: {text(row.expression_reason)}</p>')
    if drawing is not None:
        lines += _key(drawing, row)
    picture = _scrolled(drawing, row.name) if drawing is not None else ""
    broad = ' class="broad"' if drawing is not None and drawing.width > _BROAD else ""
    return f"<figure{broad}>{picture}<figcaption>{''.join(lines)}</figcaption></figure>"


def _matters(zero_hz: float, corner: CornerRow | None) -> bool:
    """Whether a zero lies near enough to the corner to be worth a reader's time."""
    if corner is None or not corner.exact_hz:
        return True
    return 1 / _FAR <= abs(zero_hz) / corner.exact_hz <= _FAR


def _scrolled(drawing: Drawing, part: str) -> str:
    """A drawing in a frame, which the keyboard reaches where it may need scrolling."""
    if drawing.width <= _FITS:
        return f'<div class="sc">{drawing.svg}</div>'
    label = f"Circuit that {text(part, NAME_COLUMNS)} sees"
    return f'<div class="sc" tabindex="0" role="group" aria-label="{label}">{drawing.svg}</div>'


def _ends(row: TimeConstantRow) -> tuple[str, str]:
    """The nodes, or the terminals of the device whose capacitance it is."""
    if row.role != "device":
        return row.nodes
    first, second = (node.rpartition(".")[2].removesuffix("_internal") for node in row.nodes)
    return first, second


def _expression(row: TimeConstantRow) -> str:
    hand = parse_hand(row.expression)
    shown = text(row.expression) if hand is None else _set_hand(hand)
    deviation = row.expression_deviation
    if deviation is None or abs(deviation) < _CLOSE:
        return shown
    return f'{shown} <span class="small">({percent(deviation, signed=True)})</span>'


def _set_hand(hand: HandExpression) -> str:
    """The expression and what its abbreviations stand for.

    The two sides of a bridge are called R with in and out: R1 and R2 may be parts of the board.
    """
    if isinstance(hand.body, Bridge):
        primed = "gm'" in hand.definitions
        gm = symbol("gm'") if primed else set_node(hand.body.transconductance, 3)
        first, second = "<i>R</i><sub>in</sub>", "<i>R</i><sub>out</sub>"
        dot = '<span class="dot">·</span>'
        body = f"{first} + {second} + {gm}{dot}{first}{dot}{second}"
        where = [
            f"{first} = {set_node(hand.body.first)}",
            f"{second} = {set_node(hand.body.second)}",
        ]
        where += [f"{gm} = {set_node(hand.body.transconductance)}"] if primed else []
    else:
        whole = hand.body
        within = 2 if hand.feedback and whole.kind in ("sum", "parallel", "minus") else 0
        body = set_node(whole, 3 if within else 0)
        where = [f"{symbol(key)} = {set_node(node)}" for key, node in hand.definitions.items()]
    if hand.feedback:
        short, opened = (f"1 + {number(f'{value:.3g}')}" for value in hand.feedback)
        if isinstance(hand.body, Bridge):
            body = f"({body})"
        body += (
            f'<span class="dot">·</span><span class="fr"><span>{short}</span>'
            f'<span class="vh">/</span><span>{opened}</span></span>'
        )
    return "<br>".join([body, *where])


def _key(drawing: Drawing, row: TimeConstantRow) -> Iterator[str]:
    """What the letters of the drawing stand for, and what it leaves out."""
    for letter, node in drawing.key:
        yield f'<p class="small">({letter}) <span class="ex">{set_node(node)}</span></p>'
    hand = parse_hand(row.expression)
    if hand is not None and hand.feedback:
        short, opened = hand.feedback
        factor = format_quantity((1.0 + short) / (1.0 + opened), "")
        yield (
            f'<p class="small">drawn with the transconductance of {name(hand.around)} at zero; its '
            f"feedback multiplies the resistance by {factor}</p>"
        )


def uncounted(rows: Iterable[TimeConstantRow]) -> str:
    """Parts in neither sum, each with the reason."""
    idle = [row for row in rows if row.end not in ("low", "high")]
    if not idle:
        return ""
    heads = (Head("part"), Head("value", True), Head("role"), Head("why", is_prose=True))
    cells = [
        (
            name(row.name),
            quantity(row.value, row.unit),
            text(row.role),
            text(f"{row.end}: {row.reason}" if row.reason else row.end),
        )
        for row in idle[:_ROWS_SHOWN]
    ]
    body = table("Parts in neither sum", heads, cells, True)
    return section("others", "In neither sum", body + _more(len(idle) - _ROWS_SHOWN, "parts"))


def _more(count: int, what: str) -> str:
    return (
        f'<p class="small">{count} more {what}: --format json lists all.</p>' if count > 0 else ""
    )
