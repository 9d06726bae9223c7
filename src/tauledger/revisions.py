"""Two revisions of a netlist, read, analysed and compared."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from tauledger.analysis import Analysis, analyze, corners_of
from tauledger.circuit.elements import GROUND, Circuit
from tauledger.configuration.settings import PathSettings
from tauledger.netlist import read
from tauledger.problems import ProblemError
from tauledger.records import dataclass
from tauledger.review.attribution import Figures, figures
from tauledger.review.changes import Comparison, PartChange
from tauledger.review.compare import Revision
from tauledger.review.compare import compare as compare_revisions
from tauledger.revision import Place, name_in, opened


@dataclass(frozen=True, slots=True)
class Aim:
    """What is asked of both sides."""

    input: str | None = None
    output: str | None = None
    midband_hz: float | None = None
    settings: Callable[[Place], PathSettings | None] | None = None
    """What the configuration adds to a netlist."""

    def analysed(self, place: Place) -> Analysis:
        """The netlist at this place, read and analysed."""
        netlist = read(place.path, place.roots)
        added = self.settings(place) if self.settings else None
        return analyze(netlist, self.input, self.output, added, self.midband_hz)


def compare(old: Analysis, new: Analysis) -> Comparison:
    """What differs between two analyses, and which edit moved each corner.

    For every edit, up to 40, two circuits between the old and the new one are solved, with the
    gain judged where it was asked to be for the new one.
    """
    return _compare(old, new, old.circuit.path, new.circuit.path)


def compare_netlists(old: str, new: str, aim: Aim, where: Path | None = None) -> Comparison:
    """Compare two netlists, each a file or ``REV:path`` in the git repository of ``where``.

    Raises ProblemError when one of them cannot be read or analysed.
    """
    with opened(old, where) as before, opened(new, where) as after:
        sides = aim.analysed(before), aim.analysed(after)
        comparison = _compare(*sides, before.name, after.name)
        return _renamed(comparison, before, after)


def compare_against(revision: str, new: Analysis, aim: Aim) -> Comparison:
    """Compare an analysed file of a working tree with itself in a revision of its repository."""
    netlist = Path(new.circuit.path)
    with opened(name_in(revision, netlist), netlist.parent) as before:
        names = before.name, new.circuit.path
        comparison = _compare(aim.analysed(before), new, *names)
        return _renamed(comparison, before, None)


def _compare(old: Analysis, new: Analysis, old_name: str, new_name: str) -> Comparison:
    path = old.topology.path
    output = path.output_node
    if path.output_reference != GROUND:
        output += f",{path.output_reference}"

    def solve(circuit: Circuit) -> Figures | None:
        try:
            corners = corners_of(circuit, path.source, output, new.asked_midband_hz)
        except ProblemError:
            return None
        gain = corners.exact_gain
        gain_db = 20.0 * math.log10(gain) if gain > 0 else None
        return figures(gain_db, corners.low.exact_hz, corners.high.exact_hz)

    sides = [
        Revision(name, side.circuit, side.topology.path, side.review)
        for name, side in ((old_name, old), (new_name, new))
    ]
    return compare_revisions(sides[0], sides[1], solve)


def _renamed(comparison: Comparison, old: Place, new: Place | None) -> Comparison:
    """The rows with the places of copies under the user's names."""

    def part(row: PartChange) -> PartChange:
        before = row.old_span and replace(row.old_span, path=old.shown(row.old_span.path))
        after = row.new_span
        if after and new:
            after = replace(after, path=new.shown(after.path))
        return replace(row, old_span=before, new_span=after)

    return replace(comparison, parts=tuple(map(part, comparison.parts)))
