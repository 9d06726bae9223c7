"""Odd circuits, large circuits, and what must hold for every circuit."""

from __future__ import annotations

import cProfile
import math
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tauledger.bias import OperatingPoint, solve_bias
from tauledger.smallsignal import drive_vector, linear_network
from tauledger.topology import Topology, choose_path, recognise
from topology.bench import circuit_of, look

NO_POINT = OperatingPoint((), np.zeros((1, 0)), (), np.zeros((1, 0)), {}, "none")


def unbiased(netlist: str, output: str | None = None) -> Topology:
    circuit = circuit_of(netlist)
    return recognise(circuit, NO_POINT, choose_path(circuit, None, output))


def test_a_network_without_transistors() -> None:
    found = look("VIN in 0 AC 1\nRS in a 1k\nC1 a out 1u\nRL out 0 10k\nCP out 0 100p\n")
    assert found.path_nodes == ("a", "out")
    assert found.stages == ()
    assert found.transistors == {}
    assert {n: r.role for n, r in found.capacitors.items()} == {
        "C1": "input coupling",
        "CP": "shunt",
    }


def test_no_way_from_input_to_output_is_a_note() -> None:
    found = unbiased("VCC vcc 0 9\nVIN in 0 AC 1\nRI in 0 1k\nR1 vcc out 1k\nCX out 0 1u\n")
    assert found.path_nodes == ()
    assert found.stages == ()
    assert any("no way" in note for note in found.notes)
    assert found.capacitors["CX"].role == "supply decoupling"


def test_input_is_output() -> None:
    found = unbiased("VIN in 0 AC 1\nRI in 0 1k\nC1 in x 1u\nRX x 0 1k\n", "in")
    assert found.path_nodes == ("in",)
    assert found.stages == ()


def test_a_path_node_that_does_not_exist_raises_nothing() -> None:
    circuit = circuit_of("VIN in 0 AC 1\nRI in out 1k\nRL out 0 1k\n")
    path = choose_path(circuit, None, None)
    assert (path.input_node, path.output_node) == ("in", "out")
    other = circuit_of("VIN a 0 AC 1\nRI a b 1k\nRL b 0 1k\n")
    assert recognise(other, NO_POINT, path).path_nodes == ()


def test_operational_amplifier_from_controlled_sources() -> None:
    found = unbiased(
        """
VIN in 0 AC 1
RS in src 1k
C1 src p 1u
RB p 0 100k
XA p n out AMP
RF out n 10k
CF out n 100p
RG n g 1k
CG g 0 10u
RL out 0 10k
.subckt AMP plus minus o
RIN plus minus 1Meg
GM 0 pole plus minus 1m
RP pole 0 100Meg
CP pole 0 10p
EO drive 0 pole 0 1
RO drive o 50
.ends
"""
    )
    (stage,) = found.stages
    assert stage.configuration == "controlled source"
    assert stage.transistors == ("XA.GM", "XA.EO")
    assert (stage.input_node, stage.output_node) == ("p", "out")
    assert {n: r.role for n, r in found.capacitors.items()} == {
        "C1": "input coupling",
        "CF": "compensation",
        "CG": "feedback",
        "XA.CP": "shunt",
    }
    assert any("RF" in note for note in found.notes)


def test_a_current_controlled_source_passes_the_signal() -> None:
    found = unbiased(
        "VIN in 0 AC 1\nR1 in s 1k\nVS s 0 0\nF1 0 out VS 100\nRO out 0 10k\nRL out 0 10k\n"
    )
    assert [s.configuration for s in found.stages] == ["controlled source"]


def test_a_behavioural_source_passes_the_signal() -> None:
    found = unbiased("VIN in 0 AC 1\nRI in 0 1k\nB1 out 0 V={tanh(v(in))}\nRL out 0 10k\n")
    assert [s.transistors for s in found.stages] == [("B1",)]


def test_a_transformer_passes_the_signal() -> None:
    found = unbiased(
        """
VCC vcc 0 12
VIN in 0 AC 1
RS in p 50
K1 L1 L2 0.95
L1 p 0 1m
L2 s bias 10m
R1 vcc bias 68k
R2 bias 0 15k
CB bias 0 10u
RC vcc c 3.9k
RE e 0 1k
CE e 0 100u
Q1 c s e N
C2 c out 1u
RL out 0 10k
"""
    )
    assert found.path_nodes == ("p", "s", "c", "out")
    assert found.capacitors["CE"].role == "emitter bypass"


