"""ngspice's figures beside ours: rows for the reports."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

from tauledger.review.rows import ComparisonRow, CornerRow, PathRow, Review, SimulatedRow
from tauledger.simulate.simulation import Simulation


def beside(review: Review, simulation: Simulation) -> Review:
    """The review with ngspice's figures on its first path, whose simulation this is."""
    path, *others = review.paths
    figures = (
        *_path_figures(path, simulation),
        *_transconductances(review, simulation),
    )
    row = SimulatedRow(f"ngspice {simulation.version}", figures)
    return replace(review, paths=(replace(path, simulated=row), *others))


def _path_figures(path: PathRow, simulation: Simulation) -> Iterator[ComparisonRow]:
    gain = math.copysign(abs(simulation.gain), simulation.gain.real)
    yield _compared("midband gain", path.gain_unit, path.gain_by_inspection, path.gain, gain)
    for corner, simulated in ((path.low, simulation.low_hz), (path.high, simulation.high_hz)):
        if corner is not None:
            yield _corner(corner, simulated)


def _corner(corner: CornerRow, simulated: float | None) -> ComparisonRow:
    figure = f"{corner.end} corner"
    return _compared(figure, "Hz", corner.estimate_hz, corner.exact_hz, simulated)


def _transconductances(review: Review, simulation: Simulation) -> Iterator[ComparisonRow]:
    for transistor in review.transistors:
        for value in transistor.values:
            if value.symbol == "gm" and transistor.name in simulation.transconductance_s:
                simulated = simulation.transconductance_s[transistor.name]
                yield _compared("gm", value.unit, None, value.value, simulated, transistor.name)


def _compared(
    figure: str,
    unit: str,
    estimate: float | None,
    exact: float | None,
    simulated: float | None,
    part: str = "",
) -> ComparisonRow:
    difference = simulated / exact - 1.0 if exact and simulated is not None else None
    return ComparisonRow(figure, part, unit, estimate, exact, simulated, difference)
