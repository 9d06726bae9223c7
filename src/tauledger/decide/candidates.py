"""Which capacitors may change, what they may become, and the search that follows from it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

from tauledger.analysis import Analysis
from tauledger.circuit.elements import BehaviouralSource, Capacitor, Circuit, ControlledSource
from tauledger.configuration.settings import PathSettings
from tauledger.corners.model import PartAccount
from tauledger.decide.available import stock_of
from tauledger.decide.bench import Bench, bench_of
from tauledger.decide.search import HIGHEST_PEAK, Search, Wish
from tauledger.decide.sizing import by_shares, least_change, least_total
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.quantity import format_quantity

_AWAY = 10.0
"""The gain is judged so far from a target that has no corner on the other side."""


def search_of(analysis: Analysis, wish: Wish, settings: PathSettings | None) -> Search:
    """What a wish is to be searched in; its limit is the target itself.

    Raises
    ------
    ProblemError
        When there is no passband, a named part is unknown or does not count at this end, or the
        target lies beyond the other corner.
    """
    bench = _one_end(bench_of(analysis), analysis, wish)
    by_name = {e.name: e for e in analysis.circuit.elements}
    names = _candidates(analysis, wish)
    parts = tuple(e for name in names if isinstance(e := by_name[name], Capacitor))
    stocks = tuple(stock_of(part.name, settings, wish.series) for part in parts)
    ideal = _ideal(analysis, parts, wish) if parts else None
    search = Search(
        bench,
        analysis.network,
        parts,
        stocks,
        ideal,
        wish.end,
        wish.target_hz,
        gains=(bench.gain, abs(analysis.corners.gain) or bench.gain),
    )
    if not parts:
        return search
    # What peaks already may go on peaking.
    return replace(search, highest_peak=max(HIGHEST_PEAK, 1.01 * search.peak(search.now_f)))


def modelled(circuit: Circuit) -> set[str]:
    """Names of what stands in a subcircuit with controlled sources, as an op-amp's model has.

    Such a capacitor or resistor is part of a model, and nobody can fit another one.
    """
    sources = (ControlledSource, BehaviouralSource)
    models = {_block(e.name) for e in circuit.elements if isinstance(e, sources)} - {""}
    return {e.name for e in circuit.elements if _block(e.name) in models}


def _block(name: str) -> str:
    return name.rpartition(".")[0]


# Parts --------------------------------------------------------------------------------------------


def _candidates(analysis: Analysis, wish: Wish) -> list[str]:
    """Names of the capacitors to set, strongest first."""
    elements = {e.name.casefold(): e for e in analysis.circuit.elements}
    named = list(dict.fromkeys(n.casefold() for n in (*wish.only, *(wish.shares or ()))))
    for name in (*wish.only, *(wish.shares or ())):
        if not isinstance(elements.get(name.casefold()), Capacitor):
            raise ProblemError(_not_a_capacitor(name, analysis.circuit))
    counted = {
        account.part.name.casefold(): account
        for account in analysis.corners.accounts
        if account.end == wish.end and account.resistance_ohm and not account.part.device
    }
    if strange := [elements[name].name for name in named if name not in counted]:
        raise ProblemError(_other_end(strange, wish, in_band(analysis)))
    ranked = sorted(counted, key=lambda name: -(counted[name].share or 0.0))
    if named:
        return [elements[name].name for name in ranked if name in named]
    models = modelled(analysis.circuit)
    found = (elements[name] for name in ranked)
    return [e.name for e in found if isinstance(e, Capacitor) and e.name not in models]


def _not_a_capacitor(name: str, circuit: Circuit) -> Problem:
    known = ", ".join(e.name for e in circuit.elements if isinstance(e, Capacitor))
    return Problem(
        "capacitor-unknown",
        Severity.ERROR,
        f"{name[:60]!r} is no capacitor of this circuit",
        None,
        f"Its capacitors: {known[:300] or 'none'}.",
    )


def _other_end(names: Sequence[str], wish: Wish, shaping: Sequence[str]) -> Problem:
    several = len(names) > 1
    advice = "Leave it out; tauledger report NETLIST shows at which end each capacitor counts."
    if set(names) & set(shaping):
        advice = (
            "It acts inside the band as that is now; --midband FREQ says where the gain is meant "
            "to be judged."
        )
    return Problem(
        "capacitor-other-end",
        Severity.ERROR,
        f"{', '.join(names)} {'do' if several else 'does'} not limit the {wish.end} end, so "
        f"{'they' if several else 'it'} cannot set that corner",
        None,
        advice,
    )


def in_band(analysis: Analysis) -> list[str]:
    """Names of the netlist's capacitors that are neither a short nor open at midband."""
    return [
        account.part.name
        for account in analysis.corners.accounts
        if account.end == "in-band" and not account.part.device
    ]


