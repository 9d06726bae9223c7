"""Choice of parts, stress and temperature as lines of the text page."""

from __future__ import annotations

from collections.abc import Sequence

from tauledger.report.layout import BLANK, Column, Line, Row, paragraph, table
from tauledger.report.page import Page
from tauledger.review.decisions import (
    Alternative,
    CapacitorStress,
    Choice,
    DeviceStress,
    FittedRow,
    ResistorStress,
    Stress,
    TemperatureSweep,
)

_HOTTEST_SHOWN = 8
_TIMES = 9.0
"""From this margin on, 900 %, a ratio reads better."""


def choice_page(page: Page, choice: Choice) -> list[Line]:
    """The whole answer of ``tauledger choose``."""
    lines = [*paragraph(page.title(choice.title), page.width, style="title")]
    word = "at most" if choice.end == "low" else "at least"
    wanted = f"{choice.end} corner {word} {page.quantity(choice.target_hz, 'Hz')}"
    if choice.margin_asked:
        wanted += f" with a margin of {100 * choice.margin_asked:g} %"
    if choice.with_tolerance:
        wanted += ", in the worst case of all tolerances"
    now = page.quantity(choice.now_hz, "Hz") if choice.now_hz is not None else "none"
    lines += paragraph(page.spell(f"{wanted}; now {now}"), page.width, "   ", " ")
    if choice.infeasible:
        sentence = f"it cannot be met: {choice.infeasible}"
        lines += paragraph(page.text(sentence), page.width, "   ", " ", "alarm")
    lines.append(BLANK)
    for number, alternative in enumerate(choice.alternatives, 1):
        lines += _alternative(page, choice, alternative, number)
    for note in choice.notes:
        lines += paragraph(page.text(note), page.width, "   ", " - ")
    return lines


def _alternative(page: Page, choice: Choice, way: Alternative, number: int) -> list[Line]:
    columns = (
        Column("part", flexible=True),
        Column("now", right=True),
        Column("fit", right=True, style="strong"),
        Column("from"),
        Column("closed form", right=True),
    )
    rows = [Row(_fitted(page, part)) for part in way.parts]
    sentences = [
        _corner(page, choice, way),
        f"{_settling(page, choice, way)}; {page.quantity(way.total_f, 'F')} in all, "
        f"{way.values} different value{'s' if way.values > 1 else ''}",
    ]
    if way.peak_db >= 0.1:
        sentences.append(f"the response peaks by {way.peak_db:.1f} dB before it falls")
    lines = [page.heading(f"{number}. {way.rule[:1].upper()}{way.rule[1:]}")]
    lines += table(columns, rows, page.width)
    for sentence in sentences:
        lines += paragraph(page.spell(sentence), page.width, "   ", " ")
    return [*lines, BLANK]


def _corner(page: Page, choice: Choice, way: Alternative) -> str:
    """The corner, and the margin it leaves to the target."""
    corner = f"exact corner {page.quantity(way.corner_hz, 'Hz')}"
    if way.worst_hz is not None:
        corner += f"; worst case {page.quantity(way.worst_hz, 'Hz')}"
    if way.margin >= _TIMES:
        return f"{corner}, {1.0 + way.margin:.0f} times the target"
    side = "below" if choice.end == "low" else "above"
    return f"{corner}, {page.percent(way.margin)} {side} the target"


def _settling(page: Page, choice: Choice, way: Alternative) -> str:
    """How long it settles, and how that compares with the netlist as it stands."""
    if way.settling_s is None:
        return "nothing in it decays"
    sentence = f"settles to 1 % in {page.quantity(way.settling_s, 's')}"
    ratio = way.settling_ratio
    if ratio is None:
        return sentence
    if abs(ratio - 1.0) < 0.005:
        return f"{sentence}, as now"
    times = f"{ratio:.0f}" if ratio >= 10.0 else f"{ratio:.1f}" if ratio >= 1.0 else f"{ratio:.2g}"
    now = page.quantity(choice.now_settling_s, "s")
    return f"{sentence}, {times} times as long as now ({now})"


def _fitted(page: Page, part: FittedRow) -> tuple[str, ...]:
    return (
        page.name(part.part),
        page.quantity(part.old_f, "F"),
        page.quantity(part.new_f, "F"),
        page.text(part.series),
        page.quantity(part.ideal_f, "F"),
    )


def stress_page(page: Page, stress: Stress) -> list[Line]:
    """The whole answer of ``tauledger stress``; findings go to the error stream."""
    lines = [*paragraph(page.title(stress.title), page.width, style="title")]
    settling = (
        f"after switch-on it settles to 1 % in {page.quantity(stress.settling_s, 's')}, from the "
        f"slowest pole at {page.quantity(stress.slowest_pole_hz, 'Hz')}"
        if stress.settling_s is not None
        else "nothing in it stores charge for long: it has no settling time"
    )
    lines += paragraph(page.spell(settling), page.width, "   ", " ", "verdict")
    lines += _effective_corners(page, stress)
    lines.append(BLANK)
    lines += _capacitors(page, stress)
    lines += _resistors(page, stress)
    lines += _devices(page, stress)
    for note in stress.notes:
        lines += paragraph(page.text(note), page.width, "   ", " - ")
    return lines


def _effective_corners(page: Page, stress: Stress) -> list[Line]:
    found = []
    for end, nominal, left in (
        ("low", stress.low_hz, stress.low_effective_hz),
        ("high", stress.high_hz, stress.high_effective_hz),
    ):
        if left is not None:
            was = page.quantity(nominal, "Hz")
            found.append(f"{end} corner {page.quantity(left, 'Hz')} (nominal {was})")
    if not found:
        return []
    sentence = f"with the capacitance that is left at voltage and temperature: {', '.join(found)}"
    return paragraph(page.spell(sentence), page.width, "   ", " ", "verdict")


