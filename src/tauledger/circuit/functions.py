"""The built-in functions of expressions on single numbers, as strict as they are on paper.

What each means was measured on ngspice-39 (see :mod:`tauledger.circuit.evaluate`).
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterable, Mapping, Sequence

from tauledger.records import dataclass


class EvaluationError(ValueError):
    """The expression has no value; the message says why, fit for the user."""


def _power_of_magnitude(base: float, exponent: float) -> float:
    return math.pow(abs(base), exponent)


def _signed_power(base: float, exponent: float) -> float:
    return _sign(base) * math.pow(abs(base), exponent)


def _sign(x: float) -> float:
    return float((x > 0) - (x < 0))


def _limit(x: float, *bounds: float) -> float:
    # Two arguments are ngspice's statistical form: nominal value and spread.
    return x if len(bounds) == 1 else min(max(x, min(bounds)), max(bounds))


def _nominal(nominal: float, *_: float) -> float:
    return nominal


def table(x: float, *points: float) -> float:
    """Linear between the points, level beyond them."""
    xs = _rising(points)
    return pwl(min(max(x, xs[0]), xs[-1]), *points)


def pwl(x: float, *points: float) -> float:
    """Linear between the points; the outer lines run on beyond them, as in ngspice 39."""
    xs, ys = _rising(points), points[1::2]
    if len(xs) == 1:
        return ys[0]
    index = next((i for i in range(1, len(xs)) if x <= xs[i]), len(xs) - 1)
    share = (x - xs[index - 1]) / (xs[index] - xs[index - 1])
    return ys[index - 1] + share * (ys[index] - ys[index - 1])


def _rising(points: Sequence[float]) -> Sequence[float]:
    xs = points[0::2]
    if len(xs) * 2 != len(points):
        raise EvaluationError("table needs its points in pairs: table(x, x1, y1, x2, y2, ...)")
    if any(left >= right for left, right in itertools.pairwise(xs)):
        raise EvaluationError("table needs its x values in rising order")
    return xs


@dataclass(frozen=True, slots=True)
class BuiltIn:
    """A function of ``fewest`` to ``most`` numbers; ``apply`` may raise as those of ``math`` do."""

    fewest: int
    most: int
    apply: Callable[..., float]


_MANY = 10_000
_UNARY: dict[str, Callable[[float], float]] = {
    "neg": lambda x: -x,
    "!": lambda x: float(x == 0),
    "abs": abs,
    "sqrt": math.sqrt,
    "sqr": lambda x: x * x,
    "exp": math.exp,
    "ln": math.log,
    "log10": math.log10,
    "sin": math.sin,
    "cos": math.cos,
    "tan": math.tan,
    "asin": math.asin,
    "acos": math.acos,
    "atan": math.atan,
    "sinh": math.sinh,
    "cosh": math.cosh,
    "tanh": math.tanh,
    "asinh": math.asinh,
    "acosh": math.acosh,
    "atanh": math.atanh,
    "sgn": _sign,
    "int": lambda x: float(math.trunc(x)),
    "nint": lambda x: float(round(x)),
    "floor": lambda x: float(math.floor(x)),
    "ceil": lambda x: float(math.ceil(x)),
    "u": lambda x: 0.5 * (_sign(x) + 1),
    "stp": lambda x: float(x > 0),
    "u2": lambda x: min(max(x, 0.0), 1.0),
    "uramp": lambda x: max(x, 0.0),
}
_BINARY: dict[str, Callable[[float, float], float]] = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
    "%": math.fmod,
    "<": lambda a, b: float(a < b),
    "<=": lambda a, b: float(a <= b),
    ">": lambda a, b: float(a > b),
    ">=": lambda a, b: float(a >= b),
    "==": lambda a, b: float(a == b),
    "!=": lambda a, b: float(a != b),
    "&&": lambda a, b: float(a != 0 and b != 0),
    "||": lambda a, b: float(a != 0 or b != 0),
    "**": _power_of_magnitude,
    "pow": math.pow,
    "pwr": _power_of_magnitude,
    "atan2": math.atan2,
    "hypot": math.hypot,
}
FUNCTIONS: dict[str, BuiltIn] = (
    {name: BuiltIn(1, 1, apply) for name, apply in _UNARY.items()}
    | {name: BuiltIn(2, 2, apply) for name, apply in _BINARY.items()}
    | {
        "min": BuiltIn(2, _MANY, min),
        "max": BuiltIn(2, _MANY, max),
        "limit": BuiltIn(2, 3, _limit),
        "table": BuiltIn(3, _MANY, table),
        "pwl": BuiltIn(3, _MANY, pwl),
        "?:": BuiltIn(3, 3, lambda condition, yes, no: yes if condition else no),
        "agauss": BuiltIn(2, 3, _nominal),
        "gauss": BuiltIn(2, 3, _nominal),
        "aunif": BuiltIn(2, 2, _nominal),
        "unif": BuiltIn(2, 2, _nominal),
    }
)
BEHAVIOURAL_FUNCTIONS = {
    "pow": BuiltIn(2, 2, _power_of_magnitude),
    "pwr": BuiltIn(2, 2, _signed_power),
}
NOMINAL = frozenset(("agauss", "gauss", "aunif", "unif"))
SAME_FUNCTION = {
    "if": "?:",
    "ternary_fcn": "?:",
    "log": "ln",
    "arctan": "atan",
}
_BEYOND_ANALYSIS = frozenset(
    ("ddt", "idt", "sdt", "delay", "absdelay", "rand", "random", "white", "noise", "laplace")
)


def built_in(name: str, count: int, known: Mapping[str, BuiltIn]) -> BuiltIn:
    """The function of that name, in lower case, for ``count`` arguments.

    Raises EvaluationError that says why it cannot be applied.
    """
    function = known.get(name)
    if function is None:
        if name in _BEYOND_ANALYSIS:
            raise EvaluationError(f"the function {name} has no place in a linear analysis")
        raise EvaluationError(
            f"unknown function {name}{near_names(name, (*known, *SAME_FUNCTION))}"
        )
    if not function.fewest <= count <= function.most:
        wanted = str(function.fewest)
        if function.most == _MANY:
            wanted = f"at least {wanted}"
        elif function.most != function.fewest:
            wanted = f"{wanted} or {function.most}"
        raise EvaluationError(f"{name} takes {wanted} arguments, not {count}")
    return function


def apply(name: str, function: BuiltIn, arguments: list[float]) -> float:
    """The function's value, a finite number.

    Raises EvaluationError for a division by zero, a number too large, or no real value.
    """
    try:
        result = function.apply(*arguments)
    except ZeroDivisionError:
        raise EvaluationError(f"division by zero: {_spelt(name, arguments)}") from None
    except OverflowError:
        raise EvaluationError(f"{_spelt(name, arguments)} is too large a number") from None
    except EvaluationError:
        raise
    except ValueError:
        if name in ("**", "pow", "pwr") and arguments[0] == 0:
            raise EvaluationError(f"division by zero: {_spelt(name, arguments)}") from None
        raise EvaluationError(f"{_spelt(name, arguments)} has no real value") from None
    if not math.isfinite(result):
        raise EvaluationError(f"{_spelt(name, arguments)} is too large a number")
    return result


def _spelt(name: str, arguments: list[float]) -> str:
    shown = [f"{argument:.6g}" for argument in arguments[:4]]
    if len(arguments) == 2 and not name[0].isalpha():
        return f"{shown[0]} {name} {shown[1]}"
    return f"{name}({', '.join(shown)}{', ...' if len(arguments) > 4 else ''})"


def near_names(name: str, known: Iterable[str]) -> str:
    """A clause such as ``; did you mean sqrt?``, or nothing."""
    import difflib

    words = [word for word in dict.fromkeys(known) if word[:1].isalpha()]
    close = difflib.get_close_matches(name, words, n=3, cutoff=0.6)
    return f"; did you mean {' or '.join(close)}?" if close else ""
