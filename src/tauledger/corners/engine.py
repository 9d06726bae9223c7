"""The time-constant engine: linear network and path → corners with reasons."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from tauledger.corners.band import (
    HALF_POWER,
    Passband,
    find_edge,
    find_passband,
    sweep_response,
)
from tauledger.corners.model import Corner, Corners, PartAccount
from tauledger.corners.ports import EndModel, midband_network
from tauledger.corners.sides import (
    HeldPairs,
    Sides,
    as_one,
    merge_parallel,
    part_out_held,
    split_sides,
    tied_by,
)
from tauledger.quantity import format_quantity
from tauledger.smallsignal.network import ReactivePart
from tauledger.smallsignal.response import (
    ComplexArray,
    Response,
    gain_sensitivity,
    natural_frequencies,
)

LEAST_EFFECT = 0.01
"""A part whose switching moves the midband gain by less does not count at that end."""
TIE_MARGIN = 0.2
"""Shares closer than this cannot be told apart within usual part tolerance (±10 to ±20 %;
common practice, no source)."""
INSPECTION_TOLERANCE = 0.02
"""Hand and exact midband gain may differ by this before it is said."""
IN_BAND_FACTOR = 3.0
"""A part's own corner is inside the passband when it is this far from both edges."""
TWO_PI = 2.0 * math.pi


def find_corners(
    response: Response,
    parts: Sequence[ReactivePart],
    fixed_voltage_pairs: HeldPairs,
    supply_pairs: HeldPairs,
) -> Corners:
    """Analyse one signal path.

    Parameters
    ----------
    response
        The exact response from the source to the output.
    parts
        Every capacitor and inductor of the network.
    fixed_voltage_pairs
        Node indices joined by an ideal voltage source.
    supply_pairs
        Those of them whose source does not carry the signal, so that the two nodes are one
        for the signal.
    """
    natural = natural_frequencies(response.conductance, response.reactance)
    sweep = sweep_response(response, natural)
    passband = find_passband(sweep)
    exact_gain = response.magnitude(passband.midband_hz)
    notes = _passband_notes(passband, exact_gain)
    edges = tuple(
        find_edge(response, sweep, passband.midband_hz, upward=up) if exact_gain > 0 else None
        for up in (False, True)
    )
    if not passband.flat or exact_gain == 0.0:
        return _without_estimate(response, passband, exact_gain, parts, edges, natural, notes)
    sides: Sides | None
    try:
        free, across_source = part_out_held(parts, fixed_voltage_pairs)
        groups = merge_parallel(free, supply_pairs)
        merged = [as_one(group) for group in groups]
        sides = split_sides(response, merged, passband.midband_hz, fixed_voltage_pairs)
    except np.linalg.LinAlgError:
        sides = None
    if sides is None or sides.midband.gain == 0.0:
        notes += (
            "with coupling capacitors short and small ones open no unique signal reaches the "
            "output; only exact figures are given",
        )
        return _without_estimate(response, passband, exact_gain, parts, edges, natural, notes)
    notes += _inspection_notes(response, parts, passband.midband_hz, sides.midband.gain)
    ends = _divide(response, sides, edges, fixed_voltage_pairs)
    accounts = _accounts(passband.midband_hz, ends, sides.looped, groups)
    accounts += [_idle_account(part, "straight across a source: no pole") for part in across_source]
    inner = [model.parts[i].name for model, i in ends.in_band]
    low_corner = _corner(ends.low, edges[0], inner)
    high_corner = _corner(ends.high, edges[1], inner)
    return Corners(
        midband_hz=passband.midband_hz,
        flat=True,
        gain=sides.midband.gain,
        exact_gain=exact_gain,
        midband=sides.midband,
        accounts=_in_order(accounts, parts),
        low=low_corner,
        high=high_corner,
        notes=notes,
    )


def _passband_notes(passband: Passband, exact_gain: float) -> tuple[str, ...]:
    if exact_gain == 0.0:
        return ("no signal reaches the output",)
    if not passband.flat:
        return (
            "no flat passband: the gain stays within ±3 dB for less than a decade, so a sum of "
            "time constants does not apply and only exact figures are given",
        )
    return ()


