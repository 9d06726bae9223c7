"""Netlists in the styles met in the wild, each checked by the values it must give.

All circuits are our own; the styles are those listed in DESIGN.md ("Dialects met in the wild").
"""

from __future__ import annotations

from pathlib import Path

import pytest

from tauledger.circuit import flatten
from tauledger.circuit.elements import (
    BehaviouralSource,
    BipolarTransistor,
    Capacitor,
    Circuit,
    ControlledSource,
    CurrentSource,
    Diode,
    Element,
    Inductor,
    JunctionFet,
    MosFet,
    Resistor,
    VoltageSource,
)
from tauledger.netlist import parse, read
from tauledger.problems import ProblemError


def flat(text: str) -> Circuit:
    """Flatten a netlist whose title line is put in front."""
    return flatten(parse("title\n" + text))


def element(circuit: Circuit, name: str) -> Element:
    return next(entry for entry in circuit.elements if entry.name == name)


def codes(circuit: Circuit) -> list[str]:
    return [entry.code for entry in circuit.problems]


def value(line: str, extra: str = "") -> float:
    """The value of the first element of a netlist."""
    part = flat(f"{line}\n{extra}").elements[0]
    for name in ("resistance_ohm", "capacitance_f", "inductance_h", "dc", "gain"):
        if hasattr(part, name):
            return float(getattr(part, name))
    raise AssertionError(part)


def test_schematic_editor_with_parenthesised_nets_and_doubled_prefixes() -> None:
    circuit = flat(
        "RR1 Net-(Q1-B) +12V 47k\nQ_Q1 Net-(Q1-C) Net-(Q1-B) net-(q1-e) BC847-B\n"
        "C_C1 /IN NET-(Q1-B) 10uF\n.model BC847-B NPN(IS=1E-14 BF=290)\n.end"
    )
    assert element(circuit, "RR1").nodes == ("Net-(Q1-B)", "+12V")
    # A node keeps the spelling of its first appearance.
    assert element(circuit, "C_C1").nodes == ("/IN", "Net-(Q1-B)")
    transistor = element(circuit, "Q_Q1")
    assert isinstance(transistor, BipolarTransistor)
    assert transistor.nodes == ("Net-(Q1-C)", "Net-(Q1-B)", "net-(q1-e)")
    assert transistor.model.name == "BC847-B"
    assert transistor.model.parameters == {"is": 1e-14, "bf": 290.0}
    assert circuit.problems == ()


def test_ground_has_two_names_and_a_source_may_be_named_like_its_node() -> None:
    circuit = flat("Vcc vcc GND 12\nR1 vcc gnd 1k\nR2 Vcc 0 2k")
    assert [entry.nodes for entry in circuit.elements] == [("vcc", "0")] * 3
    assert circuit.nodes == ("vcc",)


@pytest.mark.parametrize(
    ("text", "ohms", "trap"),
    [
        ("10k", 10e3, None),
        ("1Meg", 1e6, None),
        ("10kOhm", 10e3, None),
        ("2.2E3", 2.2e3, None),
        ("1M", 1e-3, "value-milli"),
        ("4k7", 4.7e3, "value-letter-digit"),
        ("R47", 0.47, "value-letter-digit"),
        ("1x", 1.0, "value-x-suffix"),
    ],
)
def test_resistor_values(text: str, ohms: float, trap: str | None) -> None:
    circuit = flat(f"R1 a 0 {text}")
    (part,) = circuit.elements
    assert isinstance(part, Resistor)
    assert part.resistance_ohm == pytest.approx(ohms, rel=1e-12)
    assert codes(circuit) == ([] if trap is None else [trap])
    for entry in circuit.problems:
        assert entry.span is not None
        assert (entry.span.line, entry.span.column, entry.span.length) == (2, 8, len(text))


@pytest.mark.parametrize(
    ("text", "farads"),
    [("100uF", 1e-4), ("4µ7", 4.7e-6), ("4μ7", 4.7e-6), ("470n", 470e-9), ("2u2", 2.2e-6)],
)
def test_capacitor_values(text: str, farads: float) -> None:
    assert value(f"C1 a 0 {text}") == pytest.approx(farads, rel=1e-12)


