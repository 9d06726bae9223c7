"""The report a reviewer reads in a pull request: verdict, figures against limits, what sets them.

It keeps within :data:`MOST_CHARACTERS`, below what hosts accept for a comment (65,536, from
memory), by leaving out whole sections from the end.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence

from tauledger.problems import Severity
from tauledger.quantity import format_quantity
from tauledger.report.bode import bode_sketch
from tauledger.report.expressions import without_miller
from tauledger.report.markdown_changes import changes_section
from tauledger.report.markup import code, details, html_code, sentence, table
from tauledger.review.check import Finding, NetlistCheck, distinct_findings, exit_code
from tauledger.review.limits import LimitRow
from tauledger.review.rows import CornerRow, PathRow, Review, TimeConstantRow
from tauledger.version import VERSION

MOST_CHARACTERS = 60_000
_ROWS_SHOWN = 60
_CUT_RESERVE = 200
_VERDICTS = {0: "passes", 1: "fails", 2: "unusable input", 3: "internal error"}
_CAUTION = (
    "Caution: a report is arithmetic about a netlist. Mains, high voltage, charged and reversed "
    "capacitors can kill or burn; local codes and licensed practice come first.\n"
)


def markdown_report(checks: Sequence[NetlistCheck], threshold: Severity) -> str:
    """The whole report; ``threshold`` is the severity from which a finding fails the check."""
    sections = [*_head(checks, threshold), *_bodies(checks)]
    footer = f"{_CAUTION}\ntauledger {sentence(VERSION)}\n"
    room = MOST_CHARACTERS - len(footer) - _CUT_RESERVE
    kept: list[str] = []
    for index, section in enumerate(sections):
        room -= len(section) + 1
        if room < 0:
            left = len(sections) - index
            kept.append(
                f"**Cut here to stay within {MOST_CHARACTERS} characters: {left} sections are "
                "left out.** The option `--format json` gives all of it.\n"
            )
            break
        kept.append(section)
    return "\n".join([*kept, footer])


# What comes first: verdict, findings, paths, limits -----------------------------------------------


def _head(checks: Sequence[NetlistCheck], threshold: Severity) -> Iterator[str]:
    findings = distinct_findings(checks)
    verdict = _VERDICTS[exit_code(checks, threshold)]
    counts = Counter(finding.problem.severity for finding in findings)
    words = ", ".join(
        f"{counts[severity]} {severity.value}{'' if counts[severity] == 1 else 's'}"
        for severity in (Severity.ERROR, Severity.WARNING)
    )
    yield f"## Amplifier review: {verdict} ({words})\n"
    if findings:
        lines = [_finding(finding) for finding in findings[:_ROWS_SHOWN]]
        yield "".join(lines) + _more(len(findings), "findings")
    yield _paths(checks)
    rows = [(one, row) for one in checks for row in one.limits]
    if rows:
        yield _limits(rows)
    for one in checks:
        if one.review is not None and one.review.comparison is not None:
            yield changes_section(one.review.comparison)


def _finding(finding: Finding) -> str:
    problem = finding.problem
    place = code(finding.netlist)
    if problem.span is not None:
        place = f"{code(problem.span.path)} line {problem.span.line}"
    advice = f" {sentence(problem.advice)}" if problem.advice else ""
    return f"- **{problem.severity.value}** {place}: {sentence(problem.message)}.{advice}\n"


def _paths(checks: Sequence[NetlistCheck]) -> str:
    heads = ("netlist", "path", "midband gain", "low corner", "high corner", "limits")
    rows = [_path_cells(one) for one in checks[:_ROWS_SHOWN]]
    return table(heads, rows, (2, 3, 4)) + _more(len(checks), "paths")


def _path_cells(check: NetlistCheck) -> tuple[str, ...]:
    row = check.path_row
    route = f"{code(row.input)} → {code(row.output)}" if row else "—"
    if check.path:
        route = f"{code(check.path)}: {route}"
    corners = (_corner(row.low), _corner(row.high)) if row else ("—", "—")
    figures = (_gain(row), *corners)
    names = ("midband gain", "low corner", "high corner")
    changed = [f"{text}{_since(check, name)}" for text, name in zip(figures, names, strict=True)]
    return (code(check.netlist), route, *changed, _standing(check))


def _since(check: NetlistCheck, figure: str) -> str:
    """How a figure of the path moved since the base, in parentheses; empty without a base."""
    comparison = check.review.comparison if check.review else None
    if comparison is None:
        return ""
    for change in comparison.figures:
        if change.figure == figure and not change.part:
            if change.relative is None:
                return " (new)" if change.old is None and change.new is not None else ""
            moved = f"{100.0 * change.relative:+.1f}"
            return " (unchanged)" if moved in ("+0.0", "-0.0") else f" ({moved} % since base)"
    return ""


def _standing(check: NetlistCheck) -> str:
    if check.outcome != "checked" or check.review is None:
        return "not checked"
    verdicts = Counter(row.verdict for row in check.limits)
    return ", ".join(f"{count} {verdict}" for verdict, count in verdicts.items()) or "none set"


def _gain(row: PathRow | None) -> str:
    if row is None or row.gain is None:
        return "—"
    plain = row.gain_unit == "V/V"
    gain = f"{_quantity(row.gain, '' if plain else row.gain_unit)}{' V/V' if plain else ''}"
    return f"{gain}, {_quantity(row.gain_db, 'dB')}" if row.gain_db is not None else gain


def _corner(row: CornerRow | None) -> str:
    if row is None or row.exact_hz is None:
        return "none"
    names = ", ".join(code(name) for name in row.set_by)
    return f"{_quantity(row.exact_hz, 'Hz')}{f' by {names}' if names else ''}"


def _limits(rows: Sequence[tuple[NetlistCheck, LimitRow]]) -> str:
    heads = ("netlist", "path", "figure", "is", "at least", "at most", "verdict", "set by")
    # Missed limits first: a reviewer of many need not search.
    ordered = sorted(rows, key=lambda entry: entry[1].verdict == "met")
    cells = [
        (
            code(one.netlist),
            code(one.path),
            sentence(row.figure),
            _quantity(row.value, "" if row.unit == "V/V" else row.unit) + _since(one, row.figure),
            sentence(row.minimum),
            sentence(row.maximum),
            row.verdict if row.verdict == "met" else f"**{row.verdict}**",
            ", ".join(code(part) for part in row.part.split(", ") if part) or "—",
        )
        for one, row in ordered[:_ROWS_SHOWN]
    ]
    return f"### Limits\n\n{table(heads, cells, (3, 4, 5))}{_more(len(rows), 'limits')}"


# Each path: corners first, then the details -------------------------------------------------------


def _bodies(checks: Sequence[NetlistCheck]) -> Iterator[str]:
    analysed = [(one, one.path_row) for one in checks]
    for one, row in analysed:
        if row is not None:
            yield _corners(one, row)
    for one, row in analysed:
        if one.review is not None:
            yield from _details(one.netlist, one.review, row)


def _corners(check: NetlistCheck, row: PathRow) -> str:
    name = f"{code(check.netlist)}, {code(row.input)} → {code(row.output)}"
    heads = ("end", "part", "role", "value", "sees", "expression", "τ", "corner", "share")
    counted = [entry for entry in row.time_constants if entry.share is not None]
    ordered = sorted(counted, key=lambda entry: (entry.end != "low", -(entry.share or 0.0)))
    cells = [_constant(entry) for entry in ordered[:12]]
    lines = [_both_figures(corner) for corner in (row.low, row.high) if corner is not None]
    more = "" if len(counted) <= 12 else f"\n{len(counted) - 12} smaller ones are below.\n"
    body = table(heads, cells, (3, 4, 6, 7, 8)) if cells else "No capacitor sets a corner.\n"
    return f"### What sets the corners: {name}\n\n{body}{more}\n{''.join(lines)}"


def _constant(row: TimeConstantRow) -> tuple[str, ...]:
    share = f"{100.0 * row.share:.1f} %" if row.share is not None else "—"
    expression = code(without_miller(row.expression), 120) if row.expression else "—"
    if row.expression and row.expression_deviation is not None:
        deviation = f"{100.0 * row.expression_deviation:+.1f}"
        expression += f" ({deviation} %)" if deviation not in ("+0.0", "-0.0") else ""
    return (
        row.end,
        code(row.name),
        sentence(row.role),
        _quantity(row.value, row.unit),
        _quantity(row.resistance_ohm, "Ω"),
        expression,
        _quantity(row.tau_s, "s"),
        _quantity(row.corner_hz, "Hz"),
        share,
    )


def _both_figures(row: CornerRow) -> str:
    estimate, exact = _quantity(row.estimate_hz, "Hz"), _quantity(row.exact_hz, "Hz")
    notes = "".join(f" {sentence(note[:1].upper() + note[1:])}." for note in row.notes[:3])
    return f"- {row.end} end: estimate {estimate}, exact {exact}.{notes}\n"


def _details(netlist: str, review: Review, row: PathRow | None) -> Iterator[str]:
    name = code(netlist)
    sketch = bode_sketch(row) if row is not None else ""
    if sketch:
        # A chart inside a closed part is drawn at no width by some renderers.
        yield f"### Gain of {name}\n\n{sketch}"
    if review.transistors:
        yield details(f"Bias: {html_code(netlist)}", _bias(review))
    if row is not None and row.time_constants:
        yield details(f"All time constants: {html_code(netlist)}", _constants(row))


def _bias(review: Review) -> str:
    heads = ("transistor", "type", "model", "configuration", "region", "current", "voltage")
    rows = [
        (
            code(row.name),
            sentence(row.type),
            code(row.model),
            sentence(row.configuration),
            row.region if row.region == "active" else f"**{sentence(row.region)}**",
            _quantity(row.current_a, "A"),
            _quantity(row.voltage_v, "V"),
        )
        for row in review.transistors[:_ROWS_SHOWN]
    ]
    nodes = [(code(row.node), _quantity(row.voltage_v, "V")) for row in review.nodes[:_ROWS_SHOWN]]
    return (
        f"{table(heads, rows, (5, 6))}{_more(len(review.transistors), 'transistors')}\n"
        f"{table(('node', 'voltage'), nodes, (1,))}{_more(len(review.nodes), 'nodes')}"
    )


def _constants(row: PathRow) -> str:
    heads = ("end", "part", "role", "value", "sees", "expression", "τ", "corner", "share", "why")
    cells = [
        (*_constant(entry), sentence(entry.reason, 200))
        for entry in row.time_constants[:_ROWS_SHOWN]
    ]
    return table(heads, cells, (3, 4, 6, 7, 8)) + _more(len(row.time_constants), "parts")


def _quantity(value: float | None, unit: str) -> str:
    return "—" if value is None else format_quantity(value, unit).replace(" ", "\u00a0")


def _more(number: int, what: str) -> str:
    return f"\n{number - _ROWS_SHOWN} more {what} are not shown.\n" if number > _ROWS_SHOWN else ""
