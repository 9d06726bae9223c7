"""The parts of the page about the operating point, the problems and the changes."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.report.html_text import (
    Head,
    listing,
    name,
    quantity,
    section,
    symbol,
    table,
    text,
)
from tauledger.report.inert import inert
from tauledger.report.wording import (
    change,
    moved,
    moves,
    part_name,
    part_text,
    place,
    remainder,
    value,
    verdict,
    word_text,
)
from tauledger.review.changes import Attribution, Comparison
from tauledger.review.check import Finding
from tauledger.review.rows import NodeRow, Review, TransistorRow

_ROWS_SHOWN = 200
_SOURCE_COLUMNS = 160


def bias(review: Review) -> str:
    """Bias and small-signal figures of every transistor, and the node voltages."""
    body = ""
    if review.transistors:
        body += _bias_table(review.transistors) + _small_signal(review.transistors)
    if review.nodes:
        items = "".join(_node(row) for row in review.nodes[:_ROWS_SHOWN])
        body += f'<h3>Node voltages</h3><ul class="nodes">{items}</ul>'
        body += _more(len(review.nodes) - _ROWS_SHOWN, "nodes")
    return section("bias", "Operating point", body) if body else ""


def _node(row: NodeRow) -> str:
    return f"<li><span>{name(row.node)}</span> <b>{quantity(row.voltage_v, 'V')}</b></li>"


def _bias_table(rows: Sequence[TransistorRow]) -> str:
    field_effect = ["FET" in row.type for row in rows]
    current, voltage = ("I", "C or D"), ("V", "CE or DS")
    if all(field_effect):
        current, voltage = ("I", "D"), ("V", "DS")
    elif not any(field_effect):
        current, voltage = ("I", "C"), ("V", "CE")
    heads = (
        Head("transistor"),
        Head("type"),
        Head("model"),
        Head("configuration"),
        Head("region"),
        Head(f"<i>{current[0]}</i><sub>{current[1]}</sub>", True),
        Head(f"<i>{voltage[0]}</i><sub>{voltage[1]}</sub>", True),
    )
    cells = [
        (
            name(row.name),
            text(row.type),
            name(row.model),
            text(row.configuration) or "—",
            text(row.region),
            quantity(row.current_a, "A"),
            quantity(row.voltage_v, "V"),
        )
        for row in rows[:_ROWS_SHOWN]
    ]
    return table("Bias of the transistors", heads, cells) + _more(
        len(rows) - _ROWS_SHOWN, "transistors"
    )


def _small_signal(rows: Sequence[TransistorRow]) -> str:
    families: dict[tuple[str, ...], list[TransistorRow]] = {}
    for row in rows[:_ROWS_SHOWN]:
        families.setdefault(tuple(entry.symbol for entry in row.values), []).append(row)
    drawn = ""
    for symbols, members in families.items():
        heads = (Head("transistor"), *(Head(symbol(entry), True) for entry in symbols))
        cells = [
            (name(row.name), *(quantity(entry.value, entry.unit) for entry in row.values))
            for row in members
        ]
        drawn += table("Small-signal figures", heads, cells)
    return drawn


# Problems -----------------------------------------------------------------------------------------


def problems(findings: Sequence[Finding]) -> str:
    """Every problem with its place, its source line and what to do."""
    if not findings:
        return ""
    body = "".join(_problem(finding.problem) for finding in findings[:_ROWS_SHOWN])
    body += _more(len(findings) - _ROWS_SHOWN, "problems")
    return section("problems", "Problems", body)


def _problem(problem: Problem) -> str:
    style = "alarm" if problem.severity is Severity.ERROR else "nm"
    where = line = ""
    if problem.span is not None:
        span = problem.span
        where = f' <span class="small">{text(span.path, 120)}, line {span.line}</span>'
        line = _source_line(span) if span.text.strip() else ""
    advice = f"<p>{text(problem.advice)}</p>" if problem.advice else ""
    return (
        f'<div class="problem"><p><span class="{style}">{problem.severity.value}</span> '
        f"{text(problem.message)}{where}</p>{line}{advice}</div>"
    )


def _source_line(span: SourceSpan) -> str:
    """The line with the spot marked, cut to a window round it."""
    start = min(max(span.column - 1, 0), len(span.text))
    end = min(start + max(span.length, 1), len(span.text), start + _SOURCE_COLUMNS)
    first = max(0, start - _SOURCE_COLUMNS // 2)
    before = ("…" if first else "") + span.text[first:start]
    after = span.text[end : end + _SOURCE_COLUMNS // 2]
    if len(span.text) > end + _SOURCE_COLUMNS // 2:
        after += "…"
    marked = f"<mark>{_source(span.text[start:end])}</mark>"
    return (
        f'<pre tabindex="0">{span.line}  {_source(before)}{marked}{_source(after.rstrip())}</pre>'
    )


def _source(words: str) -> str:
    return text(inert(words), 4 * _SOURCE_COLUMNS)


# Changes ------------------------------------------------------------------------------------------


def changes(comparison: Comparison | None) -> str:
    """What differs from another revision, and which edit moved each figure."""
    if comparison is None:
        return ""
    lines = [f"<b>{text(line)}</b>" for line in verdict(comparison)]
    lines += [text(line) for line in comparison.notes]
    lines += [text(word_text(row)) for row in comparison.words if row.changed]
    body = listing(lines[:_ROWS_SHOWN], "plain")
    if comparison.parts:
        heads = (Head("part"), Head("change"), Head("what", is_prose=True), Head("where"))
        rows = [
            (
                name(part_name(row)),
                text(row.kind if row.electrical else f"{row.kind}, not electrically"),
                text(part_text(row), 300),
                text(place(row), 120) or "—",
            )
            for row in comparison.parts[:_ROWS_SHOWN]
        ]
        body += table("Parts that differ", heads, rows)
    body += "".join(_attribution(row) for row in moves(comparison))
    if comparison.electrical:
        heads = (Head("figure"), Head("old", True), Head("new", True), Head("change", True))
        body += table("All figures, old and new", heads, _figures(comparison))
    aside = f"{text(comparison.old, 120)} → {text(comparison.new, 120)}"
    return section("changes", "Changes", body, aside)


def _attribution(row: Attribution) -> str:
    heads = (
        Head("edit"),
        Head("alone", True),
        Head("on top of the others", True),
        Head("attributed", True),
        Head("share", True),
    )
    cells = [
        (
            text(effect.edit, 120),
            text(moved(effect.alone, row.unit, row.old)),
            text(moved(effect.last, row.unit, row.old)),
            text(moved(effect.average, row.unit, row.old)),
            "—" if effect.share is None else f"{100 * effect.share:.1f}\u00a0%",
        )
        for effect in row.effects[:_ROWS_SHOWN]
    ]
    ends = f"{value(row.old, row.unit)} → {value(row.new, row.unit)}"
    caption = text(f"{row.figure} {ends}")
    return table(caption, heads, cells) + listing(text(line) for line in remainder(row))


def _figures(comparison: Comparison) -> Iterator[tuple[str, ...]]:
    for row in comparison.figures[:_ROWS_SHOWN]:
        yield (
            text(row.figure) + (f" of {name(row.part)}" if row.part else ""),
            text(value(row.old, row.unit)),
            text(value(row.new, row.unit)),
            text(change(row)),
        )


def _more(count: int, what: str) -> str:
    return (
        f'<p class="small">{count} more {what}: --format json lists all.</p>' if count > 0 else ""
    )
