"""The tolerance spread as lines of the text page."""

from __future__ import annotations

from tauledger.quantity import format_quantity
from tauledger.report.layout import BLANK, Column, Line, Piece, Row, paragraph, table
from tauledger.report.page import Page
from tauledger.review.decisions import Contribution, DrawRow, FigureSpread, Spread, Yield

_CAUSES_SHOWN = 6
_LEADERS_SHOWN = 6
_BAR = 48
_LEAST_SHARE = 0.005


def spread_page(page: Page, spread: Spread) -> list[Line]:
    """The whole answer of ``tauledger spread``."""
    lines = [*paragraph(page.title(spread.title), page.width, style="title")]
    lines += paragraph(page.text(_basis(spread)), page.width, " ", " ")
    lines += _sentences(page, spread)
    lines.append(BLANK)
    lines += _figures(page, spread)
    for figure in spread.figures:
        lines += _histogram(page, figure)
        lines += _causes(page, figure)
    lines += _leaders(page, spread)
    lines += _draws(page, spread)
    for note in spread.notes:
        lines += paragraph(page.text(note), page.width, "   ", " - ")
    return lines


def _basis(spread: Spread) -> str:
    words = {
        "uniform": "every value equally likely within its tolerance",
        "normal": "normal, each tolerance taken as three standard deviations",
        "truncated": "normal, three standard deviations cut off at the tolerance",
    }
    return (
        f"{spread.boards} boards, bias solved anew for each; {words[spread.distribution]}; "
        f"seed {spread.seed}"
    )


def _sentences(page: Page, spread: Spread) -> list[Line]:
    found = []
    if spread.total is not None:
        found.append(f"{_yield_text(spread.total)} keep all limits")
    if spread.failed:
        found.append(f"{spread.failed} boards have no operating point and count in no figure")
    if spread.fixed:
        names = ", ".join(spread.fixed[:12]) + (" …" if len(spread.fixed) > 12 else "")
        found.append(f"no tolerance is known for {names}: held at their nominal values")
    lines: list[Line] = []
    for sentence in found:
        lines += paragraph(page.text(sentence), page.width, "   ", " ", "verdict")
    return lines


def _yield_text(kept: Yield) -> str:
    interval = f"{100 * kept.lowest:.2f} to {100 * kept.highest:.2f} %"
    return f"{100 * kept.share:.2f} % of the boards (95 % confidence: {interval})"


def _figures(page: Page, spread: Spread) -> list[Line]:
    percents = [entry.percent for entry in spread.figures[0].percentiles] if spread.figures else []
    shown = [p for p in percents if p in (1.0, 5.0, 50.0, 95.0, 99.0)]
    columns = (
        Column("figure", flexible=True),
        Column("nominal", right=True, style="strong"),
        *(Column("median" if p == 50.0 else f"{p:g} %", right=True) for p in shown),
        Column("worst low", right=True),
        Column("worst high", right=True),
    )
    rows = []
    for figure in spread.figures:
        values = [entry.value for entry in figure.percentiles if entry.percent in shown]
        cells = [figure.nominal, *values, figure.worst_low.value, figure.worst_high.value]
        rows.append(
            Row(
                (page.text(figure.figure), *(page.quantity(v, _unit(figure)) for v in cells)),
                tuple(page.text(detail) for detail in _details(figure)),
            )
        )
    lines = [page.heading("Gain and corners over the boards"), *table(columns, rows, page.width)]
    return [*lines, BLANK]


def _unit(figure: FigureSpread) -> str:
    return "" if figure.unit == "V/V" else figure.unit


def _details(figure: FigureSpread) -> list[str]:
    relative = figure.deviation / figure.mean if figure.mean else 0.0
    details = [
        f"standard deviation {100 * relative:.2g} %; by sensitivities alone "
        f"{100 * figure.linear_deviation / figure.nominal:.2g} % of nominal"
    ]
    for word, case in (("lowest", figure.worst_low), ("highest", figure.worst_high)):
        if case.ends:
            details.append(f"{word} with {', '.join(case.ends[:5])}")
    if figure.missing:
        details.append(f"{figure.missing} boards have none")
    if figure.kept is not None:
        window = " to ".join(
            filter(None, [figure.kept.minimum or "any", figure.kept.maximum or "any"])
        )
        details.append(f"limit {window}: {_yield_text(figure.kept)}")
    return details


