"""Transistors that work together: cascode, pair, mirror, Darlington, push-pull and their kin."""

from __future__ import annotations

from topology.bench import check


def test_cascode() -> None:
    found = check(
        """
VCC vcc 0 15
VIN in 0 AC 1
RS in src 600
C1 src b1 1u
R1 vcc b2 47k
R2 b2 b1 22k
R3 b1 0 15k
CB b2 0 10u
RE e1 0 1.2k
CE e1 0 100u
Q1 m b1 e1 N
Q2 c2 b2 m N
RC vcc c2 3.3k
C2 c2 out 1u
RL out 0 22k
""",
        {"Q1": "common emitter", "Q2": "cascode"},
        {
            "C1": "input coupling",
            "CB": "base bypass",
            "CE": "emitter bypass",
            "C2": "output coupling",
        },
        [("Q1 Q2", "cascode", "b1", "c2")],
    )
    assert found.transistors["Q2"].companions == ("Q1",)
    assert found.transistors["Q2"].input_terminal == "emitter"


def test_cascode_with_its_base_bypassed_to_the_lower_emitter() -> None:
    check(
        """
VCC vcc 0 15
VIN in 0 AC 1
C1 in b1 1u
R1 vcc b2 47k
R2 b2 b1 22k
R3 b1 0 15k
RE e1 0 1.2k
CE e1 0 100u
CB b2 e1 10u
Q1 m b1 e1 N
Q2 c2 b2 m N
RC vcc c2 3.3k
C2 c2 out 1u
RL out 0 22k
""",
        {"Q1": "common emitter", "Q2": "cascode"},
        {
            "C1": "input coupling",
            "CE": "emitter bypass",
            "CB": "base bypass",
            "C2": "output coupling",
        },
        [("Q1 Q2", "cascode", "b1", "c2")],
    )


def test_folded_cascode() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b1 1u
R1 vcc b1 120k
R2 b1 0 18k
RE e1 0 1k
CE e1 0 100u
RC1 vcc m 2.2k
Q1 m b1 e1 N
R3 vcc b2 33k
R4 b2 0 68k
CB b2 0 10u
Q2 c2 b2 m P
RC2 c2 0 6.8k
C2 c2 out 1u
RL out 0 47k
""",
        {"Q1": "common emitter", "Q2": "cascode"},
        {
            "C1": "input coupling",
            "CE": "emitter bypass",
            "CB": "base bypass",
            "C2": "output coupling",
        },
        [("Q1 Q2", "cascode", "b1", "c2")],
    )


def test_common_emitter_and_common_base_coupled_by_a_capacitor_are_two_stages() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b1 1u
R1 vcc b1 100k
R2 b1 0 18k
RE1 e1 0 1k
CE1 e1 0 100u
RC1 vcc c1 3.3k
Q1 c1 b1 e1 N
C2 c1 e2 10u
RE2 e2 0 1k
R3 vcc b2 100k
R4 b2 0 18k
CB b2 0 10u
RC2 vcc c2 3.3k
Q2 c2 b2 e2 N
C3 c2 out 1u
RL out 0 22k
""",
        {"Q1": "common emitter", "Q2": "common base"},
        {
            "C1": "input coupling",
            "CE1": "emitter bypass",
            "C2": "interstage coupling",
            "CB": "base bypass",
            "C3": "output coupling",
        },
        [("Q1", "common emitter", "b1", "c1"), ("Q2", "common base", "e2", "c2")],
    )


def test_differential_pair_with_mirror_load_and_tail_source() -> None:
    found = check(
        """
VCC vcc 0 10
VEE vee 0 -10
VIN in 0 DC 0 AC 1
RS in src 1k
C1 src b1 1u
RB1 b1 0 47k
RB2 b2 0 47k
CB2 b2 0 10u
Q1 c1 b1 t N
Q2 c2 b2 t N
Q3 c1 c1 vcc P
Q4 c2 c1 vcc P
Q5 t r vee N
Q6 r r vee N
RR 0 r 9.1k
RO c2 0 220k
C2 c2 out 1u
RL out 0 470k
""",
        {
            "Q1": "differential pair",
            "Q2": "differential pair",
            "Q3": "current mirror",
            "Q4": "current mirror",
            "Q5": "current source",
            "Q6": "current mirror",
        },
        {"C1": "input coupling", "CB2": "base bypass", "C2": "output coupling"},
        [("Q1 Q4 Q2 Q3", "differential pair", "b1", "c2")],
    )
    assert found.transistors["Q1"].companions == ("Q2",)
    assert found.transistors["Q4"].companions == ("Q3",)
    assert found.transistors["Q2"].on_path
    assert not found.transistors["Q5"].on_path


