"""Expressions to numbers: parameters, user functions, and what behavioural sources keep of them.

Functions and constants mean what they mean in ngspice-39, as measured (tests hold them to it):
``log`` is natural, powers are of the magnitude (``(-2)^3`` is 8), ``u(0)`` is 0.5. Where ngspice
differs between a parameter and a behavioural source, so do we: ``pow(-2, 3)`` is −8 in a parameter
and 8 in a source, ``pwr(-2, 2)`` is 4 and −4. Accepted besides, as other SPICE readers do: ``pi``
and ``e`` in parameters, ``limit(x, low, high)``, ``table``, ``if``, ``atan2``, ``hypot``, ``stp``.
The statistical functions give their nominal value: the netlist describes the nominal board.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping

from tauledger.circuit.derivatives import evaluate_with_derivatives
from tauledger.circuit.functions import (
    BEHAVIOURAL_FUNCTIONS,
    FUNCTIONS,
    NOMINAL,
    SAME_FUNCTION,
    BuiltIn,
    EvaluationError,
    apply,
    built_in,
    near_names,
    table,
)
from tauledger.netlist.expression import (
    Call,
    Expression,
    Name,
    NodeVoltage,
    Number,
    SourceCurrent,
)
from tauledger.records import dataclass

__all__ = [
    "EvaluationError",
    "UserFunction",
    "evaluate",
    "evaluate_behavioural",
    "evaluate_with_derivatives",
    "leaves_of",
    "substitute",
]

MAX_DEPTH = 300
"""Of an expression with its user functions put in."""
MAX_STEPS = 100_000
MAX_SIZE = 20_000
"""Numbers, names and operations left in a behavioural source."""

CONSTANTS: Mapping[str, float] = {"pi": math.pi, "e": math.e}
BEHAVIOURAL_CONSTANTS: Mapping[str, float] = {**CONSTANTS, "time": 0.0, "hertz": 0.0}
"""In a behavioural source: time and frequency as at the operating point."""


@dataclass(frozen=True, slots=True)
class UserFunction:
    """A ``.func`` or a ``.param`` with arguments; names in lower case."""

    name: str
    parameters: tuple[str, ...]
    body: Expression


def evaluate(
    expression: Expression,
    names: Mapping[str, float],
    functions: Mapping[str, UserFunction] | None = None,
) -> float:
    """The value of a parameter expression.

    ``names`` and ``functions`` have lower-case keys and go before the built-in ones. Raises
    :class:`EvaluationError` for an unknown name or function, a wrong number of arguments, division
    by zero, an argument outside the domain, overflow, and endless recursion.
    """
    return _Evaluator(functions or {}, names, CONSTANTS, FUNCTIONS).value(expression)


def evaluate_behavioural(expression: Expression, leaves: Mapping[Expression, float]) -> float:
    """The value of a substituted source expression where its leaves have the given values.

    As strict as :func:`evaluate`: a caller that has solved with the forgiving
    :func:`tauledger.circuit.derivatives.evaluate_with_derivatives` learns here whether the
    solution lies where the expression has no value, such as the square root of a negative number.
    """
    table = {**FUNCTIONS, **BEHAVIOURAL_FUNCTIONS}
    return _Evaluator({}, {}, BEHAVIOURAL_CONSTANTS, table, leaves).value(expression)


def substitute(
    expression: Expression,
    names: Mapping[str, float],
    functions: Mapping[str, UserFunction] | None = None,
    rename_node: Callable[[str], str] = str,
    rename_source: Callable[[str], str] = str,
) -> Expression:
    """A source expression with parameters, user functions and constants put in and folded.

    What is left has only numbers, node voltages and source currents as leaves, renamed (ground,
    ``"0"``, stays), and only functions that
    :func:`tauledger.circuit.derivatives.evaluate_with_derivatives` knows. Raises
    :class:`EvaluationError` as :func:`evaluate` does, and when the result grows too large.
    """
    worker = _Substitution(functions or {}, names, rename_node, rename_source)
    return worker.put_in(expression, {}, 1).expression


def leaves_of(expression: Expression) -> tuple[Expression, ...]:
    """The distinct node voltages and source currents, in order of first appearance."""
    found: dict[Expression, None] = {}
    waiting = [expression]
    while waiting:
        node = waiting.pop()
        if isinstance(node, Call):
            waiting.extend(reversed(node.arguments))
        elif isinstance(node, NodeVoltage | SourceCurrent):
            found.setdefault(node)
    return tuple(found)


def _unknown_name(name: str, *scopes: Iterable[str]) -> EvaluationError:
    known = [word for scope in scopes for word in scope]
    return EvaluationError(f"unknown parameter {name}{near_names(name, known)}")


def _check_arguments(function: UserFunction, count: int) -> None:
    if count != len(function.parameters):
        raise EvaluationError(
            f"{function.name} takes {len(function.parameters)} arguments, not {count}"
        )


def _check_depth(depth: int) -> None:
    if depth > MAX_DEPTH:
        raise EvaluationError(
            f"the expression with its functions put in is more than {MAX_DEPTH} deep; "
            "does a function call itself?"
        )


class _Budget:
    """Counts steps, so that functions calling functions twice each come to an end."""

    def __init__(self) -> None:
        self.steps = 0

    def step(self) -> None:
        self.steps += 1
        if self.steps > MAX_STEPS:
            raise EvaluationError(f"the expression takes more than {MAX_STEPS} steps")


class _Evaluator:
    # One Python frame a level, no comprehension round the recursion: MAX_DEPTH levels must fit
    # into the interpreter's own limit.

    def __init__(
        self,
        functions: Mapping[str, UserFunction],
        names: Mapping[str, float],
        constants: Mapping[str, float],
        table: Mapping[str, BuiltIn],
        leaves: Mapping[Expression, float] | None = None,
    ) -> None:
        self.functions = functions
        self.names = names
        self.constants = constants
        self.table = table
        self.leaves = leaves or {}
        self.budget = _Budget()

    def value(
        self, node: Expression, local: Mapping[str, float] | None = None, depth: int = 1
    ) -> float:
        _check_depth(depth)
        self.budget.step()
        if isinstance(node, Number):
            return node.value
        if isinstance(node, Call):
            if node.function in self.functions:
                function = self.functions[node.function]
                _check_arguments(function, len(node.arguments))
                arguments = []
                for argument in node.arguments:
                    arguments.append(self.value(argument, local, depth + 1))
                inner = dict(zip(function.parameters, arguments, strict=True))
                return self.value(function.body, inner, depth + 1)
            name = SAME_FUNCTION.get(node.function, node.function)
            known = built_in(name, len(node.arguments), self.table)
            arguments = []
            for argument in node.arguments:
                arguments.append(self.value(argument, local, depth + 1))
                if (branch := _chosen(name, arguments[0], node.arguments)) is not None:
                    return self.value(branch, local, depth + 1)
            return apply(name, known, arguments)
        return self._leaf(node, local or {})

    def _leaf(self, node: Expression, local: Mapping[str, float]) -> float:
        if isinstance(node, Name):
            for scope in (local, self.names, self.constants):
                if node.name in scope:
                    return scope[node.name]
            raise _unknown_name(node.name, local, self.names, self.constants)
        if node in self.leaves:
            return self.leaves[node]
        what = f"v({node.positive})" if isinstance(node, NodeVoltage) else "i(...)"
        raise EvaluationError(
            f"{what} has no value here: a parameter cannot depend on voltages or currents"
        )


def _chosen(name: str, first: float, arguments: tuple[Expression, ...]) -> Expression | None:
    """What is left to evaluate once the first argument decides which branch counts."""
    if name == "?:":
        return arguments[1] if first else arguments[2]
    if (name == "&&" and not first) or (name == "||" and first):
        return Number(float(bool(first)))
    return None


@dataclass(frozen=True, slots=True)
class _Sized:
    expression: Expression
    size: int = 1
    depth: int = 1


class _Substitution:
    def __init__(
        self,
        functions: Mapping[str, UserFunction],
        names: Mapping[str, float],
        rename_node: Callable[[str], str],
        rename_source: Callable[[str], str],
    ) -> None:
        self.functions = functions
        self.names = names
        self.rename_node = rename_node
        self.rename_source = rename_source
        self.table = {**FUNCTIONS, **BEHAVIOURAL_FUNCTIONS}
        self.budget = _Budget()

    def put_in(self, node: Expression, local: Mapping[str, _Sized], depth: int) -> _Sized:
        _check_depth(depth)
        self.budget.step()
        if not isinstance(node, Call):
            return self._leaf(node, local)
        user = self.functions.get(node.function)
        name = SAME_FUNCTION.get(node.function, node.function)
        if user is not None:
            _check_arguments(user, len(node.arguments))
        else:
            built_in(name, len(node.arguments), self.table)
        parts: list[_Sized] = []
        for argument in node.arguments:
            parts.append(self.put_in(argument, local, depth + 1))
            first = parts[0].expression
            if user is None and isinstance(first, Number):
                branch = _chosen(name, first.value, node.arguments)
                if branch is not None:
                    return self.put_in(branch, local, depth + 1)
        if user is not None:
            inner = dict(zip(user.parameters, parts, strict=True))
            return self.put_in(user.body, inner, depth + 1)
        return self._built(name, parts)

    def _built(self, name: str, parts: list[_Sized]) -> _Sized:
        arguments = tuple(part.expression for part in parts)
        numbers = [argument.value for argument in arguments if isinstance(argument, Number)]
        if len(numbers) == len(arguments):
            return _Sized(Number(apply(name, self.table[name], numbers)))
        if name in NOMINAL or (name == "limit" and len(parts) == 2):
            return parts[0]
        if name == "table":
            if len(numbers) != len(arguments) - 1 or isinstance(arguments[0], Number):
                raise EvaluationError("the points of a table must be constant")
            table(0.0, *numbers)
        size = 1 + sum(part.size for part in parts)
        depth = 1 + max(part.depth for part in parts)
        _check_depth(depth)
        if size > MAX_SIZE:
            raise EvaluationError(
                f"the expression with its functions put in has more than {MAX_SIZE} terms"
            )
        return _Sized(Call(name, arguments), size, depth)

    def _leaf(self, node: Expression, local: Mapping[str, _Sized]) -> _Sized:
        if isinstance(node, NodeVoltage):
            return _Sized(NodeVoltage(self._node(node.positive), self._node(node.negative)))
        if isinstance(node, SourceCurrent):
            return _Sized(SourceCurrent(self.rename_source(node.source)))
        if isinstance(node, Name):
            if node.name in local:
                return local[node.name]
            for scope in (self.names, BEHAVIOURAL_CONSTANTS):
                if node.name in scope:
                    return _Sized(Number(scope[node.name]))
            raise _unknown_name(node.name, local, self.names, BEHAVIOURAL_CONSTANTS)
        return _Sized(node)

    def _node(self, node: str) -> str:
        return node if node == "0" else self.rename_node(node)
