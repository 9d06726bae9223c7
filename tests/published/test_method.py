"""The identities the engine rests on, on random active RC networks and on the published stages.

Exact coefficients come from :mod:`published.random_networks`; resistances, time constants and
gains with some capacitors shorted come from the engine.

References
----------
B1  Σ R_i⁰ C_i is the s coefficient of the denominator: Gray & Searle (1969), as cited by Franco
    ch. 6 [P]; Hajimiri, IEEE TCAS-I 57(6), 2010 [P, abstract].
B2  The twin at the other end of the polynomial: derived, no source.
B3  b2 = Σ τ_i⁰ τ_jⁱ, order free: Cochrun & Grabel, IEEE Trans. Circuit Theory CT-20, 1973
    [P, via EDN article 4417862].
B4  Numerator by transfer constants: Hajimiri 2010 [P, abstract and course notes].
B8  Bounds of the exact corner where all poles are real: derived, no source.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from functools import cached_property

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from published.example import HIGH, Example
from published.random_networks import RandomNetwork, active_networks, coefficient
from published.test_published import EXAMPLES, by_id, review_path
from tauledger.analysis import analyze
from tauledger.bias import solve_bias
from tauledger.circuit import flatten
from tauledger.circuit.elements import VoltageSource
from tauledger.corners.ports import Midband, midband_network
from tauledger.netlist import parse
from tauledger.review.rows import CornerRow, PathRow
from tauledger.smallsignal import drive_vector, linear_network, response, sense_vector

MICROSECOND = 1e-6
CLOSE = 1e-7
MIDBAND = 1e-5
"""Relative: exact corners are taken from the gain at midband, not at infinity or at DC."""
ROOT_LN_2 = math.sqrt(math.log(2.0))

thorough = settings(
    max_examples=200,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.filter_too_much, HealthCheck.too_slow],
)


class Bench:
    """A random network on the engine's bench: any capacitors shorted, the rest open."""

    def __init__(self, network: RandomNetwork) -> None:
        circuit = flatten(parse(network.text))
        linear = linear_network(solve_bias(circuit))
        source = next(e for e in circuit.elements if isinstance(e, VoltageSource))
        self.response = response(
            linear, drive_vector(linear, source), sense_vector(linear, network.output)
        )
        self.parts = linear.parts
        self.count = len(linear.parts)

    def midband(self, *shorted: int) -> Midband:
        low = [self.parts[i] for i in shorted]
        high = [part for i, part in enumerate(self.parts) if i not in shorted]
        return midband_network(self.response, low, high)

    def tau(self, i: int, *shorted: int) -> float:
        """µs: time constant of capacitor i, ``shorted`` shorted and the rest open."""
        model = self.midband(*shorted).high
        position = [part.name for part in model.parts].index(self.parts[i].name)
        return float(model.tau_s[position]) / MICROSECOND

    def gain(self, *shorted: int) -> float:
        return self.midband(*shorted).gain

    @cached_property
    def first(self) -> list[float]:
        """µs: τ_i⁰ of every capacitor."""
        return [self.tau(i) for i in range(self.count)]

    def shorted_rate(self, i: int, *opened: int) -> float:
        """1/µs: 1/(R C) of capacitor i, ``opened`` open and the rest shorted."""
        shorted = [k for k in range(self.count) if k not in opened]
        model = self.midband(*shorted).low
        return MICROSECOND / float(model.tau_s[shorted.index(i)])


def well_posed(network: RandomNetwork) -> tuple[float, ...]:
    """Denominator coefficients over b0; networks on the verge of having no DC solution are out."""
    polynomial = network.denominator()
    scale = math.prod(
        sum(1.0 / kilohm for pair, kilohm in network.resistors if node in pair)
        for node in network.nodes
    )
    assume(abs(polynomial[0]) > 1e-3 * scale)
    return tuple(float(coefficient(polynomial, k) / polynomial[0]) for k in range(5))


def numerator(network: RandomNetwork) -> tuple[float, ...]:
    """Numerator coefficients over b0."""
    constant = network.denominator()[0]
    return tuple(float(coefficient(network.numerator(), k) / constant) for k in range(3))


def agrees(terms: Sequence[float], exact: float) -> bool:
    """A sum that may cancel is as exact as its largest term."""
    return abs(math.fsum(terms) - exact) <= CLOSE * max(map(abs, (*terms, exact)), default=0.0)


