"""Two revisions of an amplifier → the rows of their comparison."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping

from tauledger.circuit.elements import Circuit
from tauledger.records import dataclass
from tauledger.review.attribution import Figures, Solve, attribute, figures
from tauledger.review.changes import Attribution, Comparison, FigureChange, WordChange
from tauledger.review.edits import find_edits, part_changes
from tauledger.review.matching import Matching, match
from tauledger.review.rows import CornerRow, PathRow, Review, TransistorRow
from tauledger.topology.model import SignalPath


@dataclass(frozen=True, slots=True)
class Revision:
    """One side of a comparison: a circuit, what was found of it, and what the user calls it."""

    name: str
    circuit: Circuit
    path: SignalPath
    review: Review
    """With one path."""


def compare(old: Revision, new: Revision, solve: Solve) -> Comparison:
    """Parts, figures and words that differ, and the edits to which the corners' moves belong.

    ``solve`` finds the figures of a circuit between the two along the old signal path.
    """
    matching = match(old.circuit, new.circuit)
    names = _Names(matching)
    parts = part_changes(old.circuit, new.circuit, matching)
    edits = find_edits(old.circuit, new.circuit, matching)
    one_path = _same_path(old.path, new.path, names, matching)
    before, after = old.review.paths[0], new.review.paths[0]
    notes: list[str] = []
    kept, all_parts = _kept(matching), max(len(old.circuit.elements), len(new.circuit.elements))
    alike = 2 * kept >= all_parts
    attributions: tuple[Attribution, ...] = ()
    if one_path and alike:
        found = attribute(old.circuit, edits, _figures(before), _figures(after), solve)
        attributions = tuple(one for one in found if _explains(one))
        notes += _unexplained([one.figure for one in found if not _explains(one)])
    elif one_path:
        notes.append(
            f"the circuits are too different ({kept} of {all_parts} parts keep their place), so "
            "the figures are set side by side and nothing is attributed"
        )
    else:
        notes.append(
            f"the signal path is another one ({before.input} to {before.output}, now "
            f"{after.input} to {after.output}), so the figures are set side by side and nothing "
            "is attributed"
        )
    return Comparison(
        old=old.name,
        new=new.name,
        electrical=bool(edits) or not one_path,
        parts=parts,
        figures=(*_path_figures(before, after), *_currents(old.review, new.review, names)),
        words=tuple(_words(old.review, new.review, names)),
        attributions=attributions,
        notes=(*notes, *_missing_corners(before, after)),
    )


def _kept(matching: Matching) -> int:
    """How many parts are between the same nets in both circuits, whatever their values."""
    return sum(
        all(matching.nodes.get(b) == a for a, b in zip(old.nodes, new.nodes, strict=False))
        for old, new in matching.pairs
    )


def _explains(attribution: Attribution) -> bool:
    """False when what is left over is more than the move itself: the shares are noise."""
    return abs(attribution.remainder) <= abs(attribution.new - attribution.old)


def _unexplained(figures: list[str]) -> Iterator[str]:
    if figures:
        yield (
            f"nothing is attributed of {', '.join(figures)}: the edits act together so much that "
            "what each does by itself leaves more over than the whole move"
        )


class _Names:
    """Old designators in the new netlist's spelling."""

    def __init__(self, matching: Matching) -> None:
        self._new = {a.name: b.name for a, b in matching.pairs}

    def __call__(self, name: str) -> str:
        """The new name of a part, or of a device capacitance such as ``Q1.Cμ``."""
        if name in self._new:
            return self._new[name]
        device, dot, symbol = name.rpartition(".")
        return f"{self._new[device]}{dot}{symbol}" if device in self._new else name


def _same_path(old: SignalPath, new: SignalPath, names: _Names, matching: Matching) -> bool:
    return (
        names(old.source) == new.source
        and old.output_node == matching.nodes.get(new.output_node)
        and old.output_reference == matching.nodes.get(new.output_reference)
    )


# Figures ------------------------------------------------------------------------------------------


def _figures(row: PathRow) -> Figures:
    return figures(row.gain_db, _exact(row.low), _exact(row.high))


