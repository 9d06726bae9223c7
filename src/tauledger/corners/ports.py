r"""The midband network seen from its reactive parts.

At midband the low-end set L is at its infinite value (capacitors short, inductors open) and the
high-end set H at its zero value (capacitors open, inductors short). Every part is then a port of
a resistive network. One inverse of that network's matrix gives everything:

Low end. Part k of L has a state x_k (voltage of a capacitor, current of an inductor) and

    s D x = w u − Q x,      y = H₀ u + qᵀ x,

with D the diagonal of values. ``Q_kk`` is 1/R for a capacitor and R for an inductor, R being the
resistance it sees with the others of its end at their midband state; τ_k = D_k / Q_kk, the poles
are −eig(D⁻¹Q), and Σ 1/τ_k = −Σ poles exactly.

High end. With z_k the voltage of a capacitor or the current of an inductor,

    z = r u − P D s z,      y = H₀ u + mᵀ D s z,

``P_kk`` is R for a capacitor and 1/R for an inductor; τ_k = P_kk D_k, the poles are
−1/eig(P D), and Σ τ_k = b₁ exactly, the s coefficient of the denominator.

Sources: short- and open-circuit time constants after P. E. Gray, C. L. Searle, "Electronic
Principles" (1969), as cited by S. Franco ch. 6 (references B1, read there); that the low-end sum
is the highest-order coefficient ratio: references B2.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from tauledger.records import dataclass
from tauledger.smallsignal.modes import ComplexArray
from tauledger.smallsignal.network import FloatArray, ReactivePart
from tauledger.smallsignal.response import Response


@dataclass(frozen=True, slots=True)
class EndModel:
    """One end of the band as a small state-space model; K parts.

    For the low end ``matrix`` is Q, ``inward`` w and ``outward`` q; for the high end they are
    P, r and m (see the module's equations).
    """

    low: bool
    parts: tuple[ReactivePart, ...]
    values: FloatArray
    """(K,): farads and henries."""
    matrix: FloatArray
    """(K, K)."""
    inward: FloatArray
    outward: FloatArray
    """(K,)."""
    gain: float
    """H₀, the midband gain."""

    @property
    def resistance_ohm(self) -> FloatArray:
        """(K,): the resistance each part sees."""
        diagonal = np.diag(self.matrix) + 0.0
        inductive = np.array([part.is_inductor for part in self.parts], dtype=bool)
        with np.errstate(divide="ignore"):
            return np.asarray(np.where(inductive == self.low, diagonal, 1.0 / diagonal))

    @property
    def tau_s(self) -> FloatArray:
        """(K,): time constants; infinite for a low-end part that sees an ideal source or none."""
        diagonal = np.diag(self.matrix) + 0.0
        with np.errstate(divide="ignore"):
            return np.asarray(self.values / diagonal if self.low else self.values * diagonal)

    def poles(self) -> ComplexArray:
        """Poles of this end in rad/s, smallest magnitude first; those at infinity left out."""
        return self._roots(self.matrix)

    def zeros(self) -> ComplexArray:
        """Zeros of this end in rad/s, smallest magnitude first; those at infinity left out.

        Balanced by the square roots of the values, the matrix has a null vector for every zero
        at the origin (low end) or at infinity (high end). They are taken out round by round before
        the eigenvalues are formed: left in, k of them would scatter over a circle of radius
        ε^(1/k) and pass for real zeros.
        """
        if self.gain == 0.0 or not self.parts:
            return np.zeros(0, dtype=complex)
        if (self.values <= 0.0).any():
            return self.scattered_zeros()
        scale = np.sqrt(self.values)
        scales = np.outer(scale, scale) if not self.low else 1.0 / np.outer(scale, scale)
        matrix = (self.matrix + self._coupling()) * scales
        largest = max(_size(matrix), _size(self.matrix * scales))
        removed = 0
        while matrix.size:
            _, singular, right = np.linalg.svd(matrix)
            null = int(np.count_nonzero(singular <= 1e-12 * largest))
            if not null:
                break
            basis = right[:-null].T
            matrix = basis.T @ matrix @ basis
            removed += null
        left = np.linalg.eigvals(matrix).astype(complex)
        roots = np.concatenate([np.zeros(removed), -left]) if self.low else -1.0 / left
        return np.asarray(roots[np.argsort(np.abs(roots))])

    def scattered_zeros(self) -> ComplexArray:
        """The same in one step, those at the origin or at infinity scattered around it."""
        return self._roots(self.matrix + self._coupling())

    def _coupling(self) -> FloatArray:
        return np.outer(self.inward, self.outward) / self.gain

    def _roots(self, matrix: FloatArray) -> ComplexArray:
        if not self.parts:
            return np.zeros(0, dtype=complex)
        if self.low:
            roots = -np.linalg.eigvals(matrix / self.values[:, None]).astype(complex)
        else:
            inverse = np.linalg.eigvals(matrix * self.values[None, :]).astype(complex)
            kept = inverse[np.abs(inverse) > 1e-12 * np.abs(inverse).max(initial=0.0)]
            roots = -1.0 / kept
        return np.asarray(roots[np.argsort(np.abs(roots))])

    def switched_gain(self) -> FloatArray:
        """(K,): midband gain when one part alone goes to its other state.

        An open low-end capacitor carries no current, so x = w u/Q; a shorted high-end one has
        no voltage, so D s z = r u/P. Both add outward·inward/diagonal to the gain.
        """
        diagonal = np.diag(self.matrix)
        step = np.divide(
            self.inward * self.outward, diagonal, out=np.zeros_like(diagonal), where=diagonal != 0
        )
        return np.asarray(self.gain + step)

    def own_zero(self) -> FloatArray:
        """(K,): the zero each part makes with the others at midband state, rad/s, sign kept.

        Negative values are zeros in the left half-plane, as for poles.
        """
        if self.gain == 0.0:
            return np.full(self.values.shape, np.nan)
        shifted = np.diag(self.matrix) + self.inward * self.outward / self.gain
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(
                -shifted / self.values if self.low else -1.0 / (shifted * self.values)
            )

    def keep(self, indices: Sequence[int]) -> EndModel:
        """The same end with some parts only (the rest stay at their midband state)."""
        index = np.asarray(indices, dtype=np.intp)
        return EndModel(
            low=self.low,
            parts=tuple(self.parts[i] for i in indices),
            values=self.values[index],
            matrix=self.matrix[np.ix_(index, index)],
            inward=self.inward[index],
            outward=self.outward[index],
            gain=self.gain,
        )


@dataclass(frozen=True, slots=True)
class Midband:
    """The network at midband and its two ends."""

    gain: float
    unknowns: FloatArray
    """(N,): node voltages and branch currents for a drive of one."""
    inverse: FloatArray
    """(N, N): inverse of the midband matrix, restricted to the network's own unknowns."""
    low: EndModel
    high: EndModel
    matrix: FloatArray
    """(M, M): the midband matrix, unknown currents of short-circuited capacitors behind the N."""
    whole_inverse: FloatArray
    """(M, M)."""

    def resistance_seen_ohm(self, probe: FloatArray) -> float:
        """Between the two nodes for which ``probe`` (N,) holds +1 and −1.

        With the inverse X of A the solution x = X p is refined once, x + X (p − A x). That step
        takes out the rounding error of x, whatever the scale of rows and columns (fixed precision
        refinement: N. J. Higham, "Accuracy and Stability of Numerical Algorithms", from memory).
        A figure no larger than its correction was rounding alone, as behind an ideal source,
        and is 0.
        """
        load = np.zeros(self.matrix.shape[0])
        load[: probe.size] = probe
        solution = self.whole_inverse @ load
        correction = float(load @ (self.whole_inverse @ (load - self.matrix @ solution)))
        seen = float(load @ solution) + correction
        return seen if abs(seen) > abs(correction) else 0.0


def midband_network(
    response: Response, low: Sequence[ReactivePart], high: Sequence[ReactivePart]
) -> Midband:
    """Solve the midband network seen from the parts of both ends.

    Raises
    ------
    numpy.linalg.LinAlgError
        When the midband network has no unique solution (a loop of short-circuited capacitors
        and voltage sources, or a node left without a path).
    """
    size = response.drive.size
    matrix, drives, reads = _bordered(response.conductance, low, size)
    inverse = np.asarray(np.linalg.inv(matrix), dtype=np.float64)
    if not np.isfinite(inverse).all():
        raise np.linalg.LinAlgError("midband matrix is singular")
    total = matrix.shape[0]
    drive = np.concatenate([response.drive, np.zeros(total - size)])
    sense = np.concatenate([response.sense, np.zeros(total - size)])
    solution = inverse @ drive
    gain = float(sense @ solution)
    injections, probes = _high_ports(high, total)
    low_values = np.array([part.value[0] for part in low])
    high_values = np.array([part.value[0] for part in high])
    low_model = EndModel(
        low=True,
        parts=tuple(low),
        values=low_values,
        matrix=-(reads.T @ inverse @ drives),
        inward=reads.T @ solution,
        outward=drives.T @ (inverse.T @ sense),
        gain=gain,
    )
    high_model = EndModel(
        low=False,
        parts=tuple(high),
        values=high_values,
        matrix=-(probes.T @ inverse @ injections),
        inward=probes.T @ solution,
        outward=injections.T @ (inverse.T @ sense),
        gain=gain,
    )
    own = inverse[:size, :size]
    return Midband(gain, solution[:size], own, low_model, high_model, matrix, inverse)


def _size(matrix: FloatArray) -> float:
    return math.sqrt(float(np.vdot(matrix, matrix)))


def _bordered(
    conductance: FloatArray, low: Sequence[ReactivePart], size: int
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Midband matrix, and the columns that drive and read each low-end part.

    A capacitor gets an unknown current and the equation v₊ − v₋ = x; an inductor's own branch
    equation becomes i = x.
    """
    capacitors = sum(not part.is_inductor for part in low)
    total = size + capacitors
    matrix = np.zeros((total, total))
    matrix[:size, :size] = conductance
    drives, reads = np.zeros((total, len(low))), np.zeros((total, len(low)))
    row = size
    for k, part in enumerate(low):
        if part.is_inductor:
            matrix[part.branch, :] = 0.0
            matrix[part.branch, part.branch] = 1.0
            drives[part.branch, k] = 1.0
            _put(reads[:, k], part, 1.0)
            continue
        _put(matrix[:, row], part, 1.0)
        _put(matrix[row, :], part, 1.0)
        drives[row, k] = reads[row, k] = 1.0
        row += 1
    return matrix, drives, reads


def _high_ports(high: Sequence[ReactivePart], total: int) -> tuple[FloatArray, FloatArray]:
    injections, probes = np.zeros((total, len(high))), np.zeros((total, len(high)))
    for k, part in enumerate(high):
        if part.is_inductor:
            injections[part.branch, k] = probes[part.branch, k] = 1.0
        else:
            _put(injections[:, k], part, -1.0)
            _put(probes[:, k], part, 1.0)
    return injections, probes


def _put(vector: FloatArray, part: ReactivePart, sign: float) -> None:
    if part.positive >= 0:
        vector[part.positive] += sign
    if part.negative >= 0:
        vector[part.negative] -= sign