def test_farad_is_femto_and_says_so() -> None:
    circuit = flat("C1 a 0 1F")
    assert circuit.elements[0].capacitance_f == pytest.approx(1e-15)  # type: ignore[attr-defined]
    assert codes(circuit) == ["value-femto"]


@pytest.mark.parametrize(
    ("line", "extra", "expected"),
    [
        ("R1 a b {2*x}", ".param x=5", 10.0),
        ("R1 a b '2*x'", ".param x = 5", 10.0),
        ("R1 a b x", ".param x=5", 5.0),
        ("R1 a b 2*x", ".param x=5", 10.0),
        ("R1 a b r={x}", ".param x=5", 5.0),
        ("R1 a b R=1k", "", 1e3),
        ("R1 a b 1k m=2", "", 500.0),
        ("C1 a b 1u m=2", "", 2e-6),
        ("L1 a b 1m m=2", "", 0.5e-3),
        ("C1 a b C=1u", "", 1e-6),
        ("L1 a b L={y}", ".param y=1m", 1e-3),
        ("R1 a b 1k tc1=0.01", ".temp 37", 1100.0),
        ("R1 a b 1k tc=0.01, 1m", ".temp 37", 1200.0),
        ("R1 a b 1k tc1=0.01 dtemp=-10", "", 900.0),
        ("R1 a b 1k rx", ".model rx r(tc1=0.01 tnom=17)", 1100.0),
        ("R1 a b rx", ".model rx res(r=3k)", 3e3),
        ("R1 a b rx l=10u w=2u", ".model rx r(rsh=50)", 250.0),
        # ngspice-39 gives 44 fF for this one (measured).
        ("C1 a b cx l=10u w=2u", ".model cx c(cj=1e-3 cjsw=1e-9)", 44e-15),
        ("R1 a b {f(2, 3)}", ".func f(x, y) {x*y + k}\n.param k=1", 7.0),
        ("R1 a b {g(2)}", ".param g(x)={x**3}", 8.0),
        ("R1 a b {c}", ".param a=1 b={a+1}\n.param c={b*d}\n.param d={a+2}", 6.0),
        ("R1 a b {x}", ".param x=1\n.param x=2", 2.0),
        ("R1 a b {x > 1 ? 10 : 20}", ".param x=2", 10.0),
        ("R1 a b {3.3k}", "", 3.3e3),
        ("R1 a b '4.7k'", "", 4.7e3),
        ("R1 a b {x}", ".param x={3.3k}", 3.3e3),
        ("R1 a b {x}", ".param y=1 x='4.7k'", 4.7e3),
        ("R1 a b {x}", ".param x={ 2 }", 2.0),
        ("R1 a b {x}", ".param x={y*2}\n.param y={3.3k}", 6.6e3),
    ],
)
def test_values_and_parameters(line: str, extra: str, expected: float) -> None:
    assert value(line, extra) == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize(
    ("line", "dc", "ac", "function"),
    [
        ("V1 a 0 5", 5, None, ""),
        ("V1 a 0 DC 5", 5, None, ""),
        ("V1 a 0 dc=5", 5, None, ""),
        ("V1 a 0", 0, None, ""),
        ("V1 a 0 AC", 0, 1, ""),
        ("V1 a 0 ac=2", 0, 2, ""),
        ("V1 a 0 DC 1 AC 2 90", 1, 2j, ""),
        ("V1 a 0 AC 1 0 DC 3", 3, 1, ""),
        ("V1 a 0 3 AC 1", 3, 1, ""),
        # Values at time zero as ngspice-39 gives them (measured).
        ("V1 a 0 SIN(1 2 1k 0 0 90)", 3, None, "sin"),
        ("V1 a 0 sin 1 2 1k 0 0 90", 3, None, "sin"),
        ("V1 a 0 SINE(0 1 1k) AC 1", 0, 1, "sin"),
        ("V1 a 0 PULSE(3 5 0 1n 1n 1m 2m)", 3, None, "pulse"),
        ("V1 a 0 pulse 3 5", 3, None, "pulse"),
        ("V1 a 0 PWL(0 4 1 5)", 4, None, "pwl"),
        ("V1 a 0 PWL(-1 0 1 4)", 2, None, "pwl"),
        ("V1 a 0 EXP(6 7)", 6, None, "exp"),
        ("V1 a 0 DC 2 SIN(1 1 1k) AC 1", 2, 1, "sin"),
        ("V1 a 0 AC 1 SIN(0 {amp} 1k)", 0, 1, "sin"),
        ("V1 a 0 AC amp SIN(0 amp 1k)", 0, 0.5, "sin"),
    ],
)
def test_sources(line: str, dc: float, ac: complex | None, function: str) -> None:
    circuit = flat(line + "\n.param amp=0.5")
    (part,) = circuit.elements
    assert isinstance(part, VoltageSource)
    assert part.dc == pytest.approx(dc)
    assert part.ac == (None if ac is None else pytest.approx(ac))
    assert part.time_function == function
    assert circuit.problems == ()


