"""How words and figures are set on the text page: spelling, safety, width."""

from __future__ import annotations

import math

from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.report.alphabet import Spell
from tauledger.report.inert import clip, inert
from tauledger.report.layout import Line, heading

BOUND = "\u00a0"
"""A space at which no line breaks; printed as a plain space."""
_NAME_COLUMNS = 24
_BAR_CELLS = 10
_EIGHTHS = " ▏▎▍▌▋▊▉"


def _unsigned_zero(figure: str) -> str:
    """What rounds to zero has no direction left to tell."""
    return "0.0" if figure in ("-0.0", "+0.0") else figure


@dataclass(frozen=True, slots=True)
class Page:
    """The width of the page in columns, and the spelling its stream can carry."""

    width: int
    spell: Spell

    def text(self, text: str) -> str:
        """Any text that may hold words of a netlist."""
        return self.spell(inert(text))

    def name(self, text: str) -> str:
        """A part, node or model name, cut in its middle when very long."""
        return clip(self.text(text), _NAME_COLUMNS).replace(" ", BOUND)

    def title(self, text: str) -> str:
        """The title of the netlist, two lines at most."""
        return clip(self.text(text), 2 * self.width - 10)

    def heading(self, text: str) -> Line:
        return heading(self.spell(text), self.width, self.spell("─"))

    def quantity(self, value: float | None, unit: str) -> str:
        """Three significant digits with prefix and unit, or a dash for a missing figure."""
        if value is None:
            return self.spell("—")
        return self.spell(format_quantity(value, unit)).replace(" ", BOUND)

    def gain(self, value: float, unit: str) -> str:
        """A gain with its unit: plain when a ratio of like quantities, else with prefix."""
        if unit not in ("V/V", "A/A"):
            return self.quantity(value, unit)
        return f"{self.quantity(value, '')}{BOUND}{unit}"

    def percent(self, value: float | None) -> str:
        """A share 0…1 in percent."""
        if value is None or not math.isfinite(value):
            return self.spell("—")
        if 0 < value < 0.0005:
            return f"<0.1{BOUND}%"
        return f"{_unsigned_zero(f'{100 * value:.1f}')}{BOUND}%"

    def signed_percent(self, value: float) -> str:
        return f"{_unsigned_zero(f'{100 * value:+.1f}')}{BOUND}%"

    def bar(self, share: float | None) -> str:
        """A bar of at most ten cells, to an eighth of a cell where the stream carries blocks."""
        if share is None or not math.isfinite(share):
            return ""
        eighths = round(min(max(share, 0.0), 1.0) * _BAR_CELLS * 8)
        whole, rest = divmod(eighths, 8)
        return self.spell("█" * whole + _EIGHTHS[rest].strip())

    def roots(self, roots: tuple[complex, ...], limit: int = 8) -> str:
        """Poles or zeros in Hz as an engineer lists them: pairs as ±j, repeated ones counted."""
        counted: dict[str, int] = {}
        for root in roots:
            # The mate of a complex pair is the same entry.
            if root.imag < 0 and root.conjugate() in roots:
                continue
            entry = self._root(root)
            counted[entry] = counted.get(entry, 0) + 1
        times = self.spell("×")
        entries = [
            entry if count == 1 else f"{entry}{BOUND}({count}{times})"
            for entry, count in counted.items()
        ]
        more = len(entries) - limit
        return ", ".join(entries[:limit]) + (f" and {more} more" if more > 0 else "")

    def _root(self, root: complex) -> str:
        if abs(root.imag) <= 1e-9 * abs(root.real) or root.imag == 0:
            return self.quantity(root.real, "Hz")
        sign = self.spell("±")
        imaginary = f"{sign}{BOUND}j{self.quantity(abs(root.imag), 'Hz')}"
        if root.real == 0:
            return imaginary
        return f"{self.quantity(root.real, 'Hz')}{BOUND}{imaginary}"
