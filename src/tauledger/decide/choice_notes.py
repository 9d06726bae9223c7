"""What to know beside the values of a choice."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from tauledger.analysis import Analysis
from tauledger.decide.available import ELECTROLYTIC_F
from tauledger.decide.candidates import modelled
from tauledger.decide.search import FloatArray, Search, Wish
from tauledger.decide.stress import CAUTION_REVERSED
from tauledger.quantity import format_quantity
from tauledger.review.check import REVERSED_VOLTS


def notes_of(
    analysis: Analysis,
    search: Search,
    wish: Wish,
    meets: bool | None,
    found: Sequence[FloatArray],
) -> tuple[str, ...]:
    """Sentences about a choice.

    ``meets`` tells whether the netlist meets the target as it stands, None without such a corner;
    ``found`` are the sets of (parts,) capacitances in F.
    """
    return (
        *_target(search, meets),
        *_left_out(analysis, search, wish),
        *_values(search, found),
        *_polarity(analysis, search, found),
    )


def _target(search: Search, meets: bool | None) -> Iterator[str]:
    if meets is None:
        reach = "down to DC" if search.end == "low" else "at all higher frequencies"
        yield f"there is no {search.end} corner to set: the gain holds {reach}"
    elif meets:
        sentence = "the netlist meets the target as it stands"
        if not search.parts:
            sentence += f", and no capacitor of it limits the {search.end} end"
        yield sentence


def _left_out(analysis: Analysis, search: Search, wish: Wish) -> Iterator[str]:
    """Capacitors that count at this end, but stand for something that is not one."""
    if wish.only or wish.shares:
        return
    models = modelled(analysis.circuit)
    names = [
        account.part.name
        for account in analysis.corners.accounts
        if account.end == search.end and account.share and account.part.name in models
    ]
    if names:
        yield (
            f"not changed: {', '.join(names[:6])}, beside controlled sources in a subcircuit and "
            "so part of a model; name it with --only if it is a real part"
        )


def _values(search: Search, found: Sequence[FloatArray]) -> Iterator[str]:
    if found and any(not stock.source for stock in search.stocks):
        yield (
            "values from E6 from 1 µF up, as electrolytics come, and E12 below; --series or the "
            "classes of tauledger.toml choose others"
        )


def _polarity(analysis: Analysis, search: Search, found: Sequence[FloatArray]) -> Iterator[str]:
    """Which way round the large ones go, when they are electrolytics."""
    if not found:
        return
    largest = np.max(found, axis=0)
    ways, either = [], []
    for part, value in zip(search.parts, largest, strict=True):
        if value < ELECTROLYTIC_F:
            continue
        first, second = part.nodes
        voltage = analysis.point.voltage(first) - analysis.point.voltage(second)
        if abs(voltage) <= REVERSED_VOLTS:
            either.append(part.name)
        else:
            plus = first if voltage > 0.0 else second
            ways.append(f"{part.name} at {plus} ({format_quantity(abs(voltage), 'V')})")
    if ways:
        yield f"plus side of an electrolytic: {', '.join(ways)}. {CAUTION_REVERSED}"
    if either:
        yield (
            f"next to no direct voltage across {', '.join(either)}: the signal would reverse an "
            "electrolytic there, so take one without polarity"
        )
