"""Input and output resistance at midband, of many boards at once.

As the report has them: in the resistive network that is left at midband, with the capacitors of
the low end as shorts and its inductors open. Which part belongs to which end is taken from the
nominal board.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np
from numpy.typing import NDArray

from tauledger.analysis import Analysis
from tauledger.bias.stamps import Variations
from tauledger.circuit.elements import Resistor
from tauledger.records import dataclass
from tauledger.smallsignal.network import LinearNetwork, ReactivePart
from tauledger.topology.model import SignalPath

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.intp]


@dataclass(frozen=True, slots=True)
class Ports:
    """The ends of a path, and what is a short or open there at midband."""

    path: SignalPath
    low: tuple[ReactivePart, ...]
    """Parts of the low end: capacitors that are shorts, inductors that are open."""
    source_resistor_ohm: Mapping[str, float]
    """Of the nominal board; empty when the source has none of its own."""
    load_ohm: Mapping[str, float]


def ports_of(analysis: Analysis) -> Ports | None:
    """The ports of an analysis; None where the path has no midband network."""
    midband = analysis.corners.midband
    if midband is None:
        return None
    path = analysis.topology.path
    values = {
        e.name: e.resistance_ohm for e in analysis.circuit.elements if isinstance(e, Resistor)
    }
    return Ports(
        path,
        midband.low.parts,
        {name: values[name] for name in (path.source_resistor,) if name in values},
        {name: values[name] for name in path.load if name in values},
    )


def port_resistances(
    ports: Ports,
    network: LinearNetwork,
    boards: IntArray,
    drive: FloatArray,
    sense: FloatArray,
    variations: Variations,
) -> tuple[FloatArray, FloatArray]:
    """What the source and what the load see on some boards, in Ω, (boards,) each.

    ``drive`` and ``sense`` are the right-hand side of the source and the unknowns at the output.
    Infinite where no current flows, NaN where the network has no solution.
    """
    matrices = _midband_matrices(network, boards, ports.low)
    right = np.zeros((matrices.shape[-1], 2))
    right[: drive.size] = np.stack([drive, sense], axis=1)
    solved = _solved(matrices, right)
    forward = solved[:, : drive.size, 0]
    seen = solved[:, : sense.size, 1] @ sense

    def resistance(name: str, nominal_ohm: float) -> FloatArray:
        value = np.asarray(variations.get(name.lower(), nominal_ohm), dtype=float)
        return np.broadcast_to(value, network.conductance.shape[:1])[boards]

    with np.errstate(divide="ignore", invalid="ignore"):
        entry = _seen_by_source(ports, network, forward)
        for name, nominal_ohm in ports.source_resistor_ohm.items():
            entry = entry if ports.path.source_is_current else entry - resistance(name, nominal_ohm)
        conductance = 1.0 / seen
        for name, nominal_ohm in ports.load_ohm.items():
            conductance = conductance - 1.0 / resistance(name, nominal_ohm)
        return np.abs(entry), np.abs(1.0 / conductance)


def _seen_by_source(ports: Ports, network: LinearNetwork, forward: FloatArray) -> FloatArray:
    if ports.path.source_is_current:
        index = network.index(ports.path.input_node)
        return forward[:, index] if index >= 0 else np.full(len(forward), np.nan)
    return 1.0 / -forward[:, len(network.nodes) + network.branches.index(ports.path.source)]


def _midband_matrices(
    network: LinearNetwork, boards: IntArray, low: Iterable[ReactivePart]
) -> FloatArray:
    """(boards, M, M): a shorted capacitor gets an unknown current and v₊ − v₋ = 0."""
    size = network.conductance.shape[-1]
    coils = [part for part in low if part.is_inductor]
    shorts = [part for part in low if not part.is_inductor]
    total = size + len(shorts)
    matrices = np.zeros((boards.size, total, total))
    matrices[:, :size, :size] = network.conductance[boards]
    for part in coils:
        matrices[:, part.branch, :] = 0.0
        matrices[:, part.branch, part.branch] = 1.0
    for row, part in enumerate(shorts, size):
        for node, sign in ((part.positive, 1.0), (part.negative, -1.0)):
            if node >= 0:
                matrices[:, node, row] += sign
                matrices[:, row, node] += sign
    return matrices


def _solved(matrices: FloatArray, right: FloatArray) -> FloatArray:
    """(boards, M, columns); NaN for a board whose matrix is singular."""
    whole = np.broadcast_to(right, (len(matrices), *right.shape))
    try:
        return np.asarray(np.linalg.solve(matrices, whole))
    except np.linalg.LinAlgError:
        found = np.full(whole.shape, np.nan)
        for board, matrix in enumerate(matrices):
            try:
                found[board] = np.linalg.solve(matrix, right)
            except np.linalg.LinAlgError:
                continue
        return found