def test_transistors_with_joined_or_loose_terminals() -> None:
    found = unbiased(
        """
VIN in 0 AC 1
R1 in out 1k
RL out 0 1k
Q1 x x x N
Q2 loose1 loose2 loose3 N
Q3 0 0 0 P
M1 y y y y MN
CX loose1 loose2 1n
CY x x 1n
"""
    )
    assert found.transistors["Q1"].configuration == "switched off"
    assert set(found.transistors) == {"Q1", "Q2", "Q3", "M1"}
    assert {n: r.role for n, r in found.capacitors.items()} == {"CX": "other", "CY": "other"}


NODES = st.sampled_from(["0", "vcc", "in", "a", "b", "c", "d", "e", "out"])
INNER = st.sampled_from(["0", "vcc", "in", "a", "b"])
PARTS = st.lists(
    st.one_of(
        st.tuples(st.just("R"), st.tuples(NODES, NODES), st.sampled_from(["1k", "100k", "-50"])),
        st.tuples(st.just("C"), st.tuples(NODES, NODES), st.sampled_from(["1u", "100p", "10n"])),
        st.tuples(st.just("L"), st.tuples(NODES, NODES), st.sampled_from(["1u", "1m"])),
        st.tuples(st.just("D"), st.tuples(NODES, NODES), st.just("DS")),
        st.tuples(st.just("Q"), st.tuples(NODES, NODES, NODES), st.sampled_from("NP")),
        st.tuples(st.just("J"), st.tuples(NODES, NODES, NODES), st.just("JN")),
        st.tuples(st.just("E"), st.tuples(NODES, NODES, NODES, NODES), st.just("10")),
        st.tuples(st.just("V"), st.tuples(INNER, INNER), st.just("0")),
    ),
    min_size=1,
    max_size=25,
)


@settings(max_examples=100, deadline=None)
@given(PARTS)
def test_random_circuits_get_a_complete_consistent_answer(
    parts: list[tuple[str, tuple[str, ...], str]],
) -> None:
    lines = [f"{k}{i} {' '.join(nodes)} {value}" for i, (k, nodes, value) in enumerate(parts)]
    netlist = "\n".join(["VCC vcc 0 9", "VIN in 0 AC 1", "RI in 0 50", "RO out 0 1k", *lines, ""])
    found = unbiased(netlist, "out")
    assert len(found.transistors) == sum(k in "QJ" for k, _, _ in parts)
    assert len(found.capacitors) == sum(k == "C" for k, _, _ in parts)
    if found.path_nodes:
        assert found.path_nodes[0] == "in"
        assert found.path_nodes[-1] in {"out", "in"}
        assert "0" not in found.path_nodes
        assert len(set(found.path_nodes)) == len(found.path_nodes)
    else:
        assert found.stages == ()
        assert found.notes
    for stage in found.stages:
        assert stage.input_node in found.path_nodes
        assert stage.output_node in found.path_nodes


AMPLIFIERS = {
    "two stages and a follower": """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 1k
C1 src b1 10u
R1 vcc b1 100k
R2 b1 0 18k
RC1 vcc c1 4.7k
RE1 e1 t1 100
RT1 t1 0 910
CE1 t1 0 1000u
Q1 c1 b1 e1 N
C2 c1 x 10u
RX x b2 2.2k
RB2 vcc b2 1Meg
RC2 vcc c2 2.2k
Q2 c2 b2 0 N
Q3 vcc c2 e3 N
RE3 e3 0 1k
C3 e3 y 100u
RO y out 100
RL out 0 1k
""",
    "cascode into a feedback pair": """
VCC vcc 0 15
VIN in 0 AC 1
C1 in b1 10u
R1 vcc b2 47k
R2 b2 b1 22k
R3 b1 0 15k
CB b2 0 100u
RE e1 0 1.2k
CE e1 0 1000u
Q1 m b1 e1 N
Q2 c2 b2 m N
RC vcc c2 3.3k
C2 c2 b3 10u
R4 vcc b3 220k
R5 b3 0 220k
Q3 d b3 e3 N
Q4 e3 d vcc P
RB vcc d 1k
R6 e3 0 2.2k
C4 e3 out 100u
RL out 0 1k
""",
    "pair with a mirror into a common emitter": """
VCC vcc 0 10
VEE vee 0 -10
VIN in 0 DC 0 AC 1
RS in bp 1k
Q1 a fb t N
Q2 g bp t N
Q3 a a vcc P
Q4 g a vcc P
RT t vee 9.1k
Q5 o g vcc P
RO o vee 4.7k
RF o fb 10k
RG fb 0 1k
.print ac v(o)
""",
}


