"""The tolerance spread as lines of the text page."""

from __future__ import annotations

import math
from collections.abc import Sequence

from tauledger.quantity import format_quantity
from tauledger.report.layout import BLANK, Column, Line, Piece, Row, paragraph, table
from tauledger.report.page import BOUND, Page
from tauledger.review.decisions import (
    Contribution,
    DemandRow,
    DrawRow,
    FigureSpread,
    Spread,
    Yield,
)

_CAUSES_SHOWN = 6
_LEADERS_SHOWN = 6
_BAR = 48
_LEAST_SHARE = 0.005
ALWAYS = ("gain", "low corner", "high corner")
"""Figures drawn in any case; of the others those whose limit a board misses."""


def spread_page(page: Page, spread: Spread) -> list[Line]:
    """The whole answer of ``tauledger spread``."""
    lines = [*paragraph(page.title(spread.title), page.width, style="title")]
    lines += paragraph(page.text(basis(spread)), page.width, " ", " ")
    lines += _sentences(page, spread)
    lines.append(BLANK)
    always = [figure for figure in spread.figures if figure.figure in ALWAYS]
    others = [figure for figure in spread.figures if figure.figure not in ALWAYS]
    lines += _figures(page, "Gain and corners over the boards", always)
    lines += _figures(page, "Other figures with limits", others)
    lines += _demands(page, spread.demands)
    for figure in (*always, *filter(is_missed, others)):
        lines += _histogram(page, figure)
        lines += _causes(page, figure)
    lines += _leaders(page, spread)
    lines += _draws(page, spread)
    for note in spread.notes:
        lines += paragraph(page.text(note), page.width, "   ", " - ")
    return lines


def basis(spread: Spread) -> str:
    """How the boards were drawn, in a line."""
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
        found.append(f"{_yield_text(spread.total)} {kept_words(spread)}")
    if spread.failed:
        found.append(f"{spread.failed} boards have no operating point and count in no figure")
    if spread.fixed:
        names = ", ".join(spread.fixed[:12]) + (" …" if len(spread.fixed) > 12 else "")
        found.append(f"no tolerance is known for {names}: held at their nominal values")
    lines: list[Line] = []
    for sentence in found:
        lines += paragraph(page.text(sentence), page.width, "   ", " ", "verdict")
    return lines


def kept_words(spread: Spread) -> str:
    """What the total counts; the notes name the limits it leaves out."""
    return "keep all limits that can be judged" if spread.notes else "keep all limits"


def _yield_text(kept: Yield) -> str:
    interval = f"{100 * kept.lowest:.2f} to {100 * kept.highest:.2f} %"
    return f"{100 * kept.share:.2f} % of the boards (95 % confidence: {interval})"


def is_missed(figure: FigureSpread) -> bool:
    """Whether some board does not keep its limit."""
    return figure.kept is not None and figure.kept.passed < figure.kept.boards


def _figures(page: Page, title: str, figures: Sequence[FigureSpread]) -> list[Line]:
    if not figures:
        return []
    percents = [entry.percent for entry in figures[0].percentiles]
    shown = [p for p in percents if p in (1.0, 5.0, 50.0, 95.0, 99.0)]
    columns = (
        Column("figure", flexible=True),
        Column("nominal", right=True, style="strong"),
        *(Column("median" if p == 50.0 else f"{p:g} %", right=True) for p in shown),
        Column("worst low", right=True),
        Column("worst high", right=True),
    )
    rows = []
    for figure in figures:
        values = [entry.value for entry in figure.percentiles if entry.percent in shown]
        cells = [figure.nominal, *values, figure.worst_low.value, figure.worst_high.value]
        rows.append(
            Row(
                (page.text(figure.figure), *(page.quantity(v, _unit(figure)) for v in cells)),
                tuple(_bound(page.text(detail)) for detail in _details(figure)),
            )
        )
    return [page.heading(title), *table(columns, rows, page.width), BLANK]


def _demands(page: Page, demands: Sequence[DemandRow]) -> list[Line]:
    if not demands:
        return []
    lines = [page.heading("Also asked of every board")]
    for row in demands:
        asked = ", ".join(filter(None, [row.demand, window_of(row.kept)]))
        words = f"{asked}: {_yield_text(row.kept)}"
        lines += paragraph(_bound(page.text(words)), page.width, "   ", " ")
    return [*lines, BLANK]


