"""Which source, which output, which load: chosen, or asked for in one message."""

from __future__ import annotations

import pytest

from tauledger.problems import Problem, ProblemError
from tauledger.topology import choose_path
from topology.bench import circuit_of

STAGE = """
VCC vcc 0 12
VIN in 0 AC 1
RS in src 600
C1 src b 1u
R1 vcc b 68k
R2 b 0 15k
RC vcc c 3.9k
RE e 0 1k
CE e 0 100u
Q1 c b e N
"""
LOADED = STAGE + "C2 c far 1u\nRX far 0 10k\nCX far 0 100p\n"


def problem_of(netlist: str, input_name: str | None = None, output: str | None = None) -> Problem:
    with pytest.raises(ProblemError) as caught:
        choose_path(circuit_of(netlist), input_name, output)
    (problem,) = caught.value.problems
    return problem


def test_the_only_ac_source_and_the_loaded_node() -> None:
    path = choose_path(circuit_of(LOADED), None, None)
    assert (path.source, path.source_resistor, path.input_node) == ("VIN", "RS", "src")
    assert (path.output_node, path.output_reference) == ("far", "0")
    assert path.load == ("RX", "CX")
    assert not path.source_is_current


def test_two_loaded_nodes_are_named_and_the_option_too() -> None:
    problem = problem_of(LOADED + "C3 e mon 1u\nRM mon 0 10k\n")
    assert "far" in problem.message
    assert "mon" in problem.message
    assert "--output" in problem.advice


def test_no_output_lists_what_could_be_meant() -> None:
    problem = problem_of(STAGE)
    assert problem.code == "output-ambiguous"
    assert " c, e" in problem.message
    assert "--output" in problem.advice


def test_two_ac_sources_are_named_with_place_and_option() -> None:
    problem = problem_of(LOADED + "VB other 0 AC 1\nRB other b 10k\n")
    assert problem.code == "input-ambiguous"
    assert "VIN" in problem.message
    assert "VB" in problem.message
    assert "--input" in problem.advice
    assert problem.span is not None
    assert problem.span.text.startswith("VB")


def test_no_ac_source_lists_the_sources() -> None:
    problem = problem_of(LOADED.replace(" AC 1", " 0"))
    assert problem.code == "input-missing"
    assert "VCC" in problem.message
    assert "VIN" in problem.message
    assert "--input" in problem.advice


def test_a_named_source_needs_no_ac_value_and_no_exact_case() -> None:
    path = choose_path(circuit_of(LOADED.replace(" AC 1", " 0")), "vin", None)
    assert path.source == "VIN"


def test_the_named_source_wins_over_several() -> None:
    path = choose_path(circuit_of(LOADED + "VB other 0 AC 1\nRB other b 10k\n"), "VB", None)
    assert (path.source, path.input_node, path.source_resistor) == ("VB", "b", "RB")


def test_an_unknown_source_is_answered_with_those_there_are() -> None:
    problem = problem_of(LOADED, "VX")
    assert problem.code == "input-unknown"
    assert "VX" in problem.message
    assert "VIN" in problem.message


def test_a_resistor_named_as_the_source_is_not_taken() -> None:
    assert problem_of(LOADED, "RS").code == "input-unknown"


@pytest.mark.parametrize(
    ("asked", "node", "reference"),
    [("C", "c", "0"), ("far", "far", "0"), ("c, E", "c", "e"), ("e,0", "e", "0")],
)
def test_output_by_name(asked: str, node: str, reference: str) -> None:
    path = choose_path(circuit_of(LOADED), None, asked)
    assert (path.output_node, path.output_reference) == (node, reference)


@pytest.mark.parametrize("asked", ["nowhere", "c,nowhere", "", "c,"])
def test_unknown_output_is_answered_with_the_nodes(asked: str) -> None:
    problem = problem_of(LOADED, None, asked)
    assert problem.code == "output-unknown"
    assert "far" in problem.message


@pytest.mark.parametrize("asked", ["0", "vcc", "c,e,b"])
def test_output_that_cannot_carry_a_signal(asked: str) -> None:
    assert problem_of(LOADED, None, asked).code == "output-useless"


def test_a_single_hint_wins_over_the_load() -> None:
    path = choose_path(circuit_of(LOADED + ".print ac v(e)\n"), None, None)
    assert path.output_node == "e"


def test_hints_for_input_and_supply_do_not_count() -> None:
    path = choose_path(circuit_of(LOADED + ".print ac v(in) v(vcc) v(src) v(c)\n"), None, None)
    assert path.output_node == "c"


def test_several_hints_are_listed() -> None:
    path_problem = problem_of(STAGE + ".print ac v(b) v(c) v(e)\n")
    assert "b, c, e" in path_problem.message


