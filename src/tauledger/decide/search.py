"""What a choice is searched in: the bench, the capacitors that may change, what they may become."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from tauledger.circuit.elements import Capacitor
from tauledger.decide.available import Stock
from tauledger.decide.bench import Bench, measure_values
from tauledger.records import dataclass
from tauledger.smallsignal.network import LinearNetwork

FloatArray = NDArray[np.float64]

BLOCK = 1000
HIGHEST_PEAK = 10.0 ** (0.5 / 20.0)
"""Half a decibel; more only where the netlist as it stands has more."""
GAIN_KEPT = 0.1
"""Largest change of the midband gain, in nepers."""


@dataclass(frozen=True, slots=True)
class Wish:
    """What is asked for."""

    end: str
    target_hz: float
    only: tuple[str, ...] = ()
    """Designators that may change; empty for all that count at this end."""
    shares: Mapping[str, float] | None = None
    """Share of the corner each capacitor is to have, in place of the least total."""
    series: str = ""
    margin: float = 0.0
    """How far the corner is to keep from the target, relative."""
    with_tolerance: bool = False
    """Whether the worst case of all tolerances is to meet it."""
    midband_hz: float | None = None
    """Where the gain is judged, when the user fixed it."""


class Measured(NamedTuple):
    """Of each board, (boards,)."""

    corner_hz: FloatArray
    """Exact −3 dB frequency; NaN where there is none."""
    peak: FloatArray
    """Highest response towards the corner, as a ratio to midband, at least 1."""
    gain: FloatArray
    """|H| at the midband frequency of the bench."""


@dataclass(frozen=True, slots=True)
class Search:
    """The bench, the capacitors that may change, and what they may become."""

    bench: Bench
    network: LinearNetwork
    parts: tuple[Capacitor, ...]
    stocks: tuple[Stock, ...]
    ideal_f: tuple[float, ...] | None
    end: str
    limit_hz: float
    """What the nominal exact corner has to meet."""
    highest_peak: float = HIGHEST_PEAK
    """Ratio to midband that the response may reach on its way to the corner."""
    gains: tuple[float, float] = (0.0, math.inf)
    """|H| at midband as the netlist stands, and with every part out of the way that ends the band:
    a narrow one stays below that. Between them the band is still the amplifier's."""

    def met(self, values_f: FloatArray) -> NDArray[np.bool_]:
        """(boards,): whether (parts, boards) capacitances meet the limit with a band that is still
        the amplifier's: no more peak than allowed, and the gain as it was."""
        return self.good(self.measured(values_f))

    def good(self, found: Measured) -> NDArray[np.bool_]:
        """The same of what was measured."""
        return np.asarray(self.reaches(found.corner_hz) & self.calm(found) & self.same(found))

    def reaches(self, corner_hz: FloatArray) -> NDArray[np.bool_]:
        """Whether corners meet the limit; none at all, as NaN, does."""
        low = self.end == "low"
        good = corner_hz <= self.limit_hz if low else corner_hz >= self.limit_hz
        return np.asarray(good | np.isnan(corner_hz))

    def calm(self, found: Measured) -> NDArray[np.bool_]:
        """Whether the response peaks no more than allowed."""
        return np.asarray(found.peak <= self.highest_peak)

    def gain_change(self, found: Measured) -> FloatArray:
        """(boards,): how far the midband gain is outside :attr:`gains`, in nepers."""
        lowest, highest = min(self.gains), max(self.gains)
        with np.errstate(divide="ignore"):
            off = np.maximum(np.log(lowest / found.gain), np.log(found.gain / highest))
        return np.asarray(np.maximum(off, 0.0))

    def same(self, found: Measured) -> NDArray[np.bool_]:
        """Whether the midband gain is still what it was, or what a wider band makes it."""
        return np.asarray(self.gain_change(found) <= GAIN_KEPT)

    def peak(self, values_f: FloatArray) -> float:
        """Of one board, as a ratio to midband."""
        return float(self.measured(values_f[:, None]).peak[0])

    def measured(self, values_f: FloatArray) -> Measured:
        """Figures of boards with (parts, boards) capacitances in F."""
        found = []
        low = self.end == "low"
        for start in range(0, values_f.shape[1], BLOCK):
            block = values_f[:, start : start + BLOCK]
            varied = {part.name: block[i] for i, part in enumerate(self.parts)}
            f = measure_values(self.bench, self.network, varied)
            found.append(
                (f.low_hz if low else f.high_hz, f.low_peak if low else f.high_peak, f.gain)
            )
        return Measured(*(np.concatenate(columns) for columns in zip(*found, strict=True)))

    @property
    def now_f(self) -> FloatArray:
        """(parts,): capacitances as the netlist has them; a new array each time."""
        return np.array([part.capacitance_f for part in self.parts])

    def only(self, indices: Sequence[int]) -> Search:
        """The same with fewer parts that may change, the others as they stand."""
        return replace(
            self,
            parts=tuple(self.parts[i] for i in indices),
            stocks=tuple(self.stocks[i] for i in indices),
            ideal_f=None,
        )


def stepped(
    search: Search,
    values: FloatArray,
    neighbour: Callable[[int, float], float | None],
    best: Callable[[FloatArray], np.intp],
) -> FloatArray:
    """Take single steps while the target is met; ``best`` picks one by the total capacitance.

    ``neighbour`` gives the next value of a part from its index and value, None at its end.
    """
    while True:
        trials = []
        for i, value in enumerate(values.tolist()):
            if (following := neighbour(i, value)) is not None:
                trial = values.copy()
                trial[i] = following
                trials.append(trial)
        if not trials:
            return values
        table = np.stack(trials, axis=1)
        met = np.flatnonzero(search.met(table))
        if not met.size:
            return values
        values = table[:, met[best(table[:, met].sum(axis=0))]]
