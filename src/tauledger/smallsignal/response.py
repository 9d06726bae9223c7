"""The exact response of the linear network on one board, and the network's poles."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from tauledger.circuit.elements import CurrentSource, IndependentSource
from tauledger.records import dataclass
from tauledger.smallsignal.modes import ComplexArray, Modes, decompose
from tauledger.smallsignal.network import FloatArray, LinearNetwork, ReactivePart

LARGEST_DECOMPOSED = 350
"""Unknowns; the time for their eigenvalues grows with the cube of the number."""
MODES_TOLERANCE = 1e-7
"""Of the largest |H|: so well must the sum over the modes agree with direct solutions."""
SKIRT_TOLERANCE, SKIRT_FLOOR = 1e-3, 1e-10
"""Of |H| itself and of the largest: a passband may lie far below a resonance elsewhere, and skirts
are drawn. So the sum is good to 0.01 dB down to -120 dB at the probes."""
PROBES = 9
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
    short: Response | None = None
    """The same H on fewer unknowns; see :func:`decomposed`."""
    modes: Modes | None = None
    """The same H as a sum over natural frequencies, to a ten-millionth of its maximum."""

    def at(self, frequency_hz: FloatArray) -> ComplexArray:
        """H at each frequency, shape of ``frequency_hz`` (one axis); from the modes if known."""
        s: ComplexArray = np.asarray(2j * math.pi * np.atleast_1d(frequency_hz), np.complex128)
        if self.modes is not None:
            return self.modes.at(s)
        at_once = max(1, LARGEST_BATCH // max(1, self.drive.size**2))
        pieces = [self.solve(s[i : i + at_once]) for i in range(0, s.size, at_once)]
        return np.concatenate(pieces) + self.direct

    def solve(self, s: ComplexArray) -> ComplexArray:
        """H less ``direct`` at complex frequencies (F,) in rad/s, by a solution for each."""
        matrices = self.conductance + s[:, None, None] * self.reactance
        right = np.broadcast_to(self.drive[:, None], (s.size, self.drive.size, 1))
        return np.asarray(np.linalg.solve(matrices, right)[:, :, 0] @ self.sense)

    def magnitude(self, frequency_hz: float) -> float:
        """|H| at one frequency, by a direct solution."""
        short = self.short or self
        matrix = short.conductance + 2j * math.pi * frequency_hz * short.reactance
        return float(abs(short.sense @ np.linalg.solve(matrix, short.drive) + short.direct))


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


def decomposed(response: Response) -> Response:
    """The response with the same on fewer unknowns, and with its modes.

    The modes are left out where the network is large or they do not reproduce direct solutions
    (equal poles may share one mode).
    """
    short = condensed(response)
    if short.drive.size > LARGEST_DECOMPOSED:
        return response
    modes = decompose(short.conductance, short.reactance, short.drive, short.sense, short.direct)
    if modes is None:
        return replace(response, short=short)
    sizes = np.abs(modes.natural[np.abs(modes.natural) > 1e-9])
    slowest, fastest = (sizes.min(), sizes.max()) if sizes.size else (1.0, 1.0)
    # As far as a sweep reaches.
    probes = 1j * np.geomspace(slowest / 100.0, fastest * 30.0, PROBES)
    direct = short.solve(probes) + short.direct
    error, size = np.abs(modes.at(probes) - direct), np.abs(direct)
    allowed = np.minimum(
        MODES_TOLERANCE * size.max(), SKIRT_TOLERANCE * size + SKIRT_FLOOR * size.max()
    )
    return replace(response, short=short, modes=modes if (error <= allowed).all() else None)


def gain_sensitivity(
    response: Response, parts: Sequence[ReactivePart], frequency_hz: float
) -> FloatArray:
    """(K,): d ln|H| / d ln(value) of each part at one frequency.

    By the adjoint network: dH/dC = −s (senseᵀA⁻¹c)(cᵀA⁻¹drive), c picking the part's voltage;
    for an inductor +s on its branch unknown.
    """
    return _sensitivities(response, parts, frequency_hz)[0]


def edge_sensitivity(
    response: Response,
    parts: Sequence[ReactivePart],
    edge_hz: float,
    at_midband: FloatArray,
) -> FloatArray:
    """(K,): d ln(edge) / d ln(value) of each part, for an edge defined relative to midband.

    The edge keeps ln|H(edge)| − ln|H(midband)| constant, so its move is minus the change of
    that difference over the slope d ln|H|/d ln f at the edge. ``at_midband`` is what
    :func:`gain_sensitivity` gives there.
    """
    at_edge, slope = _sensitivities(response, parts, edge_hz)
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