def _inspection_notes(
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


@dataclass(frozen=True, slots=True)
class _Ends:
    """The two end models with what counts, and the (model, index) of what does not."""

    low: EndModel
    high: EndModel
    in_band: tuple[tuple[EndModel, int], ...]
    idle: tuple[tuple[EndModel, int], ...]


def _divide(
    response: Response, sides: Sides, edges: tuple[float | None, ...], held: HeldPairs
) -> _Ends:
    """Leave out what has no effect, and set in-band parts aside.

    An in-band part is in its low-frequency state at the low corner and in its high-frequency
    state at the high one, so each end is solved again with it there.
    """
    low, idle_low = _effective_low(response, sides.midband.low, sides.high, held)
    high, idle_high = _effective_high(sides.midband.high)
    middle_low, middle_high = (_in_band(model, edges) for model in (low, high))
    in_band = [(low, i) for i in middle_low] + [(high, i) for i in middle_high]
    if in_band:
        low_rest = [part for i, part in enumerate(low.parts) if i not in middle_low]
        high_rest = [part for i, part in enumerate(high.parts) if i not in middle_high]
        shorted = [high.parts[i] for i in middle_high]
        new_low = midband_network(response, low_rest, sides.high).low
        high = midband_network(response, [*low.parts, *shorted], high_rest).high
        low, more_idle = _effective_low(response, new_low, sides.high, held)
        idle_low += more_idle
    return _Ends(low, high, tuple(in_band), (*idle_low, *idle_high))


def _in_band(model: EndModel, edges: tuple[float | None, ...]) -> list[int]:
    """Parts that step the gain by less than 3 dB well inside the passband."""
    if not model.parts:
        return []
    low_hz, high_hz = edges
    corner_hz = 1.0 / (TWO_PI * model.tau_s)
    step = np.abs(model.switched_gain() / model.gain)
    small = (step > HALF_POWER) & (step < 1.0 / HALF_POWER)
    inside = (corner_hz > IN_BAND_FACTOR * (low_hz or 0.0)) & (
        corner_hz < (high_hz or math.inf) / IN_BAND_FACTOR
    )
    return [int(i) for i in np.flatnonzero(small & inside)]


def _effective_low(
    response: Response, model: EndModel, high: Sequence[ReactivePart], held: HeldPairs
) -> tuple[EndModel, list[tuple[EndModel, int]]]:
    """Take low-end parts without effect out, one at a time, least effect first.

    A part taken out goes to its low-frequency state, so that of two bypass capacitors that
    stand in for each other only one is dropped and the other then shows its full effect. A coil
    that becomes a short takes along the capacitors it ties (a supply filter goes as a whole).
    """
    idle: list[tuple[EndModel, int]] = []
    needed: set[str] = set()
    while True:
        effect = _effect(model)
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


def _effective_high(model: EndModel) -> tuple[EndModel, list[tuple[EndModel, int]]]:
    effect = _effect(model)
    kept = [i for i in range(len(model.parts)) if effect[i] >= LEAST_EFFECT]
    idle = [(model, i) for i in range(len(model.parts)) if effect[i] < LEAST_EFFECT]
    return model.keep(kept), idle


def _effect(model: EndModel) -> np.ndarray:
    return np.asarray(np.abs(model.switched_gain() / model.gain - 1.0))


def _corner(model: EndModel, exact_hz: float | None, in_band: Sequence[str]) -> Corner:
    end = "low" if model.low else "high"
    notes: list[str] = []
    estimate = None
    total = _sum(model)
    if exact_hz is None:
        notes.append(_no_edge_note(model))
    elif not model.parts:
        notes.append("no part of the netlist accounts for this corner")
    elif total > 0:
        estimate = (total if model.low else 1.0 / total) / TWO_PI
    if in_band and exact_hz is not None:
        notes.append(
            f"{', '.join(in_band)} step the gain inside the passband, so the gain near this corner "
            "is not the midband gain from which the exact corner counts its 3 dB"
        )
    poles, zeros = model.poles(), model.zeros()
    notes += _difference_notes(model, poles, zeros, estimate, exact_hz)
    return Corner(
        end=end,
        estimate_hz=estimate,
        exact_hz=exact_hz,
        set_by=_set_by(model) if estimate is not None else (),
        poles_hz=_in_hz(poles),
        zeros_hz=_in_hz(zeros),
        notes=tuple(notes),
        model=model,
    )


def _no_edge_note(model: EndModel) -> str:
    if model.low:
        return "no low corner: the gain holds down to DC"
    if not model.parts:
        return (
            "no high corner: nothing in the netlist limits it (do the models give CJE, CJC and "
            "TF, or CGS and CGD?)"
        )
    return "no high corner: the gain does not fall by 3 dB at any frequency"


def _in_hz(roots: ComplexArray) -> tuple[complex, ...]:
    return tuple(complex(root) / TWO_PI for root in roots)


def _terms(model: EndModel) -> np.ndarray:
    """Summands: 1/τ in rad/s at the low end, τ in s at the high end."""
    tau = model.tau_s
    with np.errstate(divide="ignore"):
        return np.asarray(1.0 / tau if model.low else tau)


def _sum(model: EndModel) -> float:
    return float(_terms(model).sum())


def _set_by(model: EndModel) -> tuple[str, ...]:
    terms = _terms(model)
    leading = terms.max()
    order = np.argsort(terms)[::-1]
    return tuple(model.parts[i].name for i in order if terms[i] >= (1 - TIE_MARGIN) * leading)


def _difference_notes(
    model: EndModel,
    poles: ComplexArray,
    zeros: ComplexArray,
    estimate_hz: float | None,
    exact_hz: float | None,
) -> list[str]:
    """Why the sum and the exact corner differ, from the poles and zeros of this end."""
    notes = []
    corner = TWO_PI * (exact_hz or estimate_hz or math.nan)
    for pole in poles:
        if pole.imag > 1e-6 * abs(pole) and corner / 10.0 < abs(pole) < corner * 10.0:
            quality = abs(pole) / (-2.0 * pole.real) if pole.real else math.inf
            notes.append(
                f"complex pole pair at {format_quantity(abs(pole) / TWO_PI, 'Hz')}, "
                f"Q = {quality:.2f}: the sum of time constants does not see it"
            )
        if pole.real > 1e-9 * abs(pole):
            notes.append("a pole lies in the right half-plane: the circuit is unstable as drawn")
    if estimate_hz is None or exact_hz is None or abs(estimate_hz / exact_hz - 1.0) < 0.05:
        return notes
    near = [z for z in zeros if corner / 5.0 < abs(z) < corner * 5.0]
    if near:
        listed = ", ".join(format_quantity(abs(z) / TWO_PI, "Hz") for z in near[:3])
        notes.append(f"a zero near the corner ({listed}) moves the exact figure")
    close = [p for p in poles if corner / 5.0 < abs(p) < corner * 5.0]
    if len(close) > 1 and all(abs(p.imag) <= 1e-6 * abs(p) for p in close):
        side = "safe" if (estimate_hz > exact_hz) == model.low else "unsafe"
        notes.append(
            f"interacting poles near the corner: the sum is off by "
            f"{abs(estimate_hz / exact_hz - 1.0) * 100:.0f} %, on the {side} side"
        )
    return notes


def _accounts(
    midband_hz: float,
    ends: _Ends,
    looped: Sequence[ReactivePart],
    groups: Sequence[tuple[ReactivePart, ...]],
) -> list[PartAccount]:
    accounts = []
    for model in (ends.low, ends.high):
        total = _sum(model)
        terms = _terms(model)
        end = "low" if model.low else "high"
        for i in range(len(model.parts)):
            accounts.append(_account(model, i, end, float(terms[i]) / total, midband_hz))
    for label, members in (("in-band", ends.in_band), ("no effect", ends.idle)):
        for model, i in members:
            accounts.append(_account(model, i, label, None, midband_hz))
    loop = "closes a loop of other capacitors that are short at midband: no pole of its own"
    accounts += [_idle_account(part, loop) for part in looped]
    members_of = {group[0].name: group for group in groups}
    return [one for a in accounts for one in _split_parallel(a, members_of[a.part.name])]


def _split_parallel(account: PartAccount, members: Sequence[ReactivePart]) -> Iterable[PartAccount]:
    """Give each of several capacitors in parallel a row of its own.

    Open-circuit time constants add, so each has its own; at the low end they act together, and
    the largest stands for all.
    """
    if len(members) == 1:
        return [account]
    whole = float(account.part.value[0])
    additive = account.end == "high"
    rows = []
    for i, part in enumerate(members):
        part_of = float(part.value[0]) / whole
        others = ", ".join(m.name for m in members if m is not part)
        rows.append(
            replace(
                account,
                part=part,
                tau_s=account.tau_s * part_of if additive and account.tau_s else account.tau_s,
                corner_hz=account.corner_hz / part_of
                if additive and account.corner_hz and part_of
                else account.corner_hz,
                share=account.share * part_of
                if additive and account.share is not None
                else (account.share if i == 0 else None),
                reason=account.reason + (f"; counted together with {others}" if i == 0 else "")
                if i == 0 or additive
                else f"in parallel with {members[0].name}, counted there",
            )
        )
    return rows


def _account(
    model: EndModel, i: int, end: str, share: float | None, midband_hz: float
) -> PartAccount:
    part = model.parts[i]
    resistance, tau = float(model.resistance_ohm[i]), float(model.tau_s[i])
    zero = float(model.own_zero()[i])
    corner = 1.0 / tau if 0 < tau < math.inf else None
    finite_zero = corner is not None and 1e-6 * corner < abs(zero) < 1e6 * corner
    return PartAccount(
        part=part,
        end=end,
        resistance_ohm=resistance,
        tau_s=tau,
        corner_hz=corner / TWO_PI if corner is not None else None,
        share=share,
        zero_hz=-zero / TWO_PI if finite_zero else None,
        effect=float(_effect(model)[i]),
        reason=_reason(model, i, end, midband_hz),
    )


def _reason(model: EndModel, i: int, end: str, midband_hz: float) -> str:
    part = model.parts[i]
    model_end = "low" if model.low else "high"
    omega = TWO_PI * midband_hz
    value = float(part.value[0])
    reactance = omega * value if part.is_inductor else 1.0 / (omega * value) if value else math.inf
    seen = float(model.resistance_ohm[i])
    state = "a short" if model.low != part.is_inductor else "an open circuit"
    if not part.is_inductor and not model.low and seen < 1e-6 * reactance:
        return "its two ends are tied together at midband by other parts"
    text = (
        f"at midband {format_quantity(midband_hz, 'Hz')} its "
        f"{format_quantity(reactance, 'Ω')} stands against {format_quantity(seen, 'Ω')}: {state}"
    )
    if end != model_end:
        text += f"; switching it moves the gain by {_effect(model)[i] * 100:.1f} %"
    return text


def _idle_account(part: ReactivePart, reason: str) -> PartAccount:
    return PartAccount(part, "no effect", None, None, None, None, None, 0.0, reason)


def _in_order(
    accounts: Iterable[PartAccount], parts: Sequence[ReactivePart]
) -> tuple[PartAccount, ...]:
    order = {part.name: i for i, part in enumerate(parts)}
    return tuple(sorted(accounts, key=lambda account: order[account.part.name]))


def _without_estimate(
    response: Response,
    passband: Passband,
    exact_gain: float,
    parts: Sequence[ReactivePart],
    edges: tuple[float | None, ...],
    natural: ComplexArray,
    notes: tuple[str, ...],
) -> Corners:
    accounts = tuple(
        PartAccount(part, "in-band", None, None, None, None, None, None, "no flat passband")
        for part in parts
    )
    poles = _in_hz(natural)
    low, high = (
        Corner(end, None, edge, (), poles, (), (), None)
        for end, edge in zip(("low", "high"), edges, strict=True)
    )
    transfer = complex(response.at(np.array([passband.midband_hz]))[0])
    signed = math.copysign(exact_gain, transfer.real)
    return Corners(passband.midband_hz, False, signed, exact_gain, None, accounts, low, high, notes)