def test_bipolar_with_substrate_area_and_aliases() -> None:
    circuit = flat(
        "Q1 c b e s 2N1 2 off\nQ2 c b e [s] 2N1\nQ3 c b e 2N1 area=3 temp=50\nQ4 c b e 2N1 1.5\n"
        ".model 2N1 npn is=1f bf=100 va=80 Vceo=45 mfg=ACME ik=0.1 tref=25"
    )
    first, second, third, fourth = circuit.elements
    assert isinstance(first, BipolarTransistor)
    assert first.nodes == ("c", "b", "e", "s") == second.nodes
    assert first.parameters == {"area": 2.0}
    assert third.parameters == {"area": 3.0, "temp": 50.0}  # type: ignore[attr-defined]
    assert fourth.parameters == {"area": 1.5}  # type: ignore[attr-defined]
    figures = first.model.parameters
    assert (figures["vaf"], figures["ikf"], figures["tnom"]) == (80.0, 0.1, 25.0)
    assert circuit.problems == ()


def test_models_named_like_their_type_or_with_odd_characters() -> None:
    circuit = flat(
        "D1 a 0 D\nD2 a 0 1N4148/X.Y-2\nJ1 d g s NJF\nM1 d g s b nmos W=10u L=2u\n"
        ".model D D(IS=1n)\n.model 1N4148/X.Y-2 D(N=1.8 cj0=4p)\n.model NJF NJF(VT0=-2)\n"
        ".model nmos nmos(vto=1 kp=20u level=1)"
    )
    one, two, fet, mos = circuit.elements
    assert isinstance(one, Diode)
    assert one.model.parameters == {"is": 1e-9}
    assert two.model.parameters == {"n": 1.8, "cjo": 4e-12}  # type: ignore[attr-defined]
    assert isinstance(fet, JunctionFet)
    assert fet.model.parameters == {"vto": -2.0}
    assert isinstance(mos, MosFet)
    assert mos.parameters == pytest.approx({"w": 10e-6, "l": 2e-6})


def test_vertical_mosfet_has_three_nodes_and_its_channel_in_the_kind() -> None:
    circuit = flat(
        "M1 d g s VN\nM2 d g s VP\nM3 d g s b VN\n.model VN vdmos(nchan Vto=3 Kp=2 Ron=0.1)\n"
        ".model VP vdmos(pchan Vto=-3)"
    )
    kinds = [entry.model.kind for entry in circuit.elements if isinstance(entry, MosFet)]
    assert kinds == ["vdmosn", "vdmosp", "vdmosn"]
    assert [len(entry.nodes) for entry in circuit.elements] == [3, 3, 3]


def test_inherited_models_overlay_their_base() -> None:
    circuit = flat("Q1 c b e QB\n.model QB ako:QA npn(bf=300)\n.model QA npn(is=1f bf=100 vaf=50)")
    (part,) = circuit.elements
    assert isinstance(part, BipolarTransistor)
    assert part.model.kind == "npn"
    assert part.model.parameters == {"is": 1e-15, "bf": 300.0, "vaf": 50.0}


def test_tolerance_fields_are_passed_over() -> None:
    circuit = flat("Q1 c b e Q\n.model Q npn(bf=100 dev=20% lot=10% is=1f dev/gauss=5%)")
    assert circuit.elements[0].model.parameters == {  # type: ignore[attr-defined]
        "bf": 100.0,
        "is": 1e-15,
    }


