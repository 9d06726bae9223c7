"""Natural frequencies of a linear network, and its response as a sum over them.

With M = G + s₀C and A = M⁻¹C = VΛV⁻¹, the response is

    H(s) = lᵀ(G + sC)⁻¹b = Σ g_k c_k / (1 + (s − s₀)λ_k),    g = lᵀV,  c = V⁻¹M⁻¹b,

and the poles are s₀ − 1/λ_k. One decomposition then serves every frequency.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from tauledger.records import dataclass
from tauledger.smallsignal.network import FloatArray

ComplexArray = NDArray[np.complex128]
FIRST_SHIFT = 1e5
"""rad/s, between the corners of most amplifiers; the second pass corrects it."""
LEAST_ROOT = 1e-13
"""1/λ below this share of the largest is a pole at infinity, blurred by rounding."""


@dataclass(frozen=True, slots=True)
class Modes:
    """A response as a sum over its K modes."""

    shift: float
    """s₀ in rad/s, on the positive real axis."""
    eigenvalues: ComplexArray
    """(K,): λ in s; zero for a mode at infinite frequency."""
    weights: ComplexArray
    """(K,)."""
    natural: ComplexArray
    """Finite poles in rad/s, smallest magnitude first."""
    direct: float
    """What passes without any mode."""

    def at(self, s: ComplexArray) -> ComplexArray:
        """H at complex frequencies (F,) in rad/s."""
        distance = 1.0 + (s[:, None] - self.shift) * self.eigenvalues
        return np.asarray((self.weights / distance).sum(axis=1) + self.direct)

    def magnitude(self, omega: float) -> float:
        """|H| at one frequency in rad/s."""
        distance = complex(-self.shift, omega)
        pairs = zip(self.weights.tolist(), self.eigenvalues.tolist(), strict=True)
        total = complex(self.direct)
        for weight, value in pairs:
            total += weight / (1.0 + distance * value)
        return abs(total)


def decompose(
    conductance: FloatArray,
    reactance: FloatArray,
    drive: FloatArray,
    sense: FloatArray,
    direct: float,
) -> Modes | None:
    """The modes of lᵀ(G + sC)⁻¹b + direct; None where G + s₀C cannot be inverted or A is defective.

    Whether the vectors are good enough shows only in what they give: the caller holds the result
    against direct solutions.
    """
    try:
        shift = _middle(_roots(conductance, reactance, FIRST_SHIFT), FIRST_SHIFT)
        matrix = conductance + shift * reactance
        eigenvalues, vectors = np.linalg.eig(np.linalg.solve(matrix, reactance))
        drives = np.linalg.solve(vectors, np.linalg.solve(matrix, drive))
    except np.linalg.LinAlgError:
        return None
    weights = np.asarray((sense @ vectors) * drives, dtype=np.complex128)
    if not np.isfinite(weights).all():
        return None
    natural = _finite(eigenvalues, shift)
    return Modes(shift, np.asarray(eigenvalues, np.complex128), weights, natural, direct)


def natural_frequencies(
    conductance: FloatArray, reactance: FloatArray, near: float | None = None
) -> ComplexArray:
    """Finite roots s (rad/s) of det(G + sC) = 0, smallest magnitude first.

    Works on the pencil shifted to a point on the positive real axis, where G + σC is regular
    even when G alone is not (a node reached only by capacitors is a pole at zero). Two passes:
    the second shift sits in the middle of the spread that the first one found, which keeps slow
    and fast roots equally accurate. ``near`` (rad/s) gives one shift to work from instead.

    Raises numpy.linalg.LinAlgError where the shifted pencil is singular.
    """
    if near is not None:
        return _roots(conductance, reactance, near)
    first = _roots(conductance, reactance, FIRST_SHIFT)
    return _roots(conductance, reactance, _middle(first, FIRST_SHIFT))


def _roots(conductance: FloatArray, reactance: FloatArray, shift: float) -> ComplexArray:
    inverse = np.linalg.eigvals(np.linalg.solve(conductance + shift * reactance, reactance))
    return _finite(inverse, shift)


def _finite(eigenvalues: ComplexArray, shift: float) -> ComplexArray:
    """Poles from the λ that are not zero, smallest magnitude first."""
    size = np.abs(eigenvalues)
    largest = size.max(initial=0.0)
    roots = shift - 1.0 / eigenvalues[size > LEAST_ROOT * largest].astype(complex)
    return np.asarray(roots[np.argsort(np.abs(roots))])


def _middle(roots: ComplexArray, otherwise: float) -> float:
    """Geometric mean of the magnitudes, the roots at zero left out."""
    sizes = np.abs(roots)
    sizes = sizes[sizes > 1e-9]
    return math.exp(float(np.log(sizes).mean())) if sizes.size else otherwise
