"""Where a stage begins, and the gain by formulas with passive parts between the stages."""

from __future__ import annotations

import pytest

from tauledger.analysis import analyze
from tauledger.netlist import parse
from topology.bench import MODELS, look

FOLLOWER_BEHIND_33K = """
VCC vcc 0 15
VIN in 0 AC 1
C1 in m 2.2u
RA vcc m 470k
RB m 0 470k
RS m base 33k
Q1 vcc base e N
RE e 0 3.9k
C2 e out 22u
RL out 0 4.7k
"""
TWO_STAGES_WITH_A_PAD = """
VCC vcc 0 15
VIN in 0 AC 1
RS in src 1k
C1 src b 10u
R1 vcc b 120k
R2 b 0 22k
RC vcc c 6.8k
RE e 0 1.5k
CE e 0 470u
Q1 c b e N
CP c p 10u
RP1 p k 47k
RP2 k 0 22k
JB vcc k s JN
RK s 0 2.2k
C2 s out 47u
RL out 0 22k
"""


def test_a_follower_behind_a_resistor_begins_at_its_base() -> None:
    (stage,) = look(FOLLOWER_BEHIND_33K).stages
    assert (stage.input_node, stage.output_node) == ("base", "e")


@pytest.mark.parametrize(
    ("netlist", "last_gain"), [(FOLLOWER_BEHIND_33K, 0.98), (TWO_STAGES_WITH_A_PAD, 0.7)]
)
def test_formulas_and_the_divisions_round_them_give_the_whole(
    netlist: str, last_gain: float
) -> None:
    """The pads take 12 % and 60 % of the signal: left out, the product would be that far off."""
    (path,) = analyze(parse(f"bench\n{netlist}{MODELS}.end\n", "bench.cir")).review.paths
    assert path.gain_by_formulas == pytest.approx(path.gain_by_inspection, rel=0.05)
    assert path.stages[-1].gain is not None
    assert path.stages[-1].gain > last_gain
    assert path.stages[0].input_resistance_ohm is not None
    assert path.stages[0].input_resistance_ohm < 1e6


def test_a_filter_round_a_follower_keeps_the_follower_on_the_way() -> None:
    """The small capacitor back from the emitter is no shorter way than the base."""
    found = look(
        """
VCC vcc 0 9
VIN in 0 AC 1
CI in a 2.2u
RX vcc a 150k
RY a 0 150k
R1 a m 22k
R2 m n 22k
CF m e 22n
CG n 0 3.3n
Q1 vcc n e N
RE e 0 3.3k
CO e out 4.7u
RL out 0 22k
"""
    )
    assert found.transistors["Q1"].configuration == "emitter follower"
    assert found.transistors["Q1"].on_path
    (stage,) = found.stages
    assert (stage.input_node, stage.output_node) == ("n", "e")
    roles = {name: role.role for name, role in found.capacitors.items()}
    assert (roles["CI"], roles["CG"], roles["CO"]) == ("input coupling", "shunt", "output coupling")