def _path_figures(old: PathRow, new: PathRow) -> Iterator[FigureChange]:
    unit = new.gain_unit
    if old.gain_unit == unit:
        yield _figure("midband gain", "", unit, old.gain, new.gain)
    yield _figure("midband gain", "", "dB", old.gain_db, new.gain_db)
    for name, take in _PATH_FIGURES:
        yield _figure(*name, take(old), take(new))


def _exact(row: CornerRow | None) -> float | None:
    return row.exact_hz if row is not None else None


def _estimate(row: CornerRow | None) -> float | None:
    return row.estimate_hz if row is not None else None


_PATH_FIGURES: tuple[tuple[tuple[str, str, str], Callable[[PathRow], float | None]], ...] = (
    (("low corner", "", "Hz"), lambda row: _exact(row.low)),
    (("low corner by time constants", "", "Hz"), lambda row: _estimate(row.low)),
    (("high corner", "", "Hz"), lambda row: _exact(row.high)),
    (("high corner by time constants", "", "Hz"), lambda row: _estimate(row.high)),
    (("input resistance", "", "Ω"), lambda row: row.input_resistance_ohm),
    (("output resistance", "", "Ω"), lambda row: row.output_resistance_ohm),
)


def _currents(old: Review, new: Review, names: _Names) -> Iterator[FigureChange]:
    """Bias current of every transistor, those that came or went included."""
    before = {names(row.name): row for row in old.transistors}
    after = {row.name: row for row in new.transistors}
    for name in {**before, **after}:
        a, b = before.get(name), after.get(name)
        row = b or a
        assert row is not None
        figure = "drain current" if "FET" in row.type else "collector current"
        yield _figure(figure, name, "A", _current(a), _current(b))


def _current(row: TransistorRow | None) -> float | None:
    return row.current_a if row is not None else None


def _figure(
    figure: str, part: str, unit: str, old: float | None, new: float | None
) -> FigureChange:
    difference = relative = None
    if old is not None and new is not None:
        difference = 0.0 if old == new else new - old
        if old and unit != "dB":
            relative = new / old - 1.0
    return FigureChange(figure, part, unit, old, new, difference, relative)


def _missing_corners(old: PathRow, new: PathRow) -> Iterator[str]:
    for end, a, b in (("low", old.low, new.low), ("high", old.high, new.high)):
        if (_exact(a) is None) != (_exact(b) is None):
            revision = "old" if _exact(a) is None else "new"
            yield f"the {revision} revision has no {end} corner, so no change of it is attributed"


# Words --------------------------------------------------------------------------------------------


def _words(old: Review, new: Review, names: _Names) -> Iterator[WordChange]:
    before, after = old.paths[0], new.paths[0]
    for end, a, b in (("low", before.low, after.low), ("high", before.high, after.high)):
        was, now = (tuple(row.set_by) if row else () for row in (a, b))
        changed = {names(name) for name in was} != set(now)
        yield WordChange(f"{end} corner set by", "", _joined(was), _joined(now), changed)
    for what, was_of, now_of in _said(old, new, names):
        for name in now_of:
            if name in was_of and was_of[name] != now_of[name]:
                yield WordChange(what, name, was_of[name], now_of[name], True)


def _joined(names: tuple[str, ...]) -> str:
    return " and ".join(names) or "no single part"


Said = Mapping[str, str]


def _said(old: Review, new: Review, names: _Names) -> Iterator[tuple[str, Said, Said]]:
    """What is said of each part by either side, under the new name, kind by kind."""
    rows = old.paths[0].time_constants, new.paths[0].time_constants
    for what, field in (("role", "role"), ("end of the band", "end")):
        yield (
            what,
            {names(row.name): getattr(row, field) for row in rows[0]},
            {row.name: getattr(row, field) for row in rows[1]},
        )
    for what in ("configuration", "region"):
        yield what, _transistors(old, what, names), _transistors(new, what, str)


def _transistors(review: Review, what: str, names: Callable[[str], str]) -> Said:
    def said(row: TransistorRow) -> str:
        return row.configuration if what == "configuration" else row.region

    return {names(row.name): said(row) for row in review.transistors}
