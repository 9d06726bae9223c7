"""E, F, G, H and B elements: linear gains stay linear, everything else becomes an expression."""

from __future__ import annotations

import itertools
from collections.abc import Sequence

from tauledger.circuit.elements import BehaviouralSource, ControlledSource, VoltageSource
from tauledger.circuit.evaluate import EvaluationError, substitute
from tauledger.circuit.expansion import Expansion, ignored, unevaluable
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
from tauledger.records import dataclass

_OUTPUT = {"E": "voltage", "H": "voltage", "G": "current", "F": "current"}
_EXPRESSION_NAMES = frozenset(("value", "vol", "cur", "v", "i"))
_LEFT_OUT = frozenset(("laplace", "freq", "chebyshev", "delay"))
MAXIMUM_TERMS = 1000
"""Of one POLY or TABLE."""


@dataclass(frozen=True, slots=True)
class _Source:
    """One element on its way into the circuit, its output nodes known."""

    run: Expansion
    scope: Scope
    statement: Statement
    nodes: tuple[str, ...]

    @property
    def letter(self) -> str:
        return self.statement.name.text[0].upper()

    @property
    def name(self) -> str:
        return self.scope.prefix + self.statement.name.text

    def number(self, item: Item) -> float:
        return self.run.number(item, self.scope, self.statement)

    def named(self, source: str, item: Item) -> str:
        """Flat name of the voltage source whose current controls; known at the end only."""
        return self.run.element_name(source, self.scope, self.statement, item, VoltageSource)

    def add_linear(self, control: list[Word], gain: float) -> None:
        run, span = self.run, self.statement.span()
        if self.letter in "EG":
            nodes = run.nodes(control, self.scope)
            run.add(ControlledSource(self.name, self.nodes, span, self.letter, gain, nodes))
            return
        [word] = control
        run.add_later(
            lambda: ControlledSource(
                self.name, self.nodes, span, self.letter, gain, (), self.named(word.text, word)
            ),
            span,
        )

    def add_expression(self, expression: Expression, item: Item, output: str = "") -> None:
        """``item`` is where the expression stands; ``output`` is that of the letter if not said."""

        def build() -> BehaviouralSource:
            try:
                flat = substitute(
                    expression,
                    self.scope.parameters,
                    self.scope.functions,
                    lambda node: self.run.expression_node(node, self.scope),
                    lambda name: self.named(name, item),
                )
            except EvaluationError as error:
                raise unevaluable(error, item, self.statement) from None
            return BehaviouralSource(
                self.name, self.nodes, self.statement.span(), output or _OUTPUT[self.letter], flat
            )

        self.run.add_later(build, self.statement.span())


def controlled(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add an E, F, G or H source. Raises ProblemError where the line does not say one."""
    items = _with_nodes_ungrouped(statement)
    if len(items) < 2 and statement.name.text[0] in "hH":
        run.leave_out(statement, "it has no two nodes and reads as a mounting hole", scope)
        return
    if len(items) < 3:
        raise _incomplete(statement)
    source = _Source(run, scope, statement, run.nodes(_words(statement, items[:2]), scope))
    head = items[2]
    keyword = _keyword(head)
    if keyword in _LEFT_OUT:
        run.leave_out(statement, f"{keyword.upper()} is not supported", scope)
    elif keyword in _EXPRESSION_NAMES:
        _value(source, items[2:])
    elif keyword == "table":
        _table(source, items[2:])
    elif keyword == "poly":
        _polynomial(source, items[3:])
    else:
        _linear(source, ungrouped(tuple(items[2:])))


def behavioural(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add a B source: the grammar leaves ``V=…`` or ``I=…`` as the third item."""
    nodes = run.nodes(node_words(statement, 2, "Bname node node V=expression"), scope)
    word = statement.items[2]
    assert isinstance(word, Word)
    letter, _, text = word.text.partition("=")
    output = "voltage" if letter.strip() in "vV" else "current"
    body = Word(text, word.offset + len(letter) + 1)
    expression = run.expression(_unwrapped(text), body, statement)
    _Source(run, scope, statement, nodes).add_expression(expression, body, output)


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


def _linear(source: _Source, items: list[Item]) -> None:
    statement = source.statement
    count = 2 if source.letter in "EG" else 1
    if len(items) <= count:
        raise _incomplete(statement)
    control = _words(statement, items[:count])
    gain = source.number(items[count])
    for extra in items[count + 1 : count + 2]:
        ignored(source.run, statement, extra)
    source.add_linear(control, gain)


def _value(source: _Source, items: list[Item]) -> None:
    """``VALUE={…}``, ``VALUE {…}``, or ``VALUE=`` with bare arithmetic up to the line's end."""
    statement = source.statement
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
            ignored(source.run, statement, extra)
    else:
        text = statement.line.text[value.offset :]
        value = Word(text.rstrip(), value.offset)
    source.add_expression(source.run.expression(text, value, statement), value)


def _polynomial(source: _Source, items: list[Item]) -> None:
    run, statement = source.run, source.statement
    if not items or not isinstance(items[0], Group) or len(items[0].items) != 1:
        raise _incomplete(statement)
    dimension = source.number(items[0].items[0])
    rest = ungrouped(tuple(items[1:]))
    width = 2 if source.letter in "EG" else 1
    if not 1 <= dimension <= 50 or dimension != int(dimension):
        raise fault(
            "polynomial-dimension",
            f"{statement.name.text}: POLY({dimension:g}); expected a whole number from 1 to 50",
            statement.span(items[0]),
            "Give the number of controlling quantities.",
        )
    count = int(dimension)
    controls = _words(statement, rest[: width * count])
    coefficients = [source.number(item) for item in rest[width * count :]]
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
        source.add_linear(controls, coefficients[1])
        return
    quantities: list[Expression] = [
        NodeVoltage(controls[2 * k].text, controls[2 * k + 1].text)
        if width == 2
        else SourceCurrent(controls[k].text)
        for k in range(count)
    ]
    source.add_expression(polynomial(quantities, coefficients), items[0])


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


def _table(source: _Source, items: list[Item]) -> None:
    """``TABLE {expression} = (x, y) (x, y) …``, with or without the equals sign."""
    statement = source.statement
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
    values = [source.number(item) for item in pairs]
    if formula is None or len(values) < 4 or len(values) % 2 or len(values) > 2 * MAXIMUM_TERMS:
        raise fault(
            "element-incomplete",
            f"{statement.name.text}: expected TABLE {{expression}} = (x, y) (x, y) …",
            statement.span(),
            "Give an expression in braces and at least two pairs.",
        )
    argument = source.run.expression(formula.text, formula, statement)
    expression = Apply("table", (argument, *(Number(value) for value in values)))
    source.add_expression(expression, formula)
