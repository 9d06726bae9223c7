"""What a comparison of two revisions shows: plain frozen rows, nothing to compute.

Field names carry the unit. A figure that one revision does not have is None.
"""

from __future__ import annotations

from tauledger.problems import SourceSpan
from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class Detail:
    """One property of a part that differs; None where one side has no such property."""

    what: str
    """``value``, ``nodes``, ``model``, ``DC value`` or the name of a model parameter."""
    old: float | str | None
    new: float | str | None
    unit: str = ""


@dataclass(frozen=True, slots=True)
class PartChange:
    """One part that is not the same in both revisions."""

    kind: str
    """``added``, ``removed``, ``changed`` or ``renamed`` (and nothing else)."""
    part: str
    """``capacitor``, ``resistor``, ``bipolar transistor`` …; ``circuit`` for the temperature."""
    old_name: str
    """Empty when added."""
    new_name: str
    """Empty when removed; differs from old_name by more than case when renumbered."""
    details: tuple[Detail, ...]
    electrical: bool
    """False when the equations of bias and small signal stay the same."""
    old_span: SourceSpan | None
    new_span: SourceSpan | None


@dataclass(frozen=True, slots=True)
class FigureChange:
    """One figure in both revisions."""

    figure: str
    """``midband gain``, ``low corner``, ``collector current`` …"""
    part: str
    """The part whose figure it is, named as in the new revision; empty for one of the path."""
    unit: str
    old: float | None
    new: float | None
    difference: float | None
    """new − old."""
    relative: float | None
    """new/old − 1; None when there is no old value or it is zero."""


@dataclass(frozen=True, slots=True)
class WordChange:
    """What is said of a part or an end of the band in both revisions."""

    what: str
    """``role``, ``configuration``, ``region``, ``end``, ``low corner set by`` …"""
    part: str
    """Named as in the new revision; empty for what is said of the path."""
    old: str
    new: str
    changed: bool
    """False when only designators differ."""


@dataclass(frozen=True, slots=True)
class EditEffect:
    """What one edit does to one figure, in the figure's unit."""

    edit: str
    """The parts edited together, such as ``C3`` or ``R9 and C1``."""
    parts: tuple[str, ...]
    alone: float | None
    """The figure with this edit alone, minus the old figure; None when that cannot be solved."""
    last: float | None
    """The new figure minus the figure with every edit but this one; None as above."""
    average: float | None
    """Mean of the two, or the one that exists: what is attributed to the edit."""
    share: float | None
    """average over the whole change."""


@dataclass(frozen=True, slots=True)
class Attribution:
    """The change of one figure laid on the edits, with what is left over."""

    figure: str
    """``low corner``, ``high corner`` or ``midband gain``."""
    unit: str
    old: float
    new: float
    effects: tuple[EditEffect, ...]
    """Largest first."""
    interaction: float
    """The whole change minus the sum of what each edit does alone."""
    remainder: float
    """The whole change minus the sum of what is attributed."""
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Comparison:
    """Two revisions of one signal path."""

    old: str
    """The netlist as named, such as ``HEAD~1:boards/amp.cir``."""
    new: str
    electrical: bool
    """False when both circuits have the same equations and the same signal path."""
    parts: tuple[PartChange, ...]
    figures: tuple[FigureChange, ...]
    words: tuple[WordChange, ...]
    """What sets each corner, always; roles, configurations and regions where they changed."""
    attributions: tuple[Attribution, ...]
    notes: tuple[str, ...] = ()
