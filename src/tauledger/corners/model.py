"""The corners of one signal path: plain results."""

from __future__ import annotations

from tauledger.corners.ports import EndModel, Midband
from tauledger.records import dataclass
from tauledger.smallsignal.network import ReactivePart


@dataclass(frozen=True, slots=True)
class PartAccount:
    """What one capacitor or inductor does to the band."""

    part: ReactivePart
    end: str
    """``low``, ``high``, ``in-band`` or ``no effect``."""
    resistance_ohm: float | None
    tau_s: float | None
    corner_hz: float | None
    share: float | None
    """Part of the sum at its end; None when not counted."""
    zero_hz: float | None
    """Zero it makes with the others at midband state; None when none, at zero or at infinity."""
    effect: float | None
    """Gain with it in its other state over midband gain, minus one, as a magnitude."""
    reason: str


@dataclass(frozen=True, slots=True)
class Corner:
    """One edge of the passband; frequencies in Hz."""

    end: str
    estimate_hz: float | None
    """By the sum of time constants."""
    exact_hz: float | None
    set_by: tuple[str, ...]
    """The part that moves the exact corner most; several when they tie."""
    poles_hz: tuple[complex, ...]
    zeros_hz: tuple[complex, ...]
    notes: tuple[str, ...]
    model: EndModel | None
    """The parts that count at this end."""
    improved_hz: float | None = None
    """The best estimate whose conditions hold, and its name."""
    improved_method: str = ""
    lowest_hz: float | None = None
    highest_hz: float | None = None
    """Rigorous bounds of this end alone, where they hold."""
    movers: tuple[tuple[str, float], ...] = ()
    """Every part that moves the exact corner: name and d ln(corner)/d ln(value), strongest
    first."""
    changes: tuple[str, ...] = ()
    """What doubling or halving the leading parts does."""
    timing: tuple[str, ...] = ()
    """Rise time, droop, settling, each with its condition."""


@dataclass(frozen=True, slots=True)
class Corners:
    midband_hz: float
    flat: bool
    """False when the response has no stretch of a decade within ±3 dB."""
    gain: float
    """Signed midband gain by the engine: low-end parts short, high-end parts open."""
    exact_gain: float
    """|H| of the whole network at ``midband_hz``."""
    midband: Midband | None
    accounts: tuple[PartAccount, ...]
    low: Corner
    high: Corner
    notes: tuple[str, ...]
    unstable_hz: float | None = None
    """Magnitude of a natural frequency that grows, when there is one."""
