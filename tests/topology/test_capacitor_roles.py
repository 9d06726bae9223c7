"""Capacitors in less usual places of a common-emitter stage, and what is said of them."""

from __future__ import annotations

import pytest

from tauledger.topology import CapacitorRole
from topology.bench import look

STAGE = """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 600
C1 src b 4.7u
R1 vcc b 68k
R2 b 0 15k
RC vcc c 3.9k
RE e 0 1k
CE e 0 100u
C2 c out 4.7u
RL out 0 10k
Q1 c b e N
"""
USUAL = {"C1": "input coupling", "CE": "emitter bypass", "C2": "output coupling"}


def roles(netlist: str, output: str | None = None) -> dict[str, CapacitorRole]:
    return dict(look(netlist, None, output).capacitors)


@pytest.mark.parametrize(
    ("added", "role"),
    [
        ("CX c b 10p", "compensation"),
        ("CX b e 100p", "shunt"),
        ("CX b 0 100p", "shunt"),
        ("CX c 0 100p", "shunt"),
        ("CX c vcc 100p", "shunt"),
        ("CX vcc 0 10u", "supply decoupling"),
        ("CX vcc 0 10n", "supply decoupling"),
        ("CX c c 1n", "other"),
        ("CX src b 100n", "input coupling"),
        ("CX e 0 100n", "emitter bypass"),
        ("CX c out 100n", "output coupling"),
        ("CX c f 1u\nRF f b 100k", "feedback"),
        ("RF c f 100k\nCX f b 1u", "feedback"),
        ("CX c f 10p\nRF f b 1k", "compensation"),
        ("RG e g 47\nCX g 0 100u", "emitter bypass"),
        ("CX e g 100u\nRG g 0 47", "emitter bypass"),
        ("CX c z 1n\nRZ z 0 470", "filter"),
        ("RZ c z 470\nCX z 0 1n", "filter"),
        ("CX c mon 4.7u\nRM mon 0 47k", "output coupling"),
        ("RX vcc d 10k\nCX d 0 10u\nRY d 0 10k", "supply decoupling"),
        ("CX p 0 10n\nRP p q 1k\nRQ q 0 1k", "filter"),
    ],
)
def test_one_more_capacitor_at_a_common_emitter(added: str, role: str) -> None:
    found = roles(STAGE + added + "\n")
    assert {name: r.role for name, r in found.items()} == {**USUAL, "CX": role}


def test_parallel_capacitors_share_the_job_of_the_largest() -> None:
    found = roles(STAGE + "CX e 0 100n\nCY out c 22n\n")
    assert found["CX"].transistor == "Q1"
    assert "CE" in found["CX"].reason
    assert found["CY"].role == "output coupling"


def test_speed_up_capacitor_across_a_base_resistor() -> None:
    found = roles(STAGE.replace("C1 src b 4.7u", "C1 src q 4.7u\nRB q b 10k\nCX q b 100p"))
    assert {n: r.role for n, r in found.items()} == {**USUAL, "CX": "compensation"}


def test_tone_network_is_no_coupling() -> None:
    tone = """
C2 c t 4.7u
RT1 t u 10k
CT1 t v 2.2n
RT2 u v 47k
CT2 u 0 47n
RT3 v 0 10k
C3 v out 4.7u
RL out 0 100k
"""
    found = roles(STAGE.replace("C2 c out 4.7u\nRL out 0 10k\n", tone))
    assert {n: r.role for n, r in found.items()} == {
        **USUAL,
        "CT1": "filter",
        "CT2": "filter",
        "C3": "output coupling",
    }


def test_second_output_at_the_emitter_of_a_phase_splitter() -> None:
    found = roles(STAGE.replace("CE e 0 100u\n", "C3 e low 4.7u\nRL2 low 0 10k\n"), "out")
    assert found["C3"].role == "output coupling"


def test_bypass_behind_a_choke() -> None:
    found = roles(STAGE.replace("RE e 0 1k\nCE e 0", "RE e0 0 1k\nLE e e0 1m\nCE e0 0"))
    assert {n: r.role for n, r in found.items()} == USUAL
    assert "LE" in found["CE"].reason


def test_tapped_coil_with_its_neutralising_capacitor() -> None:
    found = roles(
        """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 50
C1 src b 1n
R1 vcc b 33k
R2 b 0 10k
RE e 0 1k
CE e 0 10n
RF vcc v1 100
CF v1 0 10n
L1 c v1 1u
L2 v1 n 0.3u
K1 L1 L2 0.9
CT c v1 100p
CN n b 3p
C2 c out 22p
RL out 0 1k
Q1 c b e N
"""
    )
    assert {n: r.role for n, r in found.items()} == {
        **USUAL,
        "CF": "supply decoupling",
        "CT": "filter",
        "CN": "compensation",
    }


