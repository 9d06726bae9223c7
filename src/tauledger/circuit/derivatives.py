"""Behavioural sources inside Newton's method: value and exact derivatives, one row a board.

Forward differentiation: every operation gives its value and its partial derivatives, and the chain
rule carries them up the tree. Nothing here is infinite or not-a-number, so that an iteration on its
way can pass through any point: arguments outside the domain are held at its edge, a slope that
would be infinite (sqrt at 0) is large, division by zero divides by 1e-32, and magnitudes end at
1e100. On a kink (abs at 0, the corners of limit and table) the slope is that of the right side.
Whether the solution found lies inside the domain is for
:func:`tauledger.circuit.evaluate.evaluate_behavioural` to say.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping

import numpy as np
from numpy.typing import NDArray

from tauledger.circuit.functions import EvaluationError
from tauledger.netlist.expression import Call, Expression, NodeVoltage, Number, SourceCurrent

FloatArray = NDArray[np.float64]
"""Shape (boards,), or () for a constant."""
Gradient = dict[Expression, FloatArray]

LARGEST = 1e100
SMALLEST_DIVISOR = 1e-32
_STEEPEST_EXPONENT = 200.0
"""Beyond this the exponential goes on as its tangent."""

_ZERO = np.float64(0.0)


def evaluate_with_derivatives(
    expression: Expression, leaves: Mapping[Expression, FloatArray]
) -> tuple[FloatArray, Gradient]:
    """Value (boards,) and its derivative (boards,) to every leaf the expression contains.

    ``expression`` is what :func:`tauledger.circuit.evaluate.substitute` left; ``leaves`` gives each
    node voltage in V and source current in A, shape (boards,). Raises
    :class:`tauledger.circuit.evaluate.EvaluationError` for a leaf without a value and for anything
    ``substitute`` would have put in.
    """
    shape = np.broadcast_shapes((1,), *(value.shape for value in leaves.values()))
    with np.errstate(all="ignore"):
        value, gradient = _dual(expression, leaves, {})
    return (
        np.broadcast_to(value, shape).copy(),
        {leaf: np.broadcast_to(slope, shape).copy() for leaf, slope in gradient.items()},
    )


_Dual = tuple[FloatArray, Gradient]


def _dual(
    node: Expression, leaves: Mapping[Expression, FloatArray], known: dict[int, _Dual]
) -> _Dual:
    # Arguments of user functions are shared, so the tree may be a much smaller graph.
    if (done := known.get(id(node))) is not None:
        return done
    if isinstance(node, Number):
        result: _Dual = np.asarray(node.value), {}
    elif isinstance(node, NodeVoltage | SourceCurrent):
        if node not in leaves:
            raise EvaluationError(f"no value was given for {_leaf_text(node)}")
        result = leaves[node], {node: np.ones_like(leaves[node])}
    elif isinstance(node, Call):
        rule = _RULES.get(node.function)
        if rule is None:
            raise EvaluationError(f"the function {node.function} cannot be differentiated")
        values, gradients = [], []
        for argument in node.arguments:  # a loop, not a comprehension: one frame a level
            value, gradient = _dual(argument, leaves, known)
            values.append(value)
            gradients.append(gradient)
        result = _chain(rule(*values), gradients)
    else:
        raise EvaluationError("a parameter was left in a behavioural source")
    known[id(node)] = result
    return result


def _leaf_text(leaf: NodeVoltage | SourceCurrent) -> str:
    if isinstance(leaf, SourceCurrent):
        return f"i({leaf.source})"
    return f"v({leaf.positive}, {leaf.negative})"


_Outcome = tuple[FloatArray, tuple[FloatArray | float, ...]]
"""A value and its partial derivative to each argument."""


def _chain(outcome: _Outcome, gradients: list[Gradient]) -> _Dual:
    value, partials = outcome
    total: Gradient = {}
    for partial, gradient in zip(partials, gradients, strict=True):
        bounded = _bounded(partial)
        for leaf, slope in gradient.items():
            term = bounded * slope
            total[leaf] = _bounded(total[leaf] + term if leaf in total else term)
    return _bounded(value), total


def _bounded(value: FloatArray | float) -> FloatArray:
    return np.asarray(np.minimum(np.maximum(value, -LARGEST), LARGEST))


# One rule a function: arguments → value, partial derivatives --------------------------------------


def _divide(a: FloatArray, b: FloatArray) -> _Outcome:
    divisor = np.where(
        np.abs(b) < SMALLEST_DIVISOR, np.where(b < 0, -SMALLEST_DIVISOR, SMALLEST_DIVISOR), b
    )
    quotient = _bounded(a / divisor)
    return quotient, (1 / divisor, -quotient / divisor)


def _remainder(a: FloatArray, b: FloatArray) -> _Outcome:
    divisor = np.where(b == 0, SMALLEST_DIVISOR, b)
    return np.fmod(a, divisor), (1.0, -np.trunc(a / divisor))


def _right_sign(x: FloatArray) -> FloatArray:
    return np.where(x >= 0, 1.0, -1.0)


def _power_of_magnitude(x: FloatArray, y: FloatArray) -> _Outcome:
    # d|x|^y = y |x|^(y-1) sgn(x) dx + |x|^y ln|x| dy
    value, slope, by_exponent = _magnitude_power(x, y)
    return value, (slope * _right_sign(x), by_exponent)


def _signed_power(x: FloatArray, y: FloatArray) -> _Outcome:
    # sgn(x) |x|^y rises on both sides of zero
    value, slope, by_exponent = _magnitude_power(x, y)
    sign = np.sign(x)
    return sign * value, (slope, sign * by_exponent)


def _magnitude_power(x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    size = np.abs(x)
    off_zero = np.maximum(size, SMALLEST_DIVISOR)
    # Zero itself is kept where the power allows it, so that 0^2 is 0 and its slope too.
    value = _bounded(np.power(np.where(y >= 0, size, off_zero), y))
    slope = _bounded(y * np.power(np.where(y >= 1, size, off_zero), y - 1))
    return value, slope, value * np.log(off_zero)


def _square_root(x: FloatArray) -> _Outcome:
    root = np.sqrt(np.maximum(x, 0.0))
    slope = 0.5 / np.sqrt(np.maximum(x, SMALLEST_DIVISOR))
    return root, (np.where(x >= 0, slope, 0.0),)


def _logarithm(x: FloatArray) -> _Outcome:
    inside = np.maximum(x, SMALLEST_DIVISOR)
    return np.log(inside), (np.where(x >= 0, 1 / inside, 0.0),)


def _logarithm_to_ten(x: FloatArray) -> _Outcome:
    value, (slope,) = _logarithm(x)
    return value / math.log(10), (slope / math.log(10),)


def _exponential(x: FloatArray) -> _Outcome:
    value = np.exp(np.minimum(x, _STEEPEST_EXPONENT))
    return value * (1 + np.maximum(x - _STEEPEST_EXPONENT, 0.0)), (value,)


def _hyperbolic_sine(x: FloatArray) -> _Outcome:
    within = np.clip(x, -_STEEPEST_EXPONENT, _STEEPEST_EXPONENT)
    slope = np.cosh(within)
    return np.sinh(within) + slope * (x - within), (slope,)


def _hyperbolic_cosine(x: FloatArray) -> _Outcome:
    within = np.clip(x, -_STEEPEST_EXPONENT, _STEEPEST_EXPONENT)
    slope = np.sinh(within)
    return np.cosh(within) + slope * (x - within), (slope,)


def _tangent(x: FloatArray) -> _Outcome:
    value = np.tan(x)
    return value, (1 + value * value,)


def _hyperbolic_tangent(x: FloatArray) -> _Outcome:
    value = np.tanh(x)
    return value, (1 - value * value,)


def _arc_sine(x: FloatArray) -> _Outcome:
    within = np.clip(x, -1.0, 1.0)
    slope = 1 / np.sqrt(np.maximum(1 - within * within, SMALLEST_DIVISOR))
    return np.arcsin(within), (np.where(np.abs(x) <= 1, slope, 0.0),)


def _arc_cosine(x: FloatArray) -> _Outcome:
    value, (slope,) = _arc_sine(x)
    return math.pi / 2 - value, (-np.asarray(slope),)


def _area_cosine(x: FloatArray) -> _Outcome:
    within = np.maximum(x, 1.0)
    slope = 1 / np.sqrt(np.maximum(within * within - 1, SMALLEST_DIVISOR))
    return np.arccosh(within), (np.where(x >= 1, slope, 0.0),)


def _area_tangent(x: FloatArray) -> _Outcome:
    edge = math.nextafter(1.0, 0.0)
    within = np.clip(x, -edge, edge)
    slope = 1 / (1 - within * within)
    return np.arctanh(within), (np.where(np.abs(x) <= 1, slope, 0.0),)


def _arc_tangent_of_two(y: FloatArray, x: FloatArray) -> _Outcome:
    square = np.maximum(x * x + y * y, SMALLEST_DIVISOR**2)
    return np.arctan2(y, x), (x / square, -y / square)


def _hypotenuse(x: FloatArray, y: FloatArray) -> _Outcome:
    value = np.hypot(x, y)
    divisor = np.maximum(value, SMALLEST_DIVISOR)
    return value, (x / divisor, y / divisor)


def _choose(condition: FloatArray, yes: FloatArray, no: FloatArray) -> _Outcome:
    true = condition != 0
    return np.where(true, yes, no), (0.0, np.where(true, 1.0, 0.0), np.where(true, 0.0, 1.0))


def _smallest(*values: FloatArray) -> _Outcome:
    stacked = np.stack(np.broadcast_arrays(*values))
    which = np.argmin(stacked, axis=0)
    partials = tuple(np.where(which == index, 1.0, 0.0) for index in range(len(values)))
    return stacked.min(axis=0), partials


def _largest(*values: FloatArray) -> _Outcome:
    value, partials = _smallest(*(-value for value in values))
    return -value, partials


def _limit(x: FloatArray, a: FloatArray, b: FloatArray) -> _Outcome:
    low, high = np.minimum(a, b), np.maximum(a, b)
    below, above = x < low, x >= high
    at_a = np.where(below, a <= b, above & (a > b))
    at_b = np.where(below, a > b, above & (a <= b))
    partials = (~(below | above), at_a, at_b)
    one, first, second = (np.where(held, 1.0, 0.0) for held in partials)
    return np.clip(x, low, high), (one, first, second)


def _table(x: FloatArray, *points: FloatArray) -> _Outcome:
    xs, ys = np.array(points[0::2]), np.array(points[1::2])
    slopes = np.concatenate(([0.0], np.diff(ys) / np.diff(xs), [0.0]))
    slope = slopes[np.searchsorted(xs, x, side="right")]
    return np.asarray(np.interp(x, xs, ys)), (slope, *(_ZERO,) * len(points))


def _pwl(x: FloatArray, *points: FloatArray) -> _Outcome:
    xs, ys = np.array(points[0::2]), np.array(points[1::2])
    if xs.size == 1:
        return np.full_like(x, ys[0]), (0.0, *(_ZERO,) * len(points))
    index = np.clip(np.searchsorted(xs, x, side="right") - 1, 0, xs.size - 2)
    slope = (np.diff(ys) / np.diff(xs))[index]
    return np.asarray(ys[index] + slope * (x - xs[index])), (slope, *(_ZERO,) * len(points))


def _flat(function: Callable[..., NDArray[np.generic]]) -> Callable[..., _Outcome]:
    """A function made of steps: its slope is zero wherever it has one."""

    def rule(*values: FloatArray) -> _Outcome:
        return np.asarray(function(*values), dtype=np.float64), (0.0,) * len(values)

    return rule


_RULES: dict[str, Callable[..., _Outcome]] = {
    "+": lambda a, b: (a + b, (1.0, 1.0)),
    "-": lambda a, b: (a - b, (1.0, -1.0)),
    "*": lambda a, b: (a * b, (b, a)),
    "/": _divide,
    "%": _remainder,
    "**": _power_of_magnitude,
    "pow": _power_of_magnitude,
    "pwr": _signed_power,
    "neg": lambda x: (-x, (-1.0,)),
    "abs": lambda x: (np.abs(x), (_right_sign(x),)),
    "sqrt": _square_root,
    "sqr": lambda x: (x * x, (2 * x,)),
    "exp": _exponential,
    "ln": _logarithm,
    "log10": _logarithm_to_ten,
    "sin": lambda x: (np.sin(x), (np.cos(x),)),
    "cos": lambda x: (np.cos(x), (-np.sin(x),)),
    "tan": _tangent,
    "asin": _arc_sine,
    "acos": _arc_cosine,
    "atan": lambda x: (np.arctan(x), (1 / (1 + x * x),)),
    "atan2": _arc_tangent_of_two,
    "hypot": _hypotenuse,
    "sinh": _hyperbolic_sine,
    "cosh": _hyperbolic_cosine,
    "tanh": _hyperbolic_tangent,
    "asinh": lambda x: (np.arcsinh(x), (1 / np.sqrt(1 + x * x),)),
    "acosh": _area_cosine,
    "atanh": _area_tangent,
    "min": _smallest,
    "max": _largest,
    "limit": _limit,
    "table": _table,
    "pwl": _pwl,
    "?:": _choose,
    "uramp": lambda x: (np.maximum(x, 0.0), (np.where(x >= 0, 1.0, 0.0),)),
    "u2": lambda x: (np.clip(x, 0.0, 1.0), (np.where((x >= 0) & (x < 1), 1.0, 0.0),)),
    "u": _flat(lambda x: 0.5 * (np.sign(x) + 1)),
    "stp": _flat(lambda x: x > 0),
    "sgn": _flat(np.sign),
    "int": _flat(np.trunc),
    "nint": _flat(np.rint),
    "floor": _flat(np.floor),
    "ceil": _flat(np.ceil),
    "!": _flat(lambda x: x == 0),
    "<": _flat(np.less),
    "<=": _flat(np.less_equal),
    ">": _flat(np.greater),
    ">=": _flat(np.greater_equal),
    "==": _flat(np.equal),
    "!=": _flat(np.not_equal),
    "&&": _flat(lambda a, b: (a != 0) & (b != 0)),
    "||": _flat(lambda a, b: (a != 0) | (b != 0)),
}
