"""The linear network at the operating point: ``(G + sC) x = b u``, ``y = lᵀ x``.

Unknowns are node voltages first, then the branch currents of voltage sources and inductors.
Index −1 stands for ground. The leading axis of every value array is the batch of boards.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tauledger.records import dataclass

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class ReactivePart:
    """A capacitor between two unknowns, or an inductor on its branch-current unknown.

    For a capacitor ``positive`` and ``negative`` are node indices. For an inductor they are too,
    and ``branch`` is the index of its current.
    """

    name: str
    """``C3`` for a part, ``Q1.Cπ`` for a device capacitance."""
    positive: int
    negative: int
    value: FloatArray
    """(boards,): farads or henries."""
    branch: int = -1
    device: str = ""
    """Designator of the transistor or diode the capacitance belongs to; empty for parts."""
    symbol: str = ""
    """``Cπ``, ``Cμ``, ``Cgd`` … for device capacitances."""

    @property
    def is_inductor(self) -> bool:
        return self.branch >= 0


@dataclass(frozen=True, slots=True)
class LinearNetwork:
    """Shapes: ``conductance`` and ``reactance`` (boards, N, N)."""

    nodes: tuple[str, ...]
    """Names of the node unknowns; device-internal ones look like ``Q1.base_internal``."""
    branches: tuple[str, ...]
    """Names of the elements whose current is an unknown, after the nodes."""
    conductance: FloatArray
    """G: capacitors open, inductors short (their branch rows hold v₊ − v₋)."""
    reactance: FloatArray
    """C: capacitances between nodes, −L on inductor rows, transcapacitances included."""
    parts: tuple[ReactivePart, ...]
    """Every two-terminal capacitor and inductor; transcapacitances are only in the matrix."""

    def index(self, node: str) -> int:
        """Index of a node by name; −1 for ground. Raises ValueError when there is none."""
        return -1 if node == "0" else self.nodes.index(node)
