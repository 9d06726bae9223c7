"""The tolerance spread as one HTML page, in the frame and look of the report's."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence

from tauledger.report.decision import (
    ALWAYS,
    basis,
    initial,
    is_missed,
    kept_words,
    signed_quantity,
    window,
    window_of,
)
from tauledger.report.decision_html_plot import SMALL_STYLE, colour_of, histogram_svg
from tauledger.report.html_frame import html_page
from tauledger.report.html_text import (
    Head,
    bar,
    listing,
    name,
    percent,
    quantity,
    section,
    table,
    text,
)
from tauledger.review.decisions import Contribution, FigureSpread, Spread, Yield

_METHOD = (
    "Method: the bias of every board solved anew; gain and exact −3&nbsp;dB corners of its whole "
    "linear network. Confidence: Wilson's interval, 95&nbsp;%."
)
_CAUSES_SHOWN = 8
_LEADERS_SHOWN = 12
_FIXED_SHOWN = 40
_LEAST_SHARE = 0.005
_PERCENTS = (1.0, 5.0, 50.0, 95.0, 99.0)


def spread_html(spread: Spread) -> str:
    """The whole answer of ``tauledger spread`` as a page."""
    facts = [text(spread.netlist, 200), text(basis(spread))]
    sections = [part for part in _sections(spread) if part]
    return html_page(spread.title, facts, sections, _METHOD, spread.version, SMALL_STYLE)


def _sections(spread: Spread) -> Iterator[str]:
    yield _verdict(spread)
    yield _limits(spread)
    yield section("figures", "Figures", _figure_table(spread.figures)) if spread.figures else ""
    yield _histograms(spread.figures)
    yield _causes(spread.figures)
    yield _leaders(spread)
    yield _draws(spread)


# Yields -------------------------------------------------------------------------------------------


def _verdict(spread: Spread) -> str:
    """The yield large, then gain and corners with the middle nine tenths of the boards."""
    blocks = []
    if spread.total is not None:
        blocks.append(_block(kept_words(spread), _share(spread.total), _confidence(spread.total)))
    for figure in spread.figures:
        if figure.figure in ALWAYS:
            blocks.append(_block(figure.figure, _quantity(figure.nominal, figure), _middle(figure)))
    lines = []
    if spread.failed:
        lines.append(f"{spread.failed} boards have no operating point and count in no figure")
    if spread.fixed:
        more = " …" if len(spread.fixed) > _FIXED_SHOWN else ""
        names = ", ".join(spread.fixed[:_FIXED_SHOWN]) + more
        lines.append(f"no tolerance is known for {names}: held at their nominal values")
    lines += spread.notes
    body = f'<dl class="verdict">{"".join(blocks)}</dl>' + listing(map(text, lines))
    return section("verdict", "Verdict", body)


def _block(words: str, figure: str, below: str) -> str:
    return (
        f'<div><dt>{words}</dt><dd><span class="big">{figure}</span>'
        f'<span class="by">{below}</span></dd></div>'
    )


def _middle(figure: FigureSpread) -> str:
    ends = {entry.percent: entry.value for entry in figure.percentiles}
    shown = [_quantity(ends[p], figure) for p in (5.0, 95.0) if p in ends]
    return f"nominal; 90 % of the boards {' to '.join(shown)}"


def _share(kept: Yield) -> str:
    return f"{100.0 * kept.share:.2f}\u00a0%"


def _confidence(kept: Yield) -> str:
    ends = f"{100.0 * kept.lowest:.2f} to {100.0 * kept.highest:.2f}\u00a0%"
    return f"of {kept.boards} boards; 95\u00a0% confidence: {ends}"


def _limits(spread: Spread) -> str:
    rows = [(row.figure, row.kept) for row in spread.figures if row.kept is not None]
    rows += [(row.demand, row.kept) for row in spread.demands]
    if not rows:
        return ""
    heads = (
        Head("limit"), Head("at least", True), Head("at most", True), Head("boards that keep it"),
        Head("95&nbsp;% confidence", True),
    )  # fmt: skip
    cells = [
        (
            text(words, 120),
            text(kept.minimum) or "—",
            text(kept.maximum) or "—",
            _alarming(kept),
            f"{100.0 * kept.lowest:.2f} to {100.0 * kept.highest:.2f}\u00a0%",
        )
        for words, kept in rows
    ]
    body = table("Boards that keep each limit", heads, cells, hidden_caption=True)
    return section("limits", "Limits", body)


def _alarming(kept: Yield) -> str:
    shown = f'<span class="n">{bar(kept.share, "plain")}{_share(kept)}</span>'
    return f'<span class="alarm">{shown}</span>' if kept.passed < kept.boards else shown


# Figures ------------------------------------------------------------------------------------------


def _quantity(value: float | None, figure: FigureSpread) -> str:
    return quantity(value, figure.unit)


def _figure_table(figures: Sequence[FigureSpread]) -> str:
    percents = [entry.percent for entry in figures[0].percentiles if entry.percent in _PERCENTS]
    heads = [Head("figure"), Head("nominal", True)]
    heads += [Head("median" if p == 50.0 else f"{p:g}&nbsp;%", True) for p in percents]
    heads += [Head("standard<br>deviation", True), Head("by sensi-<br>tivities alone", True)]
    rows = [
        (
            text(figure.figure, 80),
            _quantity(figure.nominal, figure),
            *(_quantity(e.value, figure) for e in figure.percentiles if e.percent in percents),
            _deviation(figure.deviation, figure.mean, figure),
            _deviation(figure.linear_deviation, figure.nominal, figure),
        )
        for figure in figures
    ]
    body = table("Percentiles over the boards", heads, rows)
    lines = [
        text(f"{figure.missing} boards have no {figure.figure}")
        for figure in figures
        if figure.missing
    ]
    return body + listing(lines) + _worst_table(figures)


def _deviation(value: float, of: float, figure: FigureSpread) -> str:
    if figure.linear or not of:
        return _quantity(value, figure)
    return percent(value / of)


def _worst_table(figures: Iterable[FigureSpread]) -> str:
    heads = (
        Head("worst case"), Head("lowest", True), Head("with", is_prose=True),
        Head("highest", True), Head("with", is_prose=True),
    )  # fmt: skip
    rows = [
        (
            text(figure.figure, 80),
            _quantity(figure.worst_low.value, figure),
            text(", ".join(figure.worst_low.ends[:5]), 200),
            _quantity(figure.worst_high.value, figure),
            text(", ".join(figure.worst_high.ends[:5]), 200),
        )
        for figure in figures
    ]
    return table(
        "Every part at the worse end of its tolerance, or the worst board if that is worse",
        heads,
        rows,
    )


def _histograms(figures: Sequence[FigureSpread]) -> str:
    drawn = []
    for number, figure in enumerate(figures):
        kept = figure.kept
        below = _middle(figure)
        if kept is not None:
            below += f"; {text(window_of(kept))}: {_share(kept)} keep it"
        drawn.append(
            f"<figure>{histogram_svg(figure, f'h{number}')}"
            f"<figcaption><b>{text(initial(figure.figure), 60)}</b>{below}</figcaption></figure>"
        )
    if not drawn:
        return ""
    aside = "Dashed: the nominal board. A limit is a full line; boards beyond it stand in red."
    return section(
        "histograms", "Boards by value", f'<div class="mult">{"".join(drawn)}</div>', aside
    )


# What moves them ----------------------------------------------------------------------------------


def _causes(figures: Sequence[FigureSpread]) -> str:
    told = [figure for figure in figures if figure.figure in ALWAYS or is_missed(figure)]
    tables = [_cause_table(figure) for figure in told]
    aside = (
        "Share: squared correlation with the figure over the boards. Per 1&nbsp;%: what one "
        "percent more does on the nominal board."
    )
    return section("causes", "What dominates", "".join(tables), aside) if any(tables) else ""


def _cause_table(figure: FigureSpread) -> str:
    shown = [c for c in figure.contributions[:_CAUSES_SHOWN] if c.share >= _LEAST_SHARE]
    if not shown:
        return ""
    heads = (
        Head("what differs"), Head("share"), Head("per 1&nbsp;%", True),
        Head("at its low end", True), Head("at its high end", True),
    )  # fmt: skip
    rows = [_cause(c, figure) for c in shown]
    return table(text(initial(figure.figure), 80), heads, rows)


def _cause(c: Contribution, figure: FigureSpread) -> tuple[str, ...]:
    share = bar(c.share, colour_of(figure.figure)) + percent(c.share)
    slope = None if c.sensitivity is None else c.sensitivity / 100.0
    return (
        text(c.label, 60),
        f'<span class="n">{share}</span>',
        *(_change(value, figure) for value in (slope, c.at_low, c.at_high)),
    )


def _change(value: float | None, figure: FigureSpread) -> str:
    if value is None or not math.isfinite(value):
        return "—"
    if not figure.linear:
        digits = 2 if abs(value) < 0.05 else 1
        return f"{100.0 * value:+.{digits}f}\u00a0%".replace("-", "−")
    return text(signed_quantity(value, figure.unit)).replace("-", "−").replace(" ", "\u00a0")


def _leaders(spread: Spread) -> str:
    heads = (Head("set by"), Head("corner"), Head("of the boards"))
    rows = []
    for end in ("low", "high"):
        for leader in [row for row in spread.leaders if row.end == end][:_LEADERS_SHOWN]:
            share = bar(leader.share, end) + percent(leader.share)
            rows.append((name(leader.part), end, f'<span class="n">{share}</span>'))
    if not rows:
        return ""
    caption = "How often each capacitor or inductor sets the corner"
    return section("leaders", "Who sets the corner", table(caption, heads, rows))


def _draws(spread: Spread) -> str:
    groups: dict[str, list[str]] = {}
    for draw in spread.draws:
        groups.setdefault(window(draw), []).append(draw.label)
    lines = [
        f"<b>{text(words).replace('-', '−')}</b> {', '.join(text(label, 60) for label in labels)}"
        for words, labels in groups.items()
    ]
    return section("draws", "What differs", listing(lines, "plain")) if lines else ""
