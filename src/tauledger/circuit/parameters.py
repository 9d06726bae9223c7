"""``.param`` and ``.func``: definitions in any order → numbers and functions of a scope."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping

from tauledger.circuit.evaluate import UserFunction
from tauledger.circuit.expansion import Expansion
from tauledger.circuit.scope import Scope
from tauledger.netlist.codes import fault
from tauledger.netlist.expression import Call, Expression, Name
from tauledger.netlist.statements import Assignment, Formula, Statement, Word
from tauledger.problems import ProblemError, SourceSpan
from tauledger.records import dataclass

_FUNCTION = re.compile(r"([A-Za-z_]\w*)\s*\(([^()]*)\)$")
# ".func f(x,y) {x*y}", with the equals sign left out.
_FUNCTION_LINE = re.compile(r"\s*([A-Za-z_]\w*)\s*\(([^()]*)\)\s*=?\s*(.*\S)\s*$")


_PLAIN_NUMBER = re.compile(r"[0-9.][^\s+*/()?<>=&|^-]*")


@dataclass(frozen=True, slots=True)
class Definition:
    """A parameter's name and unevaluated text."""

    name: str
    text: str
    item: Word | Formula
    statement: Statement


def collect(run: Expansion, scope: Scope, statements: Iterable[Statement]) -> list[Definition]:
    """Parameters of ``.param`` lines; functions go straight into the scope."""
    definitions: list[Definition] = []
    for statement in statements:
        try:
            if statement.keyword == ".func":
                _add_function_line(run, scope, statement)
                continue
            for item in statement.items:
                if isinstance(item, Assignment):
                    match = _FUNCTION.match(item.name.text)
                    text, where = assigned_text(item, statement)
                    if isinstance(where, Word) and text == where.text and " " in text:
                        run.warn("expression-unbraced", *_unbraced(text, statement, where))
                    if match:
                        _add_function(run, scope, statement, match[1], match[2], text, where)
                    else:
                        name = item.name.text.lower()
                        definitions.append(Definition(name, text, where, statement))
        except ProblemError as error:
            run.absorb(error)
    return definitions


def _unbraced(text: str, statement: Statement, where: Word) -> tuple[str, SourceSpan, str]:
    return (
        f"{text!r} is read as one expression; ngspice reads it up to the first blank only",
        statement.span(where),
        "Put the expression into braces.",
    )


def assigned_text(item: Assignment, statement: Statement) -> tuple[str, Word | Formula]:
    """The arithmetic right of the equals sign, and where it stands."""
    value = item.value
    if isinstance(value, Formula):
        return value.text, value
    raw = statement.line.text[value.offset : value.end]
    text = raw.strip()
    word = Word(text, value.offset + len(raw) - len(raw.lstrip()))
    if text[:1] + text[-1:] in ("{}", "''", '""'):
        text = text[1:-1]
    return text, word


def _add_function_line(run: Expansion, scope: Scope, statement: Statement) -> None:
    match = _FUNCTION_LINE.match(statement.tail().rstrip())
    if match is None:
        raise fault(
            "line-unreadable",
            "expected a function such as .func f(x, y) {x*y}",
            statement.span(),
            "Write the name, the arguments in parentheses, and the body in braces.",
        )
    where = Word(match[3], statement.name.end + match.start(3))
    text = match[3]
    if text[:1] + text[-1:] in ("{}", "''"):
        text = text[1:-1]
    _add_function(run, scope, statement, match[1], match[2], text, where)


def _add_function(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    name: str,
    arguments: str,
    text: str,
    where: Word | Formula,
) -> None:
    body = run.expression(text, where, statement)
    names = tuple(part.strip().lower() for part in arguments.split(",") if part.strip())
    scope.functions[name.lower()] = UserFunction(name.lower(), names, body)


def resolve(
    run: Expansion,
    scope: Scope,
    definitions: Iterable[Definition],
    overrides: Mapping[str, float],
    *,
    quiet: bool = False,
) -> None:
    """Evaluate definitions into ``scope.parameters``, whatever order they depend in.

    The last definition of a name counts. A cycle, or a name that cannot be evaluated, is one
    problem; the others are evaluated all the same. With ``quiet`` nothing is reported: more
    definitions may follow.
    """
    waiting = {item.name: item for item in definitions if item.name not in overrides}
    scope.parameters.update(overrides)
    state: dict[str, int] = {}
    for root in waiting:
        stack = [root]
        while stack:
            name = stack[-1]
            if state.get(name) == _DONE:
                stack.pop()
                continue
            needed = [
                other
                for other in _names(run, scope, waiting[name])
                if other in waiting and state.get(other) != _DONE
            ]
            if not needed:
                stack.pop()
                state[name] = _DONE
                _evaluate(run, scope, waiting[name], quiet)
            elif any(state.get(other) == _OPEN for other in needed):
                stack.pop()
                state[name] = _DONE
                if not quiet:
                    _report_cycle(run, waiting[name])
            else:
                state[name] = _OPEN
                stack.extend(needed)


_OPEN, _DONE = 1, 2


def _report_cycle(run: Expansion, definition: Definition) -> None:
    run.report(
        fault(
            "parameter-cycle",
            f"parameter {definition.name!r} is defined by itself, directly or through others",
            definition.statement.span(definition.item),
            "Give one of them a number.",
        ).problems
    )


def _names(run: Expansion, scope: Scope, definition: Definition) -> Iterator[str]:
    try:
        expression = run.expression(definition.text, definition.item, definition.statement)
    except ProblemError:
        return
    yield from free_names(expression, scope)


def free_names(expression: Expression, scope: Scope) -> Iterator[str]:
    """Parameter names in an expression and in the functions it calls."""
    seen: set[str] = set()
    stack = [expression]
    while stack:
        part = stack.pop()
        if isinstance(part, Name):
            yield part.name
        elif isinstance(part, Call):
            stack.extend(part.arguments)
            function = scope.functions.get(part.function)
            if function is not None and part.function not in seen:
                seen.add(part.function)
                stack.append(function.body)


def _evaluate(run: Expansion, scope: Scope, definition: Definition, quiet: bool) -> None:
    try:
        item = definition.item
        # A bare number may be written as no expression may, such as 1,5 or R47.
        bare = isinstance(item, Word) and item.text == definition.text
        if bare and _PLAIN_NUMBER.fullmatch(definition.text):
            value = run.number(item, scope, definition.statement)
        else:
            value = run.arithmetic(definition.text, item, scope, definition.statement)
        scope.parameters[definition.name] = value
    except ProblemError as error:
        if not quiet:
            run.absorb(error)
