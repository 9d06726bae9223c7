"""The result in a notebook cell: one small table, self-contained, every word escaped."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from html import escape

from tauledger.quantity import format_quantity
from tauledger.report.inert import clip, inert
from tauledger.review.rows import CornerRow, PathRow, Review

_LONGEST = 200
_TRANSISTORS_SHOWN = 12
_PARTS_SHOWN = 12


def notebook_html(review: Review) -> str:
    """What the amplifier does, what sets its corners, and its bias; an HTML fragment."""
    blocks = [f"<strong>{_text(review.title or review.netlist)}</strong>"]
    for path in review.paths:
        blocks.append(_table((), _path(path)))
        if rows := list(_constants(path)):
            heads = ("end", "part", "role", "value", "sees", "corner", "share")
            blocks.append(_table(heads, rows))
    if review.transistors:
        rows = [
            (row.name, row.configuration, row.region, _figure(row.current_a, "A"))
            for row in review.transistors[:_TRANSISTORS_SHOWN]
        ]
        blocks.append(_table(("transistor", "configuration", "region", "current"), rows))
        if (more := len(review.transistors) - _TRANSISTORS_SHOWN) > 0:
            blocks.append(f"<p>{more} more transistors</p>")
    return f"<div>{''.join(blocks)}</div>"


def _path(path: PathRow) -> Iterator[tuple[str, str]]:
    yield "signal path", f"{path.input} → {path.output}"
    if path.gain is not None:
        unit = path.gain_unit
        gain = f"{_figure(path.gain, '')} V/V" if unit == "V/V" else _figure(path.gain, unit)
        yield "midband gain", f"{gain}, {_figure(path.gain_db, 'dB')}"
    yield "low corner", _corner(path.low)
    yield "high corner", _corner(path.high)
    yield "input resistance", _figure(path.input_resistance_ohm, "Ω")
    yield "output resistance", _figure(path.output_resistance_ohm, "Ω")


def _corner(row: CornerRow | None) -> str:
    if row is None or row.exact_hz is None:
        return "none"
    by = f", set by {' and '.join(row.set_by)}" if row.set_by else ""
    return f"{_figure(row.exact_hz, 'Hz')} (estimate {_figure(row.estimate_hz, 'Hz')}){by}"


def _constants(path: PathRow) -> Iterator[tuple[str, ...]]:
    """The parts that count, largest share of each end first."""
    counted = [row for row in path.time_constants if row.share is not None]
    counted.sort(key=lambda row: (row.end != "low", -(row.share or 0.0)))
    for row in counted[:_PARTS_SHOWN]:
        yield (
            row.end,
            row.name,
            row.role,
            _figure(row.value, row.unit),
            _figure(row.resistance_ohm, "Ω"),
            _figure(row.corner_hz, "Hz"),
            f"{100 * (row.share or 0.0):.1f} %",
        )


def _figure(value: float | None, unit: str) -> str:
    return "—" if value is None else format_quantity(value, unit)


def _table(heads: Iterable[str], rows: Iterable[Iterable[str]]) -> str:
    head = "".join(f"<th>{_text(cell)}</th>" for cell in heads)
    body = "".join(f"<tr>{''.join(f'<td>{_text(c)}</td>' for c in row)}</tr>" for row in rows)
    return f"<table>{f'<tr>{head}</tr>' if head else ''}{body}</table>"


def _text(words: str) -> str:
    return escape(clip(inert(words), _LONGEST))
