"""What ngspice computes from a printed expression is what our own evaluation says."""

from __future__ import annotations

import pytest

from tauledger.circuit import flatten
from tauledger.circuit.elements import BehaviouralSource
from tauledger.circuit.evaluate import evaluate_behavioural, leaves_of
from tauledger.circuit.functions import FUNCTIONS, NOMINAL
from tauledger.netlist import parse
from tauledger.netlist.expression import Call, Expression, Name, NodeVoltage
from tauledger.simulate import simulate
from tauledger.simulate.formula import FormulaError, FormulaPrinter
from tauledger.topology import choose_path

VOLTAGES = {"n": -2.3, "p": 1.7, "q": 0.4, "in": 0.0, "z": 0.0}
EXPRESSIONS = [
    *("asin(v(q))", "acos(v(q))", "atanh(v(q))", "sqrt(v(q))", "exp(v(q))", "cosh(v(q))"),
    *("ln(v(q))", "log(v(q))", "log10(v(q))", "u2(v(q))", "abs(v(n))", "sgn(v(n))"),
    *("sin(v(n))", "cos(v(n))", "tan(v(n))", "atan(v(n))", "sinh(v(n))", "tanh(v(n))"),
    *("asinh(v(n))", "floor(v(n))", "ceil(v(n))", "int(v(n)*1.3)", "nint(v(n)*1.3)"),
    *("u(v(n))", "stp(v(n))", "uramp(v(n))"),
    "acosh(v(p)+1.5)",
    *("floor(v(p)*1.3)", "ceil(v(p)*1.3)", "int(v(p)*1.3)", "nint(v(p)*1.3)", "nint(v(n)+4.8)"),
    *("uramp(v(p))", "stp(v(p))", "u(v(p))", "u(v(z))", "u2(v(n))", "u2(v(p))", "sgn(v(z))"),
    *("v(n)+v(p)*v(q)-v(n,p)/v(p)", "-v(n)-(-v(p))", "2u*v(n)-3Meg*1e-7", "v(n)-(-2)"),
    *("v(n)**2", "v(n)**3", "v(p)^v(q)", "pow(v(n),3)", "pwr(v(n),2)", "pwr(v(n),1.5)"),
    *("sqr(v(n)*2)", "sqr(sqr(sqr(v(n))))", "hypot(v(n)+1,v(p))"),
    *("(7.5+v(n))%v(p)", "v(n)%v(p)", "(v(n)*3)%(v(q)-v(p))"),
    *("v(n)<v(p)", "v(n)<=v(p)", "v(n)>v(p)", "v(n)>=v(p)", "v(n)==v(n)", "v(n)!=v(p)"),
    *("(v(n)<0)&&(v(p)>0)", "(v(n)>0)||(v(p)>5)", "!(v(n)>0)", "!v(p)"),
    *("v(n)>0?v(p):v(q)", "if(v(n)<0,v(p)*2,v(q))", "(v(n)<0?1:2)*(v(p)>0?3:4)"),
    *("min(v(p),v(q),v(n),3)", "max(v(q),v(n),v(p))", "min(v(n),v(p))"),
    *("limit(v(n),-1,1)", "limit(v(p),2,-2)", "limit(v(q)*9,v(n),v(p)*2)"),
    *(f"atan2({y},{x})" for y in ("v(n)", "v(p)") for x in ("v(n)*2", "v(p)*3", "v(z)")),
    "atan2(v(z),v(n))",
    *("pwl(v(n),-1,5,1,7)", "pwl(v(q),-1,5,0,6,1,9)"),
    *("table(v(n),-1,5,1,7)", "table(v(p),-1,5,1,7)", "table(v(q),-1,5,0,6,1,9)"),
    "i(VP)*1k+v(n)",
]


@pytest.mark.referee
def test_every_function_means_the_same_to_ngspice() -> None:
    lines = ["formulas", "VIN in 0 AC 1", "RP p 0 500"]
    lines += [f"V{node} {node} 0 {volts}" for node, volts in VOLTAGES.items() if node != "in"]
    lines += [f"B{k} o{k} 0 v={text}\nR{k} o{k} 0 1k" for k, text in enumerate(EXPRESSIONS)]
    circuit = flatten(parse("\n".join((*lines, ".end")), "formulas.cir"))
    sources = [e for e in circuit.elements if isinstance(e, BehaviouralSource)]
    used = {name for source in sources for name in functions(source.expression)}
    assert used == set(FUNCTIONS) - NOMINAL
    simulation = simulate(circuit, choose_path(circuit, "VIN", "o0"), 1e3)
    for source, text in zip(sources, EXPRESSIONS, strict=True):
        leaves = {
            leaf: value(leaf.positive) - value(leaf.negative)
            if isinstance(leaf, NodeVoltage)
            else -VOLTAGES["p"] / 500
            for leaf in leaves_of(source.expression)
        }
        expected = evaluate_behavioural(source.expression, leaves)
        # ngspice keeps eleven digits of a number in an expression.
        assert simulation.nodes[source.nodes[0]] == pytest.approx(expected, rel=1e-9, abs=1e-9), (
            text
        )


def value(node: str) -> float:
    return VOLTAGES.get(node, 0.0)


def functions(expression: Expression) -> set[str]:
    if not isinstance(expression, Call):
        return set()
    inner = (functions(argument) for argument in expression.arguments)
    return {expression.function}.union(*inner)


@pytest.mark.parametrize(
    "expression",
    [
        Call("system", (NodeVoltage("a", "0"),)),
        NodeVoltage("nowhere", "0"),
        Name("left"),
        Call("table", (NodeVoltage("a", "0"), NodeVoltage("a", "0"), NodeVoltage("a", "0"))),
    ],
)
def test_what_is_not_known_is_refused(expression: Expression) -> None:
    with pytest.raises(FormulaError):
        FormulaPrinter({"a": "n1"}, {}).text(expression)


def test_an_argument_needed_twice_is_printed_once() -> None:
    nested: Expression = NodeVoltage("a", "0")
    for _ in range(40):
        nested = Call("int", (nested,))
    printer = FormulaPrinter({"a": "n1"}, {})
    assert len(printer.text(nested)) < 100
    assert len(printer.helpers) == 39
