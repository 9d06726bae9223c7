"""One end of the band as a small model, held to the same network solved anew."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from published.random_networks import RandomNetwork, active_networks
from tauledger.bias import solve_bias
from tauledger.circuit import flatten
from tauledger.circuit.elements import VoltageSource
from tauledger.corners.band import Sweep, find_edge, find_passband, sweep_response
from tauledger.corners.estimates import Roots, best_estimate, model_edge_hz, rigorous_bounds
from tauledger.corners.ports import EndModel, Midband, midband_network
from tauledger.netlist import parse
from tauledger.smallsignal import (
    Response,
    drive_vector,
    linear_network,
    natural_frequencies,
    response,
    sense_vector,
)
from tauledger.smallsignal.network import ReactivePart

TWO_PI = 2 * math.pi
CLOSE = 1e-7


def bench(text: str, output: str = "out") -> tuple[Response, dict[str, ReactivePart]]:
    """The response from the one voltage source to the output, and the parts by name."""
    circuit = flatten(parse(f"bench\n{text}\n.end\n"))
    network = linear_network(solve_bias(circuit))
    source = next(e for e in circuit.elements if isinstance(e, VoltageSource) and e.ac)
    made = response(network, drive_vector(network, source), sense_vector(network, output))
    return made, {part.name: part for part in network.parts}


def random_bench(network: RandomNetwork) -> tuple[Response, list[ReactivePart]]:
    text = network.text.removeprefix("random active network\n").removesuffix(".end\n")
    made, parts = bench(text, network.output)
    return made, list(parts.values())


def solved(made: Response, low: list[ReactivePart], high: list[ReactivePart]) -> Midband:
    """The midband network, where it has a solution far from the verge."""
    try:
        midband = midband_network(made, low, high)
    except np.linalg.LinAlgError:
        assume(False)
        raise
    assume(np.abs(midband.inverse).max() < 1e7)
    return midband


@settings(
    max_examples=100,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.filter_too_much, HealthCheck.too_slow],
)
@given(active_networks(capacitors_in_forest=True), st.integers(0, 15))
def test_switching_one_part_is_the_midband_network_with_that_part_moved(
    network: RandomNetwork, shorts: int
) -> None:
    made, parts = random_bench(network)
    low = [part for i, part in enumerate(parts) if shorts >> i & 1]
    high = [part for part in parts if part not in low]
    midband = solved(made, low, high)
    for model in (midband.low, midband.high):
        for k, part in enumerate(model.parts):
            at, value = float(model.tau_s[k]), float(part.value[0])
            if not 1e-12 < abs(at / value) < 1e12:
                continue
            fewer = [p for p in low if p is not part]
            if model.low:
                moved = solved(made, fewer, [*high, part])
                # The resistance it sees is the same from either state.
                seen = float(moved.high.resistance_ohm[-1])
                assert model.resistance_ohm[k] == pytest.approx(seen, rel=CLOSE)
                assert at == pytest.approx(seen * value, rel=CLOSE)
            else:
                moved = solved(made, [*low, part], [p for p in high if p is not part])
            size = max(abs(midband.gain), abs(moved.gain), 1e-3)
            assert model.switched_gain()[k] == pytest.approx(moved.gain, abs=CLOSE * size)
            if abs(midband.gain) < 1e-3 or abs(moved.gain) < 1e-3:
                continue
            # One pole and one zero lie as far apart as the two gains.
            pole, zero = float(model.keep([k]).poles()[0].real), float(model.own_zero()[k])
            ratio = midband.gain / moved.gain
            assert zero / pole == pytest.approx(1 / ratio if model.low else ratio, rel=1e-5)


COILS = """VS in 0 AC 1
RS in a 1k
LP a 0 1
LS a b 1u
RB b out 500
CO out 0 10p
C1 out m 10u
RM m 0 3k
RL out 0 2k"""


def test_coils_and_capacitors_at_both_ends() -> None:
    """LP is open and C1 a short at midband, LS a short and CO open."""
    made, parts = bench(COILS)
    midband = midband_network(made, [parts["LP"], parts["C1"]], [parts["LS"], parts["CO"]])
    load = 1 / (1 / 2e3 + 1 / 3e3)
    assert midband.gain == pytest.approx(load / (1.5e3 + load))
    assert midband.low.resistance_ohm == pytest.approx(
        [1 / (1 / 1e3 + 1 / (500 + load)), 3e3 + 1 / (1 / 2e3 + 1 / 1.5e3)]
    )
    assert midband.high.resistance_ohm == pytest.approx([1.5e3 + load, 1 / (1 / load + 1 / 1.5e3)])
    assert midband.low.tau_s == pytest.approx(
        [1.0 / midband.low.resistance_ohm[0], 10e-6 * midband.low.resistance_ohm[1]]
    )
    assert midband.high.tau_s == pytest.approx(
        [1e-6 / midband.high.resistance_ohm[0], 10e-12 * midband.high.resistance_ohm[1]]
    )
    # LP as a short takes the signal away; LS open, or CO a short, too. C1 open leaves RL.
    assert midband.low.switched_gain() == pytest.approx([0.0, 2 / 3.5], abs=1e-12)
    assert midband.high.switched_gain() == pytest.approx([0.0, 0.0], abs=1e-12)
    assert -midband.low.own_zero() == pytest.approx([0.0, 1 / (10e-6 * 3e3)], rel=1e-9, abs=1e-9)
    both = natural_frequencies(made.conductance, made.reactance)
    ends = np.concatenate([midband.low.poles(), midband.high.poles()])
    assert ends == pytest.approx(both, rel=1e-3)
    assert sum(1 / midband.low.tau_s) == pytest.approx(-sum(midband.low.poles().real), rel=1e-9)
    assert sum(midband.high.tau_s) == pytest.approx(-sum((1 / midband.high.poles()).real), rel=1e-9)


def test_gain_of_the_ends_model_is_the_exact_one_near_each_corner() -> None:
    """Poles, zeros and log-gains of both ends against the whole network, far apart as they are."""
    made, parts = bench(COILS)
    midband = midband_network(made, [parts["LP"], parts["C1"]], [parts["LS"], parts["CO"]])
    for model, frequencies in ((midband.low, (1.0, 5.0, 40.0, 300.0)), (midband.high, (3e6, 5e7))):
        roots = Roots.of(model)
        for frequency in frequencies:
            omega = TWO_PI * frequency
            exact = math.log(made.magnitude(frequency) / abs(midband.gain))
            assert roots.log_gain(omega) == pytest.approx(exact, abs=1e-3)
            assert roots.log_gains(np.array([omega]))[0] == pytest.approx(
                roots.log_gain(omega), abs=1e-9
            )


def two_sections(low: bool, first: float, second: float) -> EndModel:
    """Two RC sections of 1 kΩ behind a buffer each: poles at the rates given, in rad/s."""
    sections = "VS in 0 AC 1\n"
    for i, (node, leaving, rate) in enumerate((("in", "a", first), ("b", "out", second))):
        capacitor, resistor = f"{node} {leaving}", f"{leaving} 0"
        if not low:
            capacitor, resistor = resistor, capacitor
        sections += f"C{i} {capacitor} {1e-3 / rate!r}\nR{i} {resistor} 1k\n"
    made, parts = bench(sections + "E1 b 0 a 0 1")
    chosen = list(parts.values())
    midband = midband_network(made, chosen if low else [], [] if low else chosen)
    return midband.low if low else midband.high


@pytest.mark.parametrize("low", [True, False])
@pytest.mark.parametrize("ratio", [1.0, 2.0, 7.0, 40.0, 3e3])
def test_estimates_of_two_real_poles(low: bool, ratio: float) -> None:
    """−3 dB of 1/((1 + x)(1 + r x)), x = (ω/p)²: a quadratic; low end mirrored (ω → 1/ω)."""
    slow = 1e3
    model = two_sections(low, slow, slow * ratio)
    a, b = (1.0, ratio**2) if low else (1.0, ratio**-2)
    x = (-(a + b) + math.sqrt((a + b) ** 2 + 4 * a * b)) / (2 * a * b)
    exact = slow / math.sqrt(x) if low else slow * math.sqrt(x)
    rates = -model.poles().real
    summed = rates.sum() if low else 1 / (1 / rates).sum()
    roots = Roots.of(model)
    found = best_estimate(model, roots, summed / TWO_PI)
    assert found.method == "second order with zeros"
    assert found.frequency_hz == pytest.approx(exact / TWO_PI, rel=1e-9)
    assert model_edge_hz(roots, summed / TWO_PI) == pytest.approx(exact / TWO_PI, rel=1e-9)
    bounds = rigorous_bounds(model, roots, summed / TWO_PI)
    squares = math.sqrt((rates**2).sum()) if low else 1 / math.sqrt((1 / rates**2).sum())
    wide = math.sqrt(math.log(2))
    limits = (
        (squares, min(summed, squares / wide)) if low else (max(summed, squares * wide), squares)
    )
    assert (bounds.lowest_hz, bounds.highest_hz) == pytest.approx(
        tuple(limit / TWO_PI for limit in limits)
    )
    assert bounds.lowest_hz <= found.frequency_hz * (1 + 1e-9)
    assert found.frequency_hz <= bounds.highest_hz * (1 + 1e-9)


@pytest.mark.parametrize("low", [True, False])
@pytest.mark.parametrize(("first", "second"), [(20e3, 30e3), (3e3, 50e3), (4e3, 5e3)])
def test_two_poles_and_two_zeros_are_still_exact(low: bool, first: float, second: float) -> None:
    """Each section falls to a shelf, ``first`` and ``second`` Ω beside or below its capacitor."""
    text = "VS in 0 AC 1\nE1 b 0 a 0 1\n"
    for i, (node, leaving, ohms) in enumerate((("in", "a", first), ("b", "out", second))):
        if low:
            text += f"C{i} {node} {leaving} 1u\nP{i} {node} {leaving} {ohms}\nR{i} {leaving} 0 1k\n"
        else:
            text += f"R{i} {node} {leaving} 1k\nC{i} {leaving} m{i} 1u\nP{i} m{i} 0 {1e6 / ohms}\n"
    made, parts = bench(text.replace("\nP", "\nRP"))
    midband = midband_network(made, *([*parts.values()], [])[:: 1 if low else -1])
    model = midband.low if low else midband.high
    roots = Roots.of(model)
    assert len(roots.zeros) == 2
    summed = 1 / model.tau_s if low else model.tau_s
    near = (summed.sum() if low else 1 / summed.sum()) / TWO_PI
    found = best_estimate(model, roots, near)
    assert found.method == "second order with zeros"
    reached = made.magnitude(found.frequency_hz) / abs(midband.gain)
    assert reached == pytest.approx(1 / math.sqrt(2), rel=1e-9)
    # Real zeros leave the sum as the bound of one side.
    bounds = rigorous_bounds(model, roots, near)
    assert (bounds.lowest_hz, bounds.highest_hz) == ((None, near) if low else (near, None))
    assert (near >= found.frequency_hz) == low


@pytest.mark.parametrize("low", [True, False])
def test_a_pole_that_grows_has_no_bounds(low: bool) -> None:
    model = two_sections(low, 1e3, 5e3)
    roots = Roots.of(model)
    assert rigorous_bounds(model, Roots(-roots.poles, roots.zeros, low), 1.0).lowest_hz is None
    turned = roots.poles * np.exp([0.1j, -0.1j])
    assert rigorous_bounds(model, Roots(turned, roots.zeros, low), 1.0).highest_hz is None


# the passband ---------------------------------------------------------------------------------


def swept(*corners: tuple[float, float]) -> Sweep:
    """Hz and dB of the corners of a response, straight between them on logarithmic paper."""
    frequency = np.logspace(0, 9, 9 * 12 + 1)
    corner, level = zip(*((math.log10(f), db) for f, db in corners), strict=True)
    db = np.interp(np.log10(frequency), corner, level)
    return Sweep(frequency, (10 ** (db / 20)).astype(complex))


def test_the_middle_of_a_passband() -> None:
    """Geometric mean of its two ends; three decades inside where it runs off the sweep."""
    step = 10 ** (1 / 12)
    band = find_passband(swept((1, -60), (1e3, 0), (1e6, 0), (1e9, -60)))
    assert band.flat
    assert band.midband_hz == pytest.approx(math.sqrt(1e3 * 1e6), rel=step - 1)
    to_dc = find_passband(swept((1, 0), (1e6, 0), (1e9, -60)))
    assert to_dc.midband_hz == pytest.approx(1e3, rel=0.5)
    up = find_passband(swept((1, -60), (1e3, 0), (1e9, 0)))
    assert up.midband_hz == pytest.approx(1e6, rel=0.5)
    everywhere = find_passband(swept((1, 0), (1e9, 0)))
    assert everywhere.midband_hz == pytest.approx(math.sqrt(1e9), rel=1e-9)


def test_the_highest_flat_stretch_is_the_passband() -> None:
    shelf = [(1, 0), (1e3, 0), (1e4, 20), (1e6, 20), (1e8, -20), (1e9, -20)]
    assert 1e4 < find_passband(swept(*shelf)).midband_hz < 1e6
    # A resonance is higher still, but shorter than a decade.
    peak = [*shelf[:4], (1.2e6, 34), (1.5e6, 34), (1.6e6, 0), (1e9, -100)]
    found = find_passband(swept(*peak))
    assert found.flat
    assert 1e4 < found.midband_hz < 1e6


def test_a_stretch_far_below_the_maximum_is_a_skirt() -> None:
    skirt = [(1, -35), (1e4, -35), (1e5, 0), (1e6, -70), (1e9, -200)]
    found = find_passband(swept(*skirt))
    assert not found.flat
    assert found.midband_hz == pytest.approx(1e5, rel=0.25)
    assert find_passband(swept((1, -25), (1e4, -25), *skirt[2:])).flat


@pytest.mark.parametrize(("decades", "flat"), [(0.75, False), (1.3, True)])
def test_a_passband_is_a_decade_long(decades: float, flat: bool) -> None:
    start, stop = 1e4, 1e4 * 10**decades
    hill = [(1, -160), (start, 0), (stop, 0), (1e9, -40 * (9 - math.log10(stop)))]
    assert find_passband(swept(*hill)).flat is flat


def test_the_edges_of_a_band() -> None:
    made, _ = bench("VS in 0 AC 1\nC1 in a 1u\nR1 a 0 1k\nE1 b 0 a 0 1\nR2 b out 1k\nC2 out 0 1n")
    natural = natural_frequencies(made.conductance, made.reactance)
    sweep = sweep_response(made, natural)
    midband = find_passband(sweep).midband_hz
    low, high = (find_edge(made, sweep, midband, upward=up) for up in (False, True))
    target = made.magnitude(midband) / math.sqrt(2)
    for edge, pole in ((low, 1e3), (high, 1e6)):
        assert edge == pytest.approx(pole / TWO_PI, rel=3e-3)
        assert made.magnitude(edge) == pytest.approx(target, rel=1e-9)
    assert sweep.frequency_hz[0] <= 1e3 / TWO_PI / 99
    assert sweep.frequency_hz[-1] >= 1e6 / TWO_PI * 9.9


def test_a_gain_that_does_not_fall_has_no_edge() -> None:
    made, _ = bench("VS in 0 AC 1\nR1 in out 1k\nR2 out m 1k\nC2 m 0 1n\nR3 m 0 1k\nRL out 0 9k")
    sweep = sweep_response(made, natural_frequencies(made.conductance, made.reactance))
    midband = find_passband(sweep).midband_hz
    assert find_edge(made, sweep, midband, upward=False) is None
    assert find_edge(made, sweep, midband, upward=True) is None
