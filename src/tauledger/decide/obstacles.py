"""Why a corner cannot be met: which constraint binds."""

from __future__ import annotations

import math

import numpy as np

from tauledger.analysis import Analysis
from tauledger.decide.candidates import in_band, modelled
from tauledger.decide.search import GAIN_KEPT, FloatArray, Search
from tauledger.quantity import format_quantity

_HUGE = 1e6
"""A capacitor so many times larger (smaller, at the high end) is out of the way."""


def obstacle(analysis: Analysis, search: Search) -> str:
    """What keeps the target out of reach of any values; empty when nothing does.

    With no capacitor to change it is an obstacle only where the netlist misses the target.
    """
    if not search.parts:
        return _nothing_to_change(analysis, search)
    if bool(search.met(search.now_f[:, None])[0]):
        return ""
    lower = search.end == "low"
    best = np.array([[stock.values_f[-1 if lower else 0]] for stock in search.stocks])
    best_hz = _corner(search, best)
    if math.isnan(best_hz) or search.reaches(np.array([best_hz]))[0]:
        return ""
    away = search.now_f * _away(analysis, search)
    gone_hz = _corner(search, away[:, None])
    names = _listed([part.name for part in search.parts])
    wanted = _hertz(search.limit_hz)
    if (gone_hz > search.limit_hz) == lower and not math.isnan(gone_hz):
        others = _others(analysis, search) or ["something other than a capacitor"]
        return (
            f"however {'large' if lower else 'small'} {names} "
            f"{'is' if len(search.parts) == 1 else 'are'}, the {search.end} corner stays at "
            f"{_hertz(gone_hz)} where {wanted} is needed: {_listed(others)} "
            f"hold{'s' if len(others) == 1 else ''} it there"
        )
    return (
        f"the {'largest' if lower else 'smallest'} values at hand for {names} give "
        f"{_hertz(best_hz)} where {wanted} is needed: the list of values binds"
    )


def _away(analysis: Analysis, search: Search) -> float:
    """A factor on every capacitor with which none of them could keep the corner from the limit."""
    corners, limit = analysis.corners, search.limit_hz
    if search.end == "low":
        return _HUGE * max(1.0, (corners.low.exact_hz or limit) / limit)
    return 1.0 / (_HUGE * max(1.0, limit / (corners.high.exact_hz or limit)))


def _nothing_to_change(analysis: Analysis, search: Search) -> str:
    corner = analysis.corners.low if search.end == "low" else analysis.corners.high
    if corner.exact_hz is not None and search.reaches(np.array([corner.exact_hz]))[0]:
        return ""
    sentence = f"no capacitor of the netlist limits the {search.end} end"
    if others := _others(analysis, search):
        return f"{sentence}: {_listed(others)} set{'s' if len(others) == 1 else ''} it"
    if shaping := in_band(analysis):
        return (
            f"{sentence}: {_listed(shaping[:6])} act{'s' if len(shaping) == 1 else ''} inside the "
            "band, which is narrow; --midband FREQ says where the gain is meant to be judged"
        )
    return sentence


def no_way(search: Search) -> str:
    """What is wrong with the combinations that reach the target, since none was good."""
    scales = np.logspace(-6.0, 6.0, 121)
    starts = [search.now_f] + ([np.array(search.ideal_f)] if search.ideal_f else [])
    table = np.concatenate([start[:, None] * scales for start in starts], axis=1)
    found = search.measured(table)
    reach = search.reaches(found.corner_hz)
    names = _listed([part.name for part in search.parts])
    if not reach.any():
        return f"no values of {names} bring the {search.end} corner to {_hertz(search.limit_hz)}"
    calm, same = search.calm(found), search.same(found)
    if not (reach & same).any():
        change = np.expm1(search.gain_change(found)[reach].min())
        return (
            f"values of {names} that reach it change the gain at midband, "
            f"{_hertz(search.bench.midband_hz)}, by {100 * change:.0f} % or more "
            f"({100 * math.expm1(GAIN_KEPT):.0f} % is let pass): the band would be another one"
        )
    if not (reach & same & calm).any():
        peak = 20.0 * math.log10(found.peak[reach & same].min())
        allowed = 20.0 * math.log10(search.highest_peak)
        return (
            f"values of {names} that reach it make the response peak by {peak:.1f} dB or more "
            f"({allowed:.1f} dB is let pass): feedback through capacitors binds"
        )
    return (
        f"some sizes of {names} reach it, but no combination of the values at hand: "
        "the list of values binds"
    )


def _corner(search: Search, values_f: FloatArray) -> float:
    return float(search.measured(values_f).corner_hz[0])


def _others(analysis: Analysis, search: Search) -> list[str]:
    """The strongest parts at this end that may not change."""
    free = {part.name for part in search.parts}
    models = modelled(analysis.circuit)
    held = [
        account
        for account in analysis.corners.accounts
        if account.end == search.end and account.part.name not in free and account.share
    ]
    held.sort(key=lambda account: -(account.share or 0.0))
    return [
        account.part.name + (" (in a model)" if account.part.name in models else "")
        for account in held[:3]
    ]


def _listed(names: list[str]) -> str:
    return ", ".join(names)


def _hertz(value: float) -> str:
    return format_quantity(value, "Hz", 4)
