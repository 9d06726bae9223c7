"""The time-constant engine: linear network and path → corners with reasons."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

import numpy as np

from tauledger.corners.accounts import idle_account, part_accounts, summands, total
from tauledger.corners.band import (
    HIGHEST_HZ,
    TWO_PI,
    Passband,
    Sweep,
    find_edge,
    find_passband,
    sweep_response,
)
from tauledger.corners.effects import IN_BAND_FACTOR, divide_ends
from tauledger.corners.estimates import Bounds, Estimate, Roots, best_estimate, rigorous_bounds
from tauledger.corners.model import Corner, Corners, PartAccount
from tauledger.corners.ports import EndModel
from tauledger.corners.reasons import (
    corner_notes,
    inspection_notes,
    narrow_notes,
    no_edge_note,
    passband_notes,
    peak_notes,
    stability_notes,
    timing_notes,
    unreached_notes,
    what_if,
)
from tauledger.corners.sides import (
    HeldPairs,
    Sides,
    as_one,
    impedance_seen,
    merge_parallel,
    part_out_held,
    ratio_at_midband,
    split_sides,
)
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass
from tauledger.smallsignal.modes import ComplexArray, natural_frequencies
from tauledger.smallsignal.network import ReactivePart
from tauledger.smallsignal.response import (
    LARGEST_DECOMPOSED,
    Response,
    condensed,
    edge_sensitivity,
    gain_sensitivity,
)

TIE_MARGIN = 0.2
"""Parts that move a corner by amounts closer than this cannot be told apart within usual part
tolerance (±10 to ±20 %; common practice, no source)."""
LEAST_MOVE = 0.01
TRANSISTOR_CAPACITANCES = {"Cπ", "Cμ", "Cμx", "Cgs", "Cgd", "Cds"}
Movers = tuple[tuple[str, float], ...]
"""Names with d ln(corner) / d ln(value), strongest first."""
SHORTEST_SWEEP = 12
"""Points of the sweep that must be left to look for a passband in."""


def find_corners(
    response: Response,
    parts: Sequence[ReactivePart],
    fixed_voltage_pairs: HeldPairs,
    supply_pairs: HeldPairs,
    midband_hz: float | None = None,
    square_wave_hz: float | None = None,
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
    midband_hz
        Where to judge the gain, when the path is not meant to be flat; the corners then are
        where the gain has fallen by 3 dB from there, and what shapes the response between them
        is in-band.
    square_wave_hz
        Frequency of a square wave whose droop is told.

    Raises
    ------
    ProblemError
        When the network is too large to work out its poles.
    """
    path = _survey(response, parts, midband_hz)
    if not path.passband.flat or path.exact_gain == 0.0:
        return _without_estimate(path, *passband_notes(path.passband, path.exact_gain))
    free, across_source = part_out_held(parts, fixed_voltage_pairs)
    groups = merge_parallel(free, supply_pairs)
    sides = _sides(path, [as_one(group) for group in groups], fixed_voltage_pairs)
    if sides is None:
        return _without_estimate(path, *unreached_notes(response, parts))
    try:
        ends = divide_ends(
            response,
            sides,
            path.edges,
            fixed_voltage_pairs,
            shaped=midband_hz is not None,
            movers=(_heads(groups, path.movers[0]), _heads(groups, path.movers[1])),
        )
    except np.linalg.LinAlgError:
        # With the parts inside the band shorted as well, a loop of shorts is left.
        return _without_estimate(path, *unreached_notes(response, parts))
    accounts = part_accounts(path.passband.midband_hz, ends, sides.looped, groups)
    accounts += [idle_account(part, "straight across a source: no pole") for part in across_source]
    in_band = [model.parts[i].name for model, i in ends.in_band]
    low, high = (_corner(path, model, in_band, square_wave_hz) for model in (ends.low, ends.high))
    return Corners(
        midband_hz=path.passband.midband_hz,
        flat=True,
        gain=sides.midband.gain,
        exact_gain=path.exact_gain,
        midband=sides.midband,
        accounts=_in_order(accounts, parts),
        low=low,
        high=high,
        notes=(
            *stability_notes(path.unstable_hz),
            *inspection_notes(response, parts, path.passband.midband_hz, sides.midband.gain),
            *narrow_notes(path.edges, given=midband_hz is not None),
        ),
        unstable_hz=path.unstable_hz,
    )


