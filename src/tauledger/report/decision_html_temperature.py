"""The temperature sweep as one HTML page, in the frame and look of the report's."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from tauledger.report.decision import initial
from tauledger.report.decision_html_plot import SMALL_STYLE, curve_svg
from tauledger.report.html_frame import html_page
from tauledger.report.html_text import Head, listing, name, quantity, section, table, text
from tauledger.review.decisions import TemperatureRow, TemperatureSweep

_METHOD = "Method: bias, gain and exact −3&nbsp;dB corners of the whole board at each temperature."
_CURVES_SHOWN = 24
_COLUMNS_SHOWN = 24


def temperature_html(sweep: TemperatureSweep) -> str:
    """The whole answer of ``tauledger temperature`` as a page."""
    first, last = sweep.rows[0].temperature_c, sweep.rows[-1].temperature_c
    facts = [
        text(sweep.netlist, 200),
        f"{quantity(first, '°C')} to {quantity(last, '°C')} in {len(sweep.rows)} steps",
    ]
    sections = [
        section("curves", "Curves", _curves(sweep) + listing(map(text, sweep.notes))),
        section("figures", "Gain and corners", _figures(sweep)),
    ]
    if bias := _bias(sweep):
        sections.append(section("bias", "Bias", bias))
    return html_page(sweep.title, facts, sections, _METHOD, sweep.version, SMALL_STYLE)


def _transistors(sweep: TemperatureSweep) -> list[str]:
    return [t.name for t in next((r.transistors for r in sweep.rows if r.transistors), ())]


def gain_db(gain: float | None) -> float | None:
    return 20.0 * math.log10(gain) if gain else None


# Curves -------------------------------------------------------------------------------------------


def _curves(sweep: TemperatureSweep) -> str:
    across = [row.temperature_c for row in sweep.rows]
    drawn = []
    for number, (words, unit, values, colour) in enumerate(_series(sweep)):
        curve = curve_svg(words, unit, across, values, colour, f"c{number}")
        if curve:
            caption = (
                f"<figcaption><b>{text(initial(words), 60)}</b>{_ends(values, unit)}</figcaption>"
            )
            drawn.append(f"<figure>{curve}{caption}</figure>")
    more = len(_transistors(sweep)) - _CURVES_SHOWN
    rest = f'<p class="small">{more} more transistors: the table has all.</p>' if more > 0 else ""
    return f'<div class="mult">{"".join(drawn)}</div>{rest}'


Series = tuple[str, str, Sequence[float | None], str]
"""Name, unit, values by temperature, colour."""


def _series(sweep: TemperatureSweep) -> Iterator[Series]:
    rows = sweep.rows
    if sweep.gain_unit == "V/V":
        yield "gain", "dB", [gain_db(row.gain) for row in rows], "plain"
    else:
        yield "gain above 1 Ω", "dB", [gain_db(row.gain) for row in rows], "plain"
    yield "low corner", "Hz", [row.low_hz for row in rows], "low"
    yield "high corner", "Hz", [row.high_hz for row in rows], "high"
    for transistor in _transistors(sweep)[:_CURVES_SHOWN]:
        yield f"current of {transistor}", "A", _currents(rows, transistor), "plain"


def _currents(rows: Sequence[TemperatureRow], transistor: str) -> list[float | None]:
    return [
        next((t.current_a for t in row.transistors if t.name == transistor), None) for row in rows
    ]


def _ends(values: Sequence[float | None], unit: str) -> str:
    known = [value for value in values if value is not None]
    return f"{quantity(known[0], unit)} to {quantity(known[-1], unit)}"


# Tables -------------------------------------------------------------------------------------------


def _figures(sweep: TemperatureSweep) -> str:
    heads = [
        Head("temperature"), Head("gain", True), Head("gain in dB", True),
        Head("low corner", True), Head("high corner", True),
    ]  # fmt: skip
    if sweep.gain_unit != "V/V":
        heads[2] = Head("gain in dB above 1\u00a0Ω", True)
    rows = [
        (
            quantity(row.temperature_c, "°C"),
            quantity(row.gain, sweep.gain_unit),
            quantity(gain_db(row.gain), "dB"),
            quantity(row.low_hz, "Hz"),
            quantity(row.high_hz, "Hz"),
        )
        for row in sweep.rows
    ]
    return table("Gain and corners by temperature", heads, rows, hidden_caption=True)


def _bias(sweep: TemperatureSweep) -> str:
    names = _transistors(sweep)
    tables = []
    for start in range(0, len(names), _COLUMNS_SHOWN):
        tables.append(_bias_table(sweep, names[start : start + _COLUMNS_SHOWN]))
    return "".join(tables)


def _bias_table(sweep: TemperatureSweep, names: Sequence[str]) -> str:
    heads = [Head("temperature")]
    for transistor in names:
        heads += [Head(f"{name(transistor)} current", True), Head("voltage", True)]
    rows = []
    for row in sweep.rows:
        at = {transistor.name: transistor for transistor in row.transistors}
        cells = [quantity(row.temperature_c, "°C")]
        for transistor in names:
            found = at.get(transistor)
            cells.append(quantity(found.current_a if found else None, "A"))
            cells.append(quantity(found.voltage_v if found else None, "V"))
        rows.append(tuple(cells))
    caption = "Collector or drain current, voltage to emitter or source"
    return table(caption, heads, rows)