def test_several_hints_with_one_named_out() -> None:
    netlist = STAGE + "C2 c out 1u\nRL out 0 10k\n.print ac v(b) v(out)\n"
    assert choose_path(circuit_of(netlist), None, None).output_node == "out"


@pytest.mark.parametrize("name", ["OUT", "/OUT", "Vout", "v_out", "output"])
def test_a_node_named_out(name: str) -> None:
    netlist = LOADED + f"C3 c {name} 1u\nRZ {name} 0 10k\n"
    path = choose_path(circuit_of(netlist), None, None)
    assert path.output_node == name
    assert path.load == ("RZ",)


def test_a_differential_hint() -> None:
    path = choose_path(circuit_of(STAGE + ".print ac v(c,e)\n"), None, None)
    assert (path.output_node, path.output_reference) == ("c", "e")


def test_a_load_without_coupling_capacitor_goes_by_its_name() -> None:
    path = choose_path(circuit_of(STAGE + "RLOAD c 0 10k\nCL c 0 1n\n"), None, "c")
    assert path.load == ("RLOAD", "CL")


def test_a_collector_resistor_named_like_a_load_is_none() -> None:
    netlist = STAGE.replace("RC vcc c", "RL vcc c")
    assert choose_path(circuit_of(netlist), None, "c").load == ()


def test_current_source_drives_its_live_node() -> None:
    netlist = LOADED.replace("VIN in 0 AC 1", "IPD 0 in AC 1\nRPD in 0 100k")
    path = choose_path(circuit_of(netlist), None, None)
    assert path.source_is_current
    assert (path.input_node, path.source_resistor) == ("in", "")


def test_source_with_a_second_part_at_its_node_has_no_source_resistor() -> None:
    path = choose_path(circuit_of(LOADED + "RT in 0 50\n"), None, None)
    assert (path.input_node, path.source_resistor) == ("in", "")


def test_source_turned_round_is_driven_at_its_other_node() -> None:
    netlist = LOADED.replace("VIN in 0 AC 1", "VIN 0 in AC 1")
    path = choose_path(circuit_of(netlist), None, None)
    assert (path.input_node, path.source_resistor) == ("src", "RS")


def test_the_supply_as_input_shows_its_ripple_path() -> None:
    path = choose_path(circuit_of(LOADED), "VCC", None)
    assert (path.source, path.input_node) == ("VCC", "vcc")


def test_a_resistor_straight_into_the_output_is_no_source_resistor() -> None:
    netlist = "VIN in 0 AC 1\nR1 in out 1k\nC1 out 0 100n\n.print ac v(out)\n"
    path = choose_path(circuit_of(netlist), None, None)
    assert (path.input_node, path.source_resistor, path.output_node) == ("in", "", "out")
    asked = choose_path(circuit_of(netlist), None, "out")
    assert (asked.input_node, asked.source_resistor) == ("in", "")


def test_parts_beside_a_collector_are_no_load() -> None:
    """A small capacitor from base to collector does not make the collector resistor a load."""
    netlist = "VIN in 0 AC 1\nRS in b 1k\nCM b out 2p\nG1 out 0 b 0 40m\nRC out 0 4.7k\n"
    assert choose_path(circuit_of(netlist), None, "out").load == ()


@pytest.mark.parametrize(
    ("hint", "reason"), [("vcc", "a voltage source holds it"), ("in", "the signal enters there")]
)
def test_a_hint_that_cannot_be_the_output_is_said_to_be_passed_over(hint: str, reason: str) -> None:
    path = choose_path(circuit_of(LOADED + f".print ac v({hint})\n"), None, None)
    assert path.output_node == "far"
    (note,) = path.notes
    assert f"v({hint})" in note
    assert reason in note
    assert "far" in note


def test_hints_beside_a_good_one_and_an_asked_output_need_no_note() -> None:
    assert choose_path(circuit_of(LOADED + ".print ac v(in) v(c)\n"), None, None).notes == ()
    assert choose_path(circuit_of(LOADED + ".print ac v(vcc)\n"), None, "c").notes == ()


def test_a_useless_hint_is_named_where_no_output_is_left() -> None:
    problem = problem_of(STAGE + ".print ac v(vcc)\n")
    assert problem.code == "output-ambiguous"
    assert "v(vcc)" in problem.message
    assert problem.span is not None


def test_the_only_source_with_a_time_function_is_proposed_as_input() -> None:
    problem = problem_of(LOADED.replace("AC 1", "SIN(0 5m 2k)"))
    assert problem.code == "input-missing"
    assert "--input VIN" in problem.advice
    assert problem.span is not None
    assert problem.span.text.startswith("VIN")
