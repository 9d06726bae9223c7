"""What an engineer would write beside each capacitor, and when nothing should be written."""

from __future__ import annotations

import pytest

from tauledger.analysis import Analysis, analyze
from tauledger.netlist import parse
from tauledger.review.rows import TimeConstantRow

BJT = ".model qx npn is=1e-14 bf=200 cje=10p cjc=4p tf=0.3n"
STAGE = f"""stage
VCC vcc 0 12
VS in 0 AC 1
RS in a 1k
C1 a b 10u
R1 vcc b 47k
R2 b 0 22k
RC vcc c 3.3k
RE e 0 1.8k
CE e 0 100u
C2 c out 1u
RL out 0 10k
Q1 c b e qx
{BJT}
"""


def run(text: str, output: str = "out") -> Analysis:
    return analyze(parse(text + "\n.end\n"), output=output)


def row(analysis: Analysis, name: str) -> TimeConstantRow:
    return next(t for t in analysis.review.paths[0].time_constants if t.name == name)


@pytest.mark.parametrize(
    ("name", "expression"),
    [
        ("C1", "R1‖R2‖rπ + RS"),
        ("CE", "RE‖(rπ + RS‖R1‖R2)/(β+1)"),
        ("C2", "RC + RL"),
        ("Q1.Cπ", "rπ‖RS‖R1‖R2"),
        ("Q1.Cμ", "R_in + R_out + gm·R_in·R_out [Miller: R_in·(1 + gm·R_out) + R_out]"),
    ],
)
def test_common_emitter_by_the_rules_of_the_trade(name: str, expression: str) -> None:
    """Grounded emitter, no ro: references D1 and D2 (common practice, no source)."""
    found = row(run(STAGE), name)
    assert terms(found.expression) == terms(expression)
    assert found.expression_deviation == pytest.approx(0.0, abs=0.02)


def terms(expression: str) -> set[str]:
    """The symbols of an expression, whatever their order."""
    body = expression.split(",")[0]
    for mark in "()[]+·‖/:":
        body = body.replace(mark, " ")
    return set(body.split())


@pytest.mark.parametrize(
    ("change", "name", "wanted", "absent"),
    [
        # Unbypassed, the base sees the emitter resistor multiplied.
        (("CE e 0 100u\n", ""), "C1", {"β", "RE"}, set()),
        # A stiff source leaves nothing but 1/gm at the emitter.
        (("RS in a 1k", "RS in a 1"), "CE", {"1", "gm"}, {"rπ", "RS"}),
        # ro counts when it is no longer large against RC.
        ((" bf=200", " bf=200 vaf=15"), "C2", {"ro", "RC", "RL"}, set()),
        # A large divider does not.
        (("R1 vcc b 47k\nR2 b 0 22k", "R1 vcc b 4.7Meg\nR2 b 0 2.2Meg"), "CE", {"rπ"}, {"R1"}),
    ],
)
def test_terms_that_matter_are_there_and_no_others(
    change: tuple[str, str], name: str, wanted: set[str], absent: set[str]
) -> None:
    found = terms(row(run(STAGE.replace(*change)), name).expression)
    assert wanted <= found
    assert not absent & found


FOLLOWER = f"""follower into common base
VCC vcc 0 12
VS in 0 AC 1
RS in s1 600
CIN s1 b 10u
RB b vcc 220k
Q1 vcc b e1 qx
RE1 e1 0 2.2k
C1 e1 e2 10u
RE2 e2 0 1k
RB1 vcc b2 33k
RB2 b2 0 10k
CB b2 0 10u
Q2 c2 b2 e2 qx
RC2 vcc c2 2.2k
C2 c2 out 10u
RL out 0 10k
{BJT}
"""


def test_looking_into_two_emitters() -> None:
    coupled = row(run(FOLLOWER), "C1").expression
    assert all(symbol in coupled for symbol in ("RS", "rπ(Q1)", "(β(Q1)+1)", "gm(Q2)"))
    base = row(run(FOLLOWER), "CB").expression
    assert all(symbol in base for symbol in ("RB1", "RB2", "rπ(Q2)", "(β(Q2)+1)"))


def test_field_effect_stage() -> None:
    text = """jfet
VDD vdd 0 15
VS in 0 AC 1
RS in s1 10k
C1 s1 g 100n
RG g 0 1Meg
J1 d g s jx
RD vdd d 3.3k
RSS s 0 1k
CS s 0 47u
C2 d out 1u
RL out 0 100k
.model jx njf vto=-2 beta=1.5m lambda=5m cgs=5p cgd=2p"""
    analysis = run(text)
    assert terms(row(analysis, "C1").expression) == {"RS", "RG"}
    assert {"RSS", "gm"} <= terms(row(analysis, "CS").expression)
    assert row(analysis, "J1.Cgd").expression.startswith("R_in + R_out + gm·R_in·R_out")
    assert "R_in = RS" in row(analysis, "J1.Cgd").expression


