"""A choice judged by the whole analysis, and by its worst case, beside the search that found it."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np

from tauledger.analysis import Analysis, corners_of
from tauledger.circuit.elements import Capacitor, Circuit
from tauledger.configuration.settings import PathSettings
from tauledger.decide.asked import Asked
from tauledger.decide.bench import Bench, bench_of
from tauledger.decide.search import FloatArray, Search, Wish
from tauledger.decide.varied import variety_of
from tauledger.decide.worst import ends_alone, worst_cases
from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class Verified:
    """One corner three ways; no corner at all counts as 0 Hz (infinite, at the high end)."""

    searched_hz: float
    """With the midband frequency of the search."""
    exact_hz: float
    """As a report on the changed netlist shows it."""
    worst_hz: float
    """The same with every tolerance at its worst; ``exact_hz`` when they are not asked for."""


@dataclass(frozen=True, slots=True)
class Judge:
    """What a wish demands of a circuit, by real solves."""

    wish: Wish
    truth: Callable[[Circuit], float | None]
    ratio: Callable[[Circuit], float]
    """Worst corner over nominal corner."""

    def verified(self, search: Search, values_f: FloatArray) -> Verified:
        """The corner of the circuit with these values, (parts,) in F."""
        circuit = _with_values(search.bench.circuit, search.parts, values_f)
        none = 0.0 if self.wish.end == "low" else math.inf
        searched = float(search.measured(values_f[:, None]).corner_hz[0])
        exact = self.truth(circuit)
        exact = none if exact is None else exact
        searched = none if math.isnan(searched) else searched
        return Verified(searched, exact, exact * self.ratio(circuit))

    def limit_hz(self, ratio: float) -> float:
        """What the nominal corner has to meet, so that the worst one keeps the margin."""
        low, margin = self.wish.end == "low", self.wish.margin
        return self.wish.target_hz * (1.0 - margin if low else 1.0 + margin) / ratio

    def keeps(self, corner_hz: float) -> bool:
        """Whether a (worst) corner keeps the target with its margin."""
        limit = self.limit_hz(1.0)
        return corner_hz <= limit if self.wish.end == "low" else corner_hz >= limit


def judge_of(
    analysis: Analysis,
    search: Search,
    wish: Wish,
    settings: PathSettings | None,
    asked: Sequence[Asked],
) -> Judge:
    """The judge of a wish; ``asked`` are tolerances given by hand.

    Raises ProblemError when tolerances are asked for and none is known, or one fits no part.
    """
    ratio: Callable[[Circuit], float] = _nominal
    if wish.with_tolerance:
        bench = replace(bench_of(analysis), midband_hz=search.bench.midband_hz)
        ratio = _ratio(_reaching(bench, wish), wish, settings, asked)
    return Judge(wish, _whole_analysis(analysis, wish), ratio)


def _nominal(circuit: Circuit) -> float:
    return 1.0


def _whole_analysis(analysis: Analysis, wish: Wish) -> Callable[[Circuit], float | None]:
    """The corner that a report on a circuit shows, whose midband is its own."""
    path = analysis.topology.path
    output = path.output_node
    if path.output_reference != "0":
        output = f"{output},{path.output_reference}"

    def truth(circuit: Circuit) -> float | None:
        corners = corners_of(circuit, path.source, output, wish.midband_hz)
        return corners.low.exact_hz if wish.end == "low" else corners.high.exact_hz

    return truth


def _ratio(
    bench: Bench, wish: Wish, settings: PathSettings | None, asked: Sequence[Asked]
) -> Callable[[Circuit], float]:
    """Worst corner over nominal corner of a circuit."""
    variety = variety_of(bench.circuit, bench.source, settings, asked)
    figure = f"{wish.end} corner"

    def ratio(circuit: Circuit) -> float:
        own = replace(bench, circuit=circuit)
        alone = ends_alone(own, variety)
        nominal = float(alone.nominal.figure(figure)[0])
        low, high = worst_cases(own, variety, alone, [figure])[figure]
        worst = high[0] if wish.end == "low" else low[0]
        return worst / nominal if np.isfinite(worst) and nominal > 0.0 else 1.0

    return ratio


def _reaching(bench: Bench, wish: Wish) -> Bench:
    """Corners are looked for as far as the target, and a little beyond where they are now."""
    low, high, target = bench.low_hz, bench.high_hz, wish.target_hz
    if wish.end == "low":
        return replace(bench, low_hz=low and min(low, target))
    return replace(bench, high_hz=high and max(high, target))


def _with_values(circuit: Circuit, parts: Sequence[Capacitor], values_f: FloatArray) -> Circuit:
    new = {part.name: float(value) for part, value in zip(parts, values_f, strict=True)}
    elements = tuple(
        replace(e, capacitance_f=new[e.name]) if isinstance(e, Capacitor) and e.name in new else e
        for e in circuit.elements
    )
    return replace(circuit, elements=elements)
