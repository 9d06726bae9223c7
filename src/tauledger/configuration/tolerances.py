"""Tolerances as parts carry them: percents, windows, and the letters of IEC 60062."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

Window = tuple[float, float]
"""Lowest and highest relative deviation, such as (−0.2, 0.8)."""

TOLERANCE_LETTERS: Mapping[str, Window] = MappingProxyType(
    {
        "E": (-0.005, 0.005),
        "F": (-0.01, 0.01),
        "G": (-0.02, 0.02),
        "H": (-0.03, 0.03),
        "J": (-0.05, 0.05),
        "K": (-0.1, 0.1),
        "M": (-0.2, 0.2),
        "N": (-0.3, 0.3),
        "P": (0.0, 0.8),
        "Q": (-0.1, 0.3),
        "S": (-0.2, 0.5),
        "T": (-0.1, 0.5),
        "Z": (-0.2, 0.8),
    }
)
"""IEC 60062 letters (references C2, read in secondary sources; P on one page only).

B, C and D are left out: below 10 pF they mean picofarads, above it percent (from memory).
"""


def letter_window(text: str) -> Window | None:
    """The window of a tolerance letter, or None for any other text.

    >>> letter_window("Z")
    (-0.2, 0.8)
    """
    return TOLERANCE_LETTERS.get(text.strip())
