"""The linear networks of many boards, solved together at any frequency."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from tauledger.decide.elimination import Factors, Plan, plan_elimination
from tauledger.records import dataclass
from tauledger.smallsignal.network import LinearNetwork, ReactivePart

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
Column = ComplexArray | complex


@dataclass(frozen=True, slots=True)
class _Dense:
    """The same two solutions as :class:`Factors` from a pivoting solver."""

    inverse: ComplexArray

    def solve(self, right: Mapping[int, complex]) -> list[Column]:
        b = _vector(right, self.inverse.shape[-1])
        return list((self.inverse @ b).T)

    def solve_transposed(self, right: Mapping[int, complex]) -> list[Column]:
        b = _vector(right, self.inverse.shape[-1])
        return list((np.swapaxes(self.inverse, 1, 2) @ b).T)


@dataclass(frozen=True, slots=True)
class Networks:
    """``H(s) = senseᵀ (G + sC)⁻¹ drive`` on every board; entries are (boards,) arrays."""

    boards: int
    plan: Plan | None
    """None for the dense solver."""
    size: int
    conductance: Mapping[tuple[int, int], ComplexArray]
    """Complex from the start, so that no sum converts them again at every frequency."""
    reactance: Mapping[tuple[int, int], FloatArray]
    drive: Mapping[int, complex]
    sense: Mapping[int, complex]
    values: FloatArray
    """(parts, boards): farads or henries."""

    @classmethod
    def of(
        cls,
        network: LinearNetwork,
        boards: NDArray[np.intp],
        drive: FloatArray,
        sense: FloatArray,
        dense: bool = False,
    ) -> Networks:
        """The networks of some boards."""
        g, c = network.conductance[boards], network.reactance[boards]
        values = np.array([part.value[boards] for part in network.parts])
        return cls(
            len(boards),
            None if dense or not len(boards) else plan_elimination(_sizes(g, c)),
            g.shape[-1],
            {place: value.astype(complex) for place, value in _entries(g).items()},
            _entries(c),
            _sparse(drive),
            _sparse(sense),
            values,
        )

    @classmethod
    def with_values(
        cls,
        network: LinearNetwork,
        drive: FloatArray,
        sense: FloatArray,
        varied: Mapping[str, FloatArray],
        boards: int,
    ) -> Networks:
        """Boards that differ from the first of ``network`` only in the named capacitors.

        What they share stays an array of one entry, which the elimination carries along for next
        to nothing.
        """
        one = cls.of(network, np.zeros(1, dtype=np.intp), drive, sense)
        reactance = dict(one.reactance)
        values = np.repeat(one.values, boards, axis=1)
        for k, part in enumerate(network.parts):
            if part.name in varied:
                change = varied[part.name] - values[k]
                values[k] = varied[part.name]
                for i, j, sign in _places(part):
                    reactance[i, j] = reactance.get((i, j), 0.0) + sign * change
        return replace(one, boards=boards, reactance=reactance, values=values)

    def level(self, frequency_hz: FloatArray | float) -> FloatArray:
        """ln|H| of every board, at one frequency for all or one for each."""
        factors, _ = self._factorise(frequency_hz)
        size = np.maximum(np.abs(self._pick(factors.solve(self.drive))), 1e-300)
        return np.array(np.broadcast_to(np.log(size), (self.boards,)))

    def probe(
        self, frequency_hz: FloatArray | float, parts: Sequence[ReactivePart], moves: bool
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """|H| (boards,), d ln|H|/d ln(value) (parts, boards), and the relative residual.

        By the adjoint network: dH/dC = −s (yᵀc)(cᵀx) with A x = drive and Aᵀ y = sense, c picking
        the part's voltage; for an inductor +s on its branch unknown.
        """
        if not self.boards:
            return np.zeros(0), np.zeros((0, 0)), np.zeros(0)
        factors, entries = self._factorise(frequency_hz)
        x = factors.solve(self.drive)
        transfer = self._pick(x)
        found = np.zeros((0, 0))
        if moves:
            y = factors.solve_transposed(self.sense)
            s = 2j * math.pi * np.asarray(frequency_hz)
            found = np.array(
                [
                    np.broadcast_to(np.real(_change(part, s, x, y) * v / transfer), (self.boards,))
                    for part, v in zip(parts, self.values, strict=True)
                ]
            )
        size = np.broadcast_to(np.abs(transfer), (self.boards,))
        return np.array(size), found, self._residual(entries, x)

    def _pick(self, unknowns: Sequence[Column]) -> Column:
        return sum((value * unknowns[i] for i, value in self.sense.items()), 0.0 + 0.0j)

    def _factorise(
        self, frequency_hz: FloatArray | float
    ) -> tuple[Factors | _Dense, Mapping[tuple[int, int], ComplexArray]]:
        s = 2j * math.pi * np.asarray(frequency_hz)
        entries: dict[tuple[int, int], ComplexArray] = dict(self.conductance)
        for place, value in self.reactance.items():
            entries[place] = entries[place] + s * value if place in entries else s * value
        if self.plan is not None:
            return Factors.of(self.plan, entries), entries
        matrix = np.zeros((self.boards, self.size, self.size), dtype=complex)
        for (i, j), entry in entries.items():
            matrix[:, i, j] = entry
        return _Dense(_inverses(matrix)), entries

    def _residual(
        self, entries: Mapping[tuple[int, int], ComplexArray], x: Sequence[Column]
    ) -> FloatArray:
        """Largest |A x − drive| of any row over the sum of its terms' magnitudes."""
        error: list[Column] = [-self.drive.get(i, 0.0) for i in range(self.size)]
        scale: list[FloatArray | float] = [abs(self.drive.get(i, 0.0)) for i in range(self.size)]
        for (i, j), value in entries.items():
            term = value * x[j]
            error[i] = error[i] + term
            scale[i] = scale[i] + np.abs(term)
        worst = np.zeros(self.boards)
        for e, total in zip(error, scale, strict=True):
            worst = np.maximum(worst, np.abs(e) / np.maximum(total, 1e-300))
        return worst