def test_numbers_in_braces_and_quotes_as_parameters_of_a_subcircuit() -> None:
    circuit = flat(
        "X1 a s\nX2 a s r={2.2k}\nX3 a s r='g' q={h}\n.param g={1k} h='1.5k'\n"
        ".subckt s a params: r={3.3k} q='4.7k'\nR1 a 0 {r}\nR2 a 0 'q'\n.ends"
    )
    ohms = [e.resistance_ohm for e in circuit.elements]  # type: ignore[attr-defined]
    assert ohms == [3.3e3, 4.7e3, 2.2e3, 4.7e3, 1e3, 1.5e3]


def test_nested_subcircuits_with_parameters_and_scoped_models() -> None:
    circuit = flat(
        ".param r=1\nX1 a 0 pair r=10\nX2 b 0 pair\n"
        ".subckt pair p n params: r=5 twice={2*r}\nR1 p m {twice}\nX1 m n leaf\n"
        ".model dd d(is={r*1f})\n"
        ".subckt leaf p n\nD1 p n dd\nR1 p n {r}\n.ends leaf\n.ends pair\n"
    )
    ohms = {
        entry.name: entry.resistance_ohm
        for entry in circuit.elements
        if isinstance(entry, Resistor)
    }
    # The inner subcircuit sees the parameters of its caller (ngspice-39, measured).
    assert ohms == {"X1.R1": 20.0, "X1.X1.R1": 10.0, "X2.R1": 10.0, "X2.X1.R1": 5.0}
    diode = element(circuit, "X1.X1.D1")
    assert isinstance(diode, Diode)
    assert diode.nodes == ("X1.m", "0")
    assert diode.model.parameters == {"is": pytest.approx(10e-15)}


def test_a_model_of_the_caller_is_not_seen_by_a_subcircuit_defined_elsewhere() -> None:
    # ngspice-39: "can't find model 'dd'"; parameters, in contrast, are seen.
    text = ".subckt outer p\n.model dd d\nX1 p leaf\n.ends\n.subckt leaf p\nD1 p 0 dd\n.ends"
    with pytest.raises(ProblemError, match="no model 'dd'"):
        flat(f"X1 a outer\n{text}")


def test_global_nodes_are_not_local() -> None:
    circuit = flat(".global vdd VSS\nX1 a leaf\n.subckt leaf p\nR1 p VDD 1\nR2 vss q 1\n.ends")
    assert [entry.nodes for entry in circuit.elements] == [("a", "VDD"), ("vss", "X1.q")]


def test_conditionals_choose_statements() -> None:
    text = (
        ".param mode={m}\n.if (mode == 1)\n.param r=10\nR1 a 0 {r}\n.elseif (mode == 2)\n"
        ".param r=20\n.if (r > 15)\nR2 a 0 {r}\n.else\nR2 a 0 1\n.endif\n.else\nR3 a 0 30\n.endif\n"
    )
    found = [
        (entry.name, entry.resistance_ohm)
        for m in (1, 2, 3)
        for entry in flat(f".param m={m}\n{text}").elements
        if isinstance(entry, Resistor)
    ]
    assert found == [("R1", 10.0), ("R2", 20.0), ("R3", 30.0)]


def test_linear_controlled_sources() -> None:
    circuit = flat(
        "V1 c 0 1\nE1 a 0 c 0 10\nE2 (b,0) (c,0) {2*5}\nG1 a 0 c b 1m\nF1 a 0 v1 3\nH1 d 0 V1 4\n"
        "E3 e 0 POLY(1) c 0 0 7\nH2 f 0 POLY(1) V1 0 8"
    )
    found = {
        entry.name: (entry.gain, entry.control_nodes, entry.control_source)
        for entry in circuit.elements
        if isinstance(entry, ControlledSource)
    }
    assert found == {
        "E1": (10.0, ("c", "0"), ""),
        "E2": (10.0, ("c", "0"), ""),
        "G1": (1e-3, ("c", "b"), ""),
        "F1": (3.0, (), "V1"),
        "H1": (4.0, (), "V1"),
        "E3": (7.0, ("c", "0"), ""),
        "H2": (8.0, (), "V1"),
    }


