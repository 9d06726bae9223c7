"""Labels of a drawing ↔ parts of the netlist. A designator is found or missing, never guessed."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence

from tauledger.annotate.geometry import Box
from tauledger.annotate.scan import Label
from tauledger.records import dataclass

MOST_PLACES = 8
"""Where one part is marked; a name that stands more often is in use for something else too."""

_WITH_VALUE = re.compile(r"(\S+?)(?:\s*[=:,;]\s*|\s+)[0-9.]")
_SAME_PLACE = 4.0
"""Labels of one part nearer than this many letter heights are one label, written twice."""


@dataclass(frozen=True, slots=True)
class Place:
    """Where a designator stands; ``size`` is its font size, 0 when it is not text."""

    box: Box
    size: float


def find_places(labels: Sequence[Label], names: Iterable[str]) -> dict[str, list[Place]]:
    """Places by part name; a part whose designator is not on the drawing has no entry."""
    keys = _keys(tuple(names))
    found: dict[str, list[Label]] = {}
    for label in labels:
        if (name := _part(label.text, keys)) is not None:
            found.setdefault(name, []).append(label)
    return {name: _distinct(same) for name, same in found.items()}


def _part(text: str, keys: Mapping[str, str]) -> str | None:
    """The part a label names: alone, or followed by its value as in ``C1 100n``."""
    folded = text.casefold()
    if (name := keys.get(folded)) is not None:
        return name
    match = _WITH_VALUE.match(folded)
    return keys.get(match[1]) if match else None


def _keys(names: tuple[str, ...]) -> dict[str, str]:
    """How each part may be spelled on the drawing.

    Netlisters put the SPICE letter before a designator (``CC1``, ``Q_Q1``) and the instance
    before a part of a subcircuit (``X1.C1``). The bare designator counts where only one part of
    the netlist can be meant.
    """
    exact = {name.casefold(): name for name in names}
    bare: dict[str, list[str]] = {}
    for name in names:
        last = name.rpartition(".")[2].casefold()
        for key in {last, _without_prefix(last)}:
            bare.setdefault(key, []).append(name)
    single = {key: found[0] for key, found in bare.items() if len(found) == 1}
    return single | exact


def _without_prefix(name: str) -> str:
    if len(name) > 2 and name[1] == "_":
        return name[2:]
    return name[1:] if len(name) > 2 and name[0] == name[1] else name


def _distinct(labels: Sequence[Label]) -> list[Place]:
    """One place for each label that stands apart; hidden text beside strokes is one with them.

    What attributes and titles say counts only where no text says it: they describe a whole symbol
    whose designator then stands beside it.
    """
    texts = [label for label in labels if label.size > 0]
    chosen = texts or sorted(labels, key=lambda label: label.box.width * label.box.height)
    places: list[Place] = []
    for label in chosen:
        reach = _SAME_PLACE * label.size or max(label.box.width, label.box.height)
        if all(place.box.gap(label.box) > reach for place in places):
            places.append(Place(label.box, label.size))
        if len(places) == MOST_PLACES:
            break
    return places