def test_long_tailed_pair_with_output_across_from_the_input() -> None:
    """The signal crosses at the joined emitters; emitter resistors do not hide the pair."""
    found = check(
        """
VCC vcc 0 12
VEE vee 0 -12
VIN in 0 DC 0 AC 1
RS in b1 1k
RB2 b2 0 1k
Q1 vcc b1 e1 N
Q2 c2 b2 e2 N
RE1 e1 t 100
RE2 e2 t 100
RT t vee 10k
RC vcc c2 10k
C2 c2 out 1u
RL out 0 47k
""",
        {"Q1": "differential pair", "Q2": "differential pair"},
        {"C2": "output coupling"},
        [("Q1 Q2", "differential pair", "b1", "c2")],
    )
    assert found.transistors["Q2"].input_terminal == "emitter"


def test_two_common_emitters_on_one_bypassed_resistor_are_no_pair() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b1 1u
R1 vcc b1 150k
R2 b1 0 22k
RC1 vcc c1 4.7k
Q1 c1 b1 e N
C2 c1 b2 1u
R3 vcc b2 150k
R4 b2 0 22k
RC2 vcc c2 4.7k
Q2 c2 b2 e N
RE e 0 470
CE e 0 220u
C3 c2 out 1u
RL out 0 47k
""",
        {"Q1": "common emitter", "Q2": "common emitter"},
        {
            "C1": "input coupling",
            "C2": "interstage coupling",
            "CE": "emitter bypass",
            "C3": "output coupling",
        },
        [("Q1", "common emitter", "b1", "c1"), ("Q2", "common emitter", "b2", "c2")],
    )


def test_power_amplifier_front_to_back() -> None:
    """Pair, transimpedance stage with its compensation, current sources, push-pull, feedback."""
    found = check(
        """
VCC vcc 0 20
VEE vee 0 -20
VIN in 0 DC 0 AC 1
C1 in b1 2.2u
RB1 b1 0 22k
Q1 c1 b1 t P
Q2 vee fb t P
RC1 c1 vee 680
Q3 t bias vcc1 P
RT vcc vcc1 330
Q5 v c1 vee N
CC v c1 68p
Q4 u bias vcc2 P
RU vcc vcc2 120
D1 vcc x DS
D2 x bias DS
RBIAS bias 0 10k
D3 u w DS
D4 w v DS
Q6 vcc u e6 N
Q7 vee v e7 P
R6 e6 out 1
R7 e7 out 1
RF out fb 22k
RG fb g 1k
CG g 0 100u
CZ out z 100n
RZ z 0 10
RL out 0 100
""",
        {
            "Q1": "differential pair",
            "Q2": "differential pair",
            "Q3": "current source",
            "Q4": "active load",
            "Q5": "common emitter",
            "Q6": "push-pull output",
            "Q7": "push-pull output",
        },
        {
            "C1": "input coupling",
            "CC": "compensation",
            "CG": "feedback",
            "CZ": "filter",
        },
        [
            ("Q1 Q2", "differential pair", "b1", "c1"),
            ("Q5", "common emitter", "c1", "v"),
            ("Q7 Q6", "push-pull output", "v", "out"),
        ],
    )
    assert any("feedback from out back to fb" in note for note in found.notes)


def test_darlington_follower() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 100n
R1 vcc b 1Meg
R2 b 0 2.2Meg
Q1 vcc b m N
Q2 vcc m e N
RBE m e 10k
RE e 0 1k
C2 e out 100u
RL out 0 1k
""",
        {"Q1": "Darlington", "Q2": "Darlington"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1 Q2", "Darlington", "b", "e")],
    )


