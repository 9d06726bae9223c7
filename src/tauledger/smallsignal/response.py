"""The exact response of the linear network on one board, and the network's poles."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tauledger.circuit.elements import CurrentSource, IndependentSource
from tauledger.smallsignal.network import FloatArray, LinearNetwork, ReactivePart

ComplexArray = NDArray[np.complex128]
LARGEST_DIRECT, FEWEST_MODAL = 100, 30
"""Unknowns and frequencies above which a sweep goes by an eigenvalue decomposition."""
LARGEST_BATCH = 4_000_000
"""Complex numbers held at once while a sweep is solved (64 MB)."""


@dataclass(frozen=True, slots=True)
class Response:
    """``H(s) = senseᵀ (G + sC)⁻¹ drive + direct`` on one board; (N, N) and (N,)."""

    conductance: FloatArray
    reactance: FloatArray
    drive: FloatArray
    sense: FloatArray
    direct: float = 0.0

    def at(self, frequency_hz: FloatArray) -> ComplexArray:
        """H at each frequency, shape of ``frequency_hz`` (one axis)."""
        s: ComplexArray = np.asarray(2j * math.pi * np.atleast_1d(frequency_hz), np.complex128)
        if self.drive.size > LARGEST_DIRECT and s.size > FEWEST_MODAL:
            modal = self._modal(s)
            if modal is not None:
                return modal + self.direct
        at_once = max(1, LARGEST_BATCH // max(1, self.drive.size**2))
        pieces = [self._solve(s[i : i + at_once]) for i in range(0, s.size, at_once)]
        return np.concatenate(pieces) + self.direct

    def _solve(self, s: ComplexArray) -> ComplexArray:
        matrices = self.conductance + s[:, None, None] * self.reactance
        right = np.broadcast_to(self.drive[:, None], (s.size, self.drive.size, 1))
        return np.asarray(np.linalg.solve(matrices, right)[:, :, 0] @ self.sense)

    def _modal(self, s: ComplexArray) -> ComplexArray | None:
        """The same by one eigenvalue decomposition, where that is accurate; else None.

        With M = G + s₀C and A = M⁻¹C = VΛV⁻¹, H = Σ g_k c_k / (1 + (s − s₀)λ_k). A defective A
        spoils V, so the result is held against direct solutions at some of the frequencies.
        """
        shift = float(np.exp(np.log(np.abs(s)).mean()))
        matrix = self.conductance + shift * self.reactance
        try:
            values, vectors = np.linalg.eig(np.linalg.solve(matrix, self.reactance))
            drives = np.linalg.solve(vectors, np.linalg.solve(matrix, self.drive))
        except np.linalg.LinAlgError:
            return None
        weights = (self.sense @ vectors) * drives
        found = (weights[None, :] / (1.0 + (s[:, None] - shift) * values[None, :])).sum(axis=1)
        probes = np.linspace(0, s.size - 1, 7).astype(int)
        direct = self._solve(s[probes])
        near = np.abs(found[probes] - direct) <= 1e-6 * np.abs(direct).max()
        return np.asarray(found, dtype=np.complex128) if near.all() else None

    def magnitude(self, frequency_hz: float) -> float:
        """|H| at one frequency."""
        return float(abs(self.at(np.array([frequency_hz]))[0]))


def drive_vector(network: LinearNetwork, source: IndependentSource) -> FloatArray:
    """Right-hand side for a source of 1 V or 1 A, every other source at zero."""
    drive = np.zeros(len(network.nodes) + len(network.branches))
    if isinstance(source, CurrentSource):
        for node, sign in zip(source.nodes, (-1.0, 1.0), strict=False):
            if (index := network.index(node)) >= 0:
                drive[index] += sign
    else:
        drive[len(network.nodes) + network.branches.index(source.name)] = 1.0
    return drive


def sense_vector(network: LinearNetwork, positive: str, negative: str = "0") -> FloatArray:
    """Picks v(positive) − v(negative) out of the unknowns."""
    sense = np.zeros(len(network.nodes) + len(network.branches))
    for node, sign in ((positive, 1.0), (negative, -1.0)):
        if (index := network.index(node)) >= 0:
            sense[index] += sign
    return sense


def response(network: LinearNetwork, drive: FloatArray, sense: FloatArray) -> Response:
    """The response on the first board."""
    return Response(network.conductance[0], network.reactance[0], drive, sense)


def condensed(response: Response) -> Response:
    """The same H and poles with fewer unknowns: those without reactance are eliminated.

    With k the unknowns kept and e the rest, (G_kk − G_ke G_ee⁻¹ G_ek + s C_kk) x_k has no more
    s in it. Returns the response itself where the rest cannot be eliminated.
    """
    reactance = response.reactance
    kept = np.any(reactance != 0.0, axis=0) | np.any(reactance != 0.0, axis=1)
    # A branch current is eliminated only together with a node of its own: where both nodes are
    # kept its equation has nothing else to be solved for.
    conductance = response.conductance
    for row in np.flatnonzero(~kept & (np.diag(conductance) == 0.0)):
        touched = np.flatnonzero(conductance[row])
        kept[row] = bool(kept[touched].all())
    rest = ~kept
    if not rest.any() or not kept.any():
        return response
    g_ee = conductance[np.ix_(rest, rest)]
    right = np.column_stack([conductance[np.ix_(rest, kept)], response.drive[rest]])
    try:
        solved = np.linalg.solve(g_ee, right)
    except np.linalg.LinAlgError:
        return response
    if not np.isfinite(solved).all():
        return response
    g_ke, sense_e = conductance[np.ix_(kept, rest)], response.sense[rest]
    return Response(
        conductance=conductance[np.ix_(kept, kept)] - g_ke @ solved[:, :-1],
        reactance=reactance[np.ix_(kept, kept)],
        drive=response.drive[kept] - g_ke @ solved[:, -1],
        sense=response.sense[kept] - sense_e @ solved[:, :-1],
        direct=response.direct + float(sense_e @ solved[:, -1]),
    )


def gain_sensitivity(
    response: Response, parts: Sequence[ReactivePart], frequency_hz: float
) -> FloatArray:
    """(K,): d ln|H| / d ln(value) of each part at one frequency.

    By the adjoint network: dH/dC = −s (senseᵀA⁻¹c)(cᵀA⁻¹drive), c picking the part's voltage;
    for an inductor +s on its branch unknown.
    """
    return _sensitivities(response, parts, frequency_hz)[0]


def edge_sensitivity(
    response: Response, parts: Sequence[ReactivePart], edge_hz: float, midband_hz: float
) -> FloatArray:
    """(K,): d ln(edge) / d ln(value) of each part, for an edge defined relative to midband.

    The edge keeps ln|H(edge)| − ln|H(midband)| constant, so its move is minus the change of
    that difference over the slope d ln|H|/d ln f at the edge.
    """
    at_edge, slope = _sensitivities(response, parts, edge_hz)
    at_midband, _ = _sensitivities(response, parts, midband_hz)
    return np.asarray(-(at_edge - at_midband) / slope)


def _sensitivities(
    response: Response, parts: Sequence[ReactivePart], frequency_hz: float
) -> tuple[FloatArray, float]:
    """d ln|H| / d ln(value) of each part, and the slope d ln|H| / d ln(frequency)."""
    s = 2j * math.pi * frequency_hz
    matrix = response.conductance + s * response.reactance
    inverse: ComplexArray = np.asarray(np.linalg.inv(matrix), dtype=np.complex128)
    forward: ComplexArray = np.asarray(inverse @ response.drive, dtype=np.complex128)
    adjoint: ComplexArray = np.asarray(inverse.T @ response.sense, dtype=np.complex128)
    transfer = complex(response.sense @ forward)
    result = np.empty(len(parts))
    for k, part in enumerate(parts):
        if part.is_inductor:
            change = s * forward[part.branch] * adjoint[part.branch]
        else:
            change = -s * _across(forward, part) * _across(adjoint, part)
        result[k] = (change * part.value[0] / transfer).real
    slope = (-s * (adjoint @ response.reactance @ forward) / transfer).real
    return result, float(slope)


def _across(unknowns: ComplexArray, part: ReactivePart) -> complex:
    plus = unknowns[part.positive] if part.positive >= 0 else 0.0
    minus = unknowns[part.negative] if part.negative >= 0 else 0.0
    return complex(plus - minus)


def natural_frequencies(
    conductance: FloatArray, reactance: FloatArray, near: float | None = None
) -> ComplexArray:
    """Finite roots s (rad/s) of det(G + sC) = 0, smallest magnitude first.

    Works on the pencil shifted to a point on the positive real axis, where G + σC is regular
    even when G alone is not (a node reached only by capacitors is a pole at zero). Two passes:
    the second shift sits in the middle of the spread that the first one found, which keeps slow
    and fast roots equally accurate. ``near`` (rad/s) gives one shift to work from instead.
    """
    shift = 1e5 if near is None else near
    roots = np.zeros(0, dtype=complex)
    for _ in range(2 if near is None else 1):
        inverse_roots = np.linalg.eigvals(
            np.linalg.solve(conductance + shift * reactance, reactance)
        )
        largest = np.abs(inverse_roots).max(initial=0.0)
        kept = inverse_roots[np.abs(inverse_roots) > 1e-13 * largest]
        roots = shift - 1.0 / kept if largest > 0 else np.zeros(0, dtype=complex)
        sizes = np.abs(roots)[np.abs(roots) > 1e-9]
        if not sizes.size:
            break
        shift = float(np.exp(np.log(sizes).mean()))
    return np.asarray(roots[np.argsort(np.abs(roots))])