def _capacitors(page: Page, stress: Stress) -> list[Line]:
    columns = (
        Column("part", flexible=True),
        Column("from", flexible=True),
        Column("to", flexible=True),
        Column("value", right=True),
        Column("left", right=True),
        Column("voltage", right=True, style="strong"),
        Column("rated", right=True),
        Column("needed", right=True),
        Column("discharged through", flexible=True),
    )
    rows = [
        Row(_capacitor(page, row), (page.text(row.basis),) if row.basis else ())
        for row in stress.capacitors
    ]
    if not rows:
        return []
    title = f"Capacitors; needed is the rating with {100 * stress.margin:g} % of it to spare"
    return [page.heading(title), *table(columns, rows, page.width), BLANK]


def _capacitor(page: Page, row: CapacitorStress) -> tuple[str, ...]:
    way = "nothing"
    if row.discharge_tau_s is not None:
        through = page.text(row.discharge or "a short")
        way = page.spell(f"{through}, τ {page.quantity(row.discharge_tau_s, 's')}")
    return (
        page.name(row.part) + (" +" if row.polarised else ""),
        page.name(row.nodes[0]),
        page.name(row.nodes[1]),
        page.quantity(row.capacitance_f, "F"),
        page.quantity(row.effective_f, "F"),
        page.quantity(row.voltage_v, "V"),
        page.quantity(row.rated_v, "V"),
        page.quantity(row.required_v, "V"),
        way,
    )


def _resistors(page: Page, stress: Stress) -> list[Line]:
    columns = (
        Column("part", flexible=True),
        Column("dissipation", right=True, style="strong"),
        Column("rated", right=True),
        Column("load", right=True),
    )
    ranked = sorted(stress.resistors, key=_coolness)
    rows = [
        Row(
            (
                page.name(row.part),
                _heat(page, row.power_w),
                page.quantity(row.rated_w, "W"),
                page.percent(row.load),
            )
        )
        for row in ranked[:_HOTTEST_SHOWN]
    ]
    return _hottest(page, "Resistors", columns, rows, len(ranked))


def _devices(page: Page, stress: Stress) -> list[Line]:
    columns = (
        Column("part", flexible=True),
        Column("model", flexible=True),
        Column("dissipation", right=True, style="strong"),
        Column("rated", right=True),
        Column("load", right=True),
    )
    ranked = sorted(stress.devices, key=_coolness)
    rows = [
        Row(
            (
                page.name(row.part),
                page.name(row.model),
                _heat(page, row.power_w),
                page.quantity(row.rated_w, "W"),
                page.percent(row.load),
            ),
            (page.text(f"rated by {row.basis}"),) if row.basis else (),
        )
        for row in ranked[:_HOTTEST_SHOWN]
    ]
    return _hottest(page, "Transistors and diodes", columns, rows, len(ranked))


def _heat(page: Page, power_w: float) -> str:
    """Below a picowatt the figure is what rounding has left of the voltages."""
    return page.text("< 1 pW") if 0.0 < power_w < 1e-12 else page.quantity(power_w, "W")


def _coolness(row: ResistorStress | DeviceStress) -> float:
    """Twins stay in the order of the netlist, whatever a machine makes of their last digits."""
    return -float(f"{row.power_w:.6g}")


def _hottest(
    page: Page, what: str, columns: Sequence[Column], rows: Sequence[Row], count: int
) -> list[Line]:
    if not rows:
        return []
    more = count - len(rows)
    title = f"{what}, hottest first" + (
        f" ({more} cooler {'one' if more == 1 else 'ones'} not shown)" if more else ""
    )
    return [page.heading(title), *table(columns, rows, page.width), BLANK]


def temperature_page(page: Page, sweep: TemperatureSweep) -> list[Line]:
    """The whole answer of ``tauledger temperature``."""
    lines = [*paragraph(page.title(sweep.title), page.width, style="title"), BLANK]
    names = [t.name for t in next((r.transistors for r in sweep.rows if r.transistors), ())]
    columns = (
        Column("temperature", right=True),
        Column("gain", right=True, style="strong"),
        Column("low corner", right=True),
        Column("high corner", right=True),
    )
    unit = "" if sweep.gain_unit == "V/V" else sweep.gain_unit
    rows = [
        Row(
            (
                page.quantity(row.temperature_c, "°C"),
                page.quantity(row.gain, unit),
                page.quantity(row.low_hz, "Hz"),
                page.quantity(row.high_hz, "Hz"),
            )
        )
        for row in sweep.rows
    ]
    lines += [page.heading("Gain and corners"), *table(columns, rows, page.width), BLANK]
    for start in range(0, len(names), 3):
        lines += _bias(page, sweep, names[start : start + 3])
    for note in sweep.notes:
        lines += paragraph(page.text(note), page.width, "   ", " - ")
    return lines


def _bias(page: Page, sweep: TemperatureSweep, names: Sequence[str]) -> list[Line]:
    columns = [Column("temperature", right=True)]
    for name in names:
        columns += [
            Column(f"{page.name(name)} current", right=True),
            Column("voltage", right=True),
        ]
    rows = []
    for row in sweep.rows:
        cells = [page.quantity(row.temperature_c, "°C")]
        at = {transistor.name: transistor for transistor in row.transistors}
        for name in names:
            found = at.get(name)
            cells.append(page.quantity(found.current_a if found else None, "A"))
            cells.append(page.quantity(found.voltage_v if found else None, "V"))
        rows.append(Row(tuple(cells)))
    title = "Bias: collector or drain current, voltage to emitter or source"
    return [page.heading(title), *table(columns, rows, page.width), BLANK]