def test_darlington_common_emitter() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 1u
RB c b 2.2Meg
Q1 c b m N
Q2 c m 0 N
RC vcc c 1k
C2 c out 10u
RL out 0 10k
""",
        {"Q1": "Darlington", "Q2": "Darlington"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1 Q2", "Darlington", "b", "c")],
    )
    assert found.transistors["Q2"].on_path
    assert found.transistors["Q1"].companions == ("Q2",)


def test_two_followers_with_their_own_resistors_are_no_darlington() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 100n
R1 vcc b 330k
R2 b 0 680k
Q1 vcc b m N
RM m 0 10k
Q2 vcc m e N
RE e 0 1k
C2 e out 100u
RL out 0 1k
""",
        {"Q1": "emitter follower", "Q2": "emitter follower"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1", "emitter follower", "b", "m"), ("Q2", "emitter follower", "m", "e")],
    )


def test_complementary_feedback_pair_as_a_follower() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 100n
R1 vcc b 470k
R2 b 0 470k
Q1 m b e N
Q2 e m vcc P
RBE vcc m 1k
RE e 0 1k
C2 e out 100u
RL out 0 1k
""",
        {"Q1": "complementary feedback pair", "Q2": "complementary feedback pair"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1 Q2", "complementary feedback pair", "b", "e")],
    )
    assert found.transistors["Q1"].companions == ("Q2",)


def test_push_pull_driven_through_two_capacitors() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 1k
C1 src b1 4.7u
C2 src b2 4.7u
R1 vcc b1 4.7k
D1 b1 m DS
D2 m b2 DS
R2 b2 0 4.7k
Q1 vcc b1 e N
Q2 0 b2 e P
C3 e out 470u
RL out 0 100
""",
        {"Q1": "push-pull output", "Q2": "push-pull output"},
        {"C1": "input coupling", "C2": "input coupling", "C3": "output coupling"},
        [("Q1 Q2", "push-pull output", "b1", "e")],
    )
    assert found.transistors["Q2"].input_terminal == "base"
    assert found.transistors["Q2"].output_terminal == "emitter"


def test_class_b_pair_at_rest_is_push_pull_though_cut_off() -> None:
    found = check(
        """
VCC vcc 0 9
VEE vee 0 -9
VIN in 0 DC 0 AC 1
RS in b 1k
Q1 vcc b out N
Q2 vee b out P
RL out 0 100
""",
        {"Q1": "push-pull output", "Q2": "push-pull output"},
        {},
        [("Q1 Q2", "push-pull output", "b", "out")],
    )
    assert any("switched off" in note for note in found.notes)


def test_bootstrapped_collector_load_of_a_driver() -> None:
    found = check(
        """
VCC vcc 0 18
VIN in 0 AC 1
C1 in b1 1u
RF out b1 47k
RB b1 0 4.3k
RC1 vcc k 1k
RC2 k u 1k
CB mid k 220u
Q1 c1 b1 0 N
D1 u w DS
D2 w c1 DS
Q2 vcc u mid N
Q3 0 c1 mid P
ROUT mid out 0.1
CL out spk 1000u
RL spk 0 16
.print ac v(spk)
""",
        {"Q1": "common emitter", "Q2": "push-pull output", "Q3": "push-pull output"},
        {"C1": "input coupling", "CB": "bootstrap", "CL": "output coupling"},
        [
            ("Q1", "common emitter", "b1", "c1"),
            ("Q3 Q2", "push-pull output", "c1", "out"),
        ],
    )
    assert found.path_nodes[-1] == "spk"


def test_stage_with_a_current_source_load_and_vbe_referenced_bias() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b1 1u
RB c b1 1Meg
Q1 c b1 0 N
Q2 c r e2 P
RE2 vcc e2 1k
Q3 r r e3 P
RE3 vcc e3 1k
RR r 0 5.6k
CR r vcc 1u
C2 c out 1u
RL out 0 100k
""",
        {"Q1": "common emitter", "Q2": "active load", "Q3": "current mirror"},
        {"C1": "input coupling", "CR": "base bypass", "C2": "output coupling"},
        [("Q1", "common emitter", "b1", "c")],
    )
    assert found.transistors["Q2"].companions == ("Q3",)


def test_follower_on_a_current_source() -> None:
    check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 100n
R1 vcc b 220k
R2 b 0 270k
Q1 vcc b e N
Q2 e r x N
RX x 0 1k
R3 vcc r 47k
D1 r y DS
D2 y 0 DS
D3 vcc q DS
RQ q 0 100k
CR r 0 10u
C2 e out 10u
RL out 0 2.2k
""",
        {"Q1": "emitter follower", "Q2": "current source"},
        {"C1": "input coupling", "CR": "base bypass", "C2": "output coupling"},
        [("Q1", "emitter follower", "b", "e")],
    )


