"""Why estimate and exact corner differ, and what follows from a corner: sentences with figures."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from tauledger.corners.band import TWO_PI, Passband, Sweep
from tauledger.corners.estimates import Estimate, Roots, model_edge_hz
from tauledger.corners.ports import EndModel
from tauledger.quantity import format_quantity
from tauledger.smallsignal.modes import ComplexArray
from tauledger.smallsignal.network import ReactivePart
from tauledger.smallsignal.response import Response, gain_sensitivity

INSPECTION_TOLERANCE = 0.02
"""Hand and exact midband gain may differ by this before it is said."""
ESTIMATE_TOLERANCE = 0.05
"""An estimate may differ from the exact corner by this before reasons are given."""
SMALLEST_PEAK_DB = 0.3
NEAR = 5.0
"""A pole or zero within this factor of the corner has a say in it."""
DROOP_RATIO = 100.0
NARROW_BAND = 30.0
"""Ratio of the corners below which a path is likely to be shaped on purpose."""


def passband_notes(passband: Passband, exact_gain: float) -> tuple[str, str]:
    """Why sums of time constants do not apply: in short for each part, and in a sentence."""
    if exact_gain == 0.0:
        return "no signal", "no signal reaches the output"
    return (
        "no flat passband",
        "no flat passband: the gain stays within ±3 dB for less than a decade, so a sum of time "
        "constants does not apply and only exact figures are given (for an equaliser, --midband "
        "says where to judge the gain)",
    )


def unreached_notes(response: Response, parts: Sequence[ReactivePart]) -> tuple[str, str]:
    """The same where shorts and opens leave no path for the signal."""
    coils = [part.branch for part in parts if part.is_inductor]
    mutual = response.reactance[np.ix_(coils, coils)]
    if np.any(mutual != np.diag(np.diag(mutual))):
        return (
            "coupled coils",
            "coupled coils carry the signal: a sum of time constants does not treat them, and "
            "only exact figures are given",
        )
    return (
        "no path at midband",
        "with the large capacitors short and the small ones open no unique signal reaches the "
        "output; only exact figures are given",
    )


def stability_notes(unstable_hz: float | None) -> tuple[str, ...]:
    """A warning when the linear network grows by itself."""
    if unstable_hz is None:
        return ()
    return (
        f"unstable as drawn: a natural frequency at {format_quantity(unstable_hz, 'Hz')} grows, "
        "so gain and corners have no physical meaning",
    )


def narrow_notes(edges: tuple[float | None, float | None], *, given: bool) -> tuple[str, ...]:
    """A hint for equalisers, whose flat stretch is seldom where they are judged."""
    low, high = edges
    if given or low is None or high is None or high / low > NARROW_BAND:
        return ()
    return (
        "the band is narrow; if the path is meant to be shaped (an equaliser), --midband says "
        "where to judge the gain",
    )


def inspection_notes(
    response: Response, parts: Sequence[ReactivePart], midband_hz: float, hand_gain: float
) -> tuple[str, ...]:
    """Say so when shorts and opens do not give the gain the network has at midband."""
    exact = response.magnitude(midband_hz)
    error = abs(hand_gain) / exact - 1.0
    if abs(error) < INSPECTION_TOLERANCE:
        return ()
    leading = np.argsort(-np.abs(gain_sensitivity(response, parts, midband_hz)))[:2]
    names = " and ".join(parts[i].name for i in leading)
    return (
        f"at midband the gain by inspection is {abs(error) * 100:.1f} % "
        f"{'above' if error > 0 else 'below'} the exact one: {names} are neither short nor open "
        f"at {format_quantity(midband_hz, 'Hz')}",
    )


def no_edge_note(model: EndModel) -> str:
    """Why there is no corner at this end."""
    if model.low:
        return "no low corner: the gain holds down to DC"
    if not model.parts:
        return (
            "no high corner: nothing in the netlist limits it (do the models give CJE, CJC and "
            "TF, or CGS and CGD?)"
        )
    return "no high corner: the gain does not fall by 3 dB at any frequency"


def peak_notes(sweep: Sweep, midband_hz: float, *, upward: bool) -> list[str]:
    """Peaking between midband and the end of the sweep on one side."""
    side = sweep.frequency_hz > midband_hz if upward else sweep.frequency_hz < midband_hz
    if not side.any():
        return []
    level = sweep.level_db
    reference = float(np.interp(math.log(midband_hz), np.log(sweep.frequency_hz), level))
    highest = int(np.flatnonzero(side)[np.argmax(level[side])])
    rise = float(level[highest]) - reference
    if rise < SMALLEST_PEAK_DB:
        return []
    where = format_quantity(float(sweep.frequency_hz[highest]), "Hz")
    return [f"the gain peaks by {rise:.1f} dB at {where}; a sum of time constants misses it"]


def corner_notes(
    model: EndModel,
    roots: Roots,
    exact_hz: float | None,
    estimate_hz: float | None,
    better: Estimate | None,
    in_band: Sequence[str],
    set_by: Sequence[str],
    leader: str,
) -> list[str]:
    """Reasons for a difference between the sum and the exact corner, weightiest first."""
    if exact_hz is None:
        return []
    notes = []
    if not model.parts:
        notes.append("no part of this end accounts for the corner")
    if in_band:
        verb = "steps" if len(in_band) == 1 else "step"
        notes.append(
            f"{', '.join(in_band)} {verb} the gain inside the passband, so the gain near this "
            "corner is not the midband gain from which the exact corner counts its 3 dB"
        )
    poles, zeros = roots.poles, roots.zeros
    notes += _pole_notes(poles, TWO_PI * exact_hz)
    if estimate_hz is not None and abs(estimate_hz / exact_hz - 1.0) >= ESTIMATE_TOLERANCE:
        notes += _difference_notes(poles, zeros, exact_hz, estimate_hz, low=model.low)
        if leader and set_by and leader not in set_by:
            notes.append(
                f"{leader} has the largest share of the sum, but the exact corner moves most "
                f"with {' and '.join(set_by)}"
            )
    if better is not None and abs(better.frequency_hz / exact_hz - 1.0) >= ESTIMATE_TOLERANCE:
        notes.append(
            "the two ends of the band overlap: at this corner parts of the other end are not "
            "yet short or open, which no estimate of one end can see"
        )
    return notes


def _pole_notes(poles: ComplexArray, corner: float) -> list[str]:
    notes = []
    for pole in poles:
        size = abs(pole)
        if pole.real > 1e-9 * size:
            notes.append("a pole lies in the right half-plane: the circuit is unstable as drawn")
        if pole.imag > 1e-6 * size and corner / 10.0 < size < corner * 10.0:
            quality = size / (-2.0 * pole.real) if pole.real else math.inf
            notes.append(
                f"complex poles at {format_quantity(size / TWO_PI, 'Hz')}, Q = {quality:.2f}: "
                "the sum of time constants takes them for real ones"
            )
    return notes


def _difference_notes(
    poles: ComplexArray, zeros: ComplexArray, exact_hz: float, estimate_hz: float, *, low: bool
) -> list[str]:
    corner = TWO_PI * exact_hz
    notes = []
    near = [z for z in zeros if corner / NEAR < abs(z) < corner * NEAR and z.imag >= 0]
    if near:
        listed = ", ".join(format_quantity(abs(z) / TWO_PI, "Hz") for z in near[:3])
        notes.append(f"a zero near the corner ({listed}) moves the exact figure")
    close = [p for p in poles if corner / NEAR < abs(p) < corner * NEAR]
    if len(close) > 1 and all(abs(p.imag) <= 1e-6 * abs(p) for p in close):
        error = estimate_hz / exact_hz - 1.0
        side = "safe" if (error > 0) == low else "unsafe"
        notes.append(
            f"{len(close)} interacting poles near the corner: the sum is off by "
            f"{abs(error) * 100:.0f} %, on the {side} side"
        )
    return notes


def what_if(
    model: EndModel, roots: Roots, exact_hz: float | None, names: Sequence[str]
) -> tuple[str, ...]:
    """What doubling or halving a leading part does to the corner, by the end's own model."""
    before = model_edge_hz(roots, exact_hz) if exact_hz is not None else None
    if before is None or exact_hz is None:
        return ()
    sentences = []
    for i in (i for name in names for i, p in enumerate(model.parts) if p.name == name):
        part = model.parts[i]
        factor, sign = (2.0, "×") if model.low != part.is_inductor else (0.5, "/")
        values = model.values.copy()
        values[i] *= factor
        after = model_edge_hz(Roots.roughly(replace(model, values=values)), exact_hz)
        new = format_quantity(exact_hz * after / before, "Hz") if after else "no corner"
        sentences.append(f"{part.name} {sign} 2: {format_quantity(exact_hz, 'Hz')} → {new}")
    return tuple(sentences)


