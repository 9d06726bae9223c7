"""What the kinds of field-effect transistor share: limits on the Newton step, names of regions.

A channel law is quadratic, so no exponential overflows, but a gate voltage that jumps across the
threshold in one step makes Newton cycle. The rule of SPICE (common practice) lets a gate voltage
move freely well inside the conducting or the cut-off range and stops it just beyond the threshold
when it would cross; a drain voltage grows at most about threefold in a step.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from tauledger.devices.interface import BoolArray, Card, FloatArray

_DEEP_V = 3.5
"""Overdrive above which a gate counts as fully on, and the same for a drain voltage."""


def gate_step(proposed: FloatArray, previous: FloatArray, threshold: FloatArray) -> FloatArray:
    """Gate voltage to evaluate at; all shapes broadcast, volts."""
    overdrive = previous - threshold
    reach = 2.0 * np.abs(overdrive) + 2.0
    off = overdrive < 0.0
    deep = overdrive >= _DEEP_V
    lowest = np.where(off, previous - reach, threshold + np.where(deep, 2.0, -0.5))
    highest = np.where(deep, previous + reach, threshold + np.where(off, 0.5, 4.0))
    result: FloatArray = np.clip(proposed, lowest, highest)
    return result


def drain_step(proposed: FloatArray, previous: FloatArray) -> FloatArray:
    """Drain-to-source voltage to evaluate at, for either sign of ``previous``; volts."""
    sign = np.where(previous < 0.0, -1.0, 1.0)
    new, old = proposed * sign, np.abs(previous)
    deep = old >= _DEEP_V
    lowest = np.where(deep, 2.0, -0.5)
    highest = np.where(deep, 3.0 * old + 2.0, 4.0)
    result: FloatArray = sign * np.clip(new, lowest, highest)
    return result


def reciprocal(conductance: FloatArray) -> FloatArray:
    """``1/g``, infinite where the conductance is zero."""
    safe = np.where(conductance == 0.0, 1.0, conductance)
    return np.where(conductance == 0.0, np.inf, 1.0 / safe)


def transit_frequency(gm: FloatArray, capacitance: FloatArray) -> FloatArray:
    """``gm/(2π·C)`` in Hz; not a number where the model gives no capacitance."""
    safe = np.where(capacitance > 0.0, capacitance, 1.0)
    return np.where(capacitance > 0.0, gm / (2.0 * np.pi * safe), np.nan)


def channel_region(overdrive: FloatArray, drain_source: FloatArray) -> NDArray[np.str_]:
    """``cut off`` without overdrive, else ``triode`` or ``active`` about pinch-off."""
    conducting = np.where(drain_source < overdrive, "triode", "active")
    return np.where(overdrive > 0.0, conducting, "cut off")


def conductance(resistance: FloatArray) -> FloatArray:
    """``1/R``; a resistance of zero gives zero, its terminals being merged."""
    return np.where(resistance > 0.0, 1.0 / np.where(resistance > 0.0, resistance, 1.0), 0.0)


def given(cards: Sequence[Card], *names: str) -> BoolArray:
    """(1, n): True where a card states one of the parameters."""
    return np.array([[any(name in card.model for name in names) for card in cards]])
