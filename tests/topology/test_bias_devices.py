"""Transistors that hold a voltage or a current beside the way of the signal."""

from __future__ import annotations

import pytest

from topology.bench import look

SPREADER = """
VCC vcc 0 18
VEE vee 0 -18
VIN in 0 AC 1
CI in b 4.7u
RA hi b 100k
RB b vee 6.8k
QD lo b e N
RE e vee 220
CE e vee 1000u
RC vcc hi 3.3k
RX hi w 1.8k
RY w lo 1.2k
QM {multiplier}
QU vcc hi p N
QL vee lo q P
RP p y 2.2
RQ q y 2.2
CO y out 1000u
RL out 0 150
"""


@pytest.mark.parametrize("multiplier", ["hi w lo N", "lo w hi P"])
def test_vbe_multiplier_is_neither_cascode_nor_feedback(multiplier: str) -> None:
    netlist = SPREADER.format(multiplier=multiplier)
    if multiplier.endswith("P"):
        netlist = netlist.replace("RX hi w 1.8k\nRY w lo 1.2k", "RX hi w 1.2k\nRY w lo 1.8k")
    found = look(netlist, None, "out")
    assert found.transistors["QM"].configuration == "VBE multiplier"
    assert not found.transistors["QM"].on_path
    assert [s.configuration for s in found.stages] == ["common emitter", "push-pull output"]
    assert not [note for note in found.notes if "RX" in note or "RY" in note]


def test_capacitor_across_the_multiplier_is_no_feedback() -> None:
    found = look(SPREADER.format(multiplier="hi w lo N") + "CM hi lo 10u\n", None, "out")
    assert found.capacitors["CM"].role == "interstage coupling"
    assert "QM" in found.capacitors["CM"].reason
    assert not [note for note in found.notes if "CM" in note]


def test_a_driven_base_makes_no_multiplier() -> None:
    """The same two resistors, but the signal comes to the base: an amplifier with feedback."""
    found = look(
        """
VCC vcc 0 12
VIN in 0 AC 1
CI in b 1u
RC vcc c 4.7k
RX c b 100k
RY b e 22k
RE e 0 470
Q1 c b e N
CO c out 1u
RL out 0 47k
"""
    )
    assert found.transistors["Q1"].configuration == "common emitter"


FOLDED = """
VCC vcc 0 6
VIN in 0 DC 2.5 AC 1
RS in ba 820
RT vcc t 3.9k
VR bb 0 2.5
QA fa ba t P
QB fb bb t P
RA fa 0 390
RB fb 0 390
VB bias 0 1.1
QC o bias fa N
QD m bias fb N
{mirror}
QF vcc o out N
RF out 0 2.7k
"""
SIMPLE = "QG m m vcc P\nQH o m vcc P"
WILSON = "QG k k vcc P\nQH m k vcc P\nQW o m k P"


@pytest.mark.parametrize(
    ("mirror", "names"), [(SIMPLE, {"QG", "QH"}), (WILSON, {"QG", "QH", "QW"})]
)
def test_mirror_above_a_folded_pair(mirror: str, names: set[str]) -> None:
    """The tail resistor ends where the mirror's emitters stand: on the supply, not on a tail."""
    found = look(FOLDED.format(mirror=mirror), None, "out")
    by_word: dict[str, set[str]] = {}
    for role in found.transistors.values():
        by_word.setdefault(role.configuration, set()).add(role.name)
    assert by_word == {
        "differential pair": {"QA", "QB"},
        "cascode": {"QC", "QD"},
        "current mirror": names,
        "emitter follower": {"QF"},
    }
    assert set(found.stages[0].transistors) == {"QA", "QB", "QC", "QD", *names}
