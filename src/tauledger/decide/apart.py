"""What each draw does alone to the figures beside gain and corners: the bias solved anew."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from tauledger.decide.bench import Bench
from tauledger.decide.varied import Variety
from tauledger.decide.worst import Alone, measure_deviations

FloatArray = NDArray[np.float64]

_STEPS = {"": 1e-3, "V": 1e-4, "°C": 0.1}
"""Of the central differences: relative, volts, kelvins."""
_LEAST = 1e-7
"""Of the strongest effect: less is what the iteration for the bias leaves open."""


def linear_names(bench: Bench) -> dict[str, str]:
    """Figures whose changes are differences, with their units."""
    return {figure.name: figure.unit for figure in bench.wanted.figures if figure.linear}


def add_others(alone: Alone, bench: Bench, variety: Variety) -> Alone:
    """The same with the other figures that the bench wants.

    Those of :func:`linear_names` have differences where gain and corners have logarithms.
    """
    figures = bench.wanted.figures
    if not figures:
        return alone
    draws, size = variety.draws, len(variety.draws)
    steps = np.array([_STEPS[draw.unit] for draw in draws])
    ends = [np.array([d.low for d in draws]), np.array([d.high for d in draws])]
    columns = [np.diag(values) for values in (*ends, -steps, steps)]
    deviations = np.hstack([np.zeros((size, 1)), *columns])
    found = measure_deviations(bench, variety, deviations)
    low, high, slope = dict(alone.low), dict(alone.high), dict(alone.slope)
    for figure in figures:
        values = found.others[figure.name]
        with np.errstate(divide="ignore", invalid="ignore"):
            values = values if figure.linear else np.log(values)
            parts = (values[1:] - values[0]).reshape(4, size)
        low[figure.name], high[figure.name] = _cleared(parts[:2])
        slope[figure.name] = _cleared((parts[3] - parts[2])[None] / (2.0 * steps))[0]
    return replace(alone, low=low, high=high, slope=slope)


def _cleared(effects: FloatArray) -> FloatArray:
    known = np.where(np.isfinite(effects), effects, 0.0)
    return np.where(np.abs(known) > _LEAST * np.abs(known).max(initial=0.0), known, 0.0)
