r"""Estimates of a corner better than the sum, and bounds, from one end's model.

With the high end's denominator 1 + b₁s + b₂s² + … and numerator 1 + a₁s + a₂s² + … (for the low
end read s as 1/s: the coefficients are then those of the descending powers), b₁ = Σ τ_i⁰ and
b₂ = Σ τ_i⁰ τ_jⁱ are open-circuit time constants, a₁ and a₂ transfer constants.

* Second order with zeros (references B5): the −3 dB frequency of the fit cut after s², the root
  x = ω² of 1 + (b₁²−2b₂)x + b₂²x² = 2(1 + (a₁²−2a₂)x + a₂²x²). Exact for two parts.
* All poles and zeros of the end: where the third-order terms are not small at the corner, the
  −3 dB frequency of the end's own model of full order.
* Bounds (references B8), all poles real and no finite zero: with S = Σ1/p²,
  √(ln 2)/√S ≤ ω_H ≤ 1/√S and ω_H ≥ 1/b₁; low end by ω → 1/ω. Real finite zeros keep only the
  side of the sum.
"""

from __future__ import annotations

import math

import numpy as np

from tauledger.corners.band import HALF_POWER, TWO_PI, false_position
from tauledger.corners.ports import EndModel
from tauledger.records import dataclass
from tauledger.smallsignal.modes import ComplexArray
from tauledger.smallsignal.network import FloatArray

REAL_TOLERANCE = 1e-4
"""Equal real poles come out of the eigenvalue routine as a ring of about this width."""
_SCAN = np.logspace(-2.0, 2.0, 49)
ORDER_TOLERANCE = 0.03
"""Largest third-order term, relative to the first-order one at the corner, that a second-order
fit may leave out."""


@dataclass(frozen=True, slots=True)
class Roots:
    """Poles and zeros of one end in rad/s, worked out once."""

    poles: ComplexArray
    zeros: ComplexArray
    low: bool

    @classmethod
    def of(cls, model: EndModel) -> Roots:
        return cls(model.poles(), model.zeros(), model.low)

    @classmethod
    def roughly(cls, model: EndModel) -> Roots:
        """Good for the gain alone: zeros at the origin or infinity are scattered near there."""
        return cls(model.poles(), model.scattered_zeros(), model.low)

    def log_gains(self, omega: FloatArray) -> FloatArray:
        """ln|H/H₀| of the end's model at (F,) rad/s, the other end at midband."""
        s = 1j * omega[:, None]
        zeros, poles = (
            np.abs(s - roots if self.low else 1.0 - s / roots) for roots in (self.zeros, self.poles)
        )
        with np.errstate(divide="ignore"):
            return np.asarray(np.log(zeros).sum(axis=1) - np.log(poles).sum(axis=1))

    def log_gain(self, omega: float) -> float:
        """The same at one frequency."""
        s = complex(0.0, omega)
        gain = 0.0
        for roots, sign in ((self.zeros.tolist(), 1.0), (self.poles.tolist(), -1.0)):
            for root in roots:
                factor = abs(s - root if self.low else 1.0 - s / root)
                gain += sign * (math.log(factor) if factor else -math.inf)
        return gain


@dataclass(frozen=True, slots=True)
class Estimate:
    """A corner with the name of the method that gave it."""

    frequency_hz: float
    method: str


@dataclass(frozen=True, slots=True)
class Bounds:
    """The corner lies between these; None where no rigorous bound holds on that side."""

    lowest_hz: float | None
    highest_hz: float | None


def best_estimate(model: EndModel, roots: Roots, sum_hz: float) -> Estimate:
    """The best estimate whose conditions hold; the sum itself where none does better."""
    denominator = _coefficients(roots.poles, model)
    numerator = _coefficients(roots.zeros, model)
    if len(model.parts) == 1 and abs(numerator[0]) < 1e-9 * abs(denominator[0]):
        return Estimate(sum_hz, "single pole")
    second = _second_order(denominator, numerator)
    if second is not None and _higher_terms_small(denominator, numerator, second):
        return Estimate(_from_normalised(second, model), "second order with zeros")
    edge = model_edge_hz(roots, sum_hz)
    if edge is not None:
        return Estimate(edge, "all poles and zeros of this end")
    return Estimate(sum_hz, "sum of time constants")