@pytest.mark.parametrize("name", AMPLIFIERS)
def test_stage_gains_multiply_to_the_whole(name: str) -> None:
    """Stage gains and the passive divisions round them multiply to the whole, at midband.

    Passive parts to ground divide: where a stage's nodes were wrong, gain would be left between.
    The frequency lies where the coupling capacitors above are shorts (4 ppm of 1 kΩ and less).
    """
    circuit = circuit_of(AMPLIFIERS[name])
    solution = solve_bias(circuit)
    path = choose_path(circuit, None, None)
    found = recognise(circuit, solution.point, path)
    network = linear_network(solution)
    source = next(e for e in circuit.elements if e.name == path.source)
    s = 2j * math.pi * 20e3
    x = np.linalg.solve(
        network.conductance[0] + s * network.reactance[0], drive_vector(network, source)
    )

    def voltage(node: str) -> complex:
        return complex(x[network.index(node)])

    product, here = 1.0 + 0j, voltage(path.input_node)
    for stage in found.stages:
        division = voltage(stage.input_node) / here
        assert 0.3 < abs(division) < 1.002
        here = voltage(stage.output_node)
        product *= division * here / voltage(stage.input_node)
    whole = voltage(path.output_node) / voltage(path.input_node)
    assert abs(product / whole - 1.0) < 2e-3
    assert len(found.stages) >= 2


def chain(stages: int) -> str:
    lines = ["VCC vcc 0 12", "VIN in 0 AC 1", "C0 in b0 1u"]
    for i in range(stages):
        lines += [
            f"R1_{i} vcc b{i} 68k",
            f"R2_{i} b{i} 0 15k",
            f"RC_{i} vcc c{i} 3.9k",
            f"RE_{i} e{i} 0 1k",
            f"CE_{i} e{i} 0 100u",
            f"CM_{i} c{i} b{i} 10p",
            f"RF_{i} c{i} b{i} 1Meg",
            f"Q{i} c{i} b{i} e{i} N",
            f"CC_{i} c{i} b{i + 1} 1u",
        ]
    return "\n".join([*lines, f"RL b{stages} 0 10k", ""])


def counted(work: Callable[[], Topology]) -> tuple[Topology, int]:
    """The result, and how many calls it took: time would depend on what else the machine does."""
    profile = cProfile.Profile()
    result = profile.runcall(work)
    return result, sum(entry.callcount for entry in profile.getstats())


def test_work_grows_about_linearly_to_ten_thousand_elements() -> None:
    """Eight times the elements may take at most twice as many calls for each."""
    work = []
    for stages in (140, 1120):
        circuit = circuit_of(chain(stages))
        path = choose_path(circuit, None, f"b{stages}")
        found, calls = counted(lambda c=circuit, p=path: recognise(c, NO_POINT, p))
        work.append(calls)
        assert len(found.stages) == stages
        assert all(r.role == "emitter bypass" for n, r in found.capacitors.items() if "CE" in n)
    assert work[1] < 16 * work[0]


def test_a_node_with_thousands_of_parts_stays_bounded() -> None:
    lines = ["VCC vcc 0 12", "VIN in 0 AC 1", "RI in hub 1k", "RL out 0 1k", "RH hub out 1k"]
    lines += [f"R{i} hub n{i} 1k\nC{i} n{i} m{i} 1n\nR{i}b m{i} hub 1k" for i in range(2500)]
    found, calls = counted(lambda: unbiased("\n".join([*lines, ""])))
    assert len(found.capacitors) == 2500
    assert calls < 1500 * 2500


def test_a_supply_with_its_own_resistance_is_no_feedback_path() -> None:
    found = look(
        """
VBAT bat 0 9
RBAT bat vcc 2
VIN in 0 AC 1
C1 in b 1u
R1 vcc b 220k
R2 b 0 33k
RC vcc c 4.7k
RE e 0 1k
CE e 0 100u
Q1 c b e N
C2 c out 1u
RL out 0 47k
"""
    )
    assert found.path_nodes == ("in", "b", "c", "out")
    assert not any("feedback" in note for note in found.notes)


def test_a_floating_source_drives_the_pair_from_either_end() -> None:
    found = look(
        """
VCC vcc 0 12
VEE vee 0 -12
VIN x y AC 1
RX x 0 10k
RY y 0 10k
Q1 ca x t N
Q2 cb y t N
RT t vee 10k
RA vcc ca 10k
RB vcc cb 10k
.print ac v(ca,cb)
"""
    )
    assert [s.configuration for s in found.stages] == ["differential pair"]
    assert found.path_nodes[0] == "x"
