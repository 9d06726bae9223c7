"""Which edit moved a figure, and by how much.

For every edit two circuits are solved: the old one with this edit alone, and the new one without
it. With one figure f, edits E and the whole change Δ = f(all) − f(none),

    alone_i = f(i) − f(none)        last_i = f(all) − f(all without i)

and the edit is given the mean of both. Where edits act on the figure independently the two agree
and the means add up to Δ; what they leave over is the remainder, and Δ − Σ alone_i is what the
edits do together beyond what each does alone. With two edits the means always add up, since
alone_1 + last_2 = Δ.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

from tauledger.circuit.elements import Circuit
from tauledger.records import dataclass
from tauledger.review.changes import Attribution, EditEffect
from tauledger.review.edits import Edit, apply

MAXIMUM_EDITS = 40
"""Attributed one by one; two circuits are solved for each."""

FIGURES = (("low corner", "Hz"), ("high corner", "Hz"), ("midband gain", "dB"))
Figures = Mapping[str, float | None]
"""Each of :data:`FIGURES` by its name; None where a circuit has no such figure."""
Solve = Callable[[Circuit], Figures | None]
"""The figures of a circuit, or None when it cannot be solved."""
_SAME = 1e-6
"""A relative change below this is rounding."""


def figures(gain_db: float | None, low_hz: float | None, high_hz: float | None) -> Figures:
    """The figures that are laid on edits."""
    return {"low corner": low_hz, "high corner": high_hz, "midband gain": gain_db}


@dataclass(frozen=True, slots=True)
class _Trial:
    edit: Edit
    alone: Figures | None
    without: Figures | None


def attribute(
    circuit: Circuit, edits: Sequence[Edit], old: Figures, new: Figures, solve: Solve
) -> tuple[Attribution, ...]:
    """Lay the change of both corners and of the gain on the edits; unchanged figures are left out.

    Parameters
    ----------
    circuit
        The old circuit.
    edits
        As :func:`tauledger.review.edits.find_edits` gives them.
    old, new
        The figures of both revisions.
    solve
        Solves one circuit between them.
    """
    moved = [(name, unit) for name, unit in FIGURES if _moved(old[name], new[name])]
    if not moved or not edits:
        return ()
    if len(edits) == 1:
        trials = [_Trial(edits[0], new, old)]
    else:
        trials = [
            _Trial(
                edit,
                solve(apply(circuit, [edit])),
                solve(apply(circuit, [other for other in edits if other is not edit])),
            )
            for edit in edits[:MAXIMUM_EDITS]
        ]
    left_out = len(edits) - len(trials)
    return tuple(_attribution(name, unit, old, new, trials, left_out) for name, unit in moved)


def _moved(old: float | None, new: float | None) -> bool:
    if old is None or new is None:
        return False
    return abs(new - old) > _SAME * max(abs(old), abs(new))


def _attribution(
    name: str, unit: str, old: Figures, new: Figures, trials: Sequence[_Trial], left_out: int
) -> Attribution:
    start, end = old[name], new[name]
    assert start is not None
    assert end is not None
    change = end - start
    effects = [_effect(trial, name, start, end) for trial in trials]
    effects.sort(key=lambda effect: -abs(effect.average or 0.0))
    return Attribution(
        figure=name,
        unit=unit,
        old=start,
        new=end,
        effects=tuple(effects),
        interaction=change - sum(effect.alone or 0.0 for effect in effects),
        remainder=change - sum(effect.average or 0.0 for effect in effects),
        notes=tuple(_notes(effects, left_out)),
    )


def _effect(trial: _Trial, name: str, start: float, end: float) -> EditEffect:
    reached = trial.alone[name] if trial.alone is not None else None
    missed = trial.without[name] if trial.without is not None else None
    alone = None if reached is None else reached - start
    last = None if missed is None else end - missed
    found = [value for value in (alone, last) if value is not None]
    average = sum(found) / len(found) if found else None
    return EditEffect(
        edit=trial.edit.label,
        parts=trial.edit.parts,
        alone=alone,
        last=last,
        average=average,
        share=None if average is None else average / (end - start),
    )


def _notes(effects: Sequence[EditEffect], left_out: int) -> list[str]:
    notes = []
    if left_out > 0:
        notes.append(
            f"{left_out} of {left_out + len(effects)} edits are not attributed one by one; what "
            "they do is in the remainder"
        )
    unsolved = [effect.edit for effect in effects if effect.average is None]
    half = [e.edit for e in effects if e.average is not None and None in (e.alone, e.last)]
    if unsolved:
        notes.append(f"no figure with or without {_listed(unsolved)} by itself: in the remainder")
    if half:
        notes.append(f"{_listed(half)}: from one side only, the other circuit has no such figure")
    return notes


def _listed(names: Sequence[str]) -> str:
    more = f" and {len(names) - 6} more" if len(names) > 6 else ""
    return ", ".join(names[:6]) + more
