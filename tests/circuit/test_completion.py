"""A netlist exported without sources, completed from the configuration."""

from __future__ import annotations

from pathlib import Path

import pytest

from tauledger.analysis import Analysis, analyze, read
from tauledger.circuit import flatten
from tauledger.circuit.elements import BipolarTransistor, MosFet
from tauledger.circuit.generic import CARDS, generic_models
from tauledger.circuit.islands import islands, restrict
from tauledger.circuit.model_parameters import is_known
from tauledger.configuration.choice import find_settings
from tauledger.netlist import parse
from tauledger.netlist.include import default_roots
from tauledger.problems import Problem, ProblemError, Severity

# Soil probe: two stages behind a 2.2 kΩ electrode; invented.
BOARD = """\
R1  +9V b1 330k
R2  b1 GND 68k
R3  +9V c1 15k
R4  e1 GND 2.2k
C2  e1 GND 47u
C1  {input} b1 470n
Q1  c1 b1 e1 QPROBE
Q2  +9V c1 e2 QPROBE
R5  e2 GND 3.3k
C3  e2 OUT 10u
"""
MODEL = """\
.model QPROBE NPN (IS=14f BF=310 VAF=90 IKF=0.2 RB=110 RE=0.4 RC=1.1 CJE=13p CJC=4p TF=0.45n
+ XTB=1.5)
"""
SOURCES = """\
V1 +9V 0 9
VIN sensor 0 AC 1
RS sensor SENSE 2.2k
RL OUT 0 4.7k
CL OUT 0 330p
.temp 40
.print ac v(OUT)
"""
SETTINGS = """\
models = "parts.lib"
temperature = "40 °C"
[path.probe]
netlist = "probe.cir"
supplies = { "+9v" = "9 V" }
input = { node = "sense", resistance = "2.2 kΩ" }
output = { node = "OUT", load_resistance = "4.7kΩ", load_capacitance = "330 pF" }
"""


def _analysis(folder: Path, netlist: str, settings: str = "") -> Analysis:
    file = folder / "probe.cir"
    file.write_text(netlist)
    if settings:
        (folder / "tauledger.toml").write_text(settings, encoding="utf-8")
    return analyze(read(file), settings=find_settings(file, default_roots(file)))


def _faults(folder: Path, netlist: str, settings: str) -> list[Problem]:
    with pytest.raises(ProblemError) as raised:
        _analysis(folder, netlist, settings)
    return list(raised.value.problems)


def test_a_completed_board_has_the_figures_of_one_with_sources_written_in(tmp_path: Path) -> None:
    bare = tmp_path / "bare"
    bare.mkdir()
    (bare / "parts.lib").write_text(MODEL)
    connectors = (
        "J1 SENSE GND conn_01x02\nP1 OUT GND CONN_2\nJ2 OUT GND SENSE GND GND HEADER_5\n"
        "XJ3 OUT GND Terminal_2\nX4 SENSE GND Conn_01x02_Pin\n"
    )
    board = "probe\n" + BOARD.format(input="SENSE") + connectors
    completed = _analysis(bare, board, SETTINGS).review
    full = tmp_path / "full"
    full.mkdir()
    written = _analysis(full, "probe\n" + BOARD.format(input="SENSE") + MODEL + SOURCES).review
    (one,), (other,) = completed.paths, written.paths
    for row, expected in ((one.low, other.low), (one.high, other.high)):
        assert row is not None
        assert expected is not None
        assert row.exact_hz == pytest.approx(expected.exact_hz, rel=1e-9)
        assert row.estimate_hz == pytest.approx(expected.estimate_hz, rel=1e-9)
        assert row.set_by == expected.set_by
    assert one.gain == pytest.approx(other.gain, rel=1e-9)
    assert one.input_resistance_ohm == pytest.approx(other.input_resistance_ohm, rel=1e-9)
    assert one.output_resistance_ohm == pytest.approx(other.output_resistance_ohm, rel=1e-9)
    assert completed.temperature_c == 40.0
    voltages = {row.node: row.voltage_v for row in written.nodes}
    assert {row.node: row.voltage_v for row in completed.nodes if row.node != "signal"} == (
        pytest.approx({node: v for node, v in voltages.items() if node != "sensor"}, rel=1e-9)
    )


