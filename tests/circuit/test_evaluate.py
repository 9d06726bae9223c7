"""Expressions to numbers, held to ngspice; source expressions and their exact derivatives."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

import ngspice
from tauledger.circuit.evaluate import (
    EvaluationError,
    UserFunction,
    evaluate,
    evaluate_behavioural,
    evaluate_with_derivatives,
    leaves_of,
    substitute,
)
from tauledger.netlist.expression import (
    Call,
    Expression,
    NodeVoltage,
    Number,
    SourceCurrent,
    parse_expression,
)

NAMES = {"pa": 3.0, "pb": -2.0, "rload": 4700.0}
BOTH = (
    "2^3^2|2**3**2|-2^2|2^-1|(-8)^(1/3)|(-2)^2|(-2)**3|(-2)**0.5|log(10)|ln(10)|log10(10)|exp(1)|"
    "sgn(-3)|sgn(0)|floor(-2.5)|ceil(-2.5)|nint(2.5)|nint(3.5)|nint(-2.5)|min(1,2)|max(1,2)|1>2|"
    "2>=2|1==1|1!=2|1<>2|!1|!0|1&&0|1?2:3|0?2:3|ternary_fcn(1,2,3)|atan(1)|sinh(1)|cosh(1)|"
    "tanh(1)|asinh(1)|acosh(2)|atanh(0.5)|asin(0.5)|acos(0.5)|2*3+4|8/4/2|2-3-4|2*-3|2--3|1k+1|"
    "1meg|1M|1<2<3|1+2>2|!1==0|2^3*2|2*3^2|sqrt(16)|abs(-3)|sin(1)|cos(1)|tan(1)|pa*pb|pa^2/pb|"
    "agauss(1,0,1)|gauss(1,0,1)|unif(1,0)|aunif(1,0)|rload/1k|exp(-1000)|sqrt(0)"
)
PARAMETER_ONLY = "pow(-2,3)|pow(-2,2)|pwr(-2,2)|pwr(-2,3)|int(2.7)|int(-2.7)|sqr(3)|arctan(1)|7%3"
SOURCE_ONLY = (
    "pow(-2,3)|pow(-2,2)|pwr(-2,2)|pwr(-2,3)|pwr(-2,0.5)|u(0)|u(1)|u(-1)|u2(0.5)|u2(2)|uramp(2)|"
    "uramp(-1)|pwl(1.5,1,1,2,4)|pwl(-2,-1,5,1,7)|pwl(3,-1,5,1,7,2,4)|pi|e|time|hertz"
)


def listed(texts: str) -> list[str]:
    """Split at single bars: ``||`` is an operator."""
    return texts.split("|")


def reading_of_parameter(text: str) -> float:
    return evaluate(parse_expression(text), NAMES)


def reading_in_source(text: str) -> float:
    tree = substitute(parse_expression(text), NAMES)
    assert isinstance(tree, Number)
    return tree.value


@pytest.mark.referee
def test_parameters_have_the_values_ngspice_gives_them() -> None:
    texts = [*listed(BOTH), "1||0&&0", "0||0", *listed(PARAMETER_ONLY)]
    found = ngspice.values([f"V{{n}} n{{n}} 0 {{{text}}}" for text in texts], PARAMETER_CARD)
    expected = dict(zip(texts, found, strict=True))
    read = {text: reading_of_parameter(text) for text in texts}
    assert read == pytest.approx(expected, rel=1e-14)


@pytest.mark.referee
def test_sources_have_the_values_ngspice_gives_them() -> None:
    texts = [*listed(BOTH), "1||0&&0", *listed(SOURCE_ONLY)]
    found = ngspice.values([f"B{{n}} n{{n}} 0 v={text}" for text in texts], PARAMETER_CARD)
    expected = dict(zip(texts, found, strict=True))
    read = {text: reading_in_source(text) for text in texts}
    # ngspice hands constants to a source with eleven digits.
    assert read == pytest.approx(expected, rel=1e-10)


PARAMETER_CARD = ".param pa=3 pb=-2 rload=4.7k"


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("pi", math.pi),
        ("limit(5, 1, 3)", 3.0),
        ("limit(0, 3, 1)", 1.0),
        ("limit(5, 1)", 5.0),
        ("table(1.5, 1,1, 2,4)", 2.5),
        ("table(9, 1,1, 2,4)", 4.0),
        ("if(pa > 1, 10, 1/0)", 10.0),
        ("pb > 0 && 1/0", 0.0),
        ("atan2(1, -2)", math.atan2(1, -2)),
        ("hypot(3, 4)", 5.0),
        ("stp(0)", 0.0),
        ("max(1, 5, 3)", 5.0),
    ],
)
def test_what_other_readers_accept_besides(text: str, value: float) -> None:
    assert reading_of_parameter(text) == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("1/0", "division by zero: 1 / 0"),
        ("7%0", "7 % 0 has no real value"),
        ("0**-1", "division by zero"),
        ("sqrt(-4)", r"sqrt\(-4\) has no real value"),
        ("log(0)", r"ln\(0\) has no real value"),
        ("asin(2)", "no real value"),
        ("pow(-2, 0.5)", "no real value"),
        ("exp(1000)", r"exp\(1000\) is too large"),
        ("1e300*1e300", "too large"),
        ("rlod*2", "unknown parameter rlod; did you mean rload?"),
        ("zzz", "unknown parameter zzz$"),
        ("sqtr(2)", "unknown function sqtr; did you mean sqr or sqrt"),
        ("sqrt(1, 2)", "sqrt takes 1 arguments, not 2"),
        ("min(1)", "min takes at least 2 arguments"),
        ("limit(1)", "limit takes 2 or 3 arguments"),
        ("v(out)*2", "a parameter cannot depend on voltages"),
        ("i(v1)", "a parameter cannot depend on voltages"),
        ("table(1, 2,1, 1,4)", "rising order"),
        ("table(1, 2,1, 3)", "in pairs"),
        ("ddt(1)", "no place in a linear analysis"),
        ("rand()", "no place in a linear analysis"),
    ],
)
def test_an_expression_without_a_value_says_why(text: str, message: str) -> None:
    with pytest.raises(EvaluationError, match=message):
        reading_of_parameter(text)


def functions(**bodies: str) -> dict[str, UserFunction]:
    return {
        name: UserFunction(name, ("x",), parse_expression(body)) for name, body in bodies.items()
    }


def test_user_functions_see_their_arguments_and_the_parameters_around() -> None:
    known = functions(double="2*x", shifted="double(x) + pa")
    assert evaluate(parse_expression("shifted(10)"), {"pa": 3.0, "x": 99.0}, known) == 23.0
    assert evaluate(parse_expression("double(x)"), {"x": 99.0}, known) == 198.0
    with pytest.raises(EvaluationError, match="double takes 1 arguments, not 2"):
        evaluate(parse_expression("double(1, 2)"), {}, known)
    with pytest.raises(EvaluationError, match="unknown parameter x"):
        evaluate(parse_expression("double(1) + x"), {}, known)


def chain(body: str) -> dict[str, str]:
    return {f"f{index}": body.format(index + 1) for index in range(1, 40)}


EXPLOSIVE = {
    "endless": functions(f="f(x)+1"),
    "mutual": functions(f="g(x)", g="f(x)"),
    "doubling": functions(f="f1(x)+f1(x)", **chain("f{0}(x)+f{0}(x)"), f40="x"),
    "squaring": functions(f="f1(f1(x))", **chain("f{0}(f{0}(x))"), f40="x/2+x/2"),
    "deep": functions(f="g(g(g(g(g(x)))))", g="+".join("x" * 100)),
}  # fmt: skip


@pytest.mark.parametrize("name", EXPLOSIVE)
def test_no_user_function_runs_away(name: str) -> None:
    tree = parse_expression("f(v(a))")
    with pytest.raises(EvaluationError, match="more than"):
        substitute(tree, {}, EXPLOSIVE[name])
    if name != "deep":  # numbers stay small where trees would not
        with pytest.raises(EvaluationError, match="more than"):
            evaluate(parse_expression("f(1)"), {}, EXPLOSIVE[name])


def test_substitution_leaves_only_renamed_nodes_and_sources() -> None:
    tree = substitute(
        parse_expression("amp(v(in, ref)) + i(vs)*(2+pa) + v(out) + (pb > 0 ? 1/0 : 4k)"),
        NAMES,
        functions(amp="pa*x^2"),
        lambda node: f"X1.{node}",
        lambda source: f"X1.{source.upper()}",
    )
    difference, output = NodeVoltage("X1.in", "X1.ref"), NodeVoltage("X1.out", "0")
    assert leaves_of(tree) == (difference, SourceCurrent("X1.VS"), output)
    value = evaluate_behavioural(tree, {difference: 2.0, SourceCurrent("X1.VS"): 7.0, output: 0.5})
    assert value == 3 * 4 + 7 * 5 + 0.5 + 4000
    assert Number(5.0) in tuple(_nodes(tree))


def _nodes(tree: Expression) -> list[Expression]:
    below = tree.arguments if isinstance(tree, Call) else ()
    return [tree, *itertools.chain.from_iterable(map(_nodes, below))]


def test_the_points_of_a_table_are_constant() -> None:
    with pytest.raises(EvaluationError, match="must be constant"):
        substitute(parse_expression("table(v(a), 0, 0, 1, v(b))"), {})


V_A, V_B = NodeVoltage("a", "0"), NodeVoltage("b", "0")
DIFFERENTIABLE = listed(
    "x+y|x-y|x*y|x/y|-x|x**y|pow(x,y)|pwr(x,y)|x%y|abs(x)|sqrt(x)|sqr(x)|exp(x)|ln(x)|log10(x)|"
    "sin(x)|cos(x)|tan(x)|asin(x)|acos(x)|atan(x)|atan2(x,y)|hypot(x,y)|sinh(x)|cosh(x)|tanh(x)|"
    "asinh(x)|acosh(x)|atanh(x)|min(x,y)|max(x,y,1)|limit(x,-1,y)|limit(x,y,0.5)|"
    "table(x,-1,0,0,2,3,1)|pwl(x,-1,0,0,2,3,1)|x>y?x*y:x-y|uramp(x)|u2(x)|u(x)|stp(x)|sgn(x)|int(x)|nint(x)|floor(x)|"
    "ceil(x)|!x|x<y|x<=y|x>=y|x==y|x!=y|x&&y|"
    "exp(-x*x)*sin(3*y)/(1+y^2)|1m*(exp(x/0.5)-1)*(1+y/50)"
)


def source(text: str) -> Expression:
    tree = parse_expression(text)
    x, y = (functions(f="v(a)")["f"].body, functions(f="v(b)")["f"].body)
    known = {"f": UserFunction("f", ("x", "y"), tree)}
    return substitute(Call("f", (x, y)), {}, known)


@pytest.mark.parametrize("text", [*DIFFERENTIABLE, "x||y"])
@settings(
    max_examples=40, deadline=None, suppress_health_check=[HealthCheck.filter_too_much]
)  # acosh is real on a third of the range only
@given(st.integers(-1500, 1500), st.integers(-1500, 1500))
def test_derivatives_are_exact(text: str, column: int, row: int) -> None:
    """Against a central difference, where the function is smooth round the point."""
    x, y = column / 500 + 0.00037, row / 500 + 0.00071  # never on a kink, never equal
    tree = source(text)
    step = 1e-5
    offsets = (0.0, step, -step, 2 * step, -2 * step)

    def strict(dx: float, dy: float) -> float:
        return evaluate_behavioural(tree, {V_A: x + dx, V_B: y + dy})

    try:
        along_x = [strict(offset, 0.0) for offset in offsets]
        along_y = [strict(0.0, offset) for offset in offsets]
    except EvaluationError:
        assume(False)
    value, slopes = evaluate_with_derivatives(tree, {V_A: np.array([x]), V_B: np.array([y])})
    assert value[0] == pytest.approx(along_x[0], rel=1e-13, abs=1e-13)
    for leaf, (_, right, left, far_right, far_left) in ((V_A, along_x), (V_B, along_y)):
        near, wide = (right - left) / (2 * step), (far_right - far_left) / (4 * step)
        scale = max(abs(near), 1.0)
        # Both differences agree only away from kinks and poles.
        one_sided = abs((right - along_x[0]) - (along_x[0] - left)) / step
        assume(abs(near - wide) < 1e-7 * scale and one_sided < 1e-3 * scale)
        slope = slopes.get(leaf, np.zeros(1))[0]
        assert slope == pytest.approx(near, rel=1e-6, abs=1e-6)


EXTREMES = (0.0, -0.0, 1.0, -1.0, 1e-320, -1e-320, 1e-40, 1e30, -1e30, 1e99, -1e99, 710.0, -710.0)


@pytest.mark.parametrize("text", DIFFERENTIABLE)
def test_nothing_infinite_reaches_the_solver(text: str) -> None:
    x, y = np.array(list(itertools.product(EXTREMES, repeat=2))).T
    value, slopes = evaluate_with_derivatives(source(text), {V_A: x, V_B: y})
    assert value.shape == x.shape
    assert np.isfinite(value).all()
    for slope in slopes.values():
        assert slope.shape == x.shape
        assert np.isfinite(slope).all()


def test_each_board_has_its_own_row() -> None:
    tree = source("x*y + 3")
    value, slopes = evaluate_with_derivatives(
        tree, {V_A: np.array([1.0, 2.0]), V_B: np.array([5.0, 7.0])}
    )
    assert value.tolist() == [8.0, 17.0]
    assert {leaf: slope.tolist() for leaf, slope in slopes.items()} == {
        V_A: [5.0, 7.0],
        V_B: [1.0, 2.0],
    }


def test_a_constant_source_has_no_derivatives() -> None:
    value, slopes = evaluate_with_derivatives(Number(2.0), {V_A: np.zeros(4)})
    assert value.tolist() == [2.0] * 4
    assert slopes == {}


def test_a_solution_outside_the_domain_is_told() -> None:
    tree = source("sqrt(x)")
    assert evaluate_with_derivatives(tree, {V_A: np.array([-1.0])})[0][0] == 0.0
    with pytest.raises(EvaluationError, match="no real value"):
        evaluate_behavioural(tree, {V_A: -1.0})
