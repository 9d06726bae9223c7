"""The parts of the page about one signal path as a whole: verdict, stages, response, limits."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Iterator, Sequence

from tauledger.report.html_text import (
    Head,
    expression,
    listing,
    name,
    percent,
    quantity,
    section,
    table,
    text,
)
from tauledger.report.plot import BodePlot
from tauledger.report.plot_svg import NARROW, WIDE, bode_svg
from tauledger.review.limits import LimitRow
from tauledger.review.rows import (
    CornerRow,
    PathRow,
    SimulatedRow,
    StageRow,
    TimeConstantRow,
)

_LIMITS_SHOWN = 200


def verdict(path: PathRow, limits: Sequence[LimitRow]) -> str:
    """Gain and corners large, with what sets them; then how the limits stand."""
    gain = quantity(path.gain, path.gain_unit) if path.gain is not None else "none"
    level = [quantity(path.gain_db, "dB")] if path.gain_db is not None else []
    level += [f"at {quantity(path.midband_hz, 'Hz')}"] if path.midband_hz is not None else []
    blocks = [_figure("midband gain", gain, ", ".join(level) or "no passband found")]
    for end, corner in (("low", path.low), ("high", path.high)):
        shown, by = _corner(path, corner)
        blocks.append(_figure(f"{end} corner", shown, by))
    body = f'<dl class="verdict">{"".join(blocks)}</dl>'
    resistances = [
        f"{words} resistance {quantity(value, 'Ω')}"
        for words, value in (
            ("input", path.input_resistance_ohm),
            ("output", path.output_resistance_ohm),
        )
        if value is not None
    ]
    body += f"<p>{', '.join(resistances)}</p>" if resistances else ""
    if limits:
        body += f'<p><a href="#limits">Limits</a>: {_standing(limits)}</p>'
    lines = [text(note) for note in path.notes]
    return section(
        "verdict", "Verdict", body + listing(lines), f"{name(path.input)} → {name(path.output)}"
    )


def _figure(words: str, figure: str, below: str) -> str:
    return (
        f'<div><dt>{words}</dt><dd><span class="big">{figure}</span>'
        f'<span class="by">{below}</span></dd></div>'
    )


def _corner(path: PathRow, corner: CornerRow | None) -> tuple[str, str]:
    if corner is None or (corner.exact_hz is None and corner.estimate_hz is None):
        return "none", text(corner.notes[0]) if corner is not None and corner.notes else ""
    shown = quantity(corner.exact_hz, "Hz")
    if not corner.set_by:
        return shown, "set by no single part"
    rows = {row.name: row for row in path.time_constants if row.end == corner.end}
    named = [_setter(part, rows.get(part)) for part in corner.set_by]
    tie = "a tie of " if len(named) > 1 else ""
    return shown, f"set by {tie}{' and '.join(named)}"


def _setter(part: str, row: TimeConstantRow | None) -> str:
    facts = []
    if row is not None:
        facts = [
            text(row.role),
            *([f"{percent(row.share)} of the sum"] if row.share is not None else []),
        ]
    shown = f" ({', '.join(facts)})" if facts else ""
    return f'<span class="nm">{name(part)}</span>{shown}'


def _standing(limits: Iterable[LimitRow]) -> str:
    counts = Counter(row.verdict for row in limits)
    return ", ".join(
        f"{_verdict(word, f'{counts[word]} {word}')}"
        for word in ("missed", "tie", "unknown", "met")
        if counts[word]
    )


def _verdict(word: str, shown: str) -> str:
    return f'<span class="alarm">{shown}</span>' if word == "missed" else shown


def limits_section(limits: Sequence[LimitRow]) -> str:
    """Every limit beside its figure, as far as there are any."""
    if not limits:
        return ""
    heads = (Head("figure"), Head("at least", True), Head("at most", True), Head("is", True))
    rows = [
        (
            text(row.figure),
            text(row.minimum) or "—",
            text(row.maximum) or "—",
            quantity(row.value, row.unit),
            _verdict(row.verdict, text(row.verdict)),
            name(row.part) or "—",
        )
        for row in limits[:_LIMITS_SHOWN]
    ]
    body = table("Limits against figures", (*heads, Head("verdict"), Head("set by")), rows, True)
    return section("limits", "Limits", body)


# Stages -------------------------------------------------------------------------------------------


def stages(path: PathRow) -> str:
    """The path as a row of stages on one wire, each with its gain and how it comes about."""
    if not path.stages:
        return ""
    items = [_port(path.input, "source", False)]
    for place, stage in enumerate(path.stages):
        following = path.stages[place + 1] if place + 1 < len(path.stages) else None
        joined = following is not None and following.input_node == stage.output_node
        items.append(_stage(stage, not joined))
    items.append(_port(path.output, "output", True))
    body = f'<ol class="stages">{"".join(items)}</ol>'
    body += "".join(f"<p>{line}</p>" for line in _by_inspection(path))
    aside = "Gains at midband, from node to node, loaded by what follows."
    return section("path", "Signal path", body, aside)


def _port(words: str, what: str, last: bool) -> str:
    return (
        f'<li class="port{" last" if last else ""}"><div class="glyph"><svg width="14" height="14" '
        'viewBox="0 0 14 14" aria-hidden="true"><circle class="bx" cx="7" cy="7" r="5"/></svg>'
        f'<span class="node {"out" if last else "in"}">{name(words)}</span></div>'
        f'<span class="vh">{what}</span></li>'
    )


def _stage(stage: StageRow, shows_output: bool) -> str:
    inverts = stage.gain is not None and stage.gain < 0
    ring = '<circle class="bx" cx="58" cy="28" r="5"/>' if inverts else ""
    said = f"stage {stage.number}, {'inverting' if inverts else 'not inverting'}"
    out = f'<span class="node out">{name(stage.output_node)}</span>' if shows_output else ""
    gain = quantity(stage.gain, "V/V") if stage.gain is not None else "no gain"
    formula = f"<p>{expression(stage.formula)}</p>" if stage.formula else ""
    if not formula and stage.formula_reason:
        formula = f'<p class="small">no formula: {text(stage.formula_reason)}</p>'
    return (
        f'<li><div class="glyph"><svg width="66" height="56" viewBox="0 0 66 56" role="img" '
        f'aria-label="{said}"><path class="bx" d="M8 4v48l45 -24z"/>{ring}'
        f'<text x="22" y="33" class="mid">{stage.number}</text></svg>'
        f'<span class="node in">{name(stage.input_node)}</span>{out}</div>'
        f'<div class="st-t"><p><span class="nm">'
        f"{', '.join(name(part) for part in stage.transistors)}</span> {text(stage.configuration)}"
        f'</p><p class="g">{gain}</p>{formula}<p class="small">'
        f"into {quantity(stage.input_resistance_ohm, 'Ω')}, "
        f"out of {quantity(stage.output_resistance_ohm, 'Ω')}</p></div></li>"
    )


def _by_inspection(path: PathRow) -> Iterator[str]:
    if path.gain_by_formulas is not None:
        yield f"Product of the formulas {quantity(path.gain_by_formulas, path.gain_unit)}"
    if path.gain_by_inspection is not None and path.gain is not None:
        yield (
            "With large capacitors short and small ones open "
            f"{quantity(path.gain_by_inspection, path.gain_unit)}, "
            f"exact {quantity(path.gain, path.gain_unit)}"
        )


# Response -----------------------------------------------------------------------------------------


def response(path: PathRow, plot: BodePlot) -> str:
    """The Bode plot, wide and narrow, and the corners in a table beside."""
    ticks = "Triangles: the corner of each part, filled where it sets a corner"
    if plot.beyond:
        ticks += f"; {plot.beyond} more are in the ledgers"
    if plot.regions:
        ticks += ". Hatched: along each limit, on the side where the curve may not be"
    body = (
        f'<figure class="plot"><div class="wide">{bode_svg(plot, WIDE, "bode-w")}</div>'
        f'<div class="narrow">{bode_svg(plot, NARROW, "bode-n")}</div>'
        f'<figcaption class="small">{ticks}.</figcaption></figure>'
    )
    heads = [Head(""), Head("estimate", True), Head("better", True), Head("exact", True)]
    corners = [corner for corner in (path.low, path.high) if corner is not None]
    rows = [
        [
            f"{corner.end} corner",
            quantity(corner.estimate_hz, "Hz"),
            quantity(corner.improved_hz, "Hz"),
            quantity(corner.exact_hz, "Hz"),
            percent(corner.estimate_error, signed=True),
        ]
        for corner in corners
    ]
    heads.append(Head("estimate<br>against exact", True))
    return section("response", "Response", body + table("Corners three ways", heads, rows, True))


def simulated(row: SimulatedRow | None) -> str:
    """Our figures beside a simulator's."""
    if row is None:
        return ""
    heads = (
        Head("figure"),
        Head("estimate", True),
        Head("exact", True),
        Head("simulated", True),
        Head("difference", True),
    )
    rows = [
        (
            f"{text(entry.figure)}{f' of {name(entry.part)}' if entry.part else ''}",
            quantity(entry.estimate, entry.unit),
            quantity(entry.exact, entry.unit),
            quantity(entry.simulated, entry.unit),
            _difference(entry.difference),
        )
        for entry in row.figures
    ]
    body = table("Figures beside the simulator's", heads, rows, True)
    return section("simulated", "Simulated", body, text(row.simulator))


def _difference(value: float | None) -> str:
    if value is None:
        return "—"
    return f"{100 * value:+.3f}\u00a0%".replace("-", "−")