def test_a_board_that_ends_at_connectors_is_told_where_to_attach_what_is_behind(
    tmp_path: Path,
) -> None:
    (tmp_path / "parts.lib").write_text(MODEL)
    board = "probe\n" + BOARD.format(input="SENSE") + "J1 SENSE GND conn_01x02\n" + MODEL
    floating, *others = _faults(tmp_path, board, "")
    assert floating.code == "node-floating"
    assert "tauledger start" in floating.advice
    left_out = [problem for problem in others if problem.code == "element-left-out"]
    assert [problem.message.split()[0] for problem in left_out] == ["J1"]
    assert left_out[0].advice.startswith("Attach what stands behind it in tauledger.toml")


@pytest.mark.parametrize("wiper", ["wiper", "Net-(RV1-W)", "n1"])
def test_a_potentiometer_is_told_how_to_be_written(tmp_path: Path, wiper: str) -> None:
    board = f"pot\nV1 a 0 AC 1\nRV1 a 0 {wiper} 10k\nR2 {wiper} 0 1k\n"
    (found,) = _faults(tmp_path, board, "")
    assert (found.code, found.span and found.span.line) == ("element-incomplete", 3)
    assert "potentiometer" in found.advice


def test_a_connector_with_something_at_every_net_is_no_longer_warned_of(tmp_path: Path) -> None:
    (tmp_path / "parts.lib").write_text(MODEL)
    connectors = "J1 SENSE GND conn_01x02\nJ2 OUT GND conn_01x02\nJ3 OUT c1 conn_01x02\n"
    board = "probe\n" + BOARD.format(input="SENSE") + connectors
    problems = _analysis(tmp_path, board, SETTINGS).circuit.problems
    assert [p.message.split()[0] for p in problems if p.code == "element-left-out"] == ["J3"]


def test_added_parts_are_marked_with_their_line_and_take_free_names(tmp_path: Path) -> None:
    (tmp_path / "parts.lib").write_text(MODEL)
    board = "probe\n" + BOARD.format(input="SENSE") + "RLOAD OUT 0 1Meg\nRsource signal SENSE 1\n"
    circuit = _analysis(tmp_path, board + "R9 signal 0 1k\n", SETTINGS).circuit
    added = {e.name: e for e in circuit.elements if e.span.path.endswith(".toml")}
    assert list(added) == ["Vsupply_+9V", "Rsource2", "Vsignal", "Rload2", "Cload"]
    assert added["Rsource2"].nodes == ("signal2", "SENSE")
    assert [element.span.line for element in added.values()] == [5, 6, 6, 7, 7]


def test_nets_that_are_not_there_or_already_held_are_named(tmp_path: Path) -> None:
    (tmp_path / "parts.lib").write_text(MODEL)
    settings = SETTINGS.replace('"+9v"', '"+9VA"').replace('"sense"', '"sence"')
    board = "probe\n" + BOARD.format(input="SENSE")
    faults = _faults(tmp_path, board, settings)
    assert [(p.code, p.span and p.span.line) for p in faults] == [
        ("config-node-unknown", 5),
        ("config-node-unknown", 6),
    ]
    assert faults[0].message.endswith("did you mean '+9V'?")
    assert faults[1].message.endswith("did you mean 'SENSE'?")
    held = _faults(tmp_path, board + "V7 +9V 0 12\n", SETTINGS)
    assert [p.code for p in held] == ["config-net-held"]
    assert "V7" in held[0].message
    assert "12.0 V" in held[0].message


def test_a_supply_said_twice_alike_is_one_supply(tmp_path: Path) -> None:
    (tmp_path / "parts.lib").write_text(MODEL)
    board = "probe\n" + BOARD.format(input="SENSE") + "V7 0 +9V -9\n"
    names = [e.name for e in _analysis(tmp_path, board, SETTINGS).circuit.elements]
    assert "V7" in names
    assert "Vsupply_+9V" not in names


def test_the_netlists_own_model_counts_before_that_of_a_file(tmp_path: Path) -> None:
    (tmp_path / "parts.lib").write_text(".model QPROBE NPN (BF=5)\n")
    board = "probe\n" + BOARD.format(input="SENSE") + MODEL
    circuit = _analysis(tmp_path, board, SETTINGS).circuit
    assert {e.model.parameters["bf"] for e in circuit.elements if hasattr(e, "model")} == {310.0}


def test_a_model_file_cannot_include_from_outside_its_configuration(tmp_path: Path) -> None:
    (tmp_path / "secret.lib").write_text(MODEL)
    folder = tmp_path / "board"
    folder.mkdir()
    (folder / "parts.lib").write_text('.include "../secret.lib"\n')
    faults = _faults(folder, "probe\n" + BOARD.format(input="SENSE"), SETTINGS)
    assert "include-refused" in [problem.code for problem in faults]


