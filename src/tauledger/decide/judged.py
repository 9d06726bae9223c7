"""What limits ask of every board beside its gain and corners.

The figures are those :mod:`tauledger.review.limits` judges on one board, under the same names:
node voltages, currents, input and output resistance, voltage margins of capacitors, and which
part sets a corner.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence

import numpy as np
from numpy.typing import NDArray

from tauledger.analysis import Analysis
from tauledger.bias import BiasSolution
from tauledger.configuration.settings import Limit, PathSettings
from tauledger.corners.engine import TIE_MARGIN
from tauledger.decide.ports import Ports, ports_of
from tauledger.records import dataclass
from tauledger.review.limits import class_of, plain_name

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.intp]

SIMPLE = {"midband_gain": "gain", "low_corner": "low corner", "high_corner": "high corner"}
"""Limits of the figures that every spread has."""
RESISTANCES = ("input resistance", "output resistance")
LEAST_HOLD = 1.0 - TIE_MARGIN
"""A part sets a corner when it holds it at least so strongly as the strongest."""


@dataclass(frozen=True, slots=True)
class Judged:
    """One figure to find on every board."""

    name: str
    """As :mod:`tauledger.review.limits` calls it: ``voltage of coll``."""
    kind: str
    """``voltage``, ``current``, ``margin``, ``input resistance`` or ``output resistance``."""
    unit: str
    """``V``, ``A``, ``%`` or ``Ω``."""
    subjects: tuple[str, ...] = ()
    """The node, the transistor, or the two nodes of the capacitor."""
    rated_v: float = 0.0

    @property
    def linear(self) -> bool:
        """Whether differences tell more than ratios; a voltage may be zero or negative."""
        return self.unit != "Ω"


@dataclass(frozen=True, slots=True)
class Holder:
    """The part that must set a corner."""

    name: str
    """``low corner set by CE``."""
    end: str
    part: str
    """As the network calls it."""


@dataclass(frozen=True, slots=True)
class Demands:
    """The limits of a path, sorted by what it takes to judge them over the boards."""

    limits: tuple[tuple[str, Limit], ...]
    """Each with the name of its figure."""
    figures: tuple[Judged, ...]
    """Those beside gain and corners."""
    holders: tuple[Holder, ...]
    at_dc: tuple[Limit, ...]
    """Limits of a low corner where there is none, because the gain holds down to DC."""
    unjudged: tuple[str, ...]
    """What cannot be judged, and why."""


def demands_of(analysis: Analysis, settings: PathSettings | None) -> Demands:
    """Sort the limits of a configuration."""
    if settings is None:
        return Demands((), (), (), (), ())
    sorter = _Sorter(analysis, settings)
    for limit in settings.limits:
        sorter.take(limit)
    holders = tuple(sorter.holders())
    return Demands(
        tuple(sorter.limits),
        tuple({figure.name: figure for figure in sorter.figures}.values()),
        holders,
        tuple(sorter.at_dc),
        tuple(sorter.unjudged),
    )


class _Sorter:
    def __init__(self, analysis: Analysis, settings: PathSettings) -> None:
        self.limits: list[tuple[str, Limit]] = []
        self.figures: list[Judged] = []
        self.at_dc: list[Limit] = []
        self.unjudged: list[str] = []
        self._analysis = analysis
        self._settings = settings
        self._path = analysis.review.paths[0]

    def take(self, limit: Limit) -> None:
        match limit.figure:
            case "node_voltage":
                nodes = self._analysis.circuit.nodes
                self._subject(limit, "voltage", "V", nodes, "node")
            case "current":
                names = [row.name for row in self._analysis.review.transistors]
                self._subject(limit, "current", "A", names, "transistor")
            case "capacitor_voltage_margin":
                self._margins(limit)
            case "input_resistance" | "output_resistance":
                self._resistance(limit)
            case _:
                self._simple(limit)

    def _add(self, limit: Limit, figure: Judged) -> None:
        self.figures.append(figure)
        self.limits.append((figure.name, limit))

    def _subject(self, limit: Limit, kind: str, unit: str, names: Iterable[str], what: str) -> None:
        wanted = limit.subject.casefold()
        found = next((name for name in names if name.casefold() == wanted), None)
        if found is None:
            self.unjudged.append(f"{kind} of {limit.subject[:60]} (there is no such {what})")
        else:
            self._add(limit, Judged(f"{kind} of {found}", kind, unit, (found,)))

    def _margins(self, limit: Limit) -> None:
        assert limit.minimum is not None
        unrated = []
        for row in self._path.time_constants:
            if row.dc_voltage_v is None:
                continue
            kind = class_of(row.name, self._settings.capacitors)
            if kind is None or kind.rated_voltage_v is None:
                unrated.append(row.name)
                continue
            name = f"voltage margin of {row.name}"
            rated_v, unit = kind.rated_voltage_v, limit.minimum.unit
            self._add(limit, Judged(name, "margin", unit, row.nodes, rated_v))
        if unrated:
            names = ", ".join(unrated[:6]) + (" …" if len(unrated) > 6 else "")
            self.unjudged.append(f"voltage margin of {names} (no rated voltage is given)")

    def _resistance(self, limit: Limit) -> None:
        name = limit.figure.replace("_", " ")
        value = self._path.input_resistance_ohm
        if limit.figure == "output_resistance":
            value = self._path.output_resistance_ohm
        if value is None:
            self.unjudged.append(f"{name} (the nominal board has none)")
        else:
            self._add(limit, Judged(name, name, "Ω"))

    def _simple(self, limit: Limit) -> None:
        """Gain and corners, in a unit the boards have them in."""
        path, name = self._path, SIMPLE[limit.figure]
        known = {"Hz", "V/V", "dB"} if path.gain_unit == "V/V" else {"Hz", path.gain_unit}
        ends = [end for end in (limit.minimum, limit.maximum) if end]
        if strange := [end.unit for end in ends if end.unit not in known]:
            reason = f"the gain is in {path.gain_unit}, the limit in {strange[0]}"
            self.unjudged.append(f"midband gain ({reason})")
            return
        row = {"low corner": path.low, "high corner": path.high}.get(name)
        if name == "gain" or (row is not None and row.exact_hz is not None):
            self.limits.append((name, limit))
        elif name == "low corner" and path.gain_by_inspection is not None:
            self.at_dc.append(limit)
        else:
            self.unjudged.append(f"{name} (the nominal board has none)")

    def holders(self) -> Iterator[Holder]:
        known = {plain_name(row.name): row.name for row in self._path.time_constants}
        corners = {"low": self._path.low, "high": self._path.high}
        for asked in self._settings.dominance:
            name = f"{asked.end} corner set by {asked.part[:60]}"
            part = known.get(plain_name(asked.part))
            corner = corners[asked.end]
            if part is None:
                self.unjudged.append(f"{name} (there is no such capacitor or inductor)")
            elif corner is None or corner.exact_hz is None:
                self.unjudged.append(f"{name} (the nominal board has no such corner)")
            else:
                yield Holder(name, asked.end, part)


@dataclass(frozen=True, slots=True)
class Wanted:
    """What a bench measures beside gain and corners; nothing unless a limit asks for it."""

    figures: tuple[Judged, ...] = ()
    holders: tuple[Holder, ...] = ()
    ports: Ports | None = None

    @property
    def names(self) -> tuple[str, ...]:
        return (*(f.name for f in self.figures), *(h.name for h in self.holders))


def wanted_of(demands: Demands, analysis: Analysis) -> Wanted:
    """What the limits need measured."""
    at_ports = any(figure.kind in RESISTANCES for figure in demands.figures)
    return Wanted(demands.figures, demands.holders, ports_of(analysis) if at_ports else None)


# Boards -------------------------------------------------------------------------------------------


def bias_figures(
    figures: Sequence[Judged], solution: BiasSolution, boards: IntArray
) -> dict[str, FloatArray]:
    """Voltages, currents and margins of some boards of a solution, (boards,) each."""
    point = solution.point

    def voltage(node: str) -> FloatArray:
        if node == "0":
            return np.zeros(boards.size)
        return np.asarray(point.voltages[boards, point.nodes.index(node)])

    found: dict[str, FloatArray] = {}
    for figure in figures:
        if figure.kind == "voltage":
            found[figure.name] = voltage(figure.subjects[0])
        elif figure.kind == "current":
            values = point.devices[figure.subjects[0]].values
            found[figure.name] = np.abs(values["ic" if "ic" in values else "id"][boards])
        elif figure.kind == "margin":
            first, second = map(voltage, figure.subjects)
            margin = figure.rated_v - np.abs(first - second)
            is_share = figure.unit == "%"
            found[figure.name] = 100.0 * margin / figure.rated_v if is_share else margin
    return found


def hold_of(part: str, parts: Sequence[str], moves: FloatArray, upward: bool) -> FloatArray:
    """(boards,): how strongly a part holds a corner, the strongest of all being 1.

    ``moves`` (parts, boards) are d ln|H|/d ln(value) at the corner less that at midband. A larger
    value of a part that holds the low corner moves it down and so raises |H| there; of one that
    holds the high corner it lowers |H|. NaN where no part holds it.
    """
    if part not in parts:
        return np.full(moves.shape[1:], np.nan)
    holding = -moves if upward else moves
    strongest = holding.max(axis=0)
    share = np.divide(
        holding[list(parts).index(part)],
        strongest,
        out=np.full(strongest.shape, np.nan),
        where=strongest > 0.0,
    )
    return np.asarray(share)
