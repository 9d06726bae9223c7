"""The result of the bias solver."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from tauledger.records import dataclass

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class DevicePoint:
    """One transistor or diode at the operating point."""

    name: str
    kind: str
    """Name of the device kind, such as ``bjt``."""
    values: Mapping[str, FloatArray]
    """Figures of :class:`tauledger.devices.interface.OperatingValues`, each (boards,)."""
    region: str
    """Region on the first board."""
    capacitances: Mapping[str, FloatArray]
    """Symbol to farads, each (boards,)."""


@dataclass(frozen=True, slots=True)
class OperatingPoint:
    """Node voltages and branch currents; the leading axis is the batch of boards."""

    nodes: tuple[str, ...]
    """Node unknowns: the circuit's nodes, then device-internal ones (``Q1.base_internal``)."""
    voltages: FloatArray
    """(boards, nodes) in V."""
    branches: tuple[str, ...]
    """Elements whose current is an unknown: voltage sources, E, H, inductors."""
    currents: FloatArray
    """(boards, branches) in A, from the first node through the element to the second."""
    devices: Mapping[str, DevicePoint]
    method: str
    """How it converged: ``newton``, ``gmin stepping``, ``source stepping`` …"""
    failed_boards: int = 0
    """Boards whose bias was not found; their rows hold NaN."""

    def voltage(self, node: str) -> float:
        """Voltage of a node on the first board, in V; 0 for ground."""
        return 0.0 if node == "0" else float(self.voltages[0, self.nodes.index(node)])
