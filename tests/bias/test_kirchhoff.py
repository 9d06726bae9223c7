"""Random biased circuits converge and satisfy Kirchhoff's current law at every node."""

from __future__ import annotations

import numpy as np
from hypothesis import example, given, settings
from hypothesis import strategies as st

from tauledger.bias import BiasSolution, solve_bias
from tauledger.bias.newton import linearise
from tauledger.circuit import flatten
from tauledger.netlist import parse

MODELS = """
.model qn npn is=3e-15 bf=180 br=3 vaf=80 var=12 ikf=0.1 ise=1e-14 ne=1.6 rb=60 rc=2 re=0.4
.model qp pnp is=2e-15 bf=120 br=3 vaf=50 ikf=0.05 rb=80 rc=3
.model jn njf vto=-2.5 beta=1m lambda=8m rd=20 rs=20
.model jp pjf vto=-2.0 beta=0.7m lambda=10m
.model mn nmos vto=1.1 kp=80u gamma=0.4 phi=0.7 lambda=0.02 rd=5 rs=5
.model mp pmos vto=-1.0 kp=30u gamma=0.3 phi=0.65 lambda=0.03
.model dx d is=3n n=1.8 rs=0.6 ikf=50m
.model dz d is=1f bv=6.2 ibv=1m rs=5
"""
DEVICES = ("c b e qn", "c b e qp", "c b e jn", "c b e jp", "c b e e mn", "c b e 0 mn", "c b e e mp")

resistance = st.floats(1.0, 7.0).map(lambda exponent: round(10.0**exponent, 3))
EXTRAS = (
    "",
    "D{i} b{i} e{i} dx",
    "D{i} 0 b{i} dz",
    "D{i} c{i} b{i} dx",
    "G{i} b{i} vcc e{i} 0 20u",
    "E{i} x{i} 0 c{i} e{i} 0.3\nRY{i} x{i} b{i} 47k",
    "F{i} c{i} 0 VCC 0.01",
    "B{i} c{i} 0 I=1m*tanh(v(b{i}))",
)
"""Added to a stage: diodes and controlled sources. Feedback is negative or of a gain below one:
with more there may be no solution at all."""
stages = st.lists(
    st.tuples(
        st.sampled_from(DEVICES),
        resistance,
        resistance,
        resistance,
        resistance,
        st.sampled_from(EXTRAS),
    ),
    min_size=1,
    max_size=3,
)
Stage = tuple[str, float, float, float, float, str]


def netlist(circuit: list[Stage], supply: float) -> str:
    """Stages with a bias divider each, the base of one tied to the collector before it."""
    lines = ["random stages", f"VCC vcc 0 {supply}", MODELS]
    for i, (device, upper, lower, load, degeneration, extra) in enumerate(circuit):
        letter = {"q": "Q", "j": "J", "m": "M"}[device.split()[-1][0]]
        nodes = " ".join(word + str(i) if word in "cbe" else word for word in device.split())
        lines += [
            f"{letter}{i} {nodes}" + (" W=100u L=2u" if letter == "M" else ""),
            f"RU{i} vcc b{i} {upper}",
            f"RL{i} b{i} 0 {lower}",
            f"RC{i} vcc c{i} {load}",
            f"RE{i} e{i} 0 {degeneration}",
            extra.format(i=i),
        ]
        if i:
            lines.append(f"RX{i} c{i - 1} b{i} {upper}")
    return "\n".join([*lines, ".end"])


def residual(solution: BiasSolution) -> float:
    """Largest sum of currents at a node over the largest current there.

    At least 1 pA counts, and what 1e-9 of makes the rounding of the largest current anywhere: a
    cut-off branch beside one with 100 A carries nothing but that.
    """
    equations, x = solution.equations, solution.point
    unknowns = np.concatenate([x.voltages, x.currents], axis=1)
    matrix, right = linearise(equations, unknowns, solution.state.branch_voltages)
    size, nodes = equations.size, len(equations.nodes)
    terms = matrix[0, :nodes, :size] * unknowns[0]
    error = np.abs(terms.sum(axis=1) - right[0, :nodes])
    rounding = 4.0 * np.finfo(float).eps * np.abs(terms).max()
    scale = np.abs(terms).max(axis=1) + np.abs(right[0, :nodes]) + 1e-12 + 1e9 * rounding
    return float((error / scale).max())


@settings(max_examples=500, deadline=None)
@given(stages, st.sampled_from([-15.0, -5.0, 3.3, 9.0, 24.0, 48.0]))
@example(
    # The drain junction of M0 conducts 24 pA beside 40 mA: a step taken from limited voltages
    # left the unknowns where they were, and passed for the last one.
    [
        ("c b e e mn", 137.869, 874054.935, 39182.747, 32.287, ""),
        ("c b e e mp", 1281.226, 11.089, 987602.488, 126.461, EXTRAS[4]),
    ],
    -5.0,
)
def test_random_circuits_satisfy_kirchhoff(circuit: list[Stage], supply: float) -> None:
    solution = solve_bias(flatten(parse(netlist(circuit, supply))))
    assert solution.point.failed_boards == 0
    assert residual(solution) < 1e-9
