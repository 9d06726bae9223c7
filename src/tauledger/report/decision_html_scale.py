"""One axis of a small plot: where values stand, and which of them are written there."""

from __future__ import annotations

import math

from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.report.plot import Axis

_PREFIXED = ("Hz", "V", "A", "Ω")
_MANY_DECADES = 1000.0
"""Ends so far apart have labels with prefixes of their own."""
_LEAST_SPAN = 0.01
"""Of the value, when all are the same."""


@dataclass(frozen=True, slots=True)
class Scale:
    """Values from ``first`` to ``last`` between two places in user units."""

    first: float
    last: float
    logarithmic: bool
    unit: str
    start: float
    end: float

    def at(self, value: float) -> float:
        first, last = self._run(self.first), self._run(self.last)
        return self.start + (self.end - self.start) * (self._run(value) - first) / (last - first)

    def _run(self, value: float) -> float:
        return math.log(value) if self.logarithmic else value

    @property
    def unit_word(self) -> str:
        """The unit with the prefix that the labels leave out; empty without a unit."""
        if self.unit not in _PREFIXED:
            return self.unit
        return format_quantity(10.0**self._power, self.unit, 1).partition(" ")[2]

    @property
    def _power(self) -> int:
        """Of the prefix all labels share."""
        largest = max(abs(self.first), abs(self.last))
        if self.unit not in _PREFIXED or self._is_long or largest == 0.0:
            return 0
        return min(max(3 * math.floor(math.log10(largest) / 3.0), -15), 12)

    @property
    def _is_long(self) -> bool:
        return self.logarithmic and self.last / self.first > _MANY_DECADES

    def ticks(self, most: int) -> list[tuple[float, str]]:
        """Place and label of round values, at most ``most`` of them."""
        if self.logarithmic and self.last / self.first >= 10.0:
            values = self._decades(most)
        else:
            values = list(Axis(self.first, self.last, self._step(most)).ticks)
        return [(self.at(value), self._label(value)) for value in values]

    def _step(self, most: int) -> float:
        least = (self.last - self.first) / (most - 1)
        size = 10.0 ** math.floor(math.log10(least))
        return next(k * size for k in (1.0, 2.0, 5.0, 10.0) if k * size >= least * (1.0 - 1e-9))

    def _decades(self, most: int) -> list[float]:
        first, last = math.floor(math.log10(self.first)), math.ceil(math.log10(self.last))
        for steps in ((1.0, 2.0, 5.0), (1.0, 3.0), (1.0,)):
            values = [k * 10.0**power for power in range(first, last + 1) for k in steps]
            inside = [v for v in values if self.first <= v <= self.last]
            if len(inside) <= most:
                return inside
        return inside[:: math.ceil(len(inside) / most)]

    def _label(self, value: float) -> str:
        if self._is_long and self.unit in _PREFIXED:
            number, _, word = format_quantity(value, self.unit, 1).partition(" ")
            return f"{number}{word.removesuffix(self.unit)}"
        shown = f"{value / 10.0**self._power:.6g}"
        return "0" if float(shown) == 0.0 else shown.replace("-", "−")


def fitted(
    low: float, high: float, logarithmic: bool, unit: str, start: float, end: float
) -> Scale:
    """A scale round these values; one value alone stands in the middle of a narrow one."""
    logarithmic = logarithmic and low > 0.0
    if logarithmic:
        span = math.log(high / low)
        margin = 0.0 if span > 1e-6 else _LEAST_SPAN
        return Scale(low * math.exp(-margin), high * math.exp(margin), True, unit, start, end)
    size = max(abs(low), abs(high))
    margin = 0.0 if high - low > 1e-6 * size else (_LEAST_SPAN * size or 1.0)
    return Scale(low - margin, high + margin, False, unit, start, end)
