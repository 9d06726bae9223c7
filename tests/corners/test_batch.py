"""Many boards at once have the corners that each has alone."""

from __future__ import annotations

import numpy as np
import pytest

from tauledger.bias import solve_bias
from tauledger.circuit import flatten
from tauledger.circuit.elements import IndependentSource
from tauledger.corners import Corners, find_corners
from tauledger.corners.batch import BoardCorners, board_corners
from tauledger.netlist import parse
from tauledger.smallsignal import drive_vector, linear_network, response, sense_vector

STAGE = """one stage
VCC vcc 0 12
VIN in 0 AC 1
RS in a 1k
C1 a b 1u
R1 vcc b 82k
R2 b 0 18k
RC vcc c 4.7k
RE e 0 1k
CE e 0 47u
Q1 c b e qn
C2 c out 470n
RL out 0 22k
.model qn npn is=6f bf=220 vaf=75 rb=90 rc=1.5 re=0.4 cje=14p cjc=5p tf=0.45n
.end
"""
Values = dict[str, np.ndarray]


def both(text: str, varied: Values) -> tuple[BoardCorners, list[Corners]]:
    """All boards together, and each on its own for the same midband frequency."""
    circuit = flatten(parse(text))
    source = next(e for e in circuit.elements if e.name == "VIN")
    assert isinstance(source, IndependentSource)
    drawn = linear_network(solve_bias(circuit))
    drive, sense = drive_vector(drawn, source), sense_vector(drawn, "out")
    nominal = find_corners(response(drawn, drive, sense), drawn.parts, [], [])
    together = board_corners(
        linear_network(solve_bias(circuit, varied)),
        drive,
        sense,
        nominal.midband_hz,
        nominal.low.exact_hz,
        nominal.high.exact_hz,
    )
    alone = []
    for board in range(next(iter(varied.values())).size):
        single = {name: values[board : board + 1] for name, values in varied.items()}
        network = linear_network(solve_bias(circuit, single))
        alone.append(
            find_corners(response(network, drive, sense), network.parts, [], [], nominal.midband_hz)
        )
    return together, alone


def test_boards_together_are_the_boards_alone() -> None:
    rng = np.random.default_rng(3)
    spread = {"r1": 82e3, "rc": 4.7e3, "re": 1e3, "c1": 1e-6, "ce": 47e-6, "q1.bf": 220.0}
    varied = {name: value * rng.uniform(0.6, 1.6, 25) for name, value in spread.items()}
    together, alone = both(STAGE, varied)
    assert np.abs(together.gain) == pytest.approx([c.exact_gain for c in alone], rel=1e-7)
    assert together.low_hz == pytest.approx([c.low.exact_hz for c in alone], rel=1e-6)
    assert together.high_hz == pytest.approx([c.high.exact_hz for c in alone], rel=1e-6)
    assert np.ptp(np.log(together.low_hz)) > 0.5  # or the boards would prove nothing


def test_a_corner_far_from_the_nominal_one_is_found_by_a_search() -> None:
    """Coupling capacitors of a thousandth push the low corner up by decades."""
    varied = {"c1": np.array([1e-6, 1e-9]), "c2": np.array([470e-9, 470e-12])}
    together, alone = both(STAGE, varied)
    assert together.low_hz == pytest.approx([c.low.exact_hz for c in alone], rel=1e-6)
    assert together.high_hz == pytest.approx([c.high.exact_hz for c in alone], rel=1e-6)
    assert together.low_hz[1] > 30 * together.low_hz[0]


def test_a_board_without_bias_has_no_corners_and_leaves_the_others_alone() -> None:
    together, alone = both(STAGE, {"rc": np.array([4.7e3, 2.2e3])})
    circuit = flatten(parse(STAGE))
    network = linear_network(solve_bias(circuit, {"rc": np.array([4.7e3, np.nan, 2.2e3])}))
    source = next(e for e in circuit.elements if e.name == "VIN")
    assert isinstance(source, IndependentSource)
    found = board_corners(
        network,
        drive_vector(network, source),
        sense_vector(network, "out"),
        together.midband_hz,
        alone[0].low.exact_hz,
        alone[0].high.exact_hz,
    )
    assert np.isnan([found.gain[1].real, found.low_hz[1], found.high_hz[1]]).all()
    assert found.low_hz[[0, 2]] == pytest.approx(together.low_hz, rel=1e-7)


def test_an_end_without_a_nominal_corner_is_left_out() -> None:
    text = STAGE.replace("cje=14p cjc=5p tf=0.45n", "")
    together, _ = both(text, {"rc": np.array([4.7e3, 3.3e3])})
    assert np.isnan(together.high_hz).all()
    assert np.isfinite(together.low_hz).all()