def _bound(words: str) -> str:
    """A number and its percent sign stay on one line."""
    return words.replace(" %", f"{BOUND}%")


def window_of(kept: Yield) -> str:
    """The limit as written, or nothing for a demand without one."""
    if not (kept.minimum or kept.maximum):
        return ""
    return f"limit {kept.minimum or 'any'} to {kept.maximum or 'any'}"


def _unit(figure: FigureSpread) -> str:
    return "" if figure.unit == "V/V" else figure.unit


def _details(figure: FigureSpread) -> list[str]:
    details = [_deviation(figure)]
    told = figure.figure in ALWAYS or is_missed(figure)
    for word, case in (("lowest", figure.worst_low), ("highest", figure.worst_high)):
        if case.ends and told:
            details.append(f"{word} with {', '.join(case.ends[:5])}")
    if figure.missing:
        details.append(f"{figure.missing} boards have none")
    if figure.kept is not None:
        details.append(f"{window_of(figure.kept)}: {_yield_text(figure.kept)}")
    return details


def _deviation(figure: FigureSpread) -> str:
    if figure.linear:
        both = (figure.deviation, figure.linear_deviation)
        seen, alone = (format_quantity(value, figure.unit) for value in both)
        return f"standard deviation {seen}; by sensitivities alone {alone}"
    relative = figure.deviation / figure.mean if figure.mean else 0.0
    predicted = figure.linear_deviation / figure.nominal if figure.nominal else 0.0
    return (
        f"standard deviation {100 * relative:.2g} %; by sensitivities alone "
        f"{100 * predicted:.2g} % of nominal"
    )


def _histogram(page: Page, figure: FigureSpread) -> list[Line]:
    """Bars across the page; one board in the tallest bin's hundredth still shows as a dot."""
    edges, counts = figure.histogram.edges, figure.histogram.counts
    most = max(counts)
    lines = [page.heading(f"{initial(figure.figure)}: boards by value")]
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
    rows = [Row(_cause(page, c, figure.unit if figure.linear else "")) for c in shown]
    title = f"{initial(figure.figure)}: whose tolerance dominates"
    return [page.heading(title), *table(columns, rows, page.width), BLANK]


def _cause(page: Page, c: Contribution, unit: str) -> tuple[str, ...]:
    """``unit`` of a figure whose changes are differences; else they are relative."""
    slope = "—" if c.sensitivity is None else f"{c.sensitivity:+.2f} %"
    if unit and c.sensitivity is not None:
        slope = signed_quantity(c.sensitivity / 100.0, unit)
    ends = [
        page.text(signed_quantity(value, unit)) if unit else _move(page, value)
        for value in (c.at_low, c.at_high)
    ]
    return page.text(c.label), page.percent(c.share), page.bar(c.share), page.text(slope), *ends


def _move(page: Page, value: float) -> str:
    """A relative change, or a dash where the figure is not there at that end."""
    return page.signed_percent(value) if math.isfinite(value) else page.text("—")


def initial(words: str) -> str:
    """A heading's first letter as a capital; names in it stay as they are."""
    return words[:1].upper() + words[1:]


def signed_quantity(value: float, unit: str) -> str:
    """A difference with its sign."""
    return f"{'+' if value > 0.0 else ''}{format_quantity(value, unit)}"


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
        groups.setdefault(window(draw), []).append(draw.label)
    lines = [page.heading("What differs from board to board")]
    for ends, labels in groups.items():
        lines += paragraph(page.text(f"{ends}: {', '.join(labels)}"), page.width, "   ", " ")
    return [*lines, BLANK]


def window(draw: DrawRow) -> str:
    """From where to where it differs."""
    if draw.unit:
        ends = [format_quantity(end, draw.unit) for end in (draw.low, draw.high)]
        return f"{ends[0]} to +{ends[1]}"
    if abs(draw.low + draw.high) < 1e-12:
        return f"±{100 * draw.high:g} %"
    return f"{100 * draw.low:+g} % to {100 * draw.high:+g} %"
