"""Single bipolar transistors and simple chains of them: every part named."""

from __future__ import annotations

from topology.bench import check


def test_common_emitter_with_divider_bias_and_every_capacitor() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 600
C1 src b 4.7u
R1 vcc b 68k
R2 b 0 15k
RC vcc c 3.9k
RE e 0 1k
CE e 0 100u
CM c b 22p
CS b 0 220p
CV vcc 0 100n
C2 c out 4.7u
RL out 0 10k
CL out 0 100p
Q1 c b e N
""",
        {"Q1": "common emitter"},
        {
            "C1": "input coupling",
            "CE": "emitter bypass",
            "CM": "compensation",
            "CS": "shunt",
            "CV": "supply decoupling",
            "C2": "output coupling",
            "CL": "shunt",
        },
        [("Q1", "common emitter", "b", "c")],
    )
    assert found.path_nodes == ("src", "b", "c", "out")
    role = found.transistors["Q1"]
    assert (role.input_terminal, role.output_terminal) == ("base", "collector")
    assert found.capacitors["CE"].transistor == "Q1"
    assert found.path.load == ("RL", "CL")


def test_unbypassed_emitter_resistor_is_noted_as_degeneration() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 1u
R1 vcc b 100k
R2 b 0 18k
RC vcc c 4.7k
RE e 0 1k
C2 c out 1u
RL out 0 47k
Q1 c b e N
""",
        {"Q1": "common emitter"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1", "common emitter", "b", "c")],
    )
    assert any("Q1" in note and "RE" in note for note in found.notes)


def test_split_emitter_resistor_and_a_peaking_capacitor() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 10u
R1 vcc b 100k
R2 b 0 18k
RC vcc c 4.7k
RE1 e t 220
RE2 t 0 820
CE t 0 220u
CP e 0 47p
C2 c out 10u
RL out 0 47k
Q1 c b e N
""",
        {"Q1": "common emitter"},
        {
            "C1": "input coupling",
            "CE": "emitter bypass",
            "CP": "compensation",
            "C2": "output coupling",
        },
        [("Q1", "common emitter", "b", "c")],
    )


def test_gain_set_by_a_series_resistor_and_capacitor_at_the_emitter() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 10u
R1 vcc b 100k
R2 b 0 18k
RC vcc c 4.7k
RE e 0 1k
RG e g 100
CG g 0 220u
C2 c out 10u
RL out 0 47k
Q1 c b e N
""",
        {"Q1": "common emitter"},
        {"C1": "input coupling", "CG": "emitter bypass", "C2": "output coupling"},
        [("Q1", "common emitter", "b", "c")],
    )


def test_pnp_common_emitter_under_a_positive_supply() -> None:
    """The emitter hangs from the rail; its bypass may lead to the rail or to ground."""
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 4.7u
R1 vcc b 18k
R2 b 0 82k
RE vcc e 1k
RC c 0 4.7k
CE vcc e 100u
C2 c out 4.7u
RL out 0 22k
Q1 c b e P
""",
        {"Q1": "common emitter"},
        {"C1": "input coupling", "CE": "emitter bypass", "C2": "output coupling"},
        [("Q1", "common emitter", "b", "c")],
    )


def test_pnp_with_its_bypass_to_ground_under_a_negative_supply() -> None:
    check(
        """
VEE vee 0 -9
VIN in 0 AC 1
C1 in b 4.7u
R1 vee b 82k
R2 b 0 18k
RE 0 e 1k
RC c vee 3.9k
CE e 0 100u
CD vee 0 10u
C2 c out 4.7u
RL out 0 22k
Q1 c b e P
""",
        {"Q1": "common emitter"},
        {
            "C1": "input coupling",
            "CE": "emitter bypass",
            "CD": "supply decoupling",
            "C2": "output coupling",
        },
        [("Q1", "common emitter", "b", "c")],
    )


def test_feedback_bias_from_the_collector() -> None:
    found = check(
        """
