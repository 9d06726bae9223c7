"""What discharges a capacitor once the supplies are disconnected."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from tauledger.circuit.elements import GROUND, Circuit, Inductor, Resistor, VoltageSource

_INDUCTOR_OHM = 1e-3
"""An inductor is a short; this small resistance keeps the equations regular."""


class Discharge:
    """Resistors, inductors and the signal source, with every supply and transistor taken away.

    Transistors are left out because what they conduct without a supply ends at a few tenths of a
    volt. The signal source stands for the equipment before the amplifier and stays connected.
    """

    def __init__(self, circuit: Circuit, source: str) -> None:
        self._index: Mapping[str, int] = {n: i for i, n in enumerate((GROUND, *circuit.nodes))}
        size = len(self._index)
        self._laplacian = np.zeros((size, size))
        self._names: list[tuple[str, int, int]] = []
        for element in circuit.elements:
            if isinstance(element, Resistor):
                self._connect(element.name, element.nodes, abs(element.resistance_ohm))
            elif isinstance(element, Inductor) or (
                isinstance(element, VoltageSource) and element.name == source
            ):
                self._connect(element.name, element.nodes, _INDUCTOR_OHM)
        self._island = self._islands()

    def _connect(self, name: str, nodes: tuple[str, ...], resistance_ohm: float) -> None:
        a, b = self._index[nodes[0]], self._index[nodes[1]]
        conductance = 1.0 / max(resistance_ohm, _INDUCTOR_OHM)
        self._laplacian[[a, b], [a, b]] += conductance
        self._laplacian[[a, b], [b, a]] -= conductance
        self._names.append((name, a, b))

    def _islands(self) -> list[int]:
        """A number for each node, the same for nodes that are connected."""
        parent = list(range(len(self._index)))

        def root(i: int) -> int:
            while parent[i] != i:
                parent[i] = parent[parent[i]]
                i = parent[i]
            return i

        for _, a, b in self._names:
            parent[root(a)] = root(b)
        return [root(i) for i in range(len(parent))]

    def resistance(self, nodes: tuple[str, ...]) -> float | None:
        """Between two nodes, every capacitor open; None where nothing joins them."""
        a, b = self._index[nodes[0]], self._index[nodes[1]]
        if self._island[a] != self._island[b]:
            return None
        if a == b:
            return 0.0
        members = [i for i, island in enumerate(self._island) if island == self._island[a]]
        members.remove(b)
        current = np.array([1.0 if i == a else 0.0 for i in members])
        part = self._laplacian[np.ix_(members, members)]
        return float(np.linalg.solve(part, current)[members.index(a)])

    def parts(self, nodes: tuple[str, ...], limit: int = 4) -> tuple[str, ...]:
        """Names of the parts that carry most of the current between two nodes."""
        a, b = self._index[nodes[0]], self._index[nodes[1]]
        members = [i for i, island in enumerate(self._island) if island == self._island[a]]
        if b not in members or a == b:
            return ()
        members.remove(b)
        voltage = np.zeros(len(self._index))
        current = np.array([1.0 if i == a else 0.0 for i in members])
        voltage[members] = np.linalg.solve(self._laplacian[np.ix_(members, members)], current)
        flows = [
            (abs(self._laplacian[i, j] * (voltage[i] - voltage[j])), name)
            for name, i, j in self._names
            if self._island[i] == self._island[a]
        ]
        strong = [name for flow, name in sorted(flows, reverse=True) if flow > 0.1]
        return tuple(strong[:limit])