def timing_notes(
    model: EndModel,
    roots: Roots,
    exact_hz: float | None,
    natural: ComplexArray,
    square_wave_hz: float | None = None,
) -> tuple[str, ...]:
    """Rise time, droop and settling, each where the rule behind it holds.

    Rise time 10-90 % is ln 9/(2π f_H) and the droop over half a period 1 − exp(−π f_L/f), both
    for one dominant pole (references B12); settling to 1 % is ln 100 over the slowest pole
    (references B13).
    """
    if exact_hz is None:
        return ()
    alone = _dominant(roots, TWO_PI * exact_hz)
    if not model.low:
        if not alone:
            return ("rise time: no simple rule, more than one pole or a zero at the corner",)
        rise = math.log(9.0) / (TWO_PI * exact_hz)
        return (f"rise time 10-90 %: {format_quantity(rise, 's')} (one dominant pole)",)
    notes = []
    frequency = DROOP_RATIO * exact_hz if square_wave_hz is None else square_wave_hz
    wave = f"a square wave of {format_quantity(frequency, 'Hz')}"
    if alone:
        droop = 1.0 - math.exp(-math.pi * exact_hz / frequency)
        notes.append(f"{wave} droops by {droop * 100:.1f} % in half a period (one dominant pole)")
    elif square_wave_hz is not None:
        notes.append(f"{wave}: no simple rule for its droop, more than one pole at the corner")
    decay = np.abs(natural.real[np.abs(natural) > 1e-9])
    if decay.size:
        settling = math.log(100.0) / float(decay.min())
        notes.append(
            f"settles to 1 % in {format_quantity(settling, 's')} after a small step (slowest pole "
            f"{format_quantity(float(decay.min()) / TWO_PI, 'Hz')})"
        )
    return tuple(notes)


def _dominant(roots: Roots, corner: float) -> bool:
    """One real pole near the corner, every other pole and zero a factor away."""
    poles, zeros = roots.poles, roots.zeros
    close = [p for p in poles if corner / NEAR < abs(p) < corner * NEAR]
    zeros_close = [z for z in zeros if corner / NEAR < abs(z) < corner * NEAR]
    return len(close) == 1 and not zeros_close