def test_parallel_transistors_share_the_stage() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 1u
R1 vcc b 68k
R2 b 0 15k
Q1 c b e1 N
Q2 c b e2 N
RE1 e1 0 2.2k
RE2 e2 0 2.2k
RC vcc c 3.3k
C2 c out 1u
RL out 0 47k
""",
        {"Q1": "common emitter", "Q2": "common emitter"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1 Q2", "common emitter", "b", "c")],
    )
    assert found.transistors["Q1"].companions == ("Q2",)


def test_regulator_switched_off_device_and_plain_bias_transistor() -> None:
    """Q1 amplifies; Q2 passes the supply; Q3 holds a muting switch that is off; Q4 only biases."""
    found = check(
        """
VCC vcc 0 18
VIN in 0 AC 1
RZ vcc z 10k
CZ z 0 100u
Q2 vcc z v N
CV v 0 10u
C1 in b 1u
R1 v b 220k
R2 b 0 39k
RC v c 4.7k
RE e 0 1k
CE e 0 100u
Q1 c b e N
Q3 c mute 0 N
RM mute 0 10k
Q4 z d 0 N
RD v d 150k
RD2 d 0 6.8k
C2 c out 1u
RL out 0 47k
""",
        {
            "Q1": "common emitter",
            "Q2": "bias only",
            "Q3": "switched off",
            "Q4": "bias only",
        },
        {
            "CZ": "base bypass",
            "CV": "supply decoupling",
            "C1": "input coupling",
            "CE": "emitter bypass",
            "C2": "output coupling",
        },
        [("Q1", "common emitter", "b", "c")],
    )
    assert not found.transistors["Q3"].on_path


def test_pair_with_a_resistor_between_its_emitters_and_two_tail_sources() -> None:
    check(
        """
VCC vcc 0 12
VEE vee 0 -12
VIN in 0 DC 0 AC 1
RS in ba 1k
Q1 ca ba ea N
Q2 vcc 0 eb N
RG ea eb 470
Q3 ea r xa N
Q4 eb r xb N
R3 xa vee 1k
R4 xb vee 1k
Q5 r r xc N
R5 xc vee 1k
RR 0 r 10k
RC vcc ca 6.8k
C2 ca out 1u
RL out 0 100k
""",
        {
            "Q1": "differential pair",
            "Q2": "differential pair",
            "Q3": "current source",
            "Q4": "current source",
            "Q5": "current mirror",
        },
        {"C2": "output coupling"},
        [("Q1 Q2", "differential pair", "ba", "ca")],
    )


def test_feedback_between_the_emitters_of_a_triple_makes_no_pair() -> None:
    found = check(
        """
VCC vcc 0 15
VIN in 0 AC 1
C1 in b1 1u
R1 vcc b1 150k
R2 b1 0 15k
RC1 vcc c1 10k
RE1 e1 0 1k
Q1 c1 b1 e1 N
C2 c1 b2 1u
R3 vcc b2 150k
R4 b2 0 22k
RC2 vcc c2 5k
RE2 e2 0 1k
CE2 e2 0 100u
Q2 c2 b2 e2 N
C3 c2 b3 1u
R5 vcc b3 100k
R6 b3 0 22k
RC3 vcc c3 2k
RE3 e3 0 1k
Q3 c3 b3 e3 N
RF e3 e1 10k
C4 c3 out 1u
RL out 0 10k
""",
        {"Q1": "common emitter", "Q2": "common emitter", "Q3": "common emitter"},
        {
            "C1": "input coupling",
            "C2": "interstage coupling",
            "CE2": "emitter bypass",
            "C3": "interstage coupling",
            "C4": "output coupling",
        },
        [
            ("Q1", "common emitter", "b1", "c1"),
            ("Q2", "common emitter", "b2", "c2"),
            ("Q3", "common emitter", "b3", "c3"),
        ],
    )
    assert any("feedback from e3 back to e1" in note for note in found.notes)


def test_pair_with_a_wilson_mirror() -> None:
    check(
        """
