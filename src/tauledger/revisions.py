"""Two revisions of a netlist, read, analysed and compared."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from tauledger.analysis import Analysis, analyze, analyze_circuit
from tauledger.circuit.elements import GROUND, Circuit
from tauledger.configuration.settings import PathSettings
from tauledger.netlist import read
from tauledger.problems import ProblemError
from tauledger.review.changes import Comparison, PartChange
from tauledger.review.compare import Revision
from tauledger.review.compare import compare as compare_revisions
from tauledger.review.rows import PathRow
from tauledger.revision import Place, name_in, opened

Settings = Callable[[Place], PathSettings | None]
"""What the configuration adds to a netlist."""


def compare(old: Analysis, new: Analysis) -> Comparison:
    """What differs between two analyses, and which edit moved each corner.

    For every edit, up to 40, two circuits between the old and the new one are solved.
    """
    return _compare(old, new, old.circuit.path, new.circuit.path)


def compare_netlists(
    old: str,
    new: str,
    input: str | None = None,
    output: str | None = None,
    settings: Settings | None = None,
    where: Path | None = None,
) -> Comparison:
    """Compare two netlists, each a file or ``REV:path`` in the git repository of ``where``.

    Raises ProblemError when one of them cannot be read or analysed.
    """
    with opened(old, where) as before, opened(new, where) as after:
        return _renamed(
            _compare(
                _analysed(before, input, output, settings),
                _analysed(after, input, output, settings),
                before.name,
                after.name,
            ),
            before,
            after,
        )


def compare_against(
    revision: str,
    new: Analysis,
    input: str | None = None,
    output: str | None = None,
    settings: Settings | None = None,
) -> Comparison:
    """Compare an analysed file of a working tree with itself in a revision of its repository."""
    netlist = Path(new.circuit.path)
    old = name_in(revision, netlist)
    with opened(old, netlist.parent) as before:
        comparison = _compare(
            _analysed(before, input, output, settings), new, before.name, new.circuit.path
        )
        return _renamed(comparison, before, None)


def _analysed(
    place: Place, input: str | None, output: str | None, settings: Settings | None
) -> Analysis:
    added = settings(place) if settings else None
    return analyze(read(place.path, place.roots), input, output, added)


def _compare(old: Analysis, new: Analysis, old_name: str, new_name: str) -> Comparison:
    path = old.topology.path
    output = path.output_node
    if path.output_reference != GROUND:
        output += f",{path.output_reference}"

    def solve(circuit: Circuit) -> PathRow | None:
        try:
            return analyze_circuit(old.netlist, circuit, path.source, output).review.paths[0]
        except ProblemError:
            return None

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