# Where the gain is judged -------------------------------------------------------------------------


def _one_end(bench: Bench, analysis: Analysis, wish: Wish) -> Bench:
    """Searched at this end only, past the target as well as past where the corner is now.

    The gain is judged in the middle of the band there will be, unless the user says where.
    """
    low, high, target = bench.low_hz, bench.high_hz, wish.target_hz
    lower = wish.end == "low"
    if (low if lower else high) is None:
        return bench
    other = high if lower else low
    if other is not None and (target >= other if lower else target <= other):
        raise ProblemError(_beyond(wish, f"{'high' if lower else 'low'} corner", other))
    if wish.midband_hz is not None:
        middle = bench.midband_hz
        if target >= middle if lower else target <= middle:
            raise ProblemError(_beyond(wish, "midband asked for", middle))
    elif other is not None:
        middle = math.sqrt(target * other)
    else:
        pick = max if lower else min
        middle = pick(bench.midband_hz, target * (_AWAY if lower else 1.0 / _AWAY))
    return replace(
        bench,
        midband_hz=middle,
        low_hz=min(low, target) if low and lower else None,
        high_hz=None if lower else max(high or target, target),
    )


def _beyond(wish: Wish, what: str, other_hz: float) -> Problem:
    side = "above" if wish.end == "low" else "below"
    target, other = (format_quantity(value, "Hz") for value in (wish.target_hz, other_hz))
    return Problem(
        "target-beyond-band",
        Severity.ERROR,
        f"a {wish.end} corner of {target} would lie {side} the {what}, {other}, and leave no band",
        None,
        "Give the corner itself, such as 20Hz or 20kHz; m is milli and M mega here.",
    )


# Closed form --------------------------------------------------------------------------------------


def _ideal(analysis: Analysis, parts: Sequence[Capacitor], wish: Wish) -> tuple[float, ...] | None:
    """By closed form, after what the other parts take of the sum at this end."""
    accounts = {a.part.name: a for a in analysis.corners.accounts}
    names = {part.name for part in parts}
    resistances = [accounts[part.name].resistance_ohm or 0.0 for part in parts]
    if wish.shares is not None:
        lower = {name.casefold(): share for name, share in wish.shares.items()}
        shares = [lower[part.name.casefold()] for part in parts]
        return tuple(by_shares(resistances, shares, wish.target_hz))
    others = [a for a in accounts.values() if _counts(a, wish.end) and a.part.name not in names]
    if wish.end == "high":
        now = [part.capacitance_f for part in parts]
        held_s = sum(a.tau_s or 0.0 for a in others)
        sizes = least_change(resistances, now, held_s, wish.target_hz)
        return None if sizes is None else tuple(sizes)
    left = wish.target_hz - sum(a.corner_hz or 0.0 for a in others)
    return tuple(least_total(resistances, left)) if left > 0.0 else None


def _counts(account: PartAccount, end: str) -> bool:
    return account.end == end and account.share is not None
