"""What a draw does to a transistor's card, seen at its terminals, and which draws are shared."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from decide.circuits import STAGE, run
from tauledger.bias import solve_bias
from tauledger.circuit import flatten
from tauledger.configuration.reading import read_configuration
from tauledger.decide.asked import parse_asked
from tauledger.decide.varied import board_values, variety_of
from tauledger.netlist import parse
from tauledger.problems import ProblemError


@pytest.mark.parametrize(
    "card",
    [
        "is=12f nf=1.02 bf=240 ise=30f ne=1.6",
        "is=12f bf=240 c2=30f",
        "is=99f ibe=12f ibc=15f bf=240 ise=90f ne=1.7",
    ],
)
def test_a_shift_of_vbe_at_constant_current_leaves_the_current_gain(card: str) -> None:
    text = f"""a follower fed with a current
IE e 0 20u
VS b 0 DC 0.5 AC 1
VC c 0 5
Q1 c b e qx
.model qx npn ({card})
.end
"""
    circuit = flatten(parse(text))
    variety = variety_of(circuit, "VS", None, [parse_asked("Q1.base_emitter_voltage=40mV")])
    varied, _ = board_values(circuit, variety, np.array([[0.0, 0.04, -0.03]]))
    device = solve_bias(circuit, varied).point.devices["Q1"].values
    # 1e-12 S of gmin in the base of 80 nA.
    assert device["beta_dc"] == pytest.approx([device["beta_dc"][0]] * 3, rel=1e-5)
    assert device["vbe"] - device["vbe"][0] == pytest.approx([0.0, 0.04, -0.03], abs=1e-6)
    assert device["beta_dc"][0] < 0.9 * 240


@pytest.mark.parametrize("tail", [1.0, 0.6, 1.5])
def test_a_shift_of_the_pinch_off_voltage_leaves_idss(tail: float) -> None:
    text = f"""gate at the source
VD d 0 20
VS g 0 AC 1
J1 d g 0 jx
.model jx njf (vto=-2.2 beta=1.1m b={tail} pb=0.8)
.end
"""
    circuit = flatten(parse(text))
    variety = variety_of(circuit, "VS", None, [parse_asked("J1.pinch_off_voltage=40%")])
    varied, _ = board_values(circuit, variety, np.array([[0.0, -0.4, 0.4]]))
    device = solve_bias(circuit, varied).point.devices["J1"].values
    assert device["id"] == pytest.approx([device["id"][0]] * 3, rel=1e-7)
    assert device["vth"] == pytest.approx([-2.2, -1.32, -3.08])


def test_resistors_and_capacitors_of_classes_with_one_name_do_not_stray_together(
    tmp_path: Path,
) -> None:
    tables = "".join(
        f'[{kind}.film]\nmatch = "{letter}*"\ntolerance = "{percent} %"\nmatched = "0 %"\n'
        for kind, letter, percent in (("resistors", "R", 1), ("capacitors", "C", 5))
    )
    (tmp_path / "tauledger.toml").write_text(f'[path.x]\nnetlist = "x.cir"\n{tables}')
    settings = read_configuration(tmp_path / "tauledger.toml").paths[0]
    draws = variety_of(run(STAGE).circuit, "VS", settings).draws
    assert {draw.label: draw.high for draw in draws} == {
        "film: resistance of all": 0.01,
        "film: capacitance of all": 0.05,
    }


def test_one_supply_may_have_a_tolerance_of_its_own() -> None:
    text = STAGE.replace("RL out 0 10k", "RL out 0 10k\nVEE n 0 -5\nRN n 0 1k")
    circuit = run(text).circuit

    def windows(*asked: str) -> dict[str, float]:
        variety = variety_of(circuit, "VS", None, [parse_asked(entry) for entry in asked])
        return {draw.label: draw.high for draw in variety.draws}

    assert windows("VCC=2%") == {"supply VCC": 0.02}
    assert windows("VCC=2%", "supply=5%") == {"supply VCC": 0.02, "supply VEE": 0.05}
    assert not any(label.startswith("supply") for label in windows("*=5%"))
    with pytest.raises(ProblemError, match="fits no part"):
        windows("VS=5%")
