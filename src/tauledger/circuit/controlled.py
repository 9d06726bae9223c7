"""E, F, G, H and B elements: linear gains stay linear, everything else becomes an expression."""

from __future__ import annotations

import itertools
from collections.abc import Sequence

from tauledger.circuit.elements import BehaviouralSource, ControlledSource, VoltageSource
from tauledger.circuit.evaluate import EvaluationError, substitute
from tauledger.circuit.expansion import Expansion, ignored
from tauledger.circuit.operands import is_word, node_words, ungrouped
from tauledger.circuit.scope import Scope
from tauledger.netlist.codes import fault
from tauledger.netlist.expression import (
    Call as Apply,
)
from tauledger.netlist.expression import (
    Expression,
    NodeVoltage,
    Number,
    SourceCurrent,
)
from tauledger.netlist.statements import Assignment, Formula, Group, Item, Statement, Table, Word

_OUTPUT = {"e": "voltage", "h": "voltage", "g": "current", "f": "current"}
_EXPRESSION_NAMES = frozenset(("value", "vol", "cur", "v", "i"))
_LEFT_OUT = frozenset(("laplace", "freq", "chebyshev", "delay"))
MAXIMUM_TERMS = 1000
"""Of one POLY or TABLE."""


def controlled(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add an E, F, G or H source."""
    items = _with_nodes_ungrouped(statement)
    if len(items) < 2 and statement.name.text[0] in "hH":
        run.leave_out(statement, "it has no two nodes and reads as a mounting hole", scope)
        return
    if len(items) < 3:
        raise _incomplete(statement)
    output = run.nodes(_words(statement, items[:2]), scope)
    head = items[2]
    keyword = _keyword(head)
    if keyword in _LEFT_OUT:
        run.leave_out(statement, f"{keyword.upper()} is not supported", scope)
    elif keyword in _EXPRESSION_NAMES:
        _value(run, scope, statement, output, items[2:])
    elif keyword == "table":
        _table(run, scope, statement, output, items[2:])
    elif keyword == "poly":
        _polynomial(run, scope, statement, output, items[3:])
    else:
        _linear(run, scope, statement, output, ungrouped(tuple(items[2:])))


def behavioural(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add a B source: the grammar leaves ``V=…`` or ``I=…`` as the third item."""
    nodes = run.nodes(node_words(statement, 2, "Bname node node V=expression"), scope)
    word = statement.items[2]
    assert isinstance(word, Word)
    letter, _, text = word.text.partition("=")
    output = "voltage" if letter.strip() in "vV" else "current"
    body = Word(text, word.offset + len(letter) + 1)
    _add_expression(run, scope, statement, nodes, output, _unwrapped(text), body)


def _unwrapped(text: str) -> str:
    stripped = text.strip()
    pair = stripped[:1] + stripped[-1:]
    return stripped[1:-1] if pair in ("{}", "''") else stripped


def _keyword(item: Item) -> str:
    if isinstance(item, Assignment):
        return item.name.text.lower()
    return item.text.lower() if isinstance(item, Word) else ""


def _with_nodes_ungrouped(statement: Statement) -> list[Item]:
    """Output nodes may stand in parentheses."""
    items = statement.items
    if items and isinstance(items[0], Group):
        return [*items[0].items, *items[1:]]
    return list(items)


def _words(statement: Statement, items: Sequence[Item]) -> list[Word]:
    words = [item for item in items if isinstance(item, Word)]
    if len(words) != len(items):
        raise _incomplete(statement)
    return words


def _incomplete(statement: Statement) -> Exception:
    letter = statement.name.text[0].upper()
    control = "control+ control−" if letter in "EG" else "Vcontrol"
    return fault(
        "element-incomplete",
        f"{statement.name.text}: expected two nodes, the control and the gain",
        statement.span(),
        f"Write it as: {letter}name node node {control} gain",
    )


def _linear(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    output: tuple[str, ...],
    items: list[Item],
) -> None:
    letter = statement.name.text[0].upper()
    count = 2 if letter in "EG" else 1
    if len(items) <= count:
        raise _incomplete(statement)
    control = _words(statement, items[:count])
    gain = run.number(items[count], scope, statement)
    for extra in items[count + 1 : count + 2]:
        ignored(run, statement, extra)
    _add_linear(run, scope, statement, output, control, gain)


def _add_linear(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    output: tuple[str, ...],
    control: list[Word],
    gain: float,
) -> None:
    letter = statement.name.text[0].upper()
    name = scope.prefix + statement.name.text
    if letter in "EG":
        nodes = run.nodes(control, scope)
        run.add(ControlledSource(name, output, statement.span(), letter, gain, nodes))
        return
    word = control[0]
    run.add_later(
        lambda: ControlledSource(
            name,
            output,
            statement.span(),
            letter,
            gain,
            (),
            run.element_name(word.text, scope, statement, word, VoltageSource),
        ),
        statement.span(),
    )


def _value(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    output: tuple[str, ...],
    items: list[Item],
) -> None:
    """``VALUE={…}``, ``VALUE {…}``, or ``VALUE=`` with bare arithmetic up to the line's end."""
    head = items[0]
    value: Item
    if isinstance(head, Assignment):
        value = head.value  # type: ignore[assignment]
    elif len(items) > 1:
        value = items[1]
    else:
        raise _incomplete(statement)
    if isinstance(value, Formula):
        text = value.text
        after = items[1:] if isinstance(head, Assignment) else items[2:]
        for extra in after[:1]:
            ignored(run, statement, extra)
    else:
        text = statement.line.text[value.offset :]
        value = Word(text.rstrip(), value.offset)
    letter = statement.name.text[0].lower()
    _add_expression(run, scope, statement, output, _OUTPUT[letter], text, value)


def _add_expression(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    nodes: tuple[str, ...],
    output: str,
    text: str,
    item: Item,
) -> None:
    expression = run.expression(text, item, statement)
    _add_behavioural(run, scope, statement, nodes, output, expression, item)


def _add_behavioural(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    nodes: tuple[str, ...],
    output: str,
    expression: Expression,
    item: Item,
) -> None:
    def build() -> BehaviouralSource | ControlledSource:
        try:
            flat = substitute(
                expression,
                scope.parameters,
                scope.functions,
                lambda node: run.expression_node(node, scope),
                lambda name: run.element_name(name, scope, statement, item, VoltageSource),
            )
        except EvaluationError as error:
            raise fault(
                "expression-invalid",
                f"{statement.name.text}: {error}",
                statement.span(item),
                "Correct the expression, or define what it names with .param or .func.",
            ) from None
        name = scope.prefix + statement.name.text
        return BehaviouralSource(name, nodes, statement.span(), output, flat)

    run.add_later(build, statement.span())


def _polynomial(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    output: tuple[str, ...],
    items: list[Item],
) -> None:
    if not items or not isinstance(items[0], Group) or len(items[0].items) != 1:
        raise _incomplete(statement)
    dimension = run.number(items[0].items[0], scope, statement)
    rest = ungrouped(tuple(items[1:]))
    letter = statement.name.text[0].upper()
    width = 2 if letter in "EG" else 1
    if not 1 <= dimension <= 50 or dimension != int(dimension):
        raise fault(
            "polynomial-dimension",
            f"{statement.name.text}: POLY({dimension:g}); expected a whole number from 1 to 50",
            statement.span(items[0]),
            "Give the number of controlling quantities.",
        )
    count = int(dimension)
    controls = _words(statement, rest[: width * count])
    coefficients = [run.number(item, scope, statement) for item in rest[width * count :]]
    if len(controls) < width * count or not coefficients or len(coefficients) > MAXIMUM_TERMS:
        raise _incomplete(statement)
    if count == 1 and len(coefficients) == 1:
        run.warn(
            "polynomial-single",
            f"{statement.name.text}: POLY(1) with one coefficient is a constant, as in ngspice; "
            "older simulators took it as the gain",
            statement.span(rest[width]),
            "Write 0 and the gain, or leave POLY out.",
        )
    if count == 1 and len(coefficients) == 2 and coefficients[0] == 0.0:
        _add_linear(run, scope, statement, output, controls, coefficients[1])
        return
    quantities: list[Expression] = [
        NodeVoltage(controls[2 * k].text, controls[2 * k + 1].text)
        if width == 2
        else SourceCurrent(controls[k].text)
        for k in range(count)
    ]
    expression = polynomial(quantities, coefficients)
    _add_behavioural(run, scope, statement, output, _OUTPUT[letter.lower()], expression, items[0])


def polynomial(quantities: Sequence[Expression], coefficients: Sequence[float]) -> Expression:
    """Sum of coefficients times products, in SPICE order: constant, first powers, then every
    product of two in order (aa, ab, …, bb, …), of three, and so on."""
    products = itertools.chain.from_iterable(
        itertools.combinations_with_replacement(quantities, degree) for degree in itertools.count()
    )
    terms: list[Expression] = []
    for coefficient, product in zip(coefficients, products, strict=False):
        if coefficient != 0.0:
            terms.append(_balanced("*", [Number(coefficient), *product]))
    return _balanced("+", terms) if terms else Number(0.0)


def _balanced(operator: str, parts: Sequence[Expression]) -> Expression:
    """Join by halves, so that a long sum is not a deep tree."""
    if len(parts) == 1:
        return parts[0]
    half = len(parts) // 2
    return Apply(operator, (_balanced(operator, parts[:half]), _balanced(operator, parts[half:])))


def _table(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    output: tuple[str, ...],
    items: list[Item],
) -> None:
    """``TABLE {expression} = (x, y) (x, y) …``, with or without the equals sign."""
    pairs: list[Item] = []
    formula: Formula | None = None
    for item in items:
        if isinstance(item, Assignment) and isinstance(item.value, Formula):
            formula = item.value
        elif isinstance(item, Table):
            formula = item.formula
            pairs.extend(item.group.items)
        elif isinstance(item, Formula) and formula is None:
            formula = item
        elif not is_word(item, "table"):
            pairs.extend(ungrouped((item,)))
    values = [run.number(item, scope, statement) for item in pairs]
    if formula is None or len(values) < 4 or len(values) % 2 or len(values) > 2 * MAXIMUM_TERMS:
        raise fault(
            "element-incomplete",
            f"{statement.name.text}: expected TABLE {{expression}} = (x, y) (x, y) …",
            statement.span(),
            "Give an expression in braces and at least two pairs.",
        )
    argument = run.expression(formula.text, formula, statement)
    expression = Apply("table", (argument, *(Number(value) for value in values)))
    letter = statement.name.text[0].lower()
    _add_behavioural(run, scope, statement, output, _OUTPUT[letter], expression, formula)