# Missing models -----------------------------------------------------------------------------------


def test_a_missing_model_brings_near_names_of_the_given_files(tmp_path: Path) -> None:
    (tmp_path / "parts.lib").write_text(MODEL.replace("QPROBE", "QPROBE2"))
    faults = _faults(tmp_path, "probe\n" + BOARD.format(input="SENSE"), SETTINGS)
    assert {problem.code for problem in faults} == {"model-missing"}
    assert "near it: qprobe2" in faults[0].message


def test_a_generic_model_is_put_in_only_when_asked_and_says_so(tmp_path: Path) -> None:
    board = "probe\n" + BOARD.format(input="SENSE").replace("QPROBE", "BC557")
    settings = SETTINGS.replace('models = "parts.lib"', "generic_models = true")
    review = _analysis(tmp_path, board, settings.replace("true", '{ bc557 = "npn" }')).review
    assert {row.model for row in review.transistors} == {"generic-npn"}
    marks = [problem for problem in review.problems if problem.code == "model-generic"]
    assert [problem.severity for problem in marks] == [Severity.WARNING] * 2
    assert [problem.span and problem.span.line for problem in marks] == [8, 9]


@pytest.mark.parametrize(
    ("line", "kind"),
    [
        ("Q1 a b 0 BC557B", "pnp"),
        ("Q1 a b 0 2N3904", "npn"),
        ("Q1 a b 0 my_pnp", "pnp"),
        ("J1 a b 0 2N5459", "njf"),
        ("M1 a b 0 0 pmos_small", "pmos"),
        ("M1 a b 0 2N7000", "vdmosn"),
        ("D1 a b ANY", "d"),
    ],
)
def test_the_type_of_a_generic_model_comes_from_the_name(line: str, kind: str) -> None:
    netlist = parse(f"t\n{line}\nR1 b 0 1k\nR2 a 0 1k\n")
    element = flatten(netlist, generic_models({})).elements[0]
    assert element.model.kind == kind  # type: ignore[attr-defined]
    assert element.model.name.startswith("generic-")  # type: ignore[attr-defined]


def test_a_name_that_tells_no_type_is_asked_about() -> None:
    with pytest.raises(ProblemError, match="whether it is npn or pnp"):
        flatten(parse("t\nQ1 a b 0 T17\nR1 b 0 1\n"), generic_models({}))


def test_generic_cards_hold_parameters_their_type_knows() -> None:
    for kind, card in CARDS.items():
        assert [name for name in card if not is_known(kind, 1.0, name)] == []


# Independent circuits -----------------------------------------------------------------------------

_CARD = ".model Q NPN (BF=200 CJE=10p CJC=3p TF=0.4n)\n"
LEFT = """\
V1 vcc 0 12
VA ina 0 AC 1
CA ina ba 1u
RA1 vcc ba 100k
RA2 ba 0 20k
QA ca ba ea Q
RA3 vcc ca 4.7k
RA4 ea 0 1k
CO ca out 1u
RLA out 0 10k
"""
UNFINISHED = """\
VB inb 0 AC 1
CB inb bb 1u
QB cb bb eb Q
RB3 vcc cb 4.7k
CB2 nowhere cb 1u
RL2 out2 0 1k
CO2 cb out2 1u
"""


def test_an_unfinished_second_circuit_does_not_stop_the_first() -> None:
    both = parse("two\n" + LEFT + UNFINISHED + _CARD)
    alone = analyze(parse("one\n" + LEFT + _CARD)).review.paths[0]
    analysis = analyze(both, input="va")
    review = analysis.review
    assert review.paths[0].low == alone.low
    assert review.paths[0].gain == alone.gain
    (note,) = [p for p in review.problems if p.code == "circuit-independent"]
    assert note.severity is Severity.NOTE
    for name in ("VB", "QB", "CB2", "RL2"):
        assert name in note.message or "(7 parts)" in note.message
    assert not {"inb", "nowhere", "out2"} & set(analysis.circuit.nodes)


