"""Resistances in symbols: small trees that know their value and how a hand writes them."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from typing import NamedTuple

NEGLIGIBLE = 0.01
"""A term whose removal changes the value by less is left out."""

SUM, _PARALLEL, FACTOR = 1, 2, 3
"""How tightly each form binds, for parentheses."""


class Term(NamedTuple):
    """``value`` in Ω, ``text`` as written, ``binding`` of its outermost operator."""

    value: float
    text: str
    binding: int = FACTOR
    where: tuple[str, ...] = ()
    """Abbreviations the text uses, such as ``R_in = RS‖R2``."""

    def within(self, binding: int) -> str:
        """The text, in parentheses where it binds more loosely than its surroundings."""
        return self.text if self.binding >= binding else f"({self.text})"


GROUND = Term(0.0, "0")
OPEN = Term(math.inf, "∞")


def symbol(text: str, value: float) -> Term:
    """A resistance with a name of its own."""
    return Term(value, text)


def series(*terms: Term) -> Term:
    """Sum; terms that hardly count are left out."""
    kept = []
    for term in terms:
        if term.value == math.inf:
            return OPEN
        if term.value != 0.0:
            kept.append(term)
    if len(kept) > 1:
        kept = _matter(kept, [term.value for term in kept])
    if not kept:
        return GROUND
    if len(kept) == 1:
        return kept[0]
    text = " + ".join([term.within(SUM) for term in kept])
    return Term(math.fsum([term.value for term in kept]), text, SUM, _abbreviations(kept))


def parallel(*terms: Term) -> Term:
    """Parallel connection; branches that hardly count are left out."""
    kept = []
    for term in terms:
        if term.value == 0.0:
            return GROUND
        if term.value != math.inf:
            kept.append(term)
    if len(kept) > 1:
        kept = _matter(kept, [1.0 / term.value for term in kept])
    if not kept:
        return OPEN
    if len(kept) == 1:
        return kept[0]
    text = "‖".join([term.within(_PARALLEL) for term in kept])
    value = 1.0 / math.fsum([1.0 / term.value for term in kept])
    return Term(value, text, _PARALLEL, _abbreviations(kept))


def multiplied(factor: float, text: str, term: Term) -> Term:
    """``text·term``, such as (β+1)·RE."""
    if term.value == 0.0 or math.isinf(term.value):
        return term
    return Term(factor * term.value, f"{text}·{term.within(FACTOR)}")


def increased(term: Term, ratio: float, text: str) -> Term:
    """``term·(1 + text)``, where the ratio counts at all."""
    if abs(ratio) < NEGLIGIBLE or term.value == 0.0 or math.isinf(term.value):
        return term
    return Term(term.value * (1.0 + ratio), f"{term.within(FACTOR)}·(1 + {text})")


def divided(term: Term, divisor: float, text: str) -> Term:
    """``term/text``, such as (rπ + RB)/(β+1)."""
    if term.value == 0.0 or math.isinf(term.value):
        return term
    return Term(term.value / divisor, f"{term.within(FACTOR)}/{text}")


def boosted(resistance: Term, conductance: float, text: str, degeneration: Term) -> Term:
    """``r·(1 + gm·R)``: an output resistance raised by degeneration."""
    gain = conductance * degeneration.value
    if gain < NEGLIGIBLE:
        return resistance
    if math.isinf(gain):
        return OPEN
    written = f"{resistance.within(FACTOR)}·(1 + {text}·{degeneration.within(FACTOR)})"
    return Term(resistance.value * (1.0 + gain), written)


def bridging(first: Term, second: Term, conductance: Term) -> Term:
    """``R_in + R_out + gm·R_in·R_out``, what a capacitor from input to inverted output sees.

    ``conductance`` is the effective transconductance in S. The Miller form stands beside it.
    """
    if math.isinf(first.value) or math.isinf(second.value):
        return OPEN
    product = conductance.value * first.value * second.value
    total = first.value + second.value + product
    if product < NEGLIGIBLE * total:
        return series(first, second)
    where = [f"R_in = {first.text}", f"R_out = {second.text}"]
    gain = conductance.text
    if conductance.binding != FACTOR:
        where.append(f"gm' = {conductance.text}")
        gain = "gm'"
    text = f"R_in + R_out + {gain}·R_in·R_out [Miller: R_in·(1 + {gain}·R_out) + R_out]"
    return Term(total, text, SUM, tuple(where))


def _abbreviations(terms: Iterable[Term]) -> tuple[str, ...]:
    return tuple(dict.fromkeys([text for term in terms for text in term.where]))


def _matter(terms: list[Term], weights: Sequence[float]) -> list[Term]:
    """Leave out, least important first, what changes the value by under a per cent.

    ``weights`` are what adds up: resistances in series, conductances in parallel.
    """
    order = sorted(range(len(terms)), key=weights.__getitem__)
    total = math.fsum(weights)
    dropped = 0
    while len(order) - dropped > 1:
        rest = total - weights[order[dropped]]
        if abs(total / rest - 1.0) >= NEGLIGIBLE:
            break
        total, dropped = rest, dropped + 1
    if not dropped:
        return terms
    important = set(order[dropped:])
    return [term for i, term in enumerate(terms) if i in important]