def _heads(
    groups: Sequence[tuple[ReactivePart, ...]], movers: Sequence[tuple[str, float]]
) -> set[str]:
    """Names of the groups of parallel parts of which one moves a corner."""
    moving = {name for name, _ in movers}
    return {group[0].name for group in groups if any(part.name in moving for part in group)}


@dataclass(frozen=True, slots=True)
class _Path:
    """What the exact response alone tells; gathered once and handed on."""

    response: Response
    parts: tuple[ReactivePart, ...]
    natural: ComplexArray
    sweep: Sweep
    passband: Passband
    edges: tuple[float | None, float | None]
    exact_gain: float
    movers: tuple[Movers, Movers]
    """What moves the low and the high corner."""
    unstable_hz: float | None
    """Magnitude of the fastest growing natural frequency, when one grows."""


def _survey(response: Response, parts: Sequence[ReactivePart], midband_hz: float | None) -> _Path:
    natural = _natural(response)
    sweep = sweep_response(response, natural)
    passband = (
        _transistor_passband(response, parts, sweep)
        if midband_hz is None
        else Passband(midband_hz, True)
    )
    exact_gain = response.magnitude(passband.midband_hz)
    edges = (
        find_edge(response, sweep, passband.midband_hz, upward=False) if exact_gain > 0 else None,
        find_edge(response, sweep, passband.midband_hz, upward=True) if exact_gain > 0 else None,
    )
    return _Path(
        response,
        tuple(parts),
        natural,
        sweep,
        passband,
        edges,
        exact_gain,
        _movers(response, parts, edges, passband.midband_hz),
        _unstable_hz(response, natural),
    )


def _natural(response: Response) -> ComplexArray:
    if response.modes is not None:
        return response.modes.natural
    short = response.short or condensed(response)
    if short.drive.size > LARGEST_DECOMPOSED:
        raise ProblemError(_too_large(short.drive.size))
    return natural_frequencies(short.conductance, short.reactance)


def _too_large(size: int) -> Problem:
    return Problem(
        "circuit-too-large",
        Severity.ERROR,
        f"the signal network has {size} unknowns, more than the {LARGEST_DECOMPOSED} whose poles "
        "are worked out",
        None,
        "Give the netlist of the amplifier alone, without the rest of the board.",
    )


def _unstable_hz(response: Response, natural: ComplexArray) -> float | None:
    """The growing natural frequency, found again from nearby: very fast ones may be rounding."""
    growing = natural[
        (natural.real > 1e-6 * np.abs(natural) + 1e-6) & (np.abs(natural) < TWO_PI * HIGHEST_HZ)
    ]
    for root in growing[np.argsort(np.abs(growing))]:
        # Not at the root itself, where the shifted matrix would be singular.
        nearby = 1.37 * float(abs(root))
        again = natural_frequencies(response.conductance, response.reactance, nearby)
        if np.abs(again / root - 1.0).min(initial=np.inf) < 1e-3:
            return float(abs(root)) / TWO_PI
    return None


def _transistor_passband(
    response: Response, parts: Sequence[ReactivePart], sweep: Sweep
) -> Passband:
    """The passband, looked for below where the transistors' own capacitances are shorts.

    A transistor that is saturated or switched off still passes signal through Cμ at very high
    frequency; that is not where the amplifier is used.
    """
    own = [part for part in parts if part.symbol in TRANSISTOR_CAPACITANCES]
    passband = find_passband(sweep)
    for _ in range(3):
        frequency = passband.midband_hz
        ratio = ratio_at_midband(own, impedance_seen(response, own, frequency), frequency)
        if not (ratio > 1.0).any():
            break
        limit = frequency / float(ratio.max()) / IN_BAND_FACTOR
        below = sweep.frequency_hz < limit
        if below.sum() < SHORTEST_SWEEP:
            break
        sweep = Sweep(sweep.frequency_hz[below], sweep.transfer[below])
        passband = find_passband(sweep, cut=True)
    return passband


def _sides(path: _Path, parts: Sequence[ReactivePart], held: HeldPairs) -> Sides | None:
    try:
        sides = split_sides(path.response, parts, path.passband.midband_hz, held)
    except np.linalg.LinAlgError:
        return None
    return sides if abs(sides.midband.gain) > 1e-6 * path.exact_gain else None


