"""Which parts of each end count: what has no effect is left out, what is in-band set aside."""

from __future__ import annotations

import math
from collections.abc import Collection, Sequence

import numpy as np

from tauledger.corners.band import HALF_POWER, TWO_PI
from tauledger.corners.ports import EndModel, midband_network
from tauledger.corners.sides import HeldPairs, Sides, tied_by
from tauledger.records import dataclass
from tauledger.smallsignal.network import FloatArray, ReactivePart
from tauledger.smallsignal.response import Response

LEAST_EFFECT = 0.01
"""A part whose switching moves the midband gain by less does not count at that end."""
IN_BAND_FACTOR = 3.0
"""A part's own corner is inside the passband when it is this far from both edges."""


@dataclass(frozen=True, slots=True)
class Ends:
    """The two end models with what counts, and the (model, index) of what does not."""

    low: EndModel
    high: EndModel
    in_band: tuple[tuple[EndModel, int], ...]
    idle: tuple[tuple[EndModel, int], ...]


def divide_ends(
    response: Response,
    sides: Sides,
    edges: tuple[float | None, ...],
    held: HeldPairs,
    *,
    shaped: bool,
    movers: tuple[Collection[str], Collection[str]],
) -> Ends:
    """Leave out what has no effect, and set in-band parts aside.

    ``movers`` are the parts that move the exact low and high corner: they count whatever they do
    to the midband gain (inside a feedback loop it hardly changes).

    An in-band part is in its low-frequency state at the low corner and in its high-frequency
    state at the high one, so each end is solved again with it there.
    """
    at_low, at_high = movers
    low, idle_low = _effective_low(response, sides.midband.low, sides.high, held, at_low)
    high, idle_high = _effective_high(sides.midband.high, at_high)
    middle_low, middle_high = (_in_band(model, edges, any_step=shaped) for model in (low, high))
    in_band = [(low, i) for i in middle_low] + [(high, i) for i in middle_high]
    if in_band:
        low_rest = [part for i, part in enumerate(low.parts) if i not in middle_low]
        high_rest = [part for i, part in enumerate(high.parts) if i not in middle_high]
        shorted = [high.parts[i] for i in middle_high]
        new_low = midband_network(response, low_rest, sides.high).low
        high = midband_network(response, [*low.parts, *shorted], high_rest).high
        low, more_idle = _effective_low(response, new_low, sides.high, held, at_low)
        idle_low += more_idle
    return Ends(low, high, tuple(in_band), (*idle_low, *idle_high))


def _in_band(model: EndModel, edges: tuple[float | None, ...], *, any_step: bool) -> list[int]:
    """Parts that step the gain well inside the passband, by less than 3 dB unless told."""
    if not model.parts:
        return []
    low_hz, high_hz = edges
    with np.errstate(divide="ignore"):  # behind an ideal source a time constant is zero
        corner_hz = 1.0 / (TWO_PI * model.tau_s)
    step = np.abs(model.switched_gain() / model.gain)
    small = (step > HALF_POWER) & (step < 1.0 / HALF_POWER)
    inside = (corner_hz > IN_BAND_FACTOR * (low_hz or 0.0)) & (
        corner_hz < (high_hz or math.inf) / IN_BAND_FACTOR
    )
    return [int(i) for i in np.flatnonzero((small | any_step) & inside)]


def _effective_low(
    response: Response,
    model: EndModel,
    high: Sequence[ReactivePart],
    held: HeldPairs,
    movers: Collection[str],
) -> tuple[EndModel, list[tuple[EndModel, int]]]:
    """Take low-end parts without effect out, one at a time, least effect first.

    A part taken out goes to its low-frequency state, so that of two bypass capacitors that
    stand in for each other only one is dropped and the other then shows its full effect. A coil
    that becomes a short takes along the capacitors it ties (a supply filter goes as a whole).
    """
    idle: list[tuple[EndModel, int]] = []
    needed = set(movers)
    while True:
        effect = switching_effect(model)
        negligible = [
            i
            for i in range(len(model.parts))
            if effect[i] < LEAST_EFFECT and model.parts[i].name not in needed
        ]
        if not negligible:
            return model, idle
        worst = min(negligible, key=lambda i: (effect[i], model.values[i]))
        gone = [worst, *tied_by(model.parts, worst, held, high)]
        fewer = _without(response, model, gone, high)
        if fewer is None or abs(fewer.gain / model.gain - 1.0) >= LEAST_EFFECT:
            needed.add(model.parts[worst].name)
            continue
        idle += [(model, i) for i in gone]
        model = fewer


def _without(
    response: Response, model: EndModel, indices: Sequence[int], high: Sequence[ReactivePart]
) -> EndModel | None:
    """The low end with some parts in their low-frequency state; None when that has no solution."""
    rest = [part for i, part in enumerate(model.parts) if i not in indices]
    try:
        return midband_network(response, rest, high).low
    except np.linalg.LinAlgError:
        return None


def _effective_high(
    model: EndModel, movers: Collection[str]
) -> tuple[EndModel, list[tuple[EndModel, int]]]:
    effect = switching_effect(model)
    counts = [
        effect[i] >= LEAST_EFFECT or part.name in movers for i, part in enumerate(model.parts)
    ]
    idle = [(model, i) for i, counted in enumerate(counts) if not counted]
    return model.keep([i for i, counted in enumerate(counts) if counted]), idle


def switching_effect(model: EndModel) -> FloatArray:
    return np.asarray(np.abs(model.switched_gain() / model.gain - 1.0))
