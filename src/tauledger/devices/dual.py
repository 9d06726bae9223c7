"""Numbers that carry their exact derivatives, for channel laws too long to differentiate by hand.

A :class:`Dual` holds a value and its partial derivatives to a few inputs; arithmetic and the
functions below apply the chain rule (forward accumulation), so a formula written once gives
current and conductances that agree to rounding.
"""

from __future__ import annotations

import numpy as np

from tauledger.devices.interface import BoolArray, FloatArray
from tauledger.records import dataclass

Plain = float | FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Dual:
    """``value`` of any shape and ``slope`` of shape (inputs, *shape)."""

    value: FloatArray
    slope: FloatArray

    # Leave mixed arithmetic with arrays to this class, instead of element by element.
    __array_ufunc__ = None

    def __add__(self, other: Dual | Plain) -> Dual:
        if isinstance(other, Dual):
            return Dual(self.value + other.value, self.slope + other.slope)
        return Dual(self.value + other, self.slope)

    __radd__ = __add__

    def __neg__(self) -> Dual:
        return Dual(-self.value, -self.slope)

    def __sub__(self, other: Dual | Plain) -> Dual:
        if isinstance(other, Dual):
            return Dual(self.value - other.value, self.slope - other.slope)
        return Dual(self.value - other, self.slope)

    def __rsub__(self, other: Plain) -> Dual:
        return Dual(other - self.value, -self.slope)

    def __mul__(self, other: Dual | Plain) -> Dual:
        if isinstance(other, Dual):
            slope = self.slope * other.value + other.slope * self.value
            return Dual(self.value * other.value, slope)
        return Dual(self.value * other, self.slope * other)

    __rmul__ = __mul__

    def __truediv__(self, other: Dual | Plain) -> Dual:
        if isinstance(other, Dual):
            quotient = self.value / other.value
            return Dual(quotient, (self.slope - quotient * other.slope) / other.value)
        return Dual(self.value / other, self.slope / other)

    def __rtruediv__(self, other: Plain) -> Dual:
        quotient = other / self.value
        return Dual(quotient, -quotient / self.value * self.slope)


def inputs(*values: FloatArray) -> tuple[Dual, ...]:
    """Independent variables: number ``i`` has slope one to itself.

    >>> x, y = inputs(np.array([2.0]), np.array([3.0]))
    >>> (x * y / (x + 1.0)).slope.round(6).tolist()
    [[0.333333], [0.666667]]
    """
    alike = np.broadcast_arrays(*values)
    count, shape = len(alike), alike[0].shape
    units = np.eye(count).reshape((count, count) + (1,) * len(shape))
    return tuple(
        Dual(value, np.broadcast_to(unit, (count, *shape)))
        for value, unit in zip(alike, units, strict=True)
    )


def constant(value: Plain, like: Dual) -> Dual:
    """A number without derivatives, shaped as ``like``."""
    return Dual(np.broadcast_to(np.asarray(value), like.value.shape), np.zeros_like(like.slope))


def choose(condition: BoolArray, chosen: Dual | Plain, other: Dual | Plain) -> Dual:
    """``chosen`` where the condition holds, else ``other``; one of the two must be a Dual."""
    like = chosen if isinstance(chosen, Dual) else other
    assert isinstance(like, Dual)
    first = chosen if isinstance(chosen, Dual) else constant(chosen, like)
    second = other if isinstance(other, Dual) else constant(other, like)
    return Dual(
        np.where(condition, first.value, second.value),
        np.where(condition, first.slope, second.slope),
    )


def larger(first: Dual, second: Dual | Plain) -> Dual:
    """The greater of two; ``second`` where equal."""
    bound = second.value if isinstance(second, Dual) else second
    return choose(first.value > bound, first, second)


def smaller(first: Dual, second: Dual | Plain) -> Dual:
    """The lesser of two; ``first`` where equal."""
    bound = second.value if isinstance(second, Dual) else second
    return choose(first.value <= bound, first, second)


def root(x: Dual) -> Dual:
    """Square root; at zero the slope is taken as zero instead of infinite."""
    value = np.sqrt(x.value)
    half = np.where(value > 0.0, 0.5 / np.where(value > 0.0, value, 1.0), 0.0)
    return Dual(value, half * x.slope)


def exponential(x: Dual) -> Dual:
    """``eˣ``."""
    value = np.exp(x.value)
    return Dual(value, value * x.slope)


def logarithm(x: Dual) -> Dual:
    """Natural logarithm of a positive number."""
    return Dual(np.log(x.value), x.slope / x.value)