def _corner(
    path: _Path, model: EndModel, in_band: Sequence[str], square_wave_hz: float | None
) -> Corner:
    exact_hz = path.edges[0 if model.low else 1]
    roots = Roots.of(model)
    whole = total(model)
    estimate_hz = None
    if exact_hz is not None and model.parts and whole > 0:
        estimate_hz = (whole if model.low else 1.0 / whole) / TWO_PI
    better: Estimate | None = None
    bounds = Bounds(None, None)
    if estimate_hz is not None and not in_band and path.unstable_hz is None:
        better = best_estimate(model, roots, estimate_hz)
        bounds = rigorous_bounds(model, roots, estimate_hz)
    movers = path.movers[0 if model.low else 1]
    set_by = _set_by(movers)
    notes = [no_edge_note(model)] if exact_hz is None else []
    notes += peak_notes(path.sweep, path.passband.midband_hz, upward=not model.low)
    notes += corner_notes(
        model, roots, exact_hz, estimate_hz, better, in_band, set_by, _leader(model)
    )
    return Corner(
        end="low" if model.low else "high",
        estimate_hz=estimate_hz,
        exact_hz=exact_hz,
        set_by=set_by,
        poles_hz=_in_hz(roots.poles),
        zeros_hz=_in_hz(roots.zeros),
        notes=tuple(notes),
        model=model,
        improved_hz=better.frequency_hz if better else None,
        improved_method=better.method if better else "",
        lowest_hz=bounds.lowest_hz,
        highest_hz=bounds.highest_hz,
        movers=movers,
        changes=what_if(model, roots, exact_hz, [name for name, _ in movers[:2]]),
        timing=timing_notes(model, roots, exact_hz, path.natural, square_wave_hz)
        if path.unstable_hz is None
        else (),
    )


def _movers(
    response: Response,
    parts: Sequence[ReactivePart],
    edges: tuple[float | None, float | None],
    midband_hz: float,
) -> tuple[Movers, Movers]:
    """d ln(corner) / d ln(value) of every part that moves each corner, strongest first."""
    if edges == (None, None):
        return (), ()
    at_midband = gain_sensitivity(response, parts, midband_hz)

    def of(edge_hz: float | None) -> Movers:
        if edge_hz is None:
            return ()
        moves = edge_sensitivity(response, parts, edge_hz, at_midband)
        order = np.argsort(-np.abs(moves))
        return tuple((parts[i].name, float(moves[i])) for i in order if abs(moves[i]) >= LEAST_MOVE)

    return of(edges[0]), of(edges[1])


def _set_by(movers: Sequence[tuple[str, float]]) -> tuple[str, ...]:
    """The parts that hold the corner where it is; one that pulls the other way extends it."""
    holding = [(name, -move) for name, move in movers if move < 0.0]
    if not holding:
        return ()
    least = (1.0 - TIE_MARGIN) * holding[0][1]
    return tuple(name for name, move in holding if move >= least)


def _leader(model: EndModel) -> str:
    """The part with the largest share of the sum."""
    return model.parts[int(np.argmax(summands(model)))].name if model.parts else ""


def _in_hz(roots: ComplexArray) -> tuple[complex, ...]:
    return tuple(complex(root) / TWO_PI for root in roots)


def _in_order(
    accounts: Iterable[PartAccount], parts: Sequence[ReactivePart]
) -> tuple[PartAccount, ...]:
    order = {part.name: i for i, part in enumerate(parts)}
    return tuple(sorted(accounts, key=lambda account: order[account.part.name]))


def _without_estimate(path: _Path, reason: str, *notes: str) -> Corners:
    """Exact figures alone, where sums of time constants do not apply."""
    accounts = tuple(
        PartAccount(part, "in-band", None, None, None, None, None, None, reason)
        for part in path.parts
    )
    poles = _in_hz(path.natural)
    corners = []
    for end, edge, movers in zip(("low", "high"), path.edges, path.movers, strict=True):
        corners.append(Corner(end, None, edge, _set_by(movers), poles, (), (), None, movers=movers))
    transfer = complex(path.response.at(np.array([path.passband.midband_hz]))[0])
    return Corners(
        midband_hz=path.passband.midband_hz,
        flat=False,
        gain=math.copysign(path.exact_gain, transfer.real),
        exact_gain=path.exact_gain,
        midband=None,
        accounts=accounts,
        low=corners[0],
        high=corners[1],
        notes=(*stability_notes(path.unstable_hz), *notes),
        unstable_hz=path.unstable_hz,
    )
