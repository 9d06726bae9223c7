"""The ledgers of the two ends: every time constant with its share, the sum beside the exact."""

from __future__ import annotations

from tauledger.report.layout import BLANK, Column, Line, Piece, Row, paragraph, table
from tauledger.report.page import BOUND, Page
from tauledger.review.rows import CornerRow, PathRow, TimeConstantRow

_CLOSE = 0.0005
"""An estimate this near the exact figure prints as equal."""
_FAR = 100.0
"""Ratio to the corner beyond which a zero is left to the JSON report."""


def end_ledger(page: Page, path: PathRow, end: str) -> list[Line]:
    """The section of one end, ``low`` or ``high``; present even when it has no corner."""
    corner = path.low if end == "low" else path.high
    rows = _rows(page, path, end)
    other = _rows(page, path, "high" if end == "low" else "low")
    lines = [page.heading(_TITLES[end])]
    lines += table(_columns(page), rows, page.width, beside=other)
    if rows:
        lines.append(BLANK)
    if corner is not None:
        lines += _conclusion(page, corner)
    else:
        lines += paragraph(f"no {end} corner", page.width, " ")
    return [*lines, BLANK]


_TITLES = {
    "low": "Low end: short-circuit time constants",
    "high": "High end: open-circuit time constants",
}
_SUMS = {"low": "sum of corners", "high": "corner of summed τ"}


def _columns(page: Page) -> tuple[Column, ...]:
    return (
        Column("part"),
        Column("role", flexible=True),
        Column("value", right=True),
        Column("sees", right=True),
        Column(page.spell("τ"), right=True),
        Column("corner", right=True),
        Column("share", right=True),
        Column("exact", right=True),
        Column("", style="bar"),
    )


def _rows(page: Page, path: PathRow, end: str) -> list[Row]:
    """The parts of one end, largest share first."""
    corner = path.low if end == "low" else path.high
    rows = [row for row in path.time_constants if row.end == end]
    rows.sort(key=lambda row: -(row.share or 0.0))
    return [_row(page, row, corner) for row in rows]


def _row(page: Page, row: TimeConstantRow, corner: CornerRow | None) -> Row:
    cells = (
        page.name(row.name),
        page.text(row.role),
        page.quantity(row.value, row.unit),
        page.quantity(row.resistance_ohm, "Ω"),
        page.quantity(row.tau_s, "s"),
        page.quantity(row.corner_hz, "Hz"),
        page.percent(row.share),
        page.percent(None if row.exact_move is None else -row.exact_move),
        page.bar(row.share),
    )
    detail = _detail(page, row, corner)
    sets = corner is not None and row.name in corner.set_by
    return Row(cells, (detail,) if detail else (), style="strong" if sets else "")


def _detail(page: Page, row: TimeConstantRow, corner: CornerRow | None) -> str:
    """Between which nodes, the DC across it, the hand expression, its own zero."""
    parts = []
    # The name of a device capacitance already says between which terminals it lies.
    if row.role != "device":
        parts.append(f"{page.name(row.nodes[0])} to {page.name(row.nodes[1])}")
    if row.dc_voltage_v is not None:
        parts.append(f"{page.quantity(row.dc_voltage_v, 'V')}{BOUND}DC")
    if row.expression:
        parts.append(f"sees {page.text(row.expression)}{_deviation(page, row)}")
    if row.zero_hz is not None and _matters(row.zero_hz, corner):
        parts.append(f"zero at{BOUND}{page.quantity(row.zero_hz, 'Hz')}")
    return "; ".join(parts)


def _matters(zero_hz: float, corner: CornerRow | None) -> bool:
    """Whether a zero lies near enough to the corner to be worth a reader's time."""
    if corner is None or not corner.exact_hz:
        return True
    return 1 / _FAR <= abs(zero_hz) / corner.exact_hz <= _FAR


def _deviation(page: Page, row: TimeConstantRow) -> str:
    deviation = row.expression_deviation
    if deviation is None or abs(deviation) < _CLOSE:
        return ""
    return f" ({page.signed_percent(deviation)})"


def _conclusion(page: Page, corner: CornerRow) -> list[Line]:
    """Sum beside exact, poles and zeros, and the notes that say why they differ."""
    lines: list[Line] = []
    if corner.estimate_hz is None and corner.exact_hz is None:
        lines.append((Piece(f" no {corner.end} corner"),))
    else:
        lines.append(_sum_line(page, corner))
        lines += _better(page, corner)
    for label, roots in (("poles", corner.poles_hz), ("zeros", corner.zeros_hz)):
        if roots:
            first = f" {label}  "
            lines += paragraph(page.roots(roots), page.width, " " * len(first), first)
    if any(pole.real > 0 for pole in corner.poles_hz):
        lines.append(
            (Piece(" a pole with a positive real part: the circuit is not stable", "alarm"),)
        )
    for note in (*corner.notes, *corner.changes, *corner.timing):
        lines += paragraph(page.text(note), page.width, "   ", " - ")
    return lines


def _better(page: Page, corner: CornerRow) -> list[Line]:
    """The improved estimate with the name of its method, and the bounds that hold."""
    text = ""
    if corner.improved_hz is not None and corner.improved_hz != corner.estimate_hz:
        text = (
            f"better estimate {page.quantity(corner.improved_hz, 'Hz')} by "
            f"{page.text(corner.improved_method)}"
        )
        if corner.improved_error is not None:
            text += f" ({page.signed_percent(corner.improved_error)})"
    low, high = corner.lowest_hz, corner.highest_hz
    if low is not None and high is not None and high / low - 1.0 < _CLOSE:
        low = high = None
    if low is not None or high is not None:
        words = [f"above {page.quantity(low, 'Hz')}"] if low is not None else []
        words += [f"below {page.quantity(high, 'Hz')}"] if high is not None else []
        text += ("; " if text else "") + "real poles put it " + " and ".join(words)
    return paragraph(text, page.width, "   ", " ") if text else []


def _sum_line(page: Page, corner: CornerRow) -> Line:
    gap = Piece("     ")
    return (
        Piece(f" {page.spell(_SUMS[corner.end])}  "),
        Piece(page.quantity(corner.estimate_hz, "Hz"), "strong"),
        gap,
        Piece("exact  "),
        Piece(page.quantity(corner.exact_hz, "Hz"), "strong"),
        gap,
        Piece(_judgement(corner.estimate_error), "faint"),
    )


def _judgement(error: float | None) -> str:
    if error is None:
        return ""
    if abs(error) < _CLOSE:
        return f"the estimate agrees within 0.1{BOUND}%"
    return f"the estimate is {100 * abs(error):.1f}{BOUND}% {'high' if error > 0 else 'low'}"
