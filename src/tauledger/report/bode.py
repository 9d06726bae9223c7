"""A sketch of the gain against frequency that a host of repositories draws by itself.

The notation is Mermaid's ``xychart-beta`` (syntax from memory; the tests hold it to its
grammar). Its axis has no logarithms, so equal steps of log frequency stand as categories.
"""

from __future__ import annotations

import math

from tauledger.review.rows import PathRow

_DEEPEST_DB = 60.0
"""Below the peak: what lies deeper would flatten the band."""
_COLOUR = '%%{init: {"themeVariables": {"xyChart": {"plotColorPalette": "#2563a8"}}}}%%'
"""Seen on light and dark pages; the line's own colour is hardly seen on a light one."""

_INVISIBLE = "\u200b"
_PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T"}


def bode_sketch(path: PathRow) -> str:
    """The chart in a fenced block, or nothing when there is no response to draw.

    It holds numbers only, so nothing of a netlist can reach it.
    """
    points = _worth_showing(path)
    if len(points) < 2:
        return ""
    heights = [height for _, height in points]
    low, high = math.floor(min(heights) / 10) * 10, math.ceil(max(heights) / 10) * 10
    labels = ", ".join(
        f'"{_label(frequency, index)}"' for index, (frequency, _) in enumerate(points)
    )
    line = ", ".join(f"{height:.1f}" for height in heights)
    unit = "dB" if path.gain_unit != "Ω" else "dB above 1 ohm"
    return (
        "```mermaid\n"
        f"{_COLOUR}\n"
        "xychart-beta\n"
        f'  x-axis "Hz, equal steps of log frequency" [{labels}]\n'
        f'  y-axis "{unit}" {low} --> {high if high > low else low + 10}\n'
        f"  line [{line}]\n"
        "```\n"
    )


def _worth_showing(path: PathRow) -> list[tuple[float, float]]:
    """Frequency in Hz and gain in decibels; the ends that lie too deep are left out."""
    points = [
        (point.frequency_hz, 20.0 * math.log10(point.gain))
        for point in path.response
        if point.gain > 0.0
    ]
    floor = max((height for _, height in points), default=0.0) - _DEEPEST_DB
    seen = [index for index, (_, height) in enumerate(points) if height >= floor]
    shown = points[seen[0] : seen[-1] + 1] if seen else []
    return [(frequency, max(height, floor)) for frequency, height in shown]


def _label(frequency_hz: float, index: int) -> str:
    """The decade, or an invisible text where none falls: two alike would share one place."""
    power = round(math.log10(frequency_hz))
    if abs(frequency_hz / 10.0**power - 1.0) > 1e-6:
        return _INVISIBLE * (index + 1)
    scale = min(max(power // 3 * 3, -15), 12)
    return f"{10 ** (power - scale)}{_PREFIXES[scale]}"
