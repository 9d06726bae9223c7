"""The section that stands when a simulator was run: its figures beside ours."""

from __future__ import annotations

from tauledger.report.layout import BLANK, Column, Line, Row, paragraph, table
from tauledger.report.page import Page
from tauledger.review.rows import ComparisonRow, SimulatedRow

_SHOWN = 60
_CLOSE = 1e-4
"""Both sides' corners are good to this."""


def comparison(page: Page, simulated: SimulatedRow | None) -> list[Line]:
    """Estimate, exact and simulated figure, and how far the simulator is from the exact one."""
    if simulated is None:
        return []
    columns = (
        Column("figure"),
        Column("estimate", right=True),
        Column("exact", right=True),
        Column(page.text(simulated.simulator), right=True, style="strong"),
        Column("against exact", right=True),
    )
    rows = [_row(page, figure) for figure in simulated.figures[:_SHOWN]]
    title = page.text(f"Beside {simulated.simulator}")
    lines = [page.heading(title), *table(columns, rows, page.width)]
    if len(simulated.figures) > _SHOWN:
        more = f"{len(simulated.figures) - _SHOWN} more figures: --format json lists all"
        lines += paragraph(more, page.width, " ", style="faint")
    return [*lines, BLANK]


def _row(page: Page, row: ComparisonRow) -> Row:
    name = page.text(f"{row.figure} of {page.name(row.part)}" if row.part else row.figure)
    values = (_value(page, value, row.unit) for value in (row.estimate, row.exact, row.simulated))
    return Row((name, *values, _difference(page, row.difference)))


def _difference(page: Page, difference: float | None) -> str:
    if difference is None:
        return page.spell("—")
    if abs(difference) < _CLOSE:
        return f"<{100 * _CLOSE:g} %"
    return f"{100 * difference:+.2f} %"


def _value(page: Page, value: float | None, unit: str) -> str:
    return page.quantity(value, unit) if value is None else page.gain(value, unit)
