"""Junction and MOS field-effect transistors, alone and with bipolar ones."""

from __future__ import annotations

from topology.bench import check


def test_jfet_common_source() -> None:
    found = check(
        """
VDD vdd 0 15
VIN in 0 AC 1
RS in src 10k
C1 src g 10n
RG g 0 1Meg
RSS s 0 1k
CSS s 0 22u
RD vdd d 3.3k
C2 d out 100n
RL out 0 100k
J1 d g s JN
""",
        {"J1": "common source"},
        {"C1": "input coupling", "CSS": "source bypass", "C2": "output coupling"},
        [("J1", "common source", "g", "d")],
    )
    role = found.transistors["J1"]
    assert (role.input_terminal, role.output_terminal) == ("gate", "drain")


def test_jfet_follower_into_common_emitter() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in g 10n
RG g 0 1Meg
J1 vcc g s JN
RS1 s 0 2.2k
C2 s b 2.2u
R1 vcc b 68k
R2 b 0 15k
RC vcc c 3.9k
RE e 0 1k
CE e 0 100u
Q1 c b e N
C3 c out 4.7u
RL out 0 22k
""",
        {"J1": "source follower", "Q1": "common emitter"},
        {
            "C1": "input coupling",
            "C2": "interstage coupling",
            "CE": "emitter bypass",
            "C3": "output coupling",
        },
        [("J1", "source follower", "g", "s"), ("Q1", "common emitter", "b", "c")],
    )


def test_jfet_follower_bootstrapped_at_its_gate_resistor() -> None:
    check(
        """
VDD vdd 0 12
VIN in 0 AC 1
C1 in g 1n
RG g m 10Meg
RS1 s m 1k
RS2 m 0 4.7k
CB s x 1u
RX x m 100
C2 s out 1u
RL out 0 47k
J1 vdd g s JN
""",
        {"J1": "source follower"},
        {"C1": "input coupling", "CB": "bootstrap", "C2": "output coupling"},
        [("J1", "source follower", "g", "s")],
    )


def test_jfet_and_bipolar_cascode() -> None:
    check(
        """
VCC vcc 0 15
VIN in 0 AC 1
C1 in g 10n
RG g 0 1Meg
RS s 0 330
CS s 0 47u
J1 m g s JN
R1 vcc b 100k
R2 b 0 68k
CB b 0 1u
Q1 d b m N
RD vcc d 1k
C2 d out 1u
RL out 0 47k
""",
        {"J1": "common source", "Q1": "cascode"},
        {
            "C1": "input coupling",
            "CS": "source bypass",
            "CB": "base bypass",
            "C2": "output coupling",
        },
        [("J1 Q1", "cascode", "g", "d")],
    )


def test_mos_common_source_with_miller_capacitor() -> None:
    check(
        """
VDD vdd 0 12
VIN in 0 AC 1
RS in src 10k
C1 src g 10n
R1 vdd g 1Meg
R2 g 0 330k
RD vdd d 2.2k
RSS s 0 470
CSS s 0 10u
CM d g 5p
C2 d out 100n
RL out 0 47k
M1 d g s 0 MN
""",
        {"M1": "common source"},
        {
            "C1": "input coupling",
            "CSS": "source bypass",
            "CM": "compensation",
            "C2": "output coupling",
        },
        [("M1", "common source", "g", "d")],
    )


def test_mos_common_gate() -> None:
    found = check(
        """
VDD vdd 0 12
VIN in 0 AC 1
RS in src 50
C1 src s 10u
RSS s 0 1k
R1 vdd g 1Meg
R2 g 0 470k
CG g 0 100n
RD vdd d 2.2k
C2 d out 100n
RL out 0 47k
M1 d g s 0 MN
""",
        {"M1": "common gate"},
        {"C1": "input coupling", "CG": "gate bypass", "C2": "output coupling"},
        [("M1", "common gate", "s", "d")],
    )
    assert found.transistors["M1"].input_terminal == "source"


def test_mos_follower() -> None:
    check(
        """