PAIR = f"""two stages with feedback to the first emitter
VCC vcc 0 15
VS in 0 AC 1
RS in s1 1k
C1 s1 b1 10u
R1 vcc b1 150k
R2 b1 0 33k
Q1 c1 b1 e1 qx
RC1 vcc c1 10k
RG e1 g 100
RE1 g 0 2.2k
CE1 g 0 470u
Q2 c2 c1 e2 qx
RC2 vcc c2 3.3k
RE2 e2 0 2.2k
CE2 e2 0 470u
RF c2 x 4.7k
CF x e1 47u
C2 c2 out 10u
RL out 0 10k
{BJT}
"""


def test_feedback_is_shown_as_a_return_ratio_on_the_open_loop() -> None:
    """Blackman's form: the input sees more, the output less, than with the loop open."""
    analysis = run(PAIR)
    entry, leaving = row(analysis, "C1"), row(analysis, "C2")
    for found in (entry, leaving):
        assert "return ratios of Q" in found.expression
        assert found.expression_deviation == pytest.approx(0.0, abs=0.05)


def test_a_bridge_gets_a_reason_and_no_expression() -> None:
    analysis = run(
        """bridge
VS in 0 AC 1
RS in a 1k
R1 a b 1k
R2 a c 3k
R3 b 0 2k
R4 c 0 1k
R5 b c 500
C1 b out 1u
RL out 0 10k"""
    )
    found = row(analysis, "C1")
    assert found.expression == "" or abs(found.expression_deviation or 1) <= 0.05
    mesh = ["mesh", "VS in 0 AC 1", "RS in n0_0 1k", "C1 n4_4 out 1u", "RL out 0 10k"]
    for i in range(5):
        for j in range(5):
            if i < 4:
                mesh.append(f"RV{i}_{j} n{i}_{j} n{i + 1}_{j} 1k")
            if j < 4:
                mesh.append(f"RH{i}_{j} n{i}_{j} n{i}_{j + 1} 1k")
    found = row(run("\n".join([*mesh, "RG n2_2 0 1k"])), "C1")
    assert found.expression == ""
    assert found.expression_reason


@pytest.mark.parametrize(
    ("text", "formula"),
    [
        (STAGE, "−gm·(RC‖RL)"),
        (STAGE.replace("CE e 0 100u\n", ""), "−gm·(RC‖RL)/(1 + gm·RE)"),
        (STAGE.replace("CE e 0 100u\n", "").replace("C2 c out", "C2 e out"), "gm·(RE‖RL)/(1 + "),
    ],
)
def test_stage_formulas_reproduce_the_gain(text: str, formula: str) -> None:
    path = run(text).review.paths[0]
    (stage,) = path.stages
    assert stage.formula.startswith(formula)
    assert stage.formula_value == pytest.approx(stage.gain, rel=0.05)
    assert path.gain_by_formulas == pytest.approx(path.gain, rel=0.05)


def test_nine_in_ten_capacitors_of_the_samples_get_an_expression() -> None:
    from pathlib import Path

    from tauledger.analysis import read

    rows = [
        t
        for p in sorted((Path(__file__).parents[2] / "samples").glob("*/*.cir"))
        for t in analyze(read(p)).review.paths[0].time_constants
        if t.share is not None and t.unit == "F"
    ]
    written = [t for t in rows if t.expression]
    assert len(written) >= 0.9 * len(rows)
    assert all(abs(t.expression_deviation or 0.0) <= 0.05 for t in written)
    assert all(t.expression_reason for t in rows if not t.expression)


def test_body_effect_acts_on_the_source_and_not_on_the_gate() -> None:
    model = ".model mx nmos(vto=1 kp=100u gamma=0.6 phi=0.7 lambda=0.02 cgso=200p cgdo=200p)"
    text = f"""bulk at ground
VDD vdd 0 12
VS in 0 AC 1
RS in g1 10k
C1 g1 g 100n
R1 vdd g 1Meg
R2 g 0 470k
RD vdd d 4.7k
M1 d g s 0 mx W=100u L=2u
RSS s 0 2.2k
CS s 0 100u
C2 d out 10u
RL out 0 47k
{model}"""
    analysis = run(text)
    assert "(gm+gmb)" in row(analysis, "CS").expression
    (stage,) = analysis.review.paths[0].stages
    assert stage.formula.startswith("−gm·(")
    assert stage.formula_value == pytest.approx(stage.gain, rel=0.02)
