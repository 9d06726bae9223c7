"""What a published worked example says, and what it comes to when computed again.

Two columns stand side by side in every :class:`Figure`:

``published``
    the figure as the source prints it, digits and all;
``recomputed``
    the same figure from a nodal analysis written apart from this program, whose answers agree
    with ngspice 39 on six of these circuits and with two corners a textbook found by simulation.

A published figure is met when the result rounds to its digits, a recomputed one within a unit of
its last digit (some were cut, not rounded). Where the source differs by more, ``tolerance``
(relative) widens the published column alone, and ``reason`` says why it has to.

How a source was seen stands beside it:

* [P] read in the text of the book or note itself;
* [T] read in a community transcription of the book's worked examples (FOSSEE
  Python-Textbook-Companions, commit d34b2ae7): its input data and its printed results;
* [M] recalled from memory, not read.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

LOW = "low"
HIGH = "high"
NO_EFFECT = "no effect"

_PREFIXES = {"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9}
_NUMBER = re.compile(
    r"(?P<digits>-?\d+(?:\.(?P<decimals>\d+))?)(?:e(?P<power>-?\d+))?(?P<prefix>[fpnumkMG]?)"
)


def printed(text: str) -> tuple[float, float]:
    """Value of a printed figure such as ``7.44k``, and a unit of its last digit."""
    match = _NUMBER.fullmatch(text)
    if match is None:
        raise ValueError(f"not a printed figure: {text!r}")
    power = int(match["power"] or 0) + _PREFIXES[match["prefix"]]
    last_digit = power - len(match["decimals"] or "")
    return float(f"{match['digits']}e{power}"), 10.0**last_digit


@dataclass(frozen=True, slots=True)
class Figure:
    """One figure of an example in Ω, s, Hz or V/V; ``radians`` means it is printed in rad/s."""

    published: str = ""
    recomputed: str = ""
    tolerance: float = 0.0
    """Relative; widens the published column beyond half a unit of the last printed digit."""
    reason: str = ""
    """Why the published figure needs it."""
    radians: bool = False

    def __post_init__(self) -> None:
        if bool(self.tolerance) != bool(self.reason):
            raise ValueError(f"a tolerance and its reason go together: {self}")

    def misses(self, computed: float | None) -> list[str]:
        """One line for each column that ``computed`` does not meet."""
        if computed is None:
            return [f"nothing computed, expected {self.published or self.recomputed}"]
        value = computed * 2 * math.pi if self.radians else computed
        columns = (
            ("published", self.published, 0.5, self.tolerance),
            ("recomputed", self.recomputed, 1.0, 0.0),
        )
        return [
            f"{value:.6g} against {column} {text}"
            for column, text, units, tolerance in columns
            if text and not _meets(value, text, units, tolerance)
        ]


def _meets(value: float, text: str, units: float, tolerance: float) -> bool:
    expected, last_digit = printed(text)
    # The hair more lets a value that lies on the edge round either way.
    return abs(value - expected) <= max(1.001 * units * last_digit, tolerance * abs(expected))


@dataclass(frozen=True, slots=True)
class Seen:
    """One capacitor: the end it limits, and what it sees there."""

    name: str
    end: str
    resistance: Figure | None = None
    tau: Figure | None = None
    corner: Figure | None = None


@dataclass(frozen=True, slots=True)
class Corner:
    """One end of the band."""

    estimate: Figure | None = None
    """Corner by the sum of time constants."""
    exact: Figure | None = None
    """−3 dB frequency of the whole linear network."""
    tau_sum: Figure | None = None
    """High end only: b1, the sum of the open-circuit time constants."""
    second_coefficient: Figure | None = None
    """High end only: b2 in s², from the poles."""
    next_pole: Figure | None = None
    """High end only: b1/(2π·b2), the textbook estimate of the second pole."""
    one_pole: Figure | None = None
    """High end only: corner that the source takes from one pole alone, above the exact one."""


@dataclass(frozen=True, slots=True)
class Root:
    """A pole or a zero of one end, in Hz, by whichever figures the source gives."""

    end: str
    kind: str
    """``pole`` or ``zero``."""
    real: Figure | None = None
    imaginary: Figure | None = None
    """Of the member of a complex pair with positive imaginary part."""
    magnitude: Figure | None = None
    quality: Figure | None = None

    def misses(self, root: complex) -> list[str]:
        """What ``root`` does not meet of these figures."""
        quality = math.inf if root.real == 0 else abs(root) / (-2 * root.real)
        pairs = (
            (self.real, root.real),
            (self.imaginary, root.imag),
            (self.magnitude, abs(root)),
            (self.quality, quality),
        )
        return [line for figure, value in pairs if figure for line in figure.misses(value)]


@dataclass(frozen=True, slots=True)
class Example:
    """A worked example as a linear netlist driven by ``Vs``, and the figures it must give."""

    id: str
    title: str
    source: str
    netlist: str
    """The lines between the title and ``.end``."""
    seen: tuple[Seen, ...]
    low: Corner | None = None
    """None: the network has no low corner."""
    high: Corner | None = None
    """None: the network has no high corner."""
    gain: Figure | None = None
    gain_db: Figure | None = None
    roots: tuple[Root, ...] = ()
    diagnosis: tuple[tuple[str, str], ...] = ()
    """(end, word): the notes of that end have to contain the word, in any letter case."""
    shares: tuple[tuple[str, Figure], ...] = ()
    """(capacitor, percent of the sum at its end)."""

    @property
    def text(self) -> str:
        """The whole netlist."""
        return f"{self.id} {self.title}\n{self.netlist.strip()}\n.end\n"


def low(
    name: str, r: Figure | None = None, f: Figure | None = None, tau: Figure | None = None
) -> Seen:
    """A capacitor of the low end: resistance seen, corner, time constant."""
    return Seen(name, LOW, resistance=r, corner=f, tau=tau)


def high(
    name: str, r: Figure | None = None, tau: Figure | None = None, f: Figure | None = None
) -> Seen:
    """A capacitor of the high end: resistance seen, time constant, corner."""
    return Seen(name, HIGH, resistance=r, tau=tau, corner=f)


def pole(end: str, real: Figure, imaginary: Figure | None = None) -> Root:
    return Root(end, "pole", real=real, imaginary=imaginary)


def zero(end: str, real: Figure) -> Root:
    return Root(end, "zero", real=real)
