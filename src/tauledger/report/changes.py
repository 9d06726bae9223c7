"""The comparison of two revisions as lines of the text page."""

from __future__ import annotations

from tauledger.report.inert import clip
from tauledger.report.layout import BLANK, Column, Line, Piece, Row, paragraph, table
from tauledger.report.page import Page
from tauledger.report.wording import (
    change,
    kind_text,
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

_PARTS_SHOWN = 60
_FIGURES_SHOWN = 40
_EFFECTS_SHOWN = 12


def comparison_page(page: Page, comparison: Comparison) -> list[Line]:
    """The whole answer of ``tauledger compare``."""
    title = page.spell(f"{page.text(comparison.old)} → {page.text(comparison.new)}")
    return [*paragraph(title, page.width, style="title"), *_body(page, comparison)]


def comparison_section(page: Page, comparison: Comparison | None) -> list[Line]:
    """The part of a report that says what changed since another revision."""
    if comparison is None:
        return []
    room = page.width - len("Changes since  ")
    heading = page.heading(f"Changes since {clip(page.text(comparison.old), room)}")
    return [heading, *_body(page, comparison)]


def _body(page: Page, comparison: Comparison) -> list[Line]:
    lines: list[Line] = []
    for sentence in verdict(comparison):
        lines += paragraph(page.text(sentence), page.width, "   ", " ", "verdict")
    for note in comparison.notes:
        lines += paragraph(page.text(note), page.width, "   ", " - ")
    lines.append(BLANK)
    lines += _parts(page, comparison)
    lines += _words(page, comparison)
    lines += _figures(page, comparison)
    for attribution in moves(comparison):
        lines += _attribution(page, attribution)
    return lines


def _parts(page: Page, comparison: Comparison) -> list[Line]:
    if not comparison.parts:
        return []
    columns = (
        Column("part", flexible=True),
        Column("", flexible=True),
        Column("what", flexible=True),
        Column("where", flexible=True),
    )
    rows = [
        Row(
            (
                page.text(part_name(row)),
                page.text(kind_text(row)),
                page.text(part_text(row)),
                page.text(place(row)),
            )
        )
        for row in comparison.parts[:_PARTS_SHOWN]
    ]
    lines = [page.heading("Parts"), *table(columns, rows, page.width)]
    return [*lines, *_more(page, len(comparison.parts) - _PARTS_SHOWN, "parts"), BLANK]


def _words(page: Page, comparison: Comparison) -> list[Line]:
    lines = [page.heading("What sets the corners, what parts do")]
    for row in comparison.words[:_FIGURES_SHOWN]:
        style = "strong" if row.changed else ""
        lines += paragraph(page.text(word_text(row)), page.width, "   ", " ", style)
    return [*lines, *_more(page, len(comparison.words) - _FIGURES_SHOWN, "lines"), BLANK]


def _figures(page: Page, comparison: Comparison) -> list[Line]:
    columns = (
        Column("figure", flexible=True),
        Column("old", right=True),
        Column("new", right=True),
        Column("change", right=True),
    )
    rows = []
    for row in comparison.figures[:_FIGURES_SHOWN]:
        name = f"{row.figure} of {row.part}" if row.part else row.figure
        cells = (name, value(row.old, row.unit), value(row.new, row.unit), change(row))
        rows.append(Row(tuple(page.text(cell) for cell in cells)))
    lines = [page.heading("Figures"), *table(columns, rows, page.width)]
    return [*lines, *_more(page, len(comparison.figures) - _FIGURES_SHOWN, "figures"), BLANK]


def _attribution(page: Page, attribution: Attribution) -> list[Line]:
    unit = attribution.unit
    columns = (
        Column("edit", flexible=True),
        Column("alone", right=True),
        Column("on top of the others", right=True),
        Column("attributed", right=True, style="strong"),
        Column("share", right=True),
        Column("", style="bar"),
    )
    rows = [
        Row(
            (
                page.text(effect.edit),
                page.text(moved(effect.alone, unit, attribution.old)),
                page.text(moved(effect.last, unit, attribution.old)),
                page.text(moved(effect.average, unit, attribution.old)),
                page.percent(effect.share),
                page.bar(effect.share),
            )
        )
        for effect in attribution.effects[:_EFFECTS_SHOWN]
    ]
    title = f"{attribution.figure.capitalize()}: which edit moved it"
    lines = [page.heading(title), *table(columns, rows, page.width)]
    lines += _more(page, len(attribution.effects) - _EFFECTS_SHOWN, "edits")
    for sentence in remainder(attribution):
        lines += paragraph(page.text(sentence), page.width, "   ", " ", "faint")
    return [*lines, BLANK]


def _more(page: Page, count: int, what: str) -> list[Line]:
    if count <= 0:
        return []
    return [(Piece(page.text(f" {count} more {what}: --format json lists all"), "faint"),)]
