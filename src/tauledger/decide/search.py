"""What a choice is searched in: the bench, the capacitors that may change, what they may become."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tauledger.circuit.elements import Capacitor
from tauledger.decide.available import Stock
from tauledger.decide.bench import Bench, measure_values
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

    def corner(self, values_f: FloatArray) -> FloatArray:
        """(boards,): exact corners with (parts, boards) capacitances; NaN where there is none."""
        return self._measured(values_f)[0]

    def met(self, values_f: FloatArray) -> NDArray[np.bool_]:
        """(boards,): whether the corner meets the limit (no corner at all does) with a band that
        is still the amplifier's: no more peak than allowed, and the gain as it was."""
        corner, peak, gain = self._measured(values_f)
        calm = peak <= self.highest_peak
        same = np.abs(np.log(gain / self.bench.gain)) <= GAIN_KEPT
        return np.asarray(self.reaches(corner) & calm & same)

    def reaches(self, corner_hz: FloatArray) -> NDArray[np.bool_]:
        """Whether corners meet the limit; none at all, as NaN, does."""
        low = self.end == "low"
        good = corner_hz <= self.limit_hz if low else corner_hz >= self.limit_hz
        return np.asarray(good | np.isnan(corner_hz))

    def peak(self, values_f: FloatArray) -> float:
        """Of one board, as a ratio to midband."""
        return float(self._measured(values_f[:, None])[1][0])

    def _measured(self, values_f: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Corner, peak towards it, and midband gain."""
        found = []
        for start in range(0, values_f.shape[1], BLOCK):
            block = values_f[:, start : start + BLOCK]
            varied = {part.name: block[i] for i, part in enumerate(self.parts)}
            f = measure_values(self.bench, self.network, varied)
            low = self.end == "low"
            found.append(
                (f.low_hz if low else f.high_hz, f.low_peak if low else f.high_peak, f.gain)
            )
        corner, peak, gain = (np.concatenate(columns) for columns in zip(*found, strict=True))
        return corner, peak, gain

    @property
    def now_f(self) -> FloatArray:
        return np.array([part.capacitance_f for part in self.parts])

    def only(self, indices: Sequence[int]) -> Search:
        """The same with fewer parts that may change, the others as they stand."""
        return replace(
            self,
            parts=tuple(self.parts[i] for i in indices),
            stocks=tuple(self.stocks[i] for i in indices),
            ideal_f=None,
        )