VDD vdd 0 12
VIN in 0 AC 1
C1 in g 10n
R1 vdd g 1Meg
R2 g 0 1Meg
RSS s 0 1k
C2 s out 10u
RL out 0 1k
M1 vdd g s 0 MN
""",
        {"M1": "source follower"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("M1", "source follower", "g", "s")],
    )


def test_mos_stage_with_a_mirror_as_its_load() -> None:
    found = check(
        """
VDD vdd 0 5
VIN in 0 AC 1
C1 in g 10n
RF d g 10Meg
M1 d g 0 0 MN
M2 d r vdd vdd MP
M3 r r vdd vdd MP
RR r 0 10k
C2 d out 100n
RL out 0 1Meg
""",
        {"M1": "common source", "M2": "active load", "M3": "current mirror"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("M1", "common source", "g", "d")],
    )
    assert found.transistors["M2"].companions == ("M3",)


def test_two_stage_operational_amplifier_with_miller_compensation() -> None:
    found = check(
        """
VDD vdd 0 5
VSS vss 0 -5
VIN in 0 DC 0 AC 1
RS in gp 1k
M1 a fb t vss MN
M2 b gp t vss MN
M3 a a vdd vdd MP
M4 b a vdd vdd MP
M5 t r vss vss MN
M8 r r vss vss MN
RR vdd r 47k
M6 o b vdd vdd MP
M7 o r vss vss MN
CC o b 10p
CL o 0 20p
RF o fb 100k
RG fb 0 10k
.print ac v(o)
""",
        {
            "M1": "differential pair",
            "M2": "differential pair",
            "M3": "current mirror",
            "M4": "current mirror",
            "M5": "current source",
            "M8": "current mirror",
            "M6": "common source",
            "M7": "active load",
        },
        {"CC": "compensation", "CL": "shunt"},
        [
            ("M2 M1 M4 M3", "differential pair", "gp", "b"),
            ("M6", "common source", "b", "o"),
        ],
    )
    assert any("feedback from o back to fb" in note and "RF" in note for note in found.notes)


def test_complementary_mos_inverter_as_an_amplifier() -> None:
    found = check(
        """
VDD vdd 0 5
VIN in 0 AC 1
C1 in g 10n
RF d g 10Meg
M1 d g 0 0 MN
M2 d g vdd vdd MP
C2 d out 100n
RL out 0 1Meg
""",
        {"M1": "push-pull output", "M2": "push-pull output"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("M1 M2", "push-pull output", "g", "d")],
    )
    assert found.transistors["M2"].output_terminal == "drain"


def test_mos_differential_pair_with_differential_output() -> None:
    found = check(
        """
VDD vdd 0 10
VSS vss 0 -10
VIN in 0 DC 0 AC 1
RS in ga 1k
M1 da ga t vss MN
M2 db 0 t vss MN
RT t vss 4.7k
RD1 vdd da 4.7k
RD2 vdd db 4.7k
RL da db 47k
.print ac v(db,da)
""",
        {"M1": "differential pair", "M2": "differential pair"},
        {},
        [("M1 M2", "differential pair", "ga", "db")],
    )
    assert (found.path.output_node, found.path.output_reference) == ("db", "da")
    assert found.path.load == ("RL",)


def test_jfet_as_a_variable_resistor_in_series() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 1k
VG g 0 0
J1 src g x JN
C1 x b 1u
R1 vcc b 68k
R2 b 0 15k
RC vcc c 3.9k
RE e 0 1k
CE e 0 100u
Q1 c b e N
RX x 0 100k
C2 c out 1u
RL out 0 47k
""",
        {"J1": "series channel", "Q1": "common emitter"},
        {"C1": "input coupling", "CE": "emitter bypass", "C2": "output coupling"},
        [("Q1", "common emitter", "b", "c")],
    )