@thorough
@given(active_networks())
def test_open_circuit_time_constants_add_up_to_the_first_coefficient(
    network: RandomNetwork,
) -> None:
    b = well_posed(network)
    assert agrees(Bench(network).first, b[1])


@thorough
@given(active_networks())
def test_second_coefficient_and_free_order(network: RandomNetwork) -> None:
    b = well_posed(network)
    bench = Bench(network)
    terms = []
    for i, j in itertools.combinations(range(bench.count), 2):
        if not regular(bench, i) or not regular(bench, j):
            assume(False)
        terms.append(bench.first[i] * bench.tau(j, i))
        swapped = bench.first[j] * bench.tau(i, j)
        assert swapped == pytest.approx(terms[-1], rel=CLOSE, abs=CLOSE * largest_square(bench))
    assert abs(math.fsum(terms) - b[2]) <= CLOSE * max(largest_square(bench), abs(b[2]))


@thorough
@given(active_networks())
def test_numerator_by_transfer_constants(network: RandomNetwork) -> None:
    well_posed(network)
    bench = Bench(network)
    assume(all(regular(bench, i) for i in range(bench.count)))
    a = numerator(network)
    assert bench.gain() == pytest.approx(a[0], rel=CLOSE, abs=CLOSE)
    first = [bench.first[i] * bench.gain(i) for i in range(bench.count)]
    assert abs(math.fsum(first) - a[1]) <= CLOSE * max(map(abs, (*first, *bench.first)))
    second = []
    for i, j in itertools.combinations(range(bench.count), 2):
        pair = bench.first[i] * bench.tau(j, i)
        # A pair that closes a loop has no second time constant, and no gain when shorted.
        if abs(pair) > 1e-9 * largest_square(bench):
            second.append(pair * bench.gain(i, j))
    assert abs(math.fsum(second) - a[2]) <= CLOSE * max(
        largest_square(bench), *map(abs, second), abs(a[2])
    )


@thorough
@given(active_networks(capacitors_in_forest=True))
def test_short_circuit_time_constants_add_up_to_the_top_coefficients(
    network: RandomNetwork,
) -> None:
    well_posed(network)
    exact = network.denominator()
    n = len(network.capacitors)
    top = coefficient(exact, n)
    biggest = max(abs(x) for x in exact)
    # Where an active network has (almost) no pole of that order the ratio means nothing.
    assume(abs(top) > 1e-6 * biggest)
    bench = Bench(network)
    rates = [bench.shorted_rate(i) for i in range(n)]
    assert agrees(rates, float(coefficient(exact, n - 1) / top))
    model = bench.midband(*range(n)).low
    poles = model.poles() * MICROSECOND
    assert agrees([-complex(p).real for p in poles], math.fsum(rates))
    if n < 2:
        return
    products = []
    for i, j in itertools.combinations(range(n), 2):
        products.append(rates[i] * shorted_rate_or_skip(bench, j, i))
    assert abs(math.fsum(products) - float(coefficient(exact, n - 2) / top)) <= CLOSE * max(
        *map(abs, products), max(map(abs, rates)) ** 2
    )


@thorough
@given(active_networks(least_capacitors=1))
def test_poles_and_zeros_of_the_high_end_are_those_of_the_exact_fraction(
    network: RandomNetwork,
) -> None:
    b, a = well_posed(network), numerator(network)
    assume(abs(a[0]) > 1e-3)
    model = Bench(network).midband().high
    slowest = 1.0 / (abs(model.poles()[0]) * MICROSECOND)
    for roots, first, second in (
        (model.poles(), b[1], b[2]),
        (model.zeros(), a[1] / a[0], a[2] / a[0]),
    ):
        taus = [-1.0 / (complex(root) * MICROSECOND) for root in roots]
        size = max(slowest, *map(abs, taus)) if taus else slowest
        pairs = [p * q for p, q in itertools.combinations(taus, 2)]
        assert abs(sum(taus) - first) <= 1e-6 * size
        assert abs(sum(pairs) - second) <= 1e-6 * size**2


def regular(bench: Bench, i: int) -> bool:
    """Shorting the capacitor leaves a network with a solution far from the verge."""
    return abs(bench.first[i]) > 1e-6 * max(map(abs, bench.first))