@pytest.mark.parametrize(
    ("line", "output", "expected"),
    [
        # v(x)=2, v(y)=3, i(V1)=5. POLY in the order of powers, checked with ngspice-39.
        ("E1 a 0 POLY(2) x 0 y 0 3 0 1 2 3 4", "voltage", 3 + 3 + 2 * 4 + 3 * 6 + 4 * 9),
        ("G1 a 0 poly(1) (x,0) 1 10 100", "current", 1 + 20 + 400),
        ("F1 a 0 POLY(1) V1 1 2 3", "current", 1 + 10 + 75),
        ("E1 a 0 VALUE={V(x,y)*k}", "voltage", -10),
        ("E1 a 0 VALUE = {V(x)*V(y)}", "voltage", 6),
        ("E1 a 0 value {v(x)+i(v1)}", "voltage", 7),
        ("E1 a 0 vol='v(x)*5'", "voltage", 10),
        ("G1 a 0 cur='v(x)*5'", "current", 10),
        ("G1 a 0 VALUE=V(x)*V(y)+1", "current", 7),
        ("E1 a 0 TABLE {v(x)} = (0,0) (4,8)", "voltage", 4),
        ("E1 a 0 TABLE {v(x)} (0,0) (1,8)", "voltage", 8),
        ("B1 a 0 V=v(x)**2 + k", "voltage", 14),
        ("B1 a 0 I={v(x) > 1 ? v(y) : 0}", "current", 3),
        ("B1 a 0 v = twice(v(Net-(Q1-C)))", "voltage", 14),
    ],
)
def test_behavioural_sources(line: str, output: str, expected: float) -> None:
    from tauledger.circuit.evaluate import evaluate_behavioural, leaves_of
    from tauledger.netlist.expression import NodeVoltage, SourceCurrent

    circuit = flat(
        f"{line}\nV1 x 0 1\nR1 y 0 1\nR2 Net-(Q1-C) 0 1\n.param k=10\n.func twice(u) {{2*u}}"
    )
    part = circuit.elements[0]
    assert isinstance(part, BehaviouralSource)
    assert part.output == output
    volts = {"x": 2.0, "y": 3.0, "Net-(Q1-C)": 7.0, "0": 0.0}
    leaves = {}
    for leaf in leaves_of(part.expression):
        if isinstance(leaf, NodeVoltage):
            leaves[leaf] = volts[leaf.positive] - volts[leaf.negative]
        else:
            assert leaf == SourceCurrent("V1")
            leaves[leaf] = 5.0
    assert evaluate_behavioural(part.expression, leaves) == pytest.approx(expected)


def test_single_coefficient_polynomial_is_a_constant_as_in_ngspice() -> None:
    circuit = flat("E1 a 0 POLY(1) x 0 10\nR1 x 0 1")
    assert isinstance(circuit.elements[0], BehaviouralSource)
    assert codes(circuit) == ["polynomial-single"]


def test_names_inside_subcircuits_are_flat_in_expressions_and_controls() -> None:
    circuit = flat(
        "X1 a leaf\n.subckt leaf p\nVs s 0 1\nB1 p 0 I=v(s)*i(VS)\nF1 p 0 vs 2\nL1 p 0 1m\n"
        "L2 s 0 1m\nK1 L1 l2 0.9\n.ends"
    )
    from tauledger.circuit.elements import Coupling
    from tauledger.circuit.evaluate import leaves_of
    from tauledger.netlist.expression import NodeVoltage, SourceCurrent

    source = element(circuit, "X1.B1")
    assert isinstance(source, BehaviouralSource)
    assert set(leaves_of(source.expression)) == {NodeVoltage("X1.s", "0"), SourceCurrent("X1.Vs")}
    control = element(circuit, "X1.F1")
    assert isinstance(control, ControlledSource)
    assert control.control_source == "X1.Vs"
    coupling = element(circuit, "X1.K1")
    assert isinstance(coupling, Coupling)
    assert (coupling.inductors, coupling.coefficient) == (("X1.L1", "X1.L2"), 0.9)


