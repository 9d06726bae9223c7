"""Which values a capacitor may take: what is at hand, else a series of preferred values."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Sequence

from tauledger.configuration.settings import PathSettings
from tauledger.decide.series import within
from tauledger.records import dataclass
from tauledger.review.limits import class_of

ELECTROLYTIC_F = 1e-6
"""From here on capacitors are taken for electrolytics (common practice, no source)."""
ELECTROLYTIC_SERIES, OTHER_SERIES = "E6", "E12"
SMALLEST_F, LARGEST_F = 1e-12, 1.0


@dataclass(frozen=True, slots=True)
class Stock:
    """The values of one capacitor, ascending."""

    part: str
    values_f: tuple[float, ...]
    source: str
    """``available``, the name of a series, or empty for the usual ones."""

    def series_of(self, value_f: float) -> str:
        """Where a value is from."""
        return self.source or _usual(value_f)

    def near(self, value_f: float, count: int) -> list[float]:
        """``count`` values round this one, more of them above."""
        at = bisect_left(self.values_f, value_f * (1.0 - 1e-9))
        start = max(0, min(at - count // 2, len(self.values_f) - count))
        return list(self.values_f[start : start + count])

    def nearest(self, value_f: float) -> float:
        """The value nearest in ratio."""
        return min(self.values_f, key=lambda v: max(v / value_f, value_f / v))


def stock_of(part: str, settings: PathSettings | None, series: str = "") -> Stock:
    """The stock of a capacitor: its class's values, its class's series, ``series``, the usual."""
    found = class_of(part, settings.capacitors) if settings else None
    if found and found.values_f:
        return Stock(part, found.values_f, "available")
    name = (found.series if found else "") or series
    if name:
        return Stock(part, within(SMALLEST_F, LARGEST_F, name), name)
    small = [v for v in within(SMALLEST_F, ELECTROLYTIC_F, OTHER_SERIES) if v < ELECTROLYTIC_F]
    large = within(ELECTROLYTIC_F, LARGEST_F, ELECTROLYTIC_SERIES)
    return Stock(part, (*small, *large), "")


def common_values(stocks: Sequence[Stock]) -> list[float]:
    """Values that every one of the capacitors can take, ascending."""
    shared = set(stocks[0].values_f)
    for stock in stocks[1:]:
        shared &= set(stock.values_f)
    return sorted(shared)


def _usual(value_f: float) -> str:
    return ELECTROLYTIC_SERIES if value_f >= ELECTROLYTIC_F else OTHER_SERIES
