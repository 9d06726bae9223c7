"""The expression of a behavioural source, printed anew for ngspice from its tree.

Only functions listed here are printed, each written so that ngspice-39 computes what
:mod:`tauledger.circuit.functions` says (measured, and held to it by a test): ngspice has no
``atan2``, ``hypot``, ``int``, ``sqr``, ``stp`` and ``%``, and its ``pwl`` runs on beyond the outer
points along their lines. An argument that such a form needs more than once stands as the
voltage of a node of its own, so that nothing is printed twice.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping, Sequence

from tauledger.netlist.expression import Call, Expression, NodeVoltage, Number, SourceCurrent
from tauledger.quantity import format_spice

_LEAF = re.compile(r"[a-z0-9.]+|\(-[a-z0-9.]+\)|[vi]\([a-z0-9,]+\)")
_INFIX = frozenset(("+", "-", "*", "/", "<", "<=", ">", ">=", "==", "!=", "&&", "||"))
_SAME = frozenset(
    (
        *("abs", "sqrt", "exp", "ln", "log10", "sin", "cos", "tan", "asin", "acos", "atan"),
        *("sinh", "cosh", "tanh", "asinh", "acosh", "atanh", "sgn", "nint", "floor", "ceil"),
        *("u", "u2", "uramp", "pow", "pwr"),
    )
)


class FormulaError(ValueError):
    """The expression has no form ngspice can be given; the message says why."""


def number(value: float) -> str:
    """A value in lower case, as everything in the deck; raises ValueError when not finite."""
    return format_spice(value).lower()


class FormulaPrinter:
    """Prints expressions; :attr:`helpers` gathers (node, text) for the nodes it needed."""

    def __init__(self, nodes: Mapping[str, str], sources: Mapping[str, str]) -> None:
        """``nodes`` and ``sources`` lead from lower-case flat names to the names in the deck."""
        self.nodes, self.sources = nodes, sources
        self.helpers: list[tuple[str, str]] = []

    def text(self, node: Expression) -> str:
        """Raises FormulaError for a leaf or function that has no place here."""
        if isinstance(node, Number):
            return f"({number(node.value)})" if node.value < 0 else number(node.value)
        if isinstance(node, NodeVoltage):
            positive, negative = self._node(node.positive), self._node(node.negative)
            # ngspice has no voltage of ground.
            if positive == "0":
                return "0" if negative == "0" else f"(-v({negative}))"
            return f"v({positive})" if negative == "0" else f"v({positive},{negative})"
        if isinstance(node, SourceCurrent):
            source = self.sources.get(node.source.lower())
            if source is None:
                raise FormulaError("a current is asked for that no voltage source carries")
            return f"i({source})"
        if isinstance(node, Call):
            return self._call(node.function, node.arguments)
        raise FormulaError("a parameter was left in the expression")

    def _call(self, function: str, given: tuple[Expression, ...]) -> str:
        if function in ("table", "pwl"):
            return self._points(given, level=function == "table")
        arguments = []
        for argument in given:  # a loop, not a comprehension: one frame a level
            arguments.append(self.text(argument))
        if function in _INFIX:
            return f"({arguments[0]}{function}{arguments[1]})"
        if function in _SAME:
            return f"{function}({','.join(arguments)})"
        form = _FORMS.get(function)
        if form is None:
            raise FormulaError(f"ngspice has no form of the function {function}")
        return form(self._held, arguments)

    def _node(self, name: str) -> str:
        if name == "0":
            return "0"
        node = self.nodes.get(name.lower())
        if node is None:
            raise FormulaError("a voltage is asked for of a node that is not in the circuit")
        return node

    def _held(self, text: str) -> str:
        """The text as the voltage of a helper node, unless it is a number or such a voltage."""
        if _LEAF.fullmatch(text):
            return text
        node = f"h{len(self.helpers) + 1}"
        self.helpers.append((node, text))
        return f"v({node})"

    def _points(self, given: tuple[Expression, ...], *, level: bool) -> str:
        points = [point.value for point in given[1:] if isinstance(point, Number)]
        if len(points) != len(given) - 1:
            raise FormulaError("the points of a table must be constant")
        if level:
            # One more point at either end makes it level there.
            first, last = points[0], points[-2]
            points = [first - 1 - abs(first), points[1], *points]
            points += [last + 1 + abs(last), points[-1]]
        return f"pwl({','.join((self.text(given[0]), *map(number, points)))})"


Hold = Callable[[str], str]
Form = Callable[[Hold, Sequence[str]], str]


def _integer(hold: Hold, given: Sequence[str]) -> str:
    x = hold(given[0])
    return f"({x}>0?floor({x}):ceil({x}))"


def _remainder(hold: Hold, given: Sequence[str]) -> str:
    a, b = map(hold, given)
    quotient = hold(f"({a}/{b})")
    return f"({a}-{b}*{_integer(hold, (quotient,))})"


def _limit(hold: Hold, given: Sequence[str]) -> str:
    x, (a, b) = given[0], map(hold, given[1:])
    return f"min(max({x},min({a},{b})),max({a},{b}))"


def _arc_tangent_of_two(hold: Hold, given: Sequence[str]) -> str:
    y, x = map(hold, given)
    straight, right = number(math.pi), number(math.pi / 2)
    behind = f"(atan({y}/{x})+({y}<0?(-{straight}):{straight}))"
    across = f"({y}>0?{right}:({y}<0?(-{right}):0))"
    return f"({x}>0?atan({y}/{x}):({x}<0?{behind}:{across}))"


def _nested(function: str) -> Form:
    """A function of any number of arguments from the one ngspice has of two."""

    def form(_: Hold, given: Sequence[str]) -> str:
        text = given[0]
        for argument in given[1:]:
            text = f"{function}({text},{argument})"
        return text

    return form


_FORMS: Mapping[str, Form] = {
    "neg": lambda _, given: f"(-{given[0]})",
    "!": lambda _, given: f"({given[0]}==0)",
    "?:": lambda _, given: f"({given[0]}?{given[1]}:{given[2]})",
    "**": lambda _, given: f"pow({given[0]},{given[1]})",
    "sqr": lambda _, given: f"pow({given[0]},2)",
    "hypot": lambda _, given: f"sqrt(pow({given[0]},2)+pow({given[1]},2))",
    "stp": lambda _, given: f"({given[0]}>0?1:0)",
    "int": _integer,
    "%": _remainder,
    "limit": _limit,
    "atan2": _arc_tangent_of_two,
    "min": _nested("min"),
    "max": _nested("max"),
}
