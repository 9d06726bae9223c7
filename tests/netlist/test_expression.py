"""Text to expression trees: grouping, odd names, bounds, and messages."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tauledger.netlist.expression import (
    Call,
    Expression,
    ExpressionError,
    Name,
    NodeVoltage,
    Number,
    SourceCurrent,
    number_traps,
    parse_expression,
)


def spelt(tree: Expression) -> str:
    """The tree with every grouping written out."""
    if isinstance(tree, Number):
        return f"{tree.value:g}"
    if isinstance(tree, Name):
        return tree.name
    if isinstance(tree, NodeVoltage):
        return f"v<{tree.positive}|{tree.negative}>"
    if isinstance(tree, SourceCurrent):
        return f"i<{tree.source}>"
    assert isinstance(tree, Call)
    return f"({' '.join([tree.function, *map(spelt, tree.arguments)])})"


@pytest.mark.parametrize(
    ("text", "tree"),
    [
        ("1+2*3-4", "(- (+ 1 (* 2 3)) 4)"),
        ("8/4/2", "(/ (/ 8 4) 2)"),
        ("2^3^2", "(** (** 2 3) 2)"),
        ("2**-1*3", "(* (** 2 (neg 1)) 3)"),
        ("-2^2", "(neg (** 2 2))"),
        ("2*-3", "(* 2 (neg 3))"),
        ("!a==0", "(== (! a) 0)"),
        ("a<>b", "(!= a b)"),
        ("a|b&c", "(|| a (&& b c))"),
        ("+a--b", "(- a (neg b))"),
        ("1||0&&0", "(|| 1 (&& 0 0))"),
        ("1+2>2", "(> (+ 1 2) 2)"),
        ("a?b:c?d:e", "(?: a b (?: c d e))"),
        ("a ? b ? 1 : 2 : 3", "(?: a (?: b 1 2) 3)"),
        ("{1k + RB}", "(+ 1000 rb)"),
        ("'2*x'", "(* 2 x)"),
        ('"2*x"', "(* 2 x)"),
        ("{gain}*V(in)", "(* gain v<in|0>)"),
        ("'gain'*V(in)", "(* gain v<in|0>)"),
        (" 4.7k ", "4700"),
        ("{4k7}", "4700"),
        ("10uF*2", "(* 1e-05 2)"),
        ("IF(a>1, 2, 3)", "(if (> a 1) 2 3)"),
        ("f()+g(1)", "(+ (f) (g 1))"),
        ("v(net-_q1-pad1_)/2", "(/ v<net-_q1-pad1_|0> 2)"),
        ("V(Net-(Q1-C), +12V)*I(V1)", "(* v<net-(q1-c)|+12v> i<v1>)"),
        ("v(/in)-v( a , b )", "(- v</in|0> v<a|b>)"),
        ("v($n_0001)+i(x1.v2)", "(+ v<$n_0001|0> i<x1.v2>)"),
    ],
)
def test_grouping_and_names(text: str, tree: str) -> None:
    assert spelt(parse_expression(text)) == tree


@pytest.mark.parametrize(
    ("text", "message", "offset"),
    [
        ("1+", "ends where a number, a name or '\\(' was expected", 2),
        ("", "ends where a number", 0),
        ("{}", "found '}' where a number", 1),
        ("(1+2", "without its closing '\\)'", 4),
        ("{1+2", "without its closing '}'", 4),
        ("1+2)", "'\\)' closes nothing", 3),
        ("1 2", "found '2' where an operator", 2),
        ("1,5+2", "found ',' where an operator", 1),
        ("1+*2", "found '\\*' where a number", 2),
        ("1$2", "'\\$' does not belong", 1),
        ("2*4.7k7", "'4.7k7' is not a number", 2),
        ("2*1e400", "too large for any circuit value", 2),
        ("f(1,)", "found '\\)' where a number", 4),
    ],
)
def test_a_fault_is_named_where_it_stands(text: str, message: str, offset: int) -> None:
    with pytest.raises(ExpressionError, match=message) as caught:
        parse_expression(text)
    assert caught.value.offset == offset


def fault_of(text: str) -> ExpressionError | None:
    try:
        parse_expression(text)
    except ExpressionError as error:
        return error
    return None


@pytest.mark.parametrize(
    "text",
    [
        "(" * 10_000 + "1" + ")" * 10_000,
        "(" * 5_000,
        "-" * 10_000 + "1",
        "+" * 10_000 + "1+1",
        "!" * 10_000 + "1",
        "2^" * 5_000 + "1",
        "1?" * 5_000 + "1",
        "f(" * 5_000 + "1" + ")" * 5_000,
        "+".join("x" * 5_000),
        "v" + "(" * 15_000,
        "v(" + "()" * 9_000,
        "'" * 9_999,
        "1" * 100_000,
    ],
)
def test_no_depth_or_length_breaks_the_reader(text: str) -> None:
    fault = fault_of(text)
    if fault is not None:
        assert len(fault.message) < 200
        assert 0 <= fault.offset <= len(text)


@given(st.text(st.sampled_from("0123456789.ekMuµ+-*/^(){}'\",?:<>=!&|vi $\nabcé\x00"), max_size=40))
def test_any_text_is_read_or_refused(text: str) -> None:
    fault = fault_of(text)
    assert fault is None or 0 <= fault.offset <= len(text)


TREES: st.SearchStrategy[Expression] = st.recursive(
    st.builds(Number, st.integers(0, 999).map(float))
    | st.builds(Name, st.sampled_from(("a", "rb", "x1")))
    | st.builds(NodeVoltage, st.sampled_from(("in", "+12v")), st.sampled_from(("0", "net-(q1)"))),
    lambda inner: (
        st.builds(
            lambda name, *pair: Call(name, pair),
            st.sampled_from(("+", "-", "*", "/", "%", "**", "<", ">=", "==", "&&", "||", "min")),
            inner,
            inner,
        )
        | st.builds(lambda one: Call("neg", (one,)), inner)
        | st.builds(lambda *three: Call("?:", three), inner, inner, inner)
    ),
    max_leaves=12,
)


def written(tree: Expression) -> str:
    if isinstance(tree, NodeVoltage):
        return f"v({tree.positive},{tree.negative})"
    if not isinstance(tree, Call):
        return spelt(tree)
    parts = [written(argument) for argument in tree.arguments]
    if tree.function == "neg":
        return f"(-{parts[0]})"
    if tree.function == "?:":
        return f"({parts[0]} ? {parts[1]} : {parts[2]})"
    if tree.function == "min":
        return f"min({', '.join(parts)})"
    return f"({parts[0]} {tree.function} {parts[1]})"


@given(TREES)
def test_a_written_tree_reads_back(tree: Expression) -> None:
    assert parse_expression(written(tree)) == tree


def test_doubtful_numbers_are_found_with_their_place() -> None:
    traps = [(trap.offset, trap.text, trap.trap) for trap in number_traps("{4k7 + 2*1M - r47}")]
    assert traps == [(1, "4k7", "value-letter-digit"), (9, "1M", "value-milli")]
    assert [trap.trap for trap in number_traps("1F")] == ["value-femto"]