def test_capacitor_between_the_emitters_of_a_pair_sets_its_gain() -> None:
    found = look(
        """
VCC vcc 0 12
VEE vee 0 -12
VIN in 0 DC 0 AC 1
RS in ba 1k
Q1 ca ba ea N
Q2 cb 0 eb N
RA ea vee 10k
RB eb vee 10k
CG ea eb 100u
RCA vcc ca 10k
RCB vcc cb 10k
C2 ca out 1u
RL out 0 100k
"""
    )
    assert found.capacitors["CG"].role == "emitter bypass"
    assert found.capacitors["C2"].role == "output coupling"


def test_channel_turned_round_is_read_by_its_voltage() -> None:
    """Drain and source swapped in the netlist: the stage is a common source all the same."""
    found = look(
        """
VDD vdd 0 15
VIN in 0 AC 1
C1 in g 10n
RG g 0 1Meg
RSS s 0 1k
CSS s 0 22u
RD vdd d 3.3k
C2 d out 100n
RL out 0 100k
J1 s g d JN
"""
    )
    assert found.transistors["J1"].configuration == "common source"
    assert found.transistors["J1"].output_terminal == "drain"
    assert found.capacitors["CSS"].role == "source bypass"


LOADS = {
    "resistor": "RC vcc c 3.3k\n",
    "current source": "IC vcc c 1.4m\nRX c 0 33k\n",
    "mirror": "Q2 c m vcc P\nQ3 m m vcc P\nRM m 0 8.2k\nRX c 0 12k\n",
    "transformer": "LP vcc c 3\nLS w 0 0.1\nKT LP LS 0.97\nRX w 0 68\n",
}


@pytest.mark.parametrize("load", LOADS)
@pytest.mark.parametrize("parts", ["CI in b 1u\n", "RS in s 1k\nCI s b 100u\nCH c 0 4.7n\n"])
def test_emitter_bypass_whatever_loads_the_collector(load: str, parts: str) -> None:
    output = "w" if load == "transformer" else "c"
    stage = "VCC vcc 0 12\nVIN in 0 AC 1\nR1 vcc b 68k\nR2 b 0 15k\nRE e 0 1k\nQ1 c b e N\n"
    netlist = stage + parts + LOADS[load]
    found = look(netlist + "CE e 0 22u\n", None, output)
    assert found.capacitors["CE"].role == "emitter bypass"
    assert not [note for note in found.notes if "degenerated" in note]
    peaking = look(netlist + "CE e 0 100p\n", None, output)
    assert peaking.capacitors["CE"].role == "compensation"
    assert [note for note in peaking.notes if "degenerated by RE" in note]


def test_bypass_of_the_lower_emitter_resistor_that_also_feeds_a_base() -> None:
    netlist = """
VCC vcc 0 20
VIN in 0 AC 1
CI in b 2.2u
RC1 vcc k 82k
Q1 k b 0 N
Q2 c k e N
RC2 vcc c 5.6k
RU e l 330
RL1 l 0 1.2k
CE l 0 220u
RF l b 270k
CO c out 1u
RX out 0 100k
"""
    found = look(netlist)
    assert found.capacitors["CE"].role == "emitter bypass"
    assert found.capacitors["CE"].transistor == "Q2"
    assert not [note for note in found.notes if "feedback" in note]


def test_a_filtered_supply_that_feeds_base_and_emitter_is_no_bypass() -> None:
    netlist = """
VCC vcc 0 12
VIN in 0 AC 1
RF vcc v 220
CF v 0 470u
CI in b 1u
R1 v b 15k
R2 b 0 82k
RE v e 1k
Q1 c b e P
RC c 0 4.7k
CO c out 1u
RL out 0 47k
"""
    assert look(netlist).capacitors["CF"].role == "supply decoupling"


def test_phase_splitter_seen_between_its_outputs_has_two_output_couplings() -> None:
    netlist = """
VCC vcc 0 15
VIN in 0 AC 1
CI in b 1u
R1 vcc b 100k
R2 b 0 27k
RC vcc c 3.3k
RE e 0 3.3k
Q1 c b e N
CP c p 2.2u
RP p 0 68k
CN e n 2.2u
RN n 0 68k
"""
    found = look(netlist, None, "p,n")
    assert {found.capacitors[name].role for name in ("CP", "CN")} == {"output coupling"}
    assert not [note for note in found.notes if "feedback" in note]
