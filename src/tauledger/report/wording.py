"""The sentences and figures of a comparison, the same in every format; nothing is escaped here."""

from __future__ import annotations

import math
from collections.abc import Iterator

from tauledger.quantity import format_quantity
from tauledger.review.changes import (
    Attribution,
    Comparison,
    Detail,
    FigureChange,
    PartChange,
    WordChange,
)

NO_CHANGE = "no electrical change"
_DETAILS_SHOWN = 6
_SMALL = 5e-4
"""Relative changes below half a unit of the first decimal of a percentage print as such."""
_SMALL_DB = 0.005
"""The same for the second decimal of decibels, about as fine: 0.05 % are 0.004 dB."""
_SHARE_NAMED = 0.1


def verdict(comparison: Comparison) -> list[str]:
    """The answer in a sentence for every corner and gain that moved."""
    if not comparison.electrical:
        renamed = sum(row.kind == "renamed" for row in comparison.parts)
        if not renamed:
            return [NO_CHANGE]
        return [f"{NO_CHANGE}; {renamed} part{'s' if renamed > 1 else ''} renamed"]
    moved_ones = moves(comparison)
    if moved_ones:
        # A move that its own three digits do not show stands in the tables, not in the answer.
        return [_moved(one) for one in filter(_shows, moved_ones)] or list(map(_moved, moved_ones))
    if comparison.attributions or all(row.difference == 0.0 for row in comparison.figures):
        return ["parts changed; neither the corners nor the gain moved by 0.05 %"]
    return ["neither the corners nor the gain can be laid on the edits; see the figures"]


def moves(comparison: Comparison) -> list[Attribution]:
    """The attributions of moves large enough to print; JSON has the others too."""
    return [
        attribution
        for attribution in comparison.attributions
        if abs(attribution.new - attribution.old) >= _least(attribution.unit, attribution.old)
    ]


def _least(unit: str, old: float) -> float:
    """The smallest change of a figure that is worth a number."""
    return _SMALL_DB if unit == "dB" else _SMALL * abs(old)


def _shows(attribution: Attribution) -> bool:
    unit = attribution.unit
    return value(attribution.old, unit) != value(attribution.new, unit)


def _moved(attribution: Attribution) -> str:
    old, new = value(attribution.old, attribution.unit), value(attribution.new, attribution.unit)
    sentence = f"{attribution.figure} {old} → {new}"
    named = [
        f"{effect.edit} {100 * effect.share:.0f} %"
        for effect in attribution.effects
        if effect.share is not None and abs(effect.share) >= _SHARE_NAMED
    ]
    return f"{sentence}: {', '.join(named[:4])} of the move" if named else sentence


def value(number: float | None, unit: str, signed: bool = False) -> str:
    """A figure with prefix and unit, or a dash."""
    if number is None:
        return "—"
    shown = format_quantity(number, "" if unit == "V/V" else unit)
    if unit == "V/V":
        shown += " V/V"
    return f"+{shown}" if signed and number > 0 else shown


def moved(number: float | None, unit: str, old: float) -> str:
    """A move of a figure away from ``old``, to the decimals that count."""
    if number is None:
        return "—"
    least = _least(unit, old)
    if number and abs(number) < least:
        return f"<{format_quantity(least, '' if unit == 'V/V' else unit, 1)}"
    return f"{number:+.2f} dB" if unit == "dB" and number else value(number, unit, signed=True)


def change(row: FigureChange) -> str:
    """How far a figure moved: in dB, else in percent, else as a difference."""
    if row.difference is None:
        return "—" if row.old is row.new else "gone" if row.new is None else "new"
    if row.difference == 0.0:
        return "none"
    if row.relative is None or not math.isfinite(row.relative):
        return moved(row.difference, row.unit, row.old or 0.0)
    if abs(row.relative) < _SMALL:
        return "<0.05 %"
    return f"{100 * row.relative:+.3g} %"


def part_name(row: PartChange) -> str:
    if row.old_name and row.new_name and row.old_name.casefold() != row.new_name.casefold():
        return f"{row.old_name} → {row.new_name}"
    return row.new_name or row.old_name


def kind_text(row: PartChange) -> str:
    """What happened to the part; a change that the equations do not see is marked so."""
    return row.kind if row.electrical or row.kind == "renamed" else f"{row.kind}, not electrically"


def part_text(row: PartChange) -> str:
    """What differs, in words."""
    details = row.details
    if any(detail.what == "model" for detail in details):
        # Another model says it; its parameters are in JSON.
        details = tuple(detail for detail in details if not detail.what.startswith("model "))
    shown = [_detail(detail, row.kind) for detail in details[:_DETAILS_SHOWN]]
    if len(details) > _DETAILS_SHOWN:
        shown.append(f"{len(details) - _DETAILS_SHOWN} more")
    text = "; ".join(shown)
    if row.kind in ("added", "removed"):
        return f"{row.part}, {text}" if text else row.part
    return text or f"the same {row.part} in the same place"


def _detail(detail: Detail, kind: str) -> str:
    old, new = _sides(detail)
    if kind == "added":
        return f"{detail.what} {new}"
    if kind == "removed":
        return f"{detail.what} {old}"
    return f"{detail.what} {old} → {new}"


def _sides(detail: Detail) -> tuple[str, str]:
    """Both sides, with as many digits as it takes to tell them apart."""
    for digits in range(3, 9):
        old, new = (_side(side, detail.unit, digits) for side in (detail.old, detail.new))
        if old != new:
            break
    return old, new


def _side(side: float | str | None, unit: str, digits: int) -> str:
    if side is None:
        return "not given"
    return side if isinstance(side, str) else format_quantity(side, unit, digits)


def place(row: PartChange) -> str:
    """File and line, in the new revision where the part is in it."""
    span = row.new_span or row.old_span
    return f"{span.path}:{span.line}" if span is not None else ""


def word_text(row: WordChange) -> str:
    said = f"{row.old} → {row.new}" if row.old != row.new else row.new
    return f"{row.part}: {row.what} {said}" if row.part else f"{row.what} {said}"


def remainder(attribution: Attribution) -> Iterator[str]:
    """What the attribution leaves over, and how far the edits act together."""
    whole = attribution.new - attribution.old
    unit = attribution.unit
    yield (
        f"whole change {moved(whole, unit, attribution.old)}; remainder "
        f"{_part_of(attribution.remainder, attribution)}"
    )
    if len(attribution.effects) > 1:
        yield (
            "interaction, the whole change less what each edit does alone: "
            f"{_part_of(attribution.interaction, attribution)}"
        )
    yield from attribution.notes


def _part_of(part: float, attribution: Attribution) -> str:
    share = part / (attribution.new - attribution.old)
    if abs(share) < _SMALL:
        return "none"
    return f"{moved(part, attribution.unit, attribution.old)} ({100 * share:+.1f} %)"
