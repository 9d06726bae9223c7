"""What ngspice found: plain results, in the names of the flat circuit."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class Simulation:
    """Operating point and frequency response of one signal path, by ngspice."""

    version: str
    """ngspice's own number, such as ``39``."""
    nodes: Mapping[str, float]
    """Node to V at the operating point."""
    transconductance_s: Mapping[str, float]
    """Transistor to gm in S."""
    frequency_hz: NDArray[np.float64]
    """(points,), rising."""
    transfer: NDArray[np.complex128]
    """(points,): output per unit of the driven source, every other source at zero."""
    midband_hz: float
    gain: complex
    """The transfer at ``midband_hz``."""
    low_hz: float | None
    high_hz: float | None
    """The frequencies nearest to midband at which the gain is 1/√2 of that at midband, to 1e-4;
    None when it does not fall so far within the sweep."""
