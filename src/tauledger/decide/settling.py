"""How long a circuit takes to come to rest: its slowest pole."""

from __future__ import annotations

import math

from tauledger.smallsignal.modes import natural_frequencies
from tauledger.smallsignal.network import FloatArray

_STANDSTILL = 1e-6
"""rad/s: slower poles are nodes with no direct path, which never settle."""
SETTLED = 0.01


def slowest_pole(conductance: FloatArray, reactance: FloatArray) -> float | None:
    """Decay rate in rad/s of the slowest pole of one board; None without one that decays."""
    poles = natural_frequencies(conductance, reactance)
    rates = [-pole.real for pole in poles if -pole.real > _STANDSTILL]
    return float(min(rates)) if rates else None


def settling_time(rate: float | None) -> float | None:
    """Seconds until 1 % of a decay at this rate is left (references B13)."""
    return -math.log(SETTLED) / rate if rate else None