@pytest.mark.parametrize(
    ("line", "code"),
    [
        ("RX cb out2 4..7k", "value-range"),
        ("LX cb out2 much", "value-unreadable"),
        ("CX out2 0", "value-missing"),
        ("QX cb bb eb BC999X", "model-missing"),
        ("XX bb out2 NOWHERE", "subcircuit-missing"),
        ("DX lonely 0 DMISSING", "model-missing"),
    ],
)
def test_what_cannot_be_read_elsewhere_is_a_warning(line: str, code: str) -> None:
    alone = analyze(parse("one\n" + LEFT + _CARD)).review.paths[0]
    both = parse("two\n" + LEFT + UNFINISHED + line + "\n" + _CARD)
    review = analyze(both, input="va").review
    assert review.paths[0].low == alone.low
    assert review.paths[0].gain == alone.gain
    (warning,) = [p for p in review.problems if p.severity is Severity.WARNING]
    assert (warning.code, warning.span and warning.span.line) == (code, 19)
    assert "another circuit of the file" in warning.message
    # Of the circuit that it belongs to, or of no circuit at all, it is still an error.
    others = [analyze, lambda netlist: analyze(netlist, input="vb"), flatten]
    for reading in others[:1] if "lonely" in line else others:
        with pytest.raises(ProblemError) as caught:
            reading(both)
        assert [p.code for p in caught.value.problems if p.severity is Severity.ERROR] == [code]


@pytest.mark.parametrize(
    "lines",
    [
        "RX cb ca 4..7k",
        "RX vcc 0 4..7k",
        "RX lamp vcc 4..7k\nRY lamp ca 1k",
        ".subckt coil p l=1\nLI p 0 {l}\nKI LI LO 0.9\n.ends\nLO ca 0 1\nXX out2 coil l=4..7m",
        "QX lamp lit dark BC999X\nQY ca dark eb BC999X",
        "XX bb bulb NOWHERE\n.global bulb\nRY bulb ca 1k",
        "DX bb out2 ca",
        "VX bb 0 1..2",
        "FX bb 0 VNONE 10",
        "RCA cb out2 4..7k\nRCA eb 0 1k",
        "XX bb S\n.subckt S a\nR1 a 0 bad\n.ends",
    ],
)
def test_what_may_belong_to_the_path_is_an_error(lines: str) -> None:
    text = "two\n" + LEFT + UNFINISHED + lines + "\n" + _CARD
    with pytest.raises(ProblemError) as caught:
        analyze(parse(text), input="va")
    assert all(p.span for p in caught.value.problems)
    assert any(p.severity is Severity.ERROR for p in caught.value.problems)


def test_outputs_asked_for_in_a_circuit_left_out_are_named() -> None:
    text = "two\n" + LEFT + UNFINISHED + _CARD
    shown = ".print ac v(out2) v(cb,eb) v(ca)\n"
    circuit = restrict(flatten(parse(text.replace(".end\n", "") + shown)), "va")
    assert circuit.output_hints == (("ca",),)
    (note,) = [p for p in circuit.problems if p.code == "circuit-independent"]
    assert note.message.endswith("asks to see there: v(out2), v(cb,eb)")
    plain = restrict(flatten(parse(text)), "va")
    (note,) = [p for p in plain.problems if p.code == "circuit-independent"]
    assert "print" not in note.message


def test_supplies_and_their_decoupling_belong_to_every_circuit() -> None:
    more = "CD vcc 0 100u\nV2 vbb vcc 5\nRX vbb lamp 1k\nRY lamp 0 1k\n"
    circuit = flatten(parse("two\n" + LEFT + more + _CARD))
    kept = {element.name for element in restrict(circuit).elements}
    assert {"CD", "V1", "V2", "QA"} <= kept
    assert not kept & {"RX", "RY"}
    assert [len(island.elements) for island in islands(circuit)] == [9, 2]


@pytest.mark.parametrize(
    "bridge",
    [
        "RJ ca cb 1Meg",
        "CJ ea eb 1p",
        "E1 x 0 ca 0 1\nRJ x eb 1k",
        "B1 eb 0 I=1e-3*V(ca)",
        "LJ1 ca 0 1m\nLJ2 cb 0 1m\nKJ LJ1 LJ2 0.9",
    ],
)
def test_anything_between_two_circuits_makes_them_one(bridge: str) -> None:
    circuit = flatten(parse("two\n" + LEFT + UNFINISHED + bridge + "\n" + _CARD))
    homes = [island for island in islands(circuit) if {"QA", "QB"} & _names(island.elements)]
    assert len(homes) == 1


def _names(elements: tuple[object, ...]) -> set[str]:
    return {e.name for e in elements if isinstance(e, BipolarTransistor | MosFet)}


def test_one_circuit_is_left_as_it_is() -> None:
    circuit = flatten(parse("one\n" + LEFT + _CARD))
    assert restrict(circuit) is circuit
    two_signals = flatten(parse("two\n" + LEFT + UNFINISHED + _CARD))
    assert restrict(two_signals) is two_signals
