"""The Bode plot as PNG, by matplotlib, which is asked for only here.

Pixels need fonts and smoothed lines; matplotlib brings both, and only who asks for a PNG waits
for it. Our own SVG would need a browser to become one.
"""

from __future__ import annotations

import io
from typing import TYPE_CHECKING, Any

from tauledger.problems import Problem, ProblemError, Severity
from tauledger.report.inert import clip, inert
from tauledger.report.plot import BodePlot

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_INK, _FAINT, _GRID = "#1c2329", "#5a646d", "#dcd8cc"
_LOW, _HIGH, _LIMIT = "#1d5a96", "#9c3d16", "#7a5a00"
_STYLES: dict[str, dict[str, Any]] = {
    "exact": {"color": _INK, "linewidth": 1.8},
    "estimate": {"color": _LOW, "linewidth": 1.3, "linestyle": (0, (5, 3))},
    "simulated": {"color": _HIGH, "linestyle": "none", "marker": "o", "markersize": 3.5},
}
_MOST_CIRCLES = 48


def bode_png(plot: BodePlot) -> bytes:
    """1800 pixels wide; raises ProblemError where matplotlib is not installed."""
    try:
        from matplotlib.figure import Figure
    except ImportError:
        raise ProblemError(
            Problem(
                "matplotlib-missing",
                Severity.ERROR,
                "a PNG is drawn by matplotlib, which is not installed",
                advice="Run pip install 'tauledger[plot]', or ask for --format svg.",
            )
        ) from None
    figure = Figure(figsize=(9.0, 6.0), dpi=200, layout="constrained", facecolor="white")
    gain, phase = figure.subplots(2, 1, sharex=True, height_ratios=(2, 1))
    _gain(gain, plot)
    _phase(phase, plot)
    target = io.BytesIO()
    # Without the date and the library's version, so that equal plots are equal files.
    figure.savefig(target, format="png", metadata={"Software": None})
    return target.getvalue()


def _gain(axes: Axes, plot: BodePlot) -> None:
    for region in plot.regions:
        axes.fill_between(
            [region.left_hz, region.right_hz],
            region.bottom_db,
            region.top_db,
            facecolor="none",
            edgecolor=_LIMIT,
            hatch="///",
            linewidth=0.0,
            alpha=0.5,
            label=_plain(region.label),
        )
    for trace in plot.traces:
        stride = max(1, len(trace.gain) // _MOST_CIRCLES) if trace.kind == "simulated" else 1
        x, y = zip(*trace.gain[::stride], strict=True)
        axes.plot(x, y, label=_plain(trace.label), **_STYLES[trace.kind])
    for mark in plot.marks:
        axes.plot([mark.frequency_hz], [mark.gain_db], "o", color=_INK, markersize=5)
        axes.annotate(
            mark.label,
            (mark.frequency_hz, mark.gain_db),
            xytext=(7 if mark.end == "low" else -7, -13),
            textcoords="offset points",
            ha="left" if mark.end == "low" else "right",
            color=_INK,
        )
    axes.set_xscale("log")
    axes.set_xlim(plot.first_hz, plot.last_hz)
    axes.set_ylim(plot.gain_axis.first, plot.gain_axis.last)
    axes.set_yticks(list(plot.gain_axis.ticks))
    axes.set_ylabel(plot.gain_label)
    _ticks(axes, plot)
    _settle(axes)
    axes.legend(loc="lower center", ncols=3, frameon=False, bbox_to_anchor=(0.5, 1.0))


def _ticks(axes: Axes, plot: BodePlot) -> None:
    """Each part's corner on the axis; names of neighbours stand at different heights."""
    for number, tick in enumerate(sorted(plot.ticks, key=lambda tick: tick.frequency_hz)):
        colour = _LOW if tick.end == "low" else _HIGH
        axes.annotate(
            _plain(tick.name),
            (tick.frequency_hz, 0.0),
            xycoords=axes.get_xaxis_transform(),
            xytext=(2, 6 + 10 * (number % 4)),
            textcoords="offset points",
            fontsize=7.5,
            fontweight="bold" if tick.sets else "normal",
            color=colour,
            arrowprops={"arrowstyle": "-", "color": _GRID, "shrinkA": 0, "shrinkB": 0},
        )
        axes.axvline(tick.frequency_hz, 0.0, 0.03, color=colour, linewidth=1.6)


def _phase(axes: Axes, plot: BodePlot) -> None:
    for trace in plot.traces:
        stride = max(1, len(trace.phase) // _MOST_CIRCLES) if trace.kind == "simulated" else 1
        x, y = zip(*trace.phase[::stride], strict=True)
        axes.plot(x, y, **_STYLES[trace.kind])
    axes.set_ylim(plot.phase_axis.first, plot.phase_axis.last)
    axes.set_yticks(list(plot.phase_axis.ticks))
    axes.set_ylabel("phase, degrees")
    axes.set_xlabel("frequency, Hz")
    _settle(axes)


def _settle(axes: Axes) -> None:
    axes.grid(True, color=_GRID, linewidth=0.8)
    axes.tick_params(colors=_FAINT, which="both", length=0)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color(_FAINT)


def _plain(words: str) -> str:
    """Words that matplotlib must not take for its formula language."""
    return clip(inert(words), 40).replace("$", r"\$")