VCC vcc 0 9
VIN in 0 AC 1
RS in src 1k
C1 src b 1u
RB c b 470k
RC vcc c 3.3k
C2 c out 1u
RL out 0 10k
Q1 c b 0 N
""",
        {"Q1": "common emitter"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1", "common emitter", "b", "c")],
    )
    assert any("RB" in note and "feedback" in note for note in found.notes)


def test_feedback_bias_with_its_middle_held_quiet() -> None:
    found = check(
        """
VCC vcc 0 9
VIN in 0 AC 1
C1 in b 1u
RB1 c m 220k
RB2 m b 220k
CB m 0 10u
RC vcc c 3.3k
C2 c out 1u
RL out 0 10k
Q1 c b 0 N
""",
        {"Q1": "common emitter"},
        {"C1": "input coupling", "CB": "filter", "C2": "output coupling"},
        [("Q1", "common emitter", "b", "c")],
    )
    assert not any("feedback" in note for note in found.notes)


def test_emitter_follower() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 220n
R1 vcc b 220k
R2 b 0 270k
RE e 0 4.7k
C2 e out 10u
RL out 0 2.2k
Q1 vcc b e N
""",
        {"Q1": "emitter follower"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1", "emitter follower", "b", "e")],
    )


def test_follower_behind_a_supply_filter() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
RF vcc vf 470
CF vf 0 100u
C1 in b 220n
R1 vf b 220k
R2 b 0 270k
RE e 0 4.7k
C2 e out 10u
RL out 0 2.2k
Q1 vf b e N
""",
        {"Q1": "emitter follower"},
        {"CF": "supply decoupling", "C1": "input coupling", "C2": "output coupling"},
        [("Q1", "emitter follower", "b", "e")],
    )


def test_bootstrapped_follower() -> None:
    found = check(
        """
VCC vcc 0 15
VIN in 0 AC 1
C1 in b 100n
R1 vcc m 100k
R2 m 0 120k
R3 m b 47k
CB e m 47u
RE e 0 4.7k
C2 e out 10u
RL out 0 10k
Q1 vcc b e N
""",
        {"Q1": "emitter follower"},
        {"C1": "input coupling", "CB": "bootstrap", "C2": "output coupling"},
        [("Q1", "emitter follower", "b", "e")],
    )
    assert found.path_nodes == ("in", "b", "e", "out")


def test_common_base() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 50
C1 src e 10u
RE e 0 1k
R1 vcc b 68k
R2 b 0 15k
CB b 0 10u
RC vcc c 3.9k
C2 c out 1u
RL out 0 10k
Q1 c b e N
""",
        {"Q1": "common base"},
        {"C1": "input coupling", "CB": "base bypass", "C2": "output coupling"},
        [("Q1", "common base", "e", "c")],
    )
    assert found.transistors["Q1"].input_terminal == "emitter"


def test_two_stages_with_series_feedback_to_the_first_emitter() -> None:
    found = check(
        """
VCC vcc 0 18
VIN in 0 AC 1
C1 in b1 4.7u
R1 vcc b1 330k
R2 b1 0 62k
RC1 vcc c1 22k
RG e1 0 1.5k
Q1 c1 b1 e1 N
C2 c1 b2 4.7u
R3 vcc b2 100k
R4 b2 0 22k
RC2 vcc c2 3.9k
RE2 e2 0 1.2k
CE2 e2 0 220u
Q2 c2 b2 e2 N
CF c2 fb 22u
RF fb e1 22k
C3 c2 out 22u
RL out 0 10k
""",
        {"Q1": "common emitter", "Q2": "common emitter"},
        {
            "C1": "input coupling",
            "C2": "interstage coupling",
            "CE2": "emitter bypass",
            "CF": "feedback",
            "C3": "output coupling",
        },
        [("Q1", "common emitter", "b1", "c1"), ("Q2", "common emitter", "b2", "c2")],
    )
    assert any(
        "feedback from c2 back to e1" in note and "CF" in note and "RF" in note
        for note in found.notes
    )


