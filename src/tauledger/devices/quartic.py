"""The smallest positive root of a quartic, with its derivatives.

Found by Ferrari's resolvent cubic on arrays, sharpened by two Newton steps; the derivatives
follow from the equation itself, ``dx = −(da·x³ + db·x² + dc·x + dd)/(4x³ + 3a·x² + 2b·x + c)``.
"""

from __future__ import annotations

import numpy as np

from tauledger.devices.dual import Dual
from tauledger.devices.interface import BoolArray, FloatArray

_RESIDUAL = 1e-6
"""A root is accepted when the polynomial, of order one here, is smaller than this."""


def smallest_positive_root(a: Dual, b: Dual, c: Dual, d: Dual) -> tuple[Dual, BoolArray]:
    """Root of ``x⁴ + a·x³ + b·x² + c·x + d`` and where there is one (elsewhere it is 1).

    >>> one = np.zeros((1, 1))
    >>> terms = [Dual(np.array([v]), one) for v in (-10.0, 35.0, -50.0, 24.0)]
    >>> round(float(smallest_positive_root(*terms)[0].value[0]), 9)
    1.0
    """
    terms = np.broadcast_arrays(a.value, b.value, c.value, d.value)
    roots = _real_roots(*terms)
    residual = np.abs(_value(roots, *terms))
    valid = np.isfinite(roots) & (roots > 0.0) & (residual < _RESIDUAL)
    best = np.where(valid, roots, np.inf).min(axis=0)
    found: BoolArray = np.isfinite(best)
    x = np.where(found, best, 1.0)
    for _ in range(2):
        slope = _slope(x, *terms[:3])
        step = _value(x, *terms) / np.where(slope == 0.0, 1.0, slope)
        x = np.where(found & (np.abs(step) < 0.1 * x), x - step, x)
    slope = _slope(x, *terms[:3])
    change = a.slope * x**3 + b.slope * x**2 + c.slope * x + d.slope
    return Dual(x, -change / np.where(slope == 0.0, 1.0, slope) * found), found


def _real_roots(a: FloatArray, b: FloatArray, c: FloatArray, d: FloatArray) -> FloatArray:
    """(4, …): the roots of the two quadratic factors, NaN where complex."""
    y = _resolvent(a, b, c, d)
    first = np.sqrt(np.maximum(0.25 * a * a - b + y, 0.0))
    second = np.sqrt(np.maximum(0.25 * y * y - d, 0.0))
    # The signs of the two square roots belong together: 2·first·second = a·y/2 − c.
    second = np.where(0.5 * a * y - c < 0.0, -second, second)
    roots = []
    for sign in (1.0, -1.0):
        linear, level = 0.5 * a + sign * first, 0.5 * y + sign * second
        square = 0.25 * linear * linear - level
        spread = np.where(square >= 0.0, np.sqrt(np.maximum(square, 0.0)), np.nan)
        roots += [-0.5 * linear + spread, -0.5 * linear - spread]
    return np.stack(roots)


def _resolvent(a: FloatArray, b: FloatArray, c: FloatArray, d: FloatArray) -> FloatArray:
    """Greatest real root of ``y³ − b·y² + (a·c − 4d)·y − d·(a² − 4b) − c²``."""
    linear = a * c - 4.0 * d
    level = -d * (a * a - 4.0 * b) - c * c
    r = linear - b * b / 3.0
    s = -2.0 * b**3 / 27.0 + b * linear / 3.0 + level
    discriminant = 0.25 * s * s + r**3 / 27.0
    spread = np.sqrt(np.abs(discriminant))
    single = np.cbrt(-0.5 * s + spread) + np.cbrt(-0.5 * s - spread)
    size = np.sqrt(np.maximum(-r / 3.0, 0.0))
    angle = np.arctan2(spread, -0.5 * s) / 3.0
    return np.where(discriminant < 0.0, 2.0 * size * np.cos(angle), single) + b / 3.0


def _value(x: FloatArray, a: FloatArray, b: FloatArray, c: FloatArray, d: FloatArray) -> FloatArray:
    return (((x + a) * x + b) * x + c) * x + d


def _slope(x: FloatArray, a: FloatArray, b: FloatArray, c: FloatArray) -> FloatArray:
    return ((4.0 * x + 3.0 * a) * x + 2.0 * b) * x + c