@pytest.mark.parametrize(
    "line",
    [
        "T1 a 0 b 0 Z0=50 TD=1n",
        "S1 a b c 0 SW1",
        "W1 a b V1 SW1",
        "A1 a b gain1",
        "P1 a b CONN_2",
        "U1 a b c LM358",
        "J1 a b Conn_01x02",
        "TP1 a TestPoint",
        "H1 MountingHole",
        "J1 a b c Conn_01x03",
        "E1 a 0 LAPLACE {v(b)} {1/(1+s)}",
        "E1 a 0 FREQ {v(b)} = (0,0,0)",
        "M1 a b c d BSIM",
    ],
)
def test_unsupported_devices_are_left_out_with_one_warning(line: str) -> None:
    circuit = flat(f"{line}\nR1 a 0 1k\n.model BSIM nmos(level=8)\n.model SW1 sw(vt=1)")
    assert [entry.name for entry in circuit.elements] == ["R1"]
    (entry,) = circuit.problems
    assert entry.code == "element-left-out"
    assert line.split()[0] in entry.message
    assert entry.span is not None
    assert entry.span.line == 2


def test_integrated_circuit_with_a_subcircuit_of_its_name_is_a_call() -> None:
    circuit = flat("U1 a b follower\n.subckt follower i o\nR1 i o 1k\n.ends")
    assert [entry.name for entry in circuit.elements] == ["U1.R1"]


def test_directives_fill_the_circuit() -> None:
    circuit = flat(
        "R1 a out 1k\nR2 out 0 1k\nR3 Net-(Q1-C) 0 1\nI1 0 a 1m\n"
        ".ac dec 10 {f1} 10Meg\n.param f1=20\n"
        ".temp 50\n.options tnom=25 gmin=1e-11 reltol=1m\n.print ac vdb(out) v(out,a)\n"
        ".probe v(Net-(Q1-C))\n.meas ac g find vdb(a) at=1k\n.tf v(out) I1\n"
        ".ic v(a)=5 V(out) = {f1/10}\n"
        ".nodeset v(a)=1\n.tran 1u 1m\n.op\n.end\nR9 not read"
    )
    assert circuit.ac_range_hz == (20.0, 10e6)
    assert (circuit.temperature_c, circuit.nominal_temperature_c) == (50.0, 25.0)
    assert circuit.gmin == 1e-11
    assert circuit.output_hints == (("out",), ("out", "a"), ("Net-(Q1-C)",), ("a",))
    assert circuit.initial_conditions == {"a": 5.0, "out": 2.0}
    assert circuit.node_sets == {"a": 1.0}
    assert isinstance(circuit.elements[3], CurrentSource)
    assert circuit.problems == ()


def test_directives_inside_a_subcircuit() -> None:
    circuit = flat("X1 a s\n.subckt s p\nR1 p m 1\nR2 m 0 1\n.ic v(m)=2 v(p)=3\n.odd\n.ends")
    assert circuit.initial_conditions == {"X1.m": 2.0, "a": 3.0}
    assert codes(circuit) == ["directive-unknown"]


def test_control_commands_only_hint() -> None:
    circuit = flat(
        "R1 a 0 1k\n.control\nac dec 10 1 1meg\nlet g = v(a)/v(zz\nplot vdb(a)\nshell ls\n.endc"
    )
    assert circuit.ac_range_hz == (1.0, 1e6)
    assert circuit.output_hints == (("a",),)


def test_sheet_in_a_subcircuit_without_pins() -> None:
    circuit = flat(".subckt sheet\nR1 a 0 1k\nL1 a 0 1m\n.ends sheet")
    assert [type(entry) for entry in circuit.elements] == [Resistor, Inductor]
    assert codes(circuit) == ["sheet-subcircuit"]


BASE = "Verstärker\nR1 /IN 0 4µ7 ; Übergang\nC1 /IN 0 10u\n.end\n"


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "latin-1", "utf-16", "utf-16-le"])
@pytest.mark.parametrize("line_end", ["\n", "\r\n", "\r"])
def test_encodings_and_line_ends(tmp_path: Path, encoding: str, line_end: str) -> None:
    path = tmp_path / "amp.cir"
    path.write_bytes(BASE.replace("\n", line_end).encode(encoding))
    before = path.read_bytes()
    circuit = flatten(read(path))
    assert circuit.title == "Verstärker"
    assert isinstance(circuit.elements[0], Resistor)
    assert circuit.elements[0].resistance_ohm == pytest.approx(4.7e-6)
    assert isinstance(circuit.elements[1], Capacitor)
    assert circuit.elements[1].span.line == 3
    assert path.read_bytes() == before