def largest_square(bench: Bench) -> float:
    return max(map(abs, bench.first)) ** 2


def shorted_rate_or_skip(bench: Bench, i: int, opened: int) -> float:
    try:
        return bench.shorted_rate(i, opened)
    except np.linalg.LinAlgError:
        assume(False)
        raise


sections = st.lists(
    st.tuples(st.integers(1, 50), st.integers(1, 50), st.booleans()), min_size=1, max_size=4
)


def ladder(values: Sequence[tuple[int, int, bool]], *, low: bool) -> PathRow:
    """RC sections one after the other, some behind a buffering transconductance: real poles.

    For the high end series R and shunt C (no finite zeros), for the low end the reverse (all
    zeros at DC).
    """
    lines, node = ["ladder", "Vs in 0 AC 1"], "in"
    for i, (kilohm, nanofarad, buffered) in enumerate(values):
        if buffered:
            lines += [f"G{i} b{i} 0 {node} 0 2m", f"RB{i} b{i} 0 1k"]
            node = f"b{i}"
        leaving = "out" if i == len(values) - 1 else f"n{i}"
        series, shunt = (f"C{i}", f"R{i}") if low else (f"R{i}", f"C{i}")
        size = {f"C{i}": f"{nanofarad}n", f"R{i}": f"{kilohm}k"}
        lines += [f"{series} {node} {leaving} {size[series]}"]
        lines += [f"{shunt} {leaving} 0 {size[shunt]}"]
        node = leaving
    text = "\n".join([*lines, ".end", ""])
    return analyze(parse(text), input="Vs", output="out").review.paths[0]


def exact_and_estimate(corner: CornerRow | None) -> tuple[float, float]:
    assert corner is not None
    assert corner.exact_hz is not None
    assert corner.estimate_hz is not None
    return corner.exact_hz, corner.estimate_hz


@thorough
@given(sections)
def test_bounds_of_the_high_corner(values: list[tuple[int, int, bool]]) -> None:
    high = ladder(values, low=False).high
    exact, estimate = exact_and_estimate(high)
    assert high is not None
    assert len(high.poles_hz) == len(values)
    root = 1.0 / math.sqrt(sum(1.0 / abs(p) ** 2 for p in high.poles_hz))
    assert estimate <= exact * (1 + MIDBAND)
    assert ROOT_LN_2 * root * (1 - MIDBAND) <= exact <= root * (1 + MIDBAND)


@thorough
@given(sections)
def test_bounds_of_the_low_corner(values: list[tuple[int, int, bool]]) -> None:
    low = ladder(values, low=True).low
    exact, estimate = exact_and_estimate(low)
    assert low is not None
    assert len(low.poles_hz) == len(values)
    root = math.sqrt(sum(abs(p) ** 2 for p in low.poles_hz))
    assert exact <= estimate * (1 + MIDBAND)
    assert root * (1 - MIDBAND) <= exact <= root / ROOT_LN_2 * (1 + MIDBAND)


@thorough
@given(sections)
def test_ladders_have_no_finite_zero(values: list[tuple[int, int, bool]]) -> None:
    """Many zeros at one place split by rounding; none of the pieces is a zero to be shown."""
    low, high = ladder(values, low=True).low, ladder(values, low=False).high
    assert low is not None
    assert high is not None
    assert high.zeros_hz == ()
    assert len(low.zeros_hz) == len(values)
    assert max(map(abs, low.zeros_hz)) < 1e-9 * min(map(abs, low.poles_hz))


@pytest.mark.parametrize("example", by_id(EXAMPLES))
def test_the_sum_is_on_the_safe_side_where_all_roots_are_real(example: Example) -> None:
    """Real finite zeros keep wH ≥ 1/b1 and wL ≤ d1 (B8)."""
    path = review_path(example)
    for corner in filter(None, (path.low, path.high)):
        if corner.exact_hz is None or corner.estimate_hz is None or not roots_are_real(corner):
            continue
        if corner.end == HIGH:
            assert corner.estimate_hz <= corner.exact_hz * (1 + MIDBAND)
        else:
            assert corner.estimate_hz >= corner.exact_hz * (1 - MIDBAND)


def roots_are_real(corner: CornerRow) -> bool:
    roots = (*corner.poles_hz, *corner.zeros_hz)
    return all(abs(root.imag) <= 1e-6 * abs(root) for root in roots)