def _histogram(page: Page, figure: FigureSpread) -> list[Line]:
    """Bars across the page; one board in the tallest bin's hundredth still shows as a dot."""
    edges, counts = figure.histogram.edges, figure.histogram.counts
    most = max(counts)
    lines = [page.heading(f"{figure.figure.capitalize()}: boards by value")]
    label = [page.quantity(edge, _unit(figure)) for edge in edges]
    width = max(len(text) for text in label)
    for i, count in enumerate(counts):
        cells = round(_BAR * count / most)
        bar = page.spell("█" * cells or ("·" if count else ""))
        here = edges[i] <= figure.nominal < edges[i + 1]
        lines.append(
            (
                Piece(f" {label[i].rjust(width)}  "),
                Piece(bar.ljust(_BAR), "bar"),
                Piece(f"  {count}", "faint"),
                Piece("  nominal" if here else "", "strong"),
            )
        )
    return [*lines, (Piece(f" {label[-1].rjust(width)}"),), BLANK]


def _causes(page: Page, figure: FigureSpread) -> list[Line]:
    shown = [c for c in figure.contributions[:_CAUSES_SHOWN] if c.share >= _LEAST_SHARE]
    if not shown:
        return []
    columns = (
        Column("what differs", flexible=True),
        Column("share", right=True, style="strong"),
        Column("", style="bar"),
        Column("per 1 %", right=True),
        Column("at its low end", right=True),
        Column("at its high end", right=True),
    )
    rows = [Row(_cause(page, c)) for c in shown]
    title = f"{figure.figure.capitalize()}: whose tolerance dominates"
    return [page.heading(title), *table(columns, rows, page.width), BLANK]


def _cause(page: Page, c: Contribution) -> tuple[str, ...]:
    slope = f"{c.sensitivity:+.2f} %" if c.sensitivity is not None else "—"
    return (
        page.text(c.label),
        page.percent(c.share),
        page.bar(c.share),
        page.text(slope),
        page.signed_percent(c.at_low),
        page.signed_percent(c.at_high),
    )


def _leaders(page: Page, spread: Spread) -> list[Line]:
    columns = (
        Column("corner"),
        Column("set by", flexible=True),
        Column("of the boards", right=True, style="strong"),
        Column("", style="bar"),
    )
    rows = []
    for end in ("low", "high"):
        found = [leader for leader in spread.leaders if leader.end == end]
        for leader in found[:_LEADERS_SHOWN]:
            rows.append(
                Row(
                    (
                        end,
                        page.name(leader.part),
                        page.percent(leader.share),
                        page.bar(leader.share),
                    )
                )
            )
    if not rows:
        return []
    return [
        page.heading("How often each capacitor sets the corner"),
        *table(columns, rows, page.width),
        BLANK,
    ]


def _draws(page: Page, spread: Spread) -> list[Line]:
    groups: dict[str, list[str]] = {}
    for draw in spread.draws:
        groups.setdefault(_window(draw), []).append(draw.label)
    lines = [page.heading("What differs from board to board")]
    for window, labels in groups.items():
        lines += paragraph(page.text(f"{window}: {', '.join(labels)}"), page.width, "   ", " ")
    return [*lines, BLANK]


def _window(draw: DrawRow) -> str:
    if draw.unit:
        ends = [format_quantity(end, draw.unit) for end in (draw.low, draw.high)]
        return f"{ends[0]} to +{ends[1]}"
    if abs(draw.low + draw.high) < 1e-12:
        return f"±{100 * draw.high:g} %"
    return f"{100 * draw.low:+g} % to {100 * draw.high:+g} %"