def test_direct_coupled_pair_with_low_feedback_resistor() -> None:
    """The feedback resistor is small, yet the signal is followed through the transistors."""
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b1 1u
RB e2 b1 100k
RC1 vcc c1 22k
RG e1 0 100
Q1 c1 b1 e1 N
RC2 vcc c2 2.2k
RE2 e2 0 470
CE2 e2 0 470u
Q2 c2 c1 e2 N
CF c2 fb 100u
RF fb e1 1k
C3 c2 out 10u
RL out 0 10k
""",
        {"Q1": "common emitter", "Q2": "common emitter"},
        {
            "C1": "input coupling",
            "CE2": "emitter bypass",
            "CF": "feedback",
            "C3": "output coupling",
        },
        [("Q1", "common emitter", "b1", "c1"), ("Q2", "common emitter", "c1", "c2")],
    )
    assert found.path_nodes == ("in", "b1", "c1", "c2", "out")


def test_wholly_direct_coupled_path_has_no_coupling_capacitor() -> None:
    check(
        """
VCC vcc 0 10
VEE vee 0 -10
VIN in 0 DC 0 AC 1
RS in b1 1k
RC1 vcc c1 22k
RE1 e1 vee 33k
Q1 c1 b1 e1 N
RE2 vcc e2 2.2k
RC2 out vee 4.7k
Q2 out c1 e2 P
.print ac v(out)
""",
        {"Q1": "common emitter", "Q2": "common emitter"},
        {},
        [("Q1", "common emitter", "b1", "c1"), ("Q2", "common emitter", "c1", "out")],
    )


def test_series_resistors_between_stages_belong_to_neither() -> None:
    """A stage begins at the base; only what stands behind the last device counts with it."""
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b1 1u
RB1 vcc b1 1Meg
RC1 vcc c1 4.7k
Q1 c1 b1 0 N
C2 c1 x 1u
RX x b2 1k
RB2 vcc b2 470k
RE2 e2 0 1k
Q2 vcc b2 e2 N
RO e2 out 100
RL out 0 10k
""",
        {"Q1": "common emitter", "Q2": "emitter follower"},
        {"C1": "input coupling", "C2": "interstage coupling"},
        [("Q1", "common emitter", "b1", "c1"), ("Q2", "emitter follower", "b2", "out")],
    )


def test_capacitor_straight_across_the_supply_and_a_filtered_supply_chain() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
CV vcc 0 470u
RF1 vcc v1 100
CF1 v1 0 220u
RF2 v1 v2 1k
CF2 v2 0 100u
C1 in b1 1u
R1 v2 b1 470k
R2 b1 0 150k
RC1 v2 c1 10k
RE1 e1 0 2.2k
CE1 e1 0 100u
Q1 c1 b1 e1 N
RC2 v1 c2 2.2k
RE2 e2 0 1.5k
CE2 e2 0 220u
Q2 c2 c1 e2 N
C3 c2 out 10u
RL out 0 10k
""",
        {"Q1": "common emitter", "Q2": "common emitter"},
        {
            "CV": "supply decoupling",
            "CF1": "supply decoupling",
            "CF2": "supply decoupling",
            "C1": "input coupling",
            "CE1": "emitter bypass",
            "CE2": "emitter bypass",
            "C3": "output coupling",
        },
        [("Q1", "common emitter", "b1", "c1"), ("Q2", "common emitter", "c1", "c2")],
    )


def test_bias_filter_in_front_of_the_base() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 1u
R1 vcc m 100k
R2 m 0 22k
R3 m b 100k
CM m 0 10u
RC vcc c 4.7k
RE e 0 1k
CE e 0 100u
C2 c out 1u
RL out 0 47k
Q1 c b e N
""",
        {"Q1": "common emitter"},
        {
            "C1": "input coupling",
            "CM": "filter",
            "CE": "emitter bypass",
            "C2": "output coupling",
        },
        [("Q1", "common emitter", "b", "c")],
    )


def test_tuned_stage() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 50
C1 src b 10n
R1 vcc b 33k
R2 b 0 10k
RE e 0 1k
CE e 0 10n
L1 vcc c 1u
CT vcc c 100p
C2 c out 33p
RL out 0 1k
Q1 c b e N
""",
        {"Q1": "common emitter"},
        {
            "C1": "input coupling",
            "CE": "emitter bypass",
            "CT": "filter",
            "C2": "output coupling",
        },
        [("Q1", "common emitter", "b", "c")],
    )