def test_no_end_and_no_final_newline() -> None:
    assert len(flat("R1 a 0 1k\nR2 a 0 2k").elements) == 2


LIBRARY = """* a vendor's library: the first line of an included file is read, not a title
.lib slow
.model QX npn(bf=50)
.endl slow
.lib fast
.model QX npn(bf=500)
.lib 'more.lib' extra
.endl
.model QY npn(bf=1)
"""


def project(folder: Path, netlist: str, **files: str) -> Circuit:
    """Flatten a netlist that stands in a folder with other files (``_`` in names is a dot)."""
    for name, text in files.items():
        (folder / name.replace("_", ".")).write_text(text)
    path = folder / "amp.cir"
    path.write_text(f"title\n{netlist}\n.end\n")
    return flatten(read(path))


@pytest.mark.parametrize(("section", "gain"), [("slow", 50), ("FAST", 500)])
def test_library_sections(tmp_path: Path, section: str, gain: float) -> None:
    circuit = project(
        tmp_path,
        f".lib vendor.lib {section}\nQ1 c b 0 QX",
        vendor_lib=LIBRARY,
        more_lib=".lib extra\n.model QZ npn\n.endl",
    )
    assert circuit.elements[0].model.parameters == {"bf": gain}  # type: ignore[attr-defined]


def test_a_library_without_sections_is_read_whole(tmp_path: Path) -> None:
    circuit = project(
        tmp_path,
        ".lib parts.lib\nD1 a 0 DX\nX1 a s",
        parts_lib=".model DX d(is=2f)\n.subckt s a\nR1 a 0 5\n.ends\n.end\nnot read",
    )
    assert circuit.elements[0].model.parameters == {"is": 2e-15}  # type: ignore[attr-defined]
    assert element(circuit, "X1.R1").resistance_ohm == 5  # type: ignore[attr-defined]


def test_sections_of_the_netlist_itself_are_passed_over(tmp_path: Path) -> None:
    circuit = project(tmp_path, ".lib tt\nR1 a 0 1\n.endl\nR2 a 0 2")
    assert [entry.name for entry in circuit.elements] == ["R2"]


def test_includes_nest_and_messages_name_their_file(tmp_path: Path) -> None:
    circuit = project(
        tmp_path,
        ".inc one.lib\nR1 a 0 r1",
        one_lib=".include two.lib\n.param r1={r2*2}",
        two_lib=".param r2=1M",
    )
    assert circuit.elements[0].resistance_ohm == pytest.approx(2e-3)  # type: ignore[attr-defined]
    (entry,) = circuit.problems
    assert entry.code == "value-milli"
    assert entry.span is not None
    assert (Path(entry.span.path).name, entry.span.line) == ("two.lib", 1)


def test_an_include_in_the_first_line_is_followed_as_in_ngspice(tmp_path: Path) -> None:
    (tmp_path / "m.lib").write_text(".model dd d(is=1f)\n")
    path = tmp_path / "amp.cir"
    path.write_text(".include m.lib\nD1 a 0 dd\n")
    circuit = flatten(read(path))
    assert circuit.elements[0].model.name == "dd"  # type: ignore[attr-defined]
    assert circuit.title == ""


def test_include_of_another_machine_is_found_beside_the_netlist(tmp_path: Path) -> None:
    circuit = project(
        tmp_path, ".include 'D:\\kits\\spice\\Parts.LIB'\nD1 a 0 DX", parts_lib=".model DX d(is=2f)"
    )
    assert circuit.elements[0].model.parameters == {"is": 2e-15}  # type: ignore[attr-defined]
    assert codes(circuit) == ["include-relocated"]


def test_subcircuit_in_an_included_file_may_be_left_open_across_files(tmp_path: Path) -> None:
    circuit = project(
        tmp_path, ".subckt s a\n.include body.lib\n.ends\nX1 q s", body_lib="R1 a 0 7\n"
    )
    assert element(circuit, "X1.R1").nodes == ("q", "0")


