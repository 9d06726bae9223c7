"""The exact response, in each of its forms, where the answer is a formula or an exact fraction."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence

import numpy as np
import pytest
from hypothesis import assume, given, settings

from published.random_networks import RandomNetwork, active_networks, coefficient
from tauledger.bias import solve_bias
from tauledger.circuit import flatten
from tauledger.circuit.elements import IndependentSource
from tauledger.netlist import parse
from tauledger.smallsignal import (
    LinearNetwork,
    Response,
    condensed,
    decomposed,
    device_admittances,
    drive_vector,
    edge_sensitivity,
    gain_sensitivity,
    linear_network,
    natural_frequencies,
    response,
    sense_vector,
)

TWO_PI = 2 * math.pi


def bench(text: str, output: str, negative: str = "0") -> tuple[LinearNetwork, Response]:
    """The network of a netlist, and its response from the one source with AC to the output."""
    solution = solve_bias(flatten(parse("bench\n" + text + "\n.end\n")))
    network = linear_network(solution)
    source = next(
        e for e in solution.equations.circuit.elements if isinstance(e, IndependentSource) and e.ac
    )
    drive, sense = drive_vector(network, source), sense_vector(network, output, negative)
    return network, response(network, drive, sense)


def forms(plain: Response) -> list[Response]:
    """The response as it stands, with fewer unknowns, and as a sum over its modes."""
    return [plain, condensed(plain), decomposed(plain)]


def at(form: Response, frequency_hz: float) -> complex:
    return complex(form.at(np.array([frequency_hz]))[0])


@pytest.mark.parametrize(("ends", "sign"), [("0 out", 1), ("out 0", -1)])
def test_a_current_source_pushes_its_current_out_of_its_second_node(ends: str, sign: int) -> None:
    _, plain = bench(f"I1 {ends} AC 1\nR1 out 0 2k\nC1 out 0 1u", "out")
    corner = 1 / (TWO_PI * 2e3 * 1e-6)
    for form in forms(plain):
        assert at(form, corner) == pytest.approx(sign * 2e3 / (1 + 1j), rel=1e-9)


def test_a_voltage_is_sensed_between_two_nodes_of_a_floating_source() -> None:
    text = "R1 a 0 1k\nR2 b 0 3k\nI1 a b AC 1\nC1 a b 1u"
    for output, negative, ohms in (("a", "0", -1e3), ("b", "0", 3e3), ("a", "b", -4e3)):
        _, plain = bench(text, output, negative)
        for form in forms(plain):
            assert at(form, 1e-3) == pytest.approx(ohms, rel=1e-3)
            assert at(form, 1 / (TWO_PI * 4e3 * 1e-6)) == pytest.approx(ohms / (1 + 1j), rel=1e-9)


def fraction(network: RandomNetwork, per_microsecond: complex) -> complex:
    """H of a random network by the exact fraction of its two polynomials."""
    top, bottom = (
        sum(complex(coefficient(p, k)) * per_microsecond**k for k in range(len(p)))
        for p in (network.numerator(), network.denominator())
    )
    return top / bottom


def apart(roots: Sequence[complex]) -> bool:
    return all(abs(p - q) > 1e-2 * max(abs(p), abs(q)) for p, q in itertools.combinations(roots, 2))


@settings(max_examples=60, deadline=None, derandomize=True)
@given(active_networks())
def test_every_form_of_the_response_is_the_exact_fraction(network: RandomNetwork) -> None:
    denominator = network.denominator()
    scale = max(map(abs, denominator))
    assume(abs(denominator[0]) > 1e-3 * scale)
    _, plain = bench(network.text.split("\n", 1)[1].replace(".end\n", ""), network.output)
    poles = natural_frequencies(plain.conductance, plain.reactance)
    assume(apart(poles.tolist()) and np.abs(poles.real).min(initial=math.inf) > 1.0)
    frequencies = np.geomspace(1e2, 1e7, 7)
    exact = [fraction(network, 1e-6j * TWO_PI * f) for f in frequencies]
    size = max(map(abs, exact))
    assume(size > 1e-3)
    assert decomposed(plain).modes is not None
    for form in forms(plain):
        assert np.abs(form.at(frequencies) - exact).max() <= 1e-7 * size
    for form in forms(plain)[:2]:
        again = natural_frequencies(form.conductance, form.reactance)
        assert again == pytest.approx(poles, rel=1e-6)


def test_what_passes_whatever_the_frequency() -> None:
    """The output hangs on resistors alone: with C1 a short R2 is left of the signal."""
    _, plain = bench("VS in 0 AC 1\nR1 in out 1k\nR2 out a 3k\nC1 a 0 1n", "out")
    for frequency in (10.0, 40e3, 1e9):
        reactance = 1 / (2j * math.pi * frequency * 1e-9)
        exact = (3e3 + reactance) / (4e3 + reactance)
        for form in forms(plain):
            assert at(form, frequency) == pytest.approx(exact, rel=1e-9)
    assert decomposed(plain).modes is not None


@pytest.mark.parametrize(
    ("text", "unknowns"),
    [
        # Only the node of the capacitor is left.
        ("VS in 0 AC 1\nRS in a 1k\nR1 a out 1k\nR2 out 0 2k\nC1 out 0 1n", 1),
        # A capacitor across the source keeps its node, and the source's current with it.
        ("VS in 0 AC 1\nC2 in 0 1n\nRS in a 1k\nR1 a out 1k\nR2 out 0 2k\nC1 out 0 1n", 3),
        # A coil keeps its current alone where resistors hold its ends.
        ("VS in 0 AC 1\nRS in a 2k\nL1 a out 1m\nR2 out 0 2k\nR3 a 0 10k", 1),
    ],
)
def test_unknowns_without_reactance_are_eliminated(text: str, unknowns: int) -> None:
    _, plain = bench(text, "out")
    short = condensed(plain)
    assert short.drive.size == unknowns
    for frequency in (1e3, 2e5):
        assert at(short, frequency) == pytest.approx(at(plain, frequency), rel=1e-12)


def test_a_network_without_reactance_is_the_same_at_every_frequency() -> None:
    network, plain = bench("VS in 0 AC 1\nR1 in out 1k\nR2 out 0 3k", "out")
    for form in forms(plain):
        assert form.at(np.array([1.0, 1e9])) == pytest.approx(0.75, rel=1e-12)
    assert natural_frequencies(network.conductance[0], network.reactance[0]).size == 0


TRANSIT = (
    "VCC vcc 0 9\nVS in 0 AC 1\nC1 in b 1u\nR1 vcc b 100k\nR2 b 0 22k\nRE e 0 470\n"
    "RC vcc c 3.3k\nQ1 c b e qx\n.model qx npn bf=150 tf=0.4n xtf=20 vtf=3 itf=2m"
)
"""With transit time alone the collector's node has no capacitance, yet moves Q1's charge."""


def test_a_charge_that_another_junction_controls_is_not_lost() -> None:
    _, plain = bench(TRANSIT, "c")
    for frequency in (1e3, 1e6, 1e8):
        direct = complex(plain.solve(np.array([2j * math.pi * frequency]))[0])
        for form in forms(plain):
            assert at(form, frequency) == pytest.approx(direct, rel=1e-8)


def test_the_collector_moves_charge_between_base_and_emitter() -> None:
    """Charge on base and emitter per volt at each node, in farads."""
    solution = solve_bias(flatten(parse(f"bench\n{TRANSIT}\n.end\n")))
    network = linear_network(solution)
    charge = network.reactance[0]
    base, emitter, collector = (network.index(node) for node in "bec")
    diffusion, moved = solution.figures[0].capacitance[0, 0, 0], -charge[base, collector]
    # Forward charge rises with the current and with v_bc: TF·(1 + XTF·…·exp(v_bc/(1.44·VTF))).
    assert 0.0 < moved < diffusion
    (known,) = [x for x in solution.figures[0].transcapacitance[0, 0] if x != 0.0]
    assert moved == pytest.approx(known, rel=1e-12)
    assert charge[emitter, collector] == pytest.approx(moved, rel=1e-12)
    # Moving all three nodes alike moves no charge, and none is made.
    row, column = charge[emitter, [base, emitter, collector]], charge[[base, emitter], collector]
    assert row.sum() == pytest.approx(0.0, abs=1e-9 * diffusion)
    assert column.sum() == pytest.approx(0.0, abs=1e-9 * diffusion)


@pytest.mark.parametrize("sections", [2, 3, 4])
def test_equal_poles_are_as_exact_as_others(sections: int) -> None:
    """Behind buffers they share one mode, of which no sum over modes can be made."""
    lines = ["VS n0 0 AC 1"]
    for i in range(sections):
        lines += [f"E{i} m{i} 0 n{i} 0 1", f"R{i} m{i} n{i + 1} 1k", f"C{i} n{i + 1} 0 1n"]
    _, plain = bench("\n".join([*lines, f"RO n{sections} 0 1e15"]), f"n{sections}")
    for ratio in (0.01, 0.3, 1.0, 7.0):
        exact = (1 + 1j * ratio) ** -sections
        for form in forms(plain):
            assert at(form, ratio / (TWO_PI * 1e-6)) == pytest.approx(exact, rel=1e-8)


@pytest.mark.parametrize("rates", [[1e-5, 3e-5], [1e-3, 1.0, 1e3], [1e9, 1e11], [1e-4, 1e10]])
def test_slow_and_fast_poles_are_equally_exact(rates: list[float]) -> None:
    """Each pole is G/C of a pair of its own, so its figure is known to the last digit."""
    roots = natural_frequencies(np.eye(len(rates)), np.diag([1 / rate for rate in rates]))
    spread = math.sqrt(rates[-1] / rates[0])
    assert roots == pytest.approx([-rate for rate in rates], rel=1e-14 * spread + 1e-12)


def test_charge_that_cannot_leave_is_a_pole_at_zero() -> None:
    conductance, reactance = np.diag([0.0, 1e-3]), np.diag([1e-6, 1e-6])
    roots = natural_frequencies(conductance, reactance)
    assert abs(roots[0]) < 1e-9
    assert roots[1] == pytest.approx(-1e3, rel=1e-12)


def test_edge_sensitivity_is_the_derivative_of_the_edge() -> None:
    """In a band so narrow that the gain at midband moves with the parts too."""
    text = "CL out 0 1u\nC1 in out 1u\nRL out 0 10k\nVS s 0 AC 1\nRS s in 1k\nC2 0 out 100n"
    network, plain = bench(text, "out")
    midband_hz = 50.0

    def edge_hz(form: Response, low: float, high: float) -> float:
        """Where |H| crosses half power, by halving the interval."""
        target = form.magnitude(midband_hz) / math.sqrt(2)
        rising = form.magnitude(low) < target
        for _ in range(60):
            middle = math.sqrt(low * high)
            if (form.magnitude(middle) < target) == rising:
                low = middle
            else:
                high = middle
        return low

    for interval in ((1.0, midband_hz), (midband_hz, 5e3)):
        edge = edge_hz(plain, *interval)
        at_midband = gain_sensitivity(plain, network.parts, midband_hz)
        found = edge_sensitivity(plain, network.parts, edge, at_midband)
        for part, value in zip(network.parts, found, strict=True):
            ends = np.zeros(plain.drive.size)
            for index, sign in ((part.positive, 1.0), (part.negative, -1.0)):
                if index >= 0:
                    ends[index] = sign
            step = 1e-5 * part.value[0] * np.outer(ends, ends)
            up, down = (
                edge_hz(
                    Response(
                        plain.conductance, plain.reactance + k * step, plain.drive, plain.sense
                    ),
                    *interval,
                )
                for k in (1, -1)
            )
            assert value == pytest.approx(math.log(up / down) / 2e-5, rel=1e-5)


@pytest.mark.parametrize("ohmic", ["", " rb=200", " rb=200 rc=30 re=2"])
def test_terminal_currents_balance_the_resistors_beside_them(ohmic: str) -> None:
    """Signal current into each terminal of a stage with its emitter at ground."""
    solution = solve_bias(
        flatten(
            parse(
                "stage\nRC c vcc 3.3k\nR1 vcc b 1Meg\nVCC vcc 0 12\nQ1 c b 0 qx\n"
                "RB s b 10k\nVS s 0 DC 0.7 AC 1\n.model qx npn bf=150 vaf=70"
                f"{ohmic}\n.end\n"
            )
        )
    )
    network = linear_network(solution)
    source = next(e for e in solution.equations.circuit.elements if e.name == "VS")
    signal = np.linalg.solve(network.conductance[0], drive_vector(network, source))
    base, collector = signal[network.index("b")], signal[network.index("c")]
    into = device_admittances(solution)["Q1"].current_into
    assert into("collector", signal) == pytest.approx(-collector / 3.3e3, rel=1e-9)
    assert into("base", signal) == pytest.approx((1 - base) / 10e3 - base / 1e6, rel=1e-9)
    assert into("emitter", signal) == pytest.approx(
        -into("base", signal) - into("collector", signal), rel=1e-7
    )
