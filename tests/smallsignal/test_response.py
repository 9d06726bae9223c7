"""Response, natural frequencies and sensitivities against direct evaluation."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest

from tauledger.bias import solve_bias
from tauledger.circuit import flatten
from tauledger.circuit.elements import VoltageSource
from tauledger.netlist import parse
from tauledger.smallsignal import (
    decomposed,
    device_admittances,
    drive_vector,
    gain_sensitivity,
    linear_network,
    natural_frequencies,
    response,
    sense_vector,
)

TEXT = """one stage with a coil and a coupled pair
VCC vcc 0 9
VS in 0 AC 1
C1 in b 1u
R1 vcc b 100k
R2 b 0 22k
RE e 0 470
CE e 0 47u
L1 vcc c 10m
RC vcc c 3.3k
Q1 c b e qx
.model qx npn bf=150 vaf=70 rb=100 cje=12p cjc=5p tf=0.4n xtf=2 vtf=3 itf=20m
.end
"""


def test_gain_sensitivity_is_the_derivative() -> None:
    solution = solve_bias(flatten(parse(TEXT)))
    network = linear_network(solution)
    source = next(e for e in solution.equations.circuit.elements if e.name == "VS")
    drive, sense = drive_vector(network, source), sense_vector(network, "c")
    base = response(network, drive, sense)
    for frequency in (30.0, 5e4, 3e6):
        found = gain_sensitivity(base, network.parts, frequency)
        for part, value in zip(network.parts, found, strict=True):
            step = np.zeros_like(base.reactance)
            if part.is_inductor:
                step[part.branch, part.branch] = -part.value[0]
            else:
                picks = np.zeros(step.shape[0])
                for index, sign in ((part.positive, 1.0), (part.negative, -1.0)):
                    if index >= 0:
                        picks[index] += sign
                step = part.value[0] * np.outer(picks, picks)
            h = 1e-5
            up, down = (
                dataclasses.replace(base, reactance=base.reactance + sign * h * step)
                for sign in (1.0, -1.0)
            )
            difference = math.log(up.magnitude(frequency) / down.magnitude(frequency)) / (2 * h)
            assert value == pytest.approx(difference, rel=1e-4, abs=1e-7)


def test_natural_frequencies_over_twelve_decades() -> None:
    text = """independent poles
V1 a 0 AC 1
R1 a x1 1k
C1 x1 0 1
R2 a x2 1k
C2 x2 0 1u
R3 a x3 1k
C3 x3 0 1p
L4 a x4 1m
R4 x4 0 1k
.end
"""
    network = linear_network(solve_bias(flatten(parse(text))))
    roots = natural_frequencies(network.conductance[0], network.reactance[0])
    assert roots.real == pytest.approx([-1e-3, -1e3, -1e6, -1e9], rel=1e-6)
    assert np.abs(roots.imag).max() < 1e-6 * np.abs(roots).min()


def test_device_terminal_currents_add_up_and_match_gm() -> None:
    solution = solve_bias(flatten(parse(TEXT)))
    admittance = device_admittances(solution)["Q1"]
    assert np.abs(admittance.matrix.sum(axis=0)).max() < 1e-12
    values = solution.point.devices["Q1"].values
    network = linear_network(solution)
    unknowns = np.zeros(len(network.nodes) + len(network.branches))
    unknowns[network.index("b")] = unknowns[network.index("Q1.base_internal")] = 1.0
    current = admittance.current_into("collector", unknowns)
    assert current == pytest.approx(values["gm"][0] - 1 / values["r_mu"][0], rel=1e-9)


@pytest.mark.parametrize(("ohm", "farad"), [("1k", "1u"), ("3.3k", "47n"), ("47k", "470n")])
def test_skirts_of_equal_time_constants_are_those_of_direct_solutions(ohm: str, farad: str) -> None:
    """Their eigenvectors nearly coincide, and the sum over the modes is 0.3 dB off at -115 dB,
    although it agrees to a ten-millionth of the largest |H| everywhere.
    """
    high_passes = f"C1 in a {farad}\nR1 a 0 {ohm}\nC2 a b {farad}\nR2 b 0 {ohm}\nE1 c 0 b 0 1\n"
    band_pass = f"C3 c d {farad}\nR3 d 0 {ohm}\nR4 d out {ohm}\nC4 out 0 {farad}\n"
    circuit = flatten(parse(f"equal\nV1 in 0 AC 1\n{high_passes}{band_pass}.end\n"))
    network = linear_network(solve_bias(circuit))
    (source,) = [e for e in circuit.elements if isinstance(e, VoltageSource)]
    exact = response(network, drive_vector(network, source), sense_vector(network, "out"))
    frequency = np.geomspace(1e-2, 1e6, 300)
    direct = np.abs(exact.at(frequency))
    shown = direct > 1e-6 * direct.max()
    level_db = 20.0 * np.log10(np.abs(decomposed(exact).at(frequency)[shown]) / direct[shown])
    assert np.abs(level_db).max() < 0.01
