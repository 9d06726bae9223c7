"""Exact midband gain and −3 dB corners of many boards at once.

Boards differ little from the circuit as drawn, so every board's corner is sought from the nominal
one: secant steps on ``ln|H|`` over ``ln f``, in which a pole's roll-off is nearly straight, from
the nominal corner and the nominal slope. A coarse logarithmic grid between midband and the corner
shows that no nearer point is below −3 dB; a board that fails there, or does not converge, is
searched on its own as :func:`tauledger.corners.band.find_edge` does for a single board.

Unknowns that no capacitance or inductance touches (supplies, the input) are eliminated first, in
real arithmetic, once for all frequencies.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from tauledger.corners.band import HALF_POWER, find_edge, sweep_response
from tauledger.smallsignal.network import FloatArray, LinearNetwork
from tauledger.smallsignal.response import ComplexArray, Response, natural_frequencies

CHUNK_BYTES = 1 << 21
"""Size of the complex matrices of the boards solved together: they stay in the cache."""
MOST_STEPS = 14
TOLERANCE = 3e-5
"""Of ln|H| before the last secant step, which is quadratic: the corner is good to about 1e-7."""
LARGEST_STEP = 1.0
"""Of ln f."""
GRID_POINTS = 2
"""Between midband and a corner."""


@dataclass(frozen=True, slots=True)
class BoardCorners:
    """Every array (boards,); NaN where a board has no bias or no such corner."""

    midband_hz: float
    gain: ComplexArray
    """H at midband_hz."""
    low_hz: FloatArray
    high_hz: FloatArray
    searched: int
    """Boards that needed a search of their own."""


def board_corners(
    network: LinearNetwork,
    drive: FloatArray,
    sense: FloatArray,
    midband_hz: float,
    low_hz: float | None,
    high_hz: float | None,
) -> BoardCorners:
    """Gain and corners of every board.

    Parameters
    ----------
    network
        The linear networks of all boards.
    drive, sense
        (N,): right-hand side and output, as for :class:`Response`.
    midband_hz
        Where the gain is taken, for all boards.
    low_hz, high_hz
        The corners of the circuit as drawn; None where it has none, which leaves that end NaN.
    """
    boards, order = network.conductance.shape[:2]
    gain = np.full(boards, np.nan, dtype=np.complex128)
    edges = {False: np.full(boards, np.nan), True: np.full(boards, np.nan)}
    sound = np.flatnonzero(np.isfinite(network.conductance).all(axis=(1, 2)))
    chunk = max(16, CHUNK_BYTES // (16 * order * order))
    searched: set[int] = set()
    for first in range(0, sound.size, chunk):
        members = sound[first : first + chunk]
        system = _eliminated(network.conductance[members], network.reactance[members], drive, sense)
        gain[members] = system.at(np.full(members.size, midband_hz))
        for upward, nominal in ((False, low_hz), (True, high_hz)):
            if nominal is None:
                continue
            found, good = _follow(system, gain[members], midband_hz, nominal)
            edges[upward][members] = found
            for board in members[~good]:
                edges[upward][board] = _alone(network, drive, sense, board, midband_hz, upward)
                searched.add(int(board))
    return BoardCorners(midband_hz, gain, edges[False], edges[True], len(searched))


@dataclass(frozen=True, slots=True)
class _Boards:
    """Systems of several boards: matrices (boards, n, n), ``drive`` (boards, n)."""

    conductance: FloatArray
    reactance: FloatArray
    drive: FloatArray
    sense: FloatArray

    def at(self, frequency_hz: FloatArray) -> ComplexArray:
        """H of each board at its own frequency, (boards,)."""
        matrix = np.empty(self.conductance.shape, dtype=np.complex128)
        matrix.real = self.conductance
        np.multiply(self.reactance, (2.0 * math.pi * frequency_hz)[:, None, None], out=matrix.imag)
        unknowns = np.linalg.solve(matrix, self.drive[:, :, None])[:, :, 0]
        # Not a matrix product: a threaded library is slow on so small a one.
        seen = np.flatnonzero(self.sense)
        return np.asarray((unknowns[:, seen] * self.sense[seen]).sum(axis=1))

    def take(self, boards: np.ndarray) -> _Boards:
        return _Boards(
            self.conductance[boards], self.reactance[boards], self.drive[boards], self.sense
        )


def _follow(
    system: _Boards, gain: ComplexArray, midband_hz: float, nominal_hz: float
) -> tuple[FloatArray, np.ndarray]:
    """Corner of each board from the nominal one, and which boards can be trusted."""
    level = np.log(np.abs(gain) * HALF_POWER)
    x = np.full(level.size, math.log(nominal_hz))

    def excess(part: _Boards, at: FloatArray, wanted: FloatArray) -> FloatArray:
        return np.asarray(np.log(np.abs(part.at(np.exp(at)))) - wanted)

    value = excess(system, x, level)
    # The nominal slope of one decade beyond a pole at its corner is 0.5: a first guess only.
    slope = np.full(level.size, 0.5 if nominal_hz < midband_hz else -0.5)
    going = np.abs(value) > TOLERANCE
    for _ in range(MOST_STEPS):
        boards = np.flatnonzero(going)
        if not boards.size:
            break
        step = np.clip(-value[boards] / slope[boards], -LARGEST_STEP, LARGEST_STEP)
        part = system if boards.size == x.size else system.take(boards)
        fresh = excess(part, x[boards] + step, level[boards])
        change = (fresh - value[boards]) / step
        slope[boards] = np.where(np.abs(change) > 1e-3, change, slope[boards])
        x[boards] += step
        value[boards] = fresh
        going[boards] = np.abs(fresh) > TOLERANCE
    x -= value / slope
    middle = math.log(midband_hz)
    good = ~going & ((x < middle) == (nominal_hz < midband_hz))
    for k in range(1, GRID_POINTS + 1):
        between = middle + (x - middle) * k / (GRID_POINTS + 1)
        good &= excess(system, np.where(good, between, middle), level) > 0.0
    return np.exp(x), good


def _alone(
    network: LinearNetwork,
    drive: FloatArray,
    sense: FloatArray,
    board: int,
    midband_hz: float,
    upward: bool,
) -> float:
    response = Response(network.conductance[board], network.reactance[board], drive, sense)
    sweep = sweep_response(response, natural_frequencies(response.conductance, response.reactance))
    edge = find_edge(response, sweep, midband_hz, upward=upward)
    return math.nan if edge is None else edge


def _eliminated(
    conductance: FloatArray, reactance: FloatArray, drive: FloatArray, sense: FloatArray
) -> _Boards:
    """The same response with the unknowns left out that have no reactance and no output."""
    order = drive.size
    right = np.broadcast_to(drive, (conductance.shape[0], order))
    static = _static(conductance, reactance, sense)
    if not static.any():
        return _Boards(conductance, reactance, right, sense)
    s, d = np.flatnonzero(static), np.flatnonzero(~static)
    inner = conductance[:, s[:, None], s]
    known = np.concatenate([conductance[:, s[:, None], d], right[:, s, None]], axis=2)
    carried = conductance[:, d[:, None], s] @ np.linalg.solve(inner, known)
    return _Boards(
        conductance[:, d[:, None], d] - carried[:, :, :-1],
        reactance[:, d[:, None], d],
        right[:, d] - carried[:, :, -1],
        sense[d],
    )


def _static(conductance: FloatArray, reactance: FloatArray, sense: FloatArray) -> np.ndarray:
    """(N,): unknowns that can be eliminated; none where their own block is singular."""
    touched = (reactance != 0.0).any(axis=0)
    free = ~(touched.any(axis=0) | touched.any(axis=1)) & (sense == 0.0)
    # A source's current has no conductance of its own: it goes with a node of the source or stays.
    links = (conductance != 0.0).any(axis=0)
    nodes = free & links.diagonal()
    static = nodes | (free & (links[:, nodes].any(axis=1)))
    if static.any():
        block = conductance[:, static][:, :, static]
        if (np.linalg.cond(block[:1]) > 1e10).any():
            return np.zeros(sense.size, dtype=bool)
    return np.asarray(static)