def test_export_with_dollar_nets_upper_case_and_glued_units() -> None:
    circuit = flat(
        "* source AMP\nR_R1         $N_0001 $N_0002  10K TC=0,0\n"
        "V_V1         $N_0001 0 DC 0Vdc AC 1Vac\n"
        "+SIN 0 10m 1k 0 0 0\nQ_Q1  $N_0003 $N_0002 0 Q2N7 $ a comment\nR_R2 VCC $N_0003 4.7K\n"
        "V_V2 VCC 0 12Vdc\nC_C1 $N_0003 OUT 10uF IC=0\nR_R3 OUT 0 100K\n.PROBE V(*) I(*)\n"
        ".AC DEC 101 10Hz 10MegHz\n.model Q2N7 NPN(Is=6.7f Xti=3 Eg=1.11 Vaf=74 Bf=416 Ne=1.26\n"
        "+\t\tIse=6.7f Ikf=66.78m Cjc=3.638p Mjc=.3085 Vjc=.75 Fc=.5 Tf=301.2p Rb=10)\n.END\n"
    )
    assert circuit.problems == ()
    assert [entry.nodes for entry in circuit.elements[:3]] == [
        ("$N_0001", "$N_0002"),
        ("$N_0001", "0"),
        ("$N_0003", "$N_0002", "0"),
    ]
    assert circuit.elements[1].ac == 1  # type: ignore[attr-defined]
    assert circuit.elements[4].dc == 12  # type: ignore[attr-defined]
    assert circuit.ac_range_hz == (10.0, 10e6)
    model = circuit.elements[2].model  # type: ignore[attr-defined]
    assert (model.parameters["tf"], model.parameters["ikf"]) == (301.2e-12, 66.78e-3)


def test_export_with_section_signs_micro_signs_and_part_data() -> None:
    circuit = flatten(
        parse(
            "* C:\\Users\\me\\preamp.asc\nV1 N001 0 9\nV§2 in 0 SINE(0 10m 1k) AC 1\n"
            'C1 in N002 4.7µ V=16 Irms=0 mfg="ACME" pn="X-1" type="Al electrolytic"\n'
            "R1 N001 N002 {Rb}\nQ1 N003 N002 N004 0 QN\nRc N001 N003 4k7\nR§e N004 0 1K\n"
            "L1 N003 out 1m Rser=0.5\nRL out 0 10Meg\n.model NPN NPN\n.model PNP PNP\n"
            ".model QN NPN(Is=1E-14 Vaf=100 Bf=200 Vceo=45 Icrating=100m mfg=ACME)\n"
            ".param Rb=470k\n.tran 0 5m\n.step param Rb 100k 1Meg 100k\n;.ac dec 10 1 1k\n"
            ".meas AC mid MAX V(out)\n.backanno\n.end\n",
            "preamp.net",
        )
    )
    assert circuit.title == "C:\\Users\\me\\preamp.asc"
    values = {
        entry.name: next(
            getattr(entry, name)
            for name in ("resistance_ohm", "capacitance_f", "inductance_h", "dc", "parameters")
            if hasattr(entry, name)
        )
        for entry in circuit.elements
    }
    assert values == {
        "V1": 9.0,
        "V§2": 0.0,
        "C1": pytest.approx(4.7e-6),
        "R1": 470e3,
        "Q1": {},
        "Rc": 4.7e3,
        "R§e": 1e3,
        "L1": 1e-3,
        "RL": 10e6,
    }
    # The choke's series resistance is not part of the analysis, and it says so.
    assert codes(circuit) == ["value-letter-digit", "words-ignored"]
    assert circuit.output_hints == (("out",),)
    assert circuit.ac_range_hz is None


def test_independent_circuits_in_one_file_are_all_read() -> None:
    circuit = flat("V1 a 0 1\nR1 a 0 1\n\nV2 x y 1\nR2 x y 1\nR3 y 0 1")
    assert len(circuit.elements) == 5


def test_a_file_without_sources_or_models_names_what_is_missing() -> None:
    with pytest.raises(ProblemError) as caught:
        flat("R1 a b 1k\nQ1 a b c BC847\nJ1 a b c Conn_01x03\nU1 a b c NE5532\nD1 a b BAT54")
    assert [(entry.code, entry.severity.value) for entry in caught.value.problems] == [
        ("model-missing", "error"),
        ("element-left-out", "warning"),
        ("element-left-out", "warning"),
        ("model-missing", "error"),
    ]
