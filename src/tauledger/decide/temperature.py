"""Gain, corners and bias over a range of temperatures: the whole board at each of them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from tauledger.analysis import Analysis
from tauledger.bias.point import DevicePoint
from tauledger.decide.bench import bench_of, measure_solution, solve
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.review.decisions import TemperatureRow, TemperatureSweep, TransistorAt
from tauledger.version import VERSION

STEPS = 9
MOST_STEPS = 1000
_CURRENTS = (("ic", "vce"), ("id", "vds"))


def steps(low_c: float, high_c: float, count: int = STEPS) -> list[float]:
    """Temperatures in equal steps.

    Raises ProblemError for a range that is empty, too fine or below absolute zero.
    """
    if not (-273.15 < low_c < high_c <= 1000.0) or not 2 <= count <= MOST_STEPS:
        raise ProblemError(
            Problem(
                "temperature-range",
                Severity.ERROR,
                f"cannot sweep from {low_c:g} °C to {high_c:g} °C in {count} steps",
                None,
                f"Give a range that rises, within 1000 °C, and 2 to {MOST_STEPS} steps.",
            )
        )
    return [float(t) for t in np.linspace(low_c, high_c, count)]


def temperature_sweep(analysis: Analysis, temperatures_c: Sequence[float]) -> TemperatureSweep:
    """The amplifier at each temperature; parts without temperature data keep their values.

    Raises ProblemError when there is no passband, or no operating point at any temperature.
    """
    bench = bench_of(analysis)
    solution = solve(bench, None, np.array(temperatures_c, dtype=float))
    found = measure_solution(bench, solution)
    devices = [d for d in solution.point.devices.values() if _keys(d)]
    rows = tuple(
        TemperatureRow(
            float(t),
            _real(found.gain[i]),
            _real(found.low_hz[i]),
            _real(found.high_hz[i]),
            tuple(_transistor(device, i) for device in devices) if found.measured[i] else (),
        )
        for i, t in enumerate(temperatures_c)
    )
    unit = "Ω" if analysis.topology.path.source_is_current else "V/V"
    return TemperatureSweep(
        analysis.circuit.title,
        analysis.circuit.path,
        VERSION,
        unit,
        rows,
        tuple(_notes(rows)),
        analysis.circuit.problems,
    )


def _keys(device: DevicePoint) -> tuple[str, str] | None:
    return next((pair for pair in _CURRENTS if device.values.keys() >= set(pair)), None)


def _transistor(device: DevicePoint, board: int) -> TransistorAt:
    keys = _keys(device)
    assert keys is not None
    current, voltage = (float(device.values[key][board]) for key in keys)
    return TransistorAt(device.name, current, voltage)


def _real(value: float) -> float | None:
    return None if np.isnan(value) else float(value)


def _notes(rows: Sequence[TemperatureRow]) -> Iterator[str]:
    yield (
        "transistors and diodes follow their models; resistors and capacitors keep their values, "
        "whatever their temperature coefficients"
    )
    if lost := [row.temperature_c for row in rows if row.gain is None]:
        yield f"no operating point at {', '.join(f'{t:g} °C' for t in lost)}"
