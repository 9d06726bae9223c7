"""One row for each capacitor and inductor: what it sees, its time constant, its share, why."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from tauledger.corners.band import TWO_PI
from tauledger.corners.effects import Ends, switching_effect
from tauledger.corners.model import PartAccount
from tauledger.corners.ports import EndModel
from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.smallsignal.network import FloatArray, ReactivePart


def summands(model: EndModel) -> FloatArray:
    """Summands: 1/τ in rad/s at the low end, τ in s at the high end."""
    tau = model.tau_s
    with np.errstate(divide="ignore"):
        return np.asarray(1.0 / tau if model.low else tau)


def total(model: EndModel) -> float:
    """Σ 1/τ in rad/s at the low end, Σ τ in s at the high end."""
    return float(summands(model).sum())


def part_accounts(
    midband_hz: float,
    ends: Ends,
    looped: Sequence[ReactivePart],
    groups: Sequence[tuple[ReactivePart, ...]],
) -> list[PartAccount]:
    """A row for every part of both ends, in-band and without effect included.

    ``groups`` are the capacitors that were counted as one, ``looped`` those that close a loop.
    """
    accounts = []
    for model in (ends.low, ends.high):
        whole = total(model)
        terms = summands(model)
        columns = _Columns.of(model)
        end = "low" if model.low else "high"
        for i in range(len(model.parts)):
            share = float(terms[i]) / whole
            accounts.append(_account(model, columns, i, end, share, midband_hz))
    known: dict[int, _Columns] = {}
    for label, members in (("in-band", ends.in_band), ("no effect", ends.idle)):
        for model, i in members:
            if id(model) not in known:
                known[id(model)] = _Columns.of(model)
            columns = known[id(model)]
            accounts.append(_account(model, columns, i, label, None, midband_hz))
    loop = "closes a loop of other capacitors that are short at midband: no pole of its own"
    accounts += [idle_account(part, loop) for part in looped]
    members_of = {group[0].name: group for group in groups}
    return [one for a in accounts for one in _split_parallel(a, members_of[a.part.name])]


def _split_parallel(account: PartAccount, members: Sequence[ReactivePart]) -> list[PartAccount]:
    """Give each of several capacitors in parallel a row of its own."""
    if len(members) == 1:
        return [account]
    rows = []
    for i, part in enumerate(members):
        if account.end == "high":
            rows.append(_own_part(account, part))
        elif i == 0:
            others = ", ".join(member.name for member in members[1:])
            reason = f"{account.reason}; counted together with {others}"
            rows.append(replace(account, part=part, reason=reason))
        else:
            reason = f"in parallel with {members[0].name}, counted there"
            rows.append(replace(account, part=part, share=None, reason=reason))
    return rows


def _own_part(account: PartAccount, part: ReactivePart) -> PartAccount:
    """One capacitor's part of a parallel group: open-circuit time constants add."""
    fraction = float(part.value[0] / account.part.value[0])
    tau, corner, share = account.tau_s, account.corner_hz, account.share
    return replace(
        account,
        part=part,
        tau_s=tau * fraction if tau is not None else None,
        corner_hz=corner / fraction if corner is not None and fraction else None,
        share=share * fraction if share is not None else None,
    )


@dataclass(frozen=True, slots=True)
class _Columns:
    """What a model tells of all its parts at once, (K,) each."""

    resistance_ohm: FloatArray
    tau_s: FloatArray
    zero: FloatArray
    effect: FloatArray

    @classmethod
    def of(cls, model: EndModel) -> _Columns:
        return cls(model.resistance_ohm, model.tau_s, model.own_zero(), switching_effect(model))


def _account(
    model: EndModel,
    columns: _Columns,
    i: int,
    end: str,
    share: float | None,
    midband_hz: float,
) -> PartAccount:
    part = model.parts[i]
    resistance, tau = float(columns.resistance_ohm[i]), float(columns.tau_s[i])
    zero = float(columns.zero[i])
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
        effect=float(columns.effect[i]),
        reason=_reason(model, columns, i, end, midband_hz),
    )


def _reason(model: EndModel, columns: _Columns, i: int, end: str, midband_hz: float) -> str:
    part = model.parts[i]
    model_end = "low" if model.low else "high"
    omega = TWO_PI * midband_hz
    value = float(part.value[0])
    reactance = omega * value if part.is_inductor else 1.0 / (omega * value) if value else math.inf
    seen = float(columns.resistance_ohm[i])
    state = "a short" if model.low != part.is_inductor else "an open circuit"
    if not part.is_inductor and not model.low and seen < 1e-6 * reactance:
        return "its two ends are tied together at midband by other parts"
    text = (
        f"at midband {format_quantity(midband_hz, 'Hz')} its "
        f"{format_quantity(reactance, 'Ω')} stands against {format_quantity(seen, 'Ω')}: {state}"
    )
    if end != model_end:
        text += f"; switching it moves the gain by {columns.effect[i] * 100:.1f} %"
    return text


def idle_account(part: ReactivePart, reason: str) -> PartAccount:
    """A row for a part that counts nowhere, with the reason."""
    return PartAccount(part, "no effect", None, None, None, None, None, 0.0, reason)