def _inverses(matrices: ComplexArray) -> ComplexArray:
    """Of every board; NaN where there is none."""
    try:
        return np.asarray(np.linalg.inv(matrices), dtype=np.complex128)
    except np.linalg.LinAlgError:
        if len(matrices) == 1:
            return np.full_like(matrices, np.nan)
        return np.concatenate([_inverses(one[None]) for one in matrices])


def _change(part: ReactivePart, s: Column, x: Sequence[Column], y: Sequence[Column]) -> Column:
    if part.is_inductor:
        return s * x[part.branch] * y[part.branch]
    return -s * _across(x, part) * _across(y, part)


def _across(unknowns: Sequence[Column], part: ReactivePart) -> Column:
    plus = unknowns[part.positive] if part.positive >= 0 else 0.0
    minus = unknowns[part.negative] if part.negative >= 0 else 0.0
    return plus - minus


def _places(part: ReactivePart) -> list[tuple[int, int, float]]:
    """Row, column and sign of a capacitor's entries."""
    a, b = part.positive, part.negative
    pairs = ((a, a, 1.0), (b, b, 1.0), (a, b, -1.0), (b, a, -1.0))
    return [(i, j, sign) for i, j, sign in pairs if i >= 0 and j >= 0]


def _entries(matrix: FloatArray) -> dict[tuple[int, int], FloatArray]:
    rows, columns = np.nonzero((matrix != 0.0).any(axis=0))
    return {
        (int(i), int(j)): np.ascontiguousarray(matrix[:, i, j])
        for i, j in zip(rows, columns, strict=True)
    }


def _sizes(conductance: FloatArray, reactance: FloatArray) -> FloatArray:
    """Typical magnitudes for the choice of pivots: conductances, else susceptances.

    A conductance counts at every frequency; where there is none, the susceptance at a frequency
    that makes the largest of them equal the smallest conductance keeps its place in the pattern.
    """
    g = np.abs(conductance).mean(axis=0)
    c = np.abs(reactance).mean(axis=0)
    least = g[g > 0.0].min(initial=1.0)
    return np.asarray(np.where(g > 0.0, g, c * (least / max(c.max(initial=0.0), 1e-300))))


def _sparse(vector: FloatArray) -> dict[int, complex]:
    return {int(i): complex(vector[i]) for i in np.flatnonzero(vector)}


def _vector(entries: Mapping[int, complex], size: int) -> ComplexArray:
    vector = np.zeros(size, dtype=complex)
    for i, value in entries.items():
        vector[i] = value
    return vector
