"""The sections of the text report, in the order an engineer asks: verdict first."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable

from tauledger.problems import Problem, Severity
from tauledger.report.comparison import comparison
from tauledger.report.layout import (
    BLANK,
    Column,
    Line,
    Piece,
    Row,
    pairs,
    paragraph,
    table,
    text_width,
)
from tauledger.report.ledger import end_ledger
from tauledger.report.page import BOUND, Page
from tauledger.review.rows import (
    CornerRow,
    DividerRow,
    NodeRow,
    PathRow,
    Review,
    StageRow,
    TimeConstantRow,
    TransistorRow,
)

_NODES_SHOWN = 60
_PLACES_SHOWN = 4
_CAUTION = (
    "Caution: mains, high voltage, charged or reversed capacitors. Local codes, licensed practice."
)
_METHOD = (
    "Method: short- and open-circuit time constants at the operating point; exact: "
    "−3 dB of the whole linear network."
)


def report_lines(page: Page, review: Review) -> list[Line]:
    """The whole report as lines no wider than the page."""
    lines = _title(page, review)
    for path in review.paths:
        lines += _verdict(page, path)
    if review.comparison is not None:
        from tauledger.report.changes import comparison_section

        lines += comparison_section(page, review.comparison)
    for path in review.paths:
        lines += _path_sections(page, path, named=len(review.paths) > 1)
    lines += _transistors(page, review)
    lines += _nodes(page, review.nodes)
    lines += _problems(page, review.problems)
    return lines + _footer(page, review)


def _title(page: Page, review: Review) -> list[Line]:
    named = review.title.strip() or "untitled netlist"
    title = paragraph(page.title(named), page.width, style="title")
    facts = [page.text(review.netlist), f"{review.temperature_c:g}{BOUND}°C"]
    if review.supply_power_w is not None:
        facts.append(f"{page.quantity(review.supply_power_w, 'W')}{BOUND}from the supplies")
    lines = title + paragraph(page.spell(", ".join(facts)), page.width, style="faint") + [BLANK]
    if not review.paths:
        lines += [(Piece("no signal path: bias only", "alarm"),), BLANK]
    return lines


def _verdict(page: Page, path: PathRow) -> list[Line]:
    """What the amplifier does: gain, band, what sets each corner, resistances."""
    route = f"{page.name(path.input)} {page.spell('→')} {page.name(path.output)}"
    gain = "no midband gain"
    if path.gain is not None:
        gain = page.gain(path.gain, path.gain_unit)
    if path.gain_db is not None:
        gain += f"   {page.quantity(path.gain_db, 'dB')}"
    facts = [("midband", _midband(page, path))]
    facts += [(f"{end} corner", _corner(page, path, end)) for end in ("low", "high")]
    verdict = Piece(f"{gain}   {_band(page, path)}", "verdict")
    lines: list[Line] = [(Piece(f"{route}   "), verdict)]
    if text_width(lines[0]) > page.width:
        lines = [(Piece(route),), (Piece("  "), verdict)]
    for label, text in facts:
        first = f"  {label:<13}"
        lines += paragraph(text, page.width, " " * len(first), first)
    for note in path.notes:
        lines += paragraph(page.text(note), page.width, "    ", "  - ")
    return [*lines, BLANK]


def _band(page: Page, path: PathRow) -> str:
    low, high = (
        page.quantity(corner.exact_hz, "Hz")
        if corner is not None and corner.exact_hz is not None
        else ""
        for corner in (path.low, path.high)
    )
    if low and high:
        return f"{low} to {high}"
    return f"from {low} up" if low else f"up to {high}" if high else "no corner"


def _midband(page: Page, path: PathRow) -> str:
    facts = ["no passband found"]
    if path.midband_hz is not None:
        facts = [f"taken at{BOUND}{page.quantity(path.midband_hz, 'Hz')}"]
    for label, value in (
        ("input", path.input_resistance_ohm),
        ("output", path.output_resistance_ohm),
    ):
        if value is not None:
            facts.append(f"{label} resistance{BOUND}{page.quantity(value, 'Ω')}")
    return ", ".join(facts)


def _corner(page: Page, path: PathRow, end: str) -> str:
    corner = path.low if end == "low" else path.high
    if corner is None or (corner.exact_hz is None and corner.estimate_hz is None):
        why = corner.notes[0] if corner is not None and corner.notes else ""
        return f"none: {page.text(why.removeprefix(f'no {end} corner: '))}" if why else "none"
    exact = "no exact −3 dB point"
    if corner.exact_hz is not None:
        exact = page.quantity(corner.exact_hz, "Hz")
    return f"{page.spell(exact)}, {_set_by(page, path, corner)}"


def _set_by(page: Page, path: PathRow, corner: CornerRow) -> str:
    """The part or the tied parts that set the corner, each with its role and share."""
    if not corner.set_by:
        return "set by no single part"
    rows = {row.name: row for row in path.time_constants if row.end == corner.end}
    named = [_part(page, name, rows.get(name)) for name in corner.set_by]
    tie = " in a tie" if len(named) > 1 else ""
    return f"set by {' and '.join(named)}{tie}"


def _part(page: Page, name: str, row: TimeConstantRow | None) -> str:
    if row is None:
        return page.name(name)
    facts = [page.text(row.role)]
    if row.share is not None:
        facts.append(f"{page.percent(row.share)} of the sum")
    return f"{page.name(name)} ({', '.join(facts)})"


def _path_sections(page: Page, path: PathRow, named: bool) -> list[Line]:
    lines: list[Line] = []
    if named:
        route = f"{page.name(path.input)} {page.spell('→')} {page.name(path.output)}"
        lines += [(Piece(route, "title"),), BLANK]
    lines += _stages(page, path)
    lines += end_ledger(page, path, "low")
    lines += end_ledger(page, path, "high")
    lines += _uncounted(page, path.time_constants)
    return lines + comparison(page, path.simulated)


def _stages(page: Page, path: PathRow) -> list[Line]:
    if not path.stages:
        return []
    columns = (
        Column("stage", right=True),
        Column("transistors", flexible=True),
        Column("configuration", flexible=True),
        Column("from", flexible=True),
        Column("to", flexible=True),
        Column("gain V/V", right=True),
        Column("input R", right=True),
        Column("output R", right=True),
    )
    rows = [_stage_row(page, stage) for stage in path.stages]
    lines = [page.heading("Stages at midband, loaded"), *table(columns, rows, page.width)]
    return [*lines, *_by_inspection(page, path), BLANK]


def _by_inspection(page: Page, path: PathRow) -> list[Line]:
    """The gain a hand analysis finds, beside the exact one."""
    if path.gain_by_inspection is None or path.gain is None:
        return []
    text = (
        f"gain with large capacitors short and small ones open "
        f"{page.quantity(path.gain_by_inspection, path.gain_unit)}, "
        f"exact {page.quantity(path.gain, path.gain_unit)}"
    )
    if path.gain_by_formulas is not None:
        product = page.quantity(path.gain_by_formulas, path.gain_unit)
        text = f"product of the formulas {product}; {text}"
    return [BLANK, *paragraph(text, page.width, " ", " ")]


def _stage_row(page: Page, stage: StageRow) -> Row:
    return Row(
        (
            str(stage.number),
            ", ".join(page.name(name) for name in stage.transistors),
            page.text(stage.configuration),
            page.name(stage.input_node),
            page.name(stage.output_node),
            page.quantity(stage.gain, ""),
            page.quantity(stage.input_resistance_ohm, "Ω"),
            page.quantity(stage.output_resistance_ohm, "Ω"),
        ),
        (page.text(stage.formula),) if stage.formula else (),
    )


def _uncounted(page: Page, rows: tuple[TimeConstantRow, ...]) -> list[Line]:
    """Parts in neither sum, each with the reason."""
    idle = [row for row in rows if row.end not in ("low", "high")]
    if not idle:
        return []
    columns = (
        Column("part"),
        Column("value", right=True),
        Column("role", flexible=True),
        Column("why", flexible=True),
    )
    shown = [
        Row(
            (
                page.name(row.name),
                page.quantity(row.value, row.unit),
                page.text(row.role),
                page.text(f"{row.end}: {row.reason}" if row.reason else row.end),
            )
        )
        for row in idle
    ]
    return [page.heading("Parts in neither sum"), *table(columns, shown, page.width), BLANK]


def _transistors(page: Page, review: Review) -> list[Line]:
    transistors = review.transistors
    if not transistors:
        return []
    lines = [page.heading("Transistors: bias"), *_bias_table(page, transistors)]
    lines += [*_bias_checks(page, review), BLANK]
    lines.append(page.heading("Transistors: small signal"))
    families: dict[tuple[str, ...], list[TransistorRow]] = {}
    for transistor in transistors:
        symbols = tuple(value.symbol for value in transistor.values)
        families.setdefault(symbols, []).append(transistor)
    for symbols, members in families.items():
        columns = [Column("name"), *(Column(page.text(symbol), right=True) for symbol in symbols)]
        rows = [Row((page.name(row.name), *_small_signal(page, row))) for row in members]
        lines += table(columns, rows, page.width)
    return [*lines, BLANK]


def _bias_checks(page: Page, review: Review) -> list[Line]:
    """The dividers by hand, and how far each output can move."""
    found = [_divider(page, row) for row in review.dividers]
    found += [
        _headroom(page, path, named=len(review.paths) > 1)
        for path in review.paths
        if path.headroom is not None
    ]
    lines = [line for text in found for line in paragraph(text, page.width, "   ", " - ")]
    return [BLANK, *lines] if lines else []


def _divider(page: Page, row: DividerRow) -> str:
    text = (
        f"{page.name(row.transistor)} by hand: divider {page.quantity(row.source_v, 'V')} behind "
        f"{page.quantity(row.source_ohm, 'Ω')}, emitter resistor "
        f"{page.quantity(row.emitter_ohm, 'Ω')}, VBE 0.65{BOUND}V: "
        f"IE {page.quantity(row.hand_a, 'A')}, solved {page.quantity(row.solved_a, 'A')} "
        f"({row.difference * 100.0:+.1f}{BOUND}%)"
    )
    return f"{text}: {page.text(row.reason)}" if row.reason else text


def _headroom(page: Page, path: PathRow, named: bool) -> str:
    row = path.headroom
    assert row is not None
    sides = [
        f"{page.quantity(volts, 'V')} {way} ({page.text(limit)})" if volts is not None else ""
        for way, volts, limit in (
            ("up", row.up_v, row.up_limit),
            ("down", row.down_v, row.down_limit),
        )
    ]
    where = f" at {page.name(path.output)}" if named else ""
    moves = ", ".join(side for side in sides if side)
    return f"headroom{where}: {moves}; {page.text(row.method)}"


def _small_signal(page: Page, row: TransistorRow) -> Iterable[str]:
    for value in row.values:
        yield page.quantity(value.value, value.unit)


def _bias_table(page: Page, transistors: tuple[TransistorRow, ...]) -> list[Line]:
    field_effect = ["FET" in row.type for row in transistors]
    with_power = any(row.power_w is not None for row in transistors)
    current, voltage = "IC or ID", "VCE or VDS"
    if all(field_effect):
        current, voltage = "ID", "VDS"
    elif not any(field_effect):
        current, voltage = "IC", "VCE"
    columns = (
        Column("name"),
        Column("type"),
        Column("model", flexible=True),
        Column("configuration", flexible=True),
        Column("region", flexible=True),
        Column(current, right=True),
        Column(voltage, right=True),
        *((Column("power", right=True),) if with_power else ()),
    )
    rows = [
        Row(
            (
                page.name(row.name),
                page.text(row.type),
                page.name(row.model),
                page.text(row.configuration),
                page.text(row.region),
                page.quantity(row.current_a, "A"),
                page.quantity(row.voltage_v, "V"),
                *((page.quantity(row.power_w, "W"),) if with_power else ()),
            )
        )
        for row in transistors
    ]
    return table(columns, rows, page.width)


def _nodes(page: Page, nodes: tuple[NodeRow, ...]) -> list[Line]:
    if not nodes:
        return []
    shown = [
        (page.name(row.node), page.quantity(row.voltage_v, "V")) for row in nodes[:_NODES_SHOWN]
    ]
    lines = [page.heading("Node voltages"), *pairs(shown, page.width)]
    if len(nodes) > _NODES_SHOWN:
        more = f"{len(nodes) - _NODES_SHOWN} more nodes: --format json lists all"
        lines += paragraph(more, page.width, " ", style="faint")
    return [*lines, BLANK]


def _problems(page: Page, problems: tuple[Problem, ...]) -> list[Line]:
    """How many of each severity, and where; the full messages go to stderr."""
    if not problems:
        return []
    counts = Counter(problem.severity for problem in problems)
    lines = [page.heading("Problems")]
    for severity in Severity:
        if counts[severity]:
            number = counts[severity]
            chosen = [problem for problem in problems if problem.severity is severity]
            places = ", ".join(_place(page, problem) for problem in chosen[:_PLACES_SHOWN])
            more = number - _PLACES_SHOWN
            tail = f" and {more} more" if more > 0 else ""
            first = f" {number} {severity.value}{'s' if number > 1 else ''}: "
            style = "alarm" if severity is Severity.ERROR else ""
            lines += paragraph(f"{places}{tail}", page.width, "   ", first, style)
    return [*lines, BLANK]


def _place(page: Page, problem: Problem) -> str:
    code = page.text(problem.code)
    if problem.span is None:
        return code
    return f"{code}{BOUND}(line{BOUND}{problem.span.line})"


def _footer(page: Page, review: Review) -> list[Line]:
    method = f"{_METHOD} tauledger {review.version}"
    return [
        *paragraph(_CAUTION, page.width),
        *paragraph(page.text(method), page.width, style="faint"),
    ]
