"""The comparison of two revisions as a section of the Markdown report."""

from __future__ import annotations

from collections.abc import Iterator

from tauledger.report.markup import code, details, sentence, table
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

_PARTS_SHOWN = 40
_FIGURES_SHOWN = 30
_EFFECTS_SHOWN = 10


def changes_section(comparison: Comparison) -> str:
    """Verdict, parts, the attribution of each corner; the figures open on demand."""
    return "\n".join(_blocks(comparison))


def _blocks(comparison: Comparison) -> Iterator[str]:
    yield f"### Changes: {code(comparison.old)} → {code(comparison.new)}\n"
    yield "".join(f"- **{sentence(line)}**\n" for line in verdict(comparison))
    lines = [*comparison.notes, *(word_text(row) for row in comparison.words if row.changed)]
    if lines:
        yield "".join(f"- {sentence(line)}\n" for line in lines[:_PARTS_SHOWN])
    if comparison.parts:
        yield _parts(comparison)
    for attribution in moves(comparison):
        yield _attribution(attribution)
    if comparison.electrical:
        yield details("All figures, old and new", _figures(comparison))


def _parts(comparison: Comparison) -> str:
    rows = [
        (
            code(part_name(row)),
            kind_text(row),
            sentence(part_text(row), 200),
            code(place(row)),
        )
        for row in comparison.parts[:_PARTS_SHOWN]
    ]
    body = table(("part", "", "what", "where"), rows)
    return body + _more(len(comparison.parts) - _PARTS_SHOWN, "parts")


def _attribution(attribution: Attribution) -> str:
    unit = attribution.unit
    rows = [
        (
            code(effect.edit),
            moved(effect.alone, unit, attribution.old),
            moved(effect.last, unit, attribution.old),
            f"**{moved(effect.average, unit, attribution.old)}**",
            "—" if effect.share is None else f"{100 * effect.share:.1f} %",
        )
        for effect in attribution.effects[:_EFFECTS_SHOWN]
    ]
    old, new = value(attribution.old, unit), value(attribution.new, unit)
    heads = (
        f"{attribution.figure} {old} → {new}",
        "alone",
        "on top of the others",
        "attributed",
        "share",
    )
    body = table(heads, rows, (1, 2, 3, 4))
    body += _more(len(attribution.effects) - _EFFECTS_SHOWN, "edits")
    return body + "\n" + "".join(f"- {sentence(line)}\n" for line in remainder(attribution))


def _figures(comparison: Comparison) -> str:
    rows = [
        (
            f"{row.figure} of {code(row.part)}" if row.part else row.figure,
            value(row.old, row.unit),
            value(row.new, row.unit),
            change(row),
        )
        for row in comparison.figures[:_FIGURES_SHOWN]
    ]
    body = table(("figure", "old", "new", "change"), rows, (1, 2, 3))
    return body + _more(len(comparison.figures) - _FIGURES_SHOWN, "figures")


def _more(count: int, what: str) -> str:
    return f"\n{count} more {what}: --format json lists all.\n" if count > 0 else ""
