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
LEAST_SIZE = 1e-9
"""rad/s; a root below is one at zero, blurred by rounding."""
LONGEST_STRETCH = 7.0
"""Decades of poles served from one shift in their middle."""
LEAST_ROOT = 1e-13
"""1/λ below this share of the largest is a pole at infinity, blurred by rounding."""


@dataclass(frozen=True, slots=True)
class Expansion:
    """The sum over K modes from one shift, at its best for frequencies of that size."""

    shift: float
    """s₀ in rad/s, on the positive real axis."""
    eigenvalues: ComplexArray
    """(K,): λ in s; zero for a mode at infinite frequency."""
    weights: ComplexArray
    """(K,)."""

    def at(self, s: ComplexArray) -> ComplexArray:
        """H less ``direct`` at complex frequencies (F,) in rad/s."""
        distance = 1.0 + (s[:, None] - self.shift) * self.eigenvalues
        return np.asarray((self.weights / distance).sum(axis=1))


@dataclass(frozen=True, slots=True)
class Modes:
    """A response as sums over its modes."""

    expansions: tuple[Expansion, ...]
    """By rising shift."""
    natural: ComplexArray
    """Finite poles in rad/s, smallest magnitude first."""
    direct: float
    """What passes without any mode."""

    def at(self, s: ComplexArray) -> ComplexArray:
        """H at complex frequencies (F,) in rad/s."""
        if len(self.expansions) == 1:
            return self.expansions[0].at(s) + self.direct
        nearest = self._nearest(np.abs(s))
        found = np.empty(s.shape, dtype=np.complex128)
        for i, expansion in enumerate(self.expansions):
            found[nearest == i] = expansion.at(s[nearest == i])
        return found + self.direct

    def magnitude(self, omega: float) -> float:
        """|H| at one frequency in rad/s."""
        expansion = self.expansions[int(self._nearest(np.array([omega]))[0])]
        distance = complex(-expansion.shift, omega)
        pairs = zip(expansion.weights.tolist(), expansion.eigenvalues.tolist(), strict=True)
        total = complex(self.direct)
        for weight, value in pairs:
            total += weight / (1.0 + distance * value)
        return abs(total)

    def _nearest(self, size: FloatArray) -> NDArray[np.intp]:
        """(F,): which expansion serves a frequency of this size."""
        shifts = np.array([expansion.shift for expansion in self.expansions])
        return np.searchsorted(np.sqrt(shifts[1:] * shifts[:-1]), size)


def decompose(
    conductance: FloatArray,
    reactance: FloatArray,
    drive: FloatArray,
    sense: FloatArray,
    direct: float,
) -> Modes | None:
    """The modes of lᵀ(G + sC)⁻¹b + direct; None where G + s₀C cannot be inverted or A is defective.

    A mode of frequency p is blurred by s₀/p + p/s₀ times the rounding error, so that poles that
    lie far apart get more than one shift. Whether the vectors are good enough shows only in what
    they give: the caller holds the result against direct solutions.
    """
    try:
        natural = natural_frequencies(conductance, reactance)
        expansions = tuple(
            _expansion(conductance, reactance, drive, sense, shift) for shift in _shifts(natural)
        )
    except np.linalg.LinAlgError:
        return None
    if not all(np.isfinite(expansion.weights).all() for expansion in expansions):
        return None
    return Modes(expansions, natural, direct)


def _shifts(natural: ComplexArray) -> FloatArray:
    """In the middle of equal stretches of the poles' logarithms, none longer than allowed."""
    sizes = np.abs(natural)
    sizes = sizes[sizes > LEAST_SIZE]
    if not sizes.size:
        return np.array([FIRST_SHIFT])
    first, last = math.log10(sizes.min()), math.log10(sizes.max())
    count = max(1, math.ceil((last - first) / LONGEST_STRETCH))
    return np.asarray(10.0 ** (first + (last - first) * (np.arange(count) + 0.5) / count))


def _expansion(
    conductance: FloatArray,
    reactance: FloatArray,
    drive: FloatArray,
    sense: FloatArray,
    shift: float,
) -> Expansion:
    matrix = conductance + shift * reactance
    solved = np.linalg.solve(matrix, np.column_stack([reactance, drive]))
    eigenvalues, vectors = np.linalg.eig(solved[:, :-1])
    weights = (sense @ vectors) * np.linalg.solve(vectors, solved[:, -1])
    return Expansion(
        float(shift),
        np.asarray(eigenvalues, dtype=np.complex128),
        np.asarray(weights, dtype=np.complex128),
    )


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
    sizes = sizes[sizes > LEAST_SIZE]
    return math.exp(float(np.log(sizes).mean())) if sizes.size else otherwise