def rigorous_bounds(model: EndModel, roots: Roots, sum_hz: float) -> Bounds:
    """Bounds that follow from real poles alone, see the module's docstring."""
    poles, zeros = roots.poles, roots.zeros
    if not poles.size or not _all_real(poles) or np.any(poles.real > 0):
        return Bounds(None, None)
    finite = zeros[np.abs(zeros) > 0]
    if finite.size:
        side = sum_hz if _all_real(zeros) else None
        return Bounds(None, side) if model.low else Bounds(side, None)
    if model.low:
        root = math.sqrt(float(np.sum(np.abs(poles) ** 2))) / TWO_PI
        return Bounds(root, min(sum_hz, root / math.sqrt(math.log(2.0))))
    root = 1.0 / math.sqrt(float(np.sum(1.0 / np.abs(poles) ** 2))) / TWO_PI
    return Bounds(max(sum_hz, root * math.sqrt(math.log(2.0))), root)


def model_edge_hz(roots: Roots, near_hz: float) -> float | None:
    """−3 dB frequency of the end's own model, every order, within two decades of ``near_hz``.

    The other end is taken at midband, so this differs from the exact corner by the overlap.
    None when the gain does not cross −3 dB there.
    """
    if not roots.poles.size:
        return None
    omega = TWO_PI * near_hz * _SCAN
    target = math.log(HALF_POWER)
    gain = roots.log_gains(omega)
    below = np.flatnonzero(gain < target)
    if not below.size:
        return None
    outer = int(below[-1] if roots.low else below[0])
    inner = outer + (1 if roots.low else -1)
    if not 0 <= inner < omega.size:
        return None

    def excess(log_omega: float) -> float:
        return roots.log_gain(math.exp(log_omega)) - target

    ends = math.log(float(omega[inner])), math.log(float(omega[outer]))
    return math.exp(false_position(excess, *ends)) / TWO_PI


def _coefficients(roots: ComplexArray, model: EndModel) -> tuple[float, float, float]:
    """First three coefficients of ∏(1 − x/r), x = s for the high end and 1/s for the low."""
    first = second = third = 0j
    for value in (-roots if model.low else -1.0 / roots).tolist():
        third += second * value
        second += first * value
        first += value
    return first.real, second.real, third.real


def _second_order(
    denominator: tuple[float, float, float], numerator: tuple[float, float, float]
) -> float | None:
    """Normalised corner w (ω, or 1/ω at the low end) of the fit cut after the square."""
    b1, b2, _ = denominator
    a1, a2, _ = numerator
    square = b2 * b2 - 2.0 * a2 * a2
    linear = (b1 * b1 - 2.0 * b2) - 2.0 * (a1 * a1 - 2.0 * a2)
    roots = (
        np.roots([square, linear, -1.0]) if square else np.array([1.0 / linear if linear else 0])
    )
    real = [float(r.real) for r in np.atleast_1d(roots) if abs(r.imag) < 1e-9 * abs(r)]
    positive = [r for r in real if r > 0]
    return math.sqrt(min(positive)) if positive else None


def _higher_terms_small(
    denominator: tuple[float, float, float], numerator: tuple[float, float, float], w: float
) -> bool:
    third = max(abs(denominator[2]), abs(numerator[2])) * w**3
    return third < ORDER_TOLERANCE * max(1.0, abs(denominator[0]) * w)


def _from_normalised(w: float, model: EndModel) -> float:
    return (1.0 / w if model.low else w) / TWO_PI


def _all_real(roots: ComplexArray) -> bool:
    return bool(np.all(np.abs(roots.imag) <= REAL_TOLERANCE * np.abs(roots)))