VCC vcc 0 15
VEE vee 0 -15
VIN in 0 DC 0 AC 1
RS in ba 1k
Q1 ca ba t N
Q2 cb 0 t N
RT t vee 10k
Q3 x x vcc P
Q4 ca x vcc P
Q5 cb ca x P
RO cb 0 100k
C2 cb out 1u
RL out 0 100k
""",
        {
            "Q1": "differential pair",
            "Q2": "differential pair",
            "Q3": "current mirror",
            "Q4": "current mirror",
            "Q5": "current mirror",
        },
        {"C2": "output coupling"},
        [("Q1 Q5 Q2 Q4 Q3", "differential pair", "ba", "cb")],
    )


def test_cascoded_pair() -> None:
    found = check(
        """
VCC vcc 0 15
VEE vee 0 -15
VIN in 0 DC 0 AC 1
RS in ba 1k
Q1 ma ba t N
Q2 mb 0 t N
RT t vee 10k
VB bias 0 4
Q3 ca bias ma N
Q4 cb bias mb N
RA vcc ca 6.8k
RB vcc cb 6.8k
C2 cb out 1u
RL out 0 100k
""",
        {
            "Q1": "differential pair",
            "Q2": "differential pair",
            "Q3": "cascode",
            "Q4": "cascode",
        },
        {"C2": "output coupling"},
        [("Q1 Q2 Q4", "differential pair", "ba", "cb")],
    )
    assert found.transistors["Q3"].companions == ("Q1",)


def test_quasi_complementary_output() -> None:
    """A Darlington above, a complementary feedback pair below: one output stage of four."""
    found = check(
        """
VCC vcc 0 15
VEE vee 0 -15
VIN in 0 DC 0 AC 1
RS in b 1k
RB vcc u 6.8k
D1 u w DS
D2 w x DS
D3 x b DS
RB2 b vee 6.8k
Q1 vcc u m N
Q2 vcc m e2 N
R1 m e2 220
RE2 e2 out 0.33
Q3 k b out P
Q4 out k e4 N
R4 k e4 220
RE4 e4 vee 0.33
RL out 0 100
""",
        {
            "Q1": "Darlington",
            "Q2": "push-pull output",
            "Q3": "push-pull output",
            "Q4": "complementary feedback pair",
        },
        {},
        [("Q3 Q2 Q4 Q1", "push-pull output", "b", "out")],
    )
    assert all(role.on_path for role in found.transistors.values())
    assert not any("feedback" in note and "R1" in note for note in found.notes)


def test_push_pull_drivers_and_output_devices_are_two_stages() -> None:
    check(
        """
VCC vcc 0 15
VEE vee 0 -15
VIN in 0 DC 0 AC 1
RS in b 1k
RB vcc u 6.8k
D1 u w DS
D2 w x DS
D3 x y DS
D4 y b DS
RB2 b vee 6.8k
Q1 vcc u m N
Q2 vcc m e2 N
R1 m k 220
RE2 e2 out 0.33
Q3 vee b k P
Q4 vee k e4 P
RE4 e4 out 0.33
RL out 0 100
""",
        dict.fromkeys(("Q1", "Q2", "Q3", "Q4"), "push-pull output"),
        {},
        [("Q1 Q3", "push-pull output", "u", "m"), ("Q2 Q4", "push-pull output", "m", "out")],
    )


def test_complementary_pair_with_gain_is_two_stages_in_a_loop() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 1u
R1 vcc b 220k
R2 b 0 47k
Q1 k b e N
RK vcc k 1k
Q2 c k vcc P
RF c e 4.7k
RE e 0 1k
C2 c out 10u
RL out 0 10k
""",
        {"Q1": "common emitter", "Q2": "common emitter"},
        {"C1": "input coupling", "C2": "output coupling"},
        [("Q1", "common emitter", "b", "k"), ("Q2", "common emitter", "k", "c")],
    )
    assert any("feedback from c back to e round Q1, Q2 through RF" in n for n in found.notes)


def test_follower_helped_by_a_driven_transistor_below() -> None:
    found = check(
        """
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 1u
R1 vcc b 100k
R2 b 0 100k
Q1 cx b e N
RX vcc cx 220
CX cx b2 10u
R3 vcc b2 33k
R4 b2 0 6.8k
Q2 e b2 e2 N
RE e2 0 220
CE e2 0 100u
C2 e out 10u
RL out 0 1k
""",
        {"Q1": "emitter follower", "Q2": "common emitter"},
        {
            "C1": "input coupling",
            "CX": "interstage coupling",
            "CE": "emitter bypass",
            "C2": "output coupling",
        },
        [("Q1", "emitter follower", "b", "e")],
    )
    assert not found.transistors["Q2"].on_path
