"""Stress at the operating point: capacitor voltages and polarity, what discharges them, heat.

Only ratings that the configuration or a model card gives are held against anything. Figures that
are merely remembered (leakage rules, surge factors) are no limits here.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence

import numpy as np

from tauledger.analysis import Analysis
from tauledger.circuit.elements import Capacitor, Element, Resistor, SemiconductorDevice
from tauledger.configuration.settings import PathSettings
from tauledger.decide.bench import bench_of, measure_values
from tauledger.decide.candidates import modelled
from tauledger.decide.dielectric import Effective, code_limits, effective
from tauledger.decide.discharge import Discharge
from tauledger.decide.dissipation import device_heat, overloads, resistor_heat
from tauledger.decide.settling import settling_time, slowest_pole
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.quantity import format_quantity
from tauledger.review.check import REVERSED_VOLTS, polarised_by
from tauledger.review.decisions import CapacitorStress, DeviceStress, ResistorStress, Stress
from tauledger.review.limits import class_of
from tauledger.version import VERSION

MARGIN = 0.2
"""Of the rating, kept between it and the voltage (common practice, no source)."""
HAZARDOUS_V = 60.0
"""From here on a capacitor that stays charged is a warning, below a note (a limit of direct
voltage that is safe to touch, from memory; it decides nothing else)."""
_CHARGED_V = 0.5
CAUTION_REVERSED = (
    "Caution: a reversed electrolytic or tantalum capacitor can burst or burn; switch off and "
    "discharge it before you touch it."
)
CAUTION_CHARGED = (
    "Caution: it can hold its charge long after switch-off; discharge it through a resistor and "
    "measure before you touch it."
)


def stress(
    analysis: Analysis, settings: PathSettings | None = None, margin: float = MARGIN
) -> Stress:
    """Stress of every capacitor, resistor, transistor and diode of the netlist, with findings.

    The load that the configuration attaches is no part of the board and has no row.
    """
    network = analysis.network
    capacitors: list[CapacitorStress] = []
    problems: list[Problem] = []
    changed: dict[str, float] = {}
    discharge = Discharge(analysis.circuit, analysis.topology.path.source)
    circuit = analysis.circuit
    inside = modelled(circuit)
    parts = [e for e in circuit.elements if e.name not in circuit.attached | inside]
    for element in parts:
        if isinstance(element, Capacitor):
            left = _effective(element, analysis, settings)
            row = _capacitor(element, analysis, settings, margin, discharge, left)
            capacitors.append(row)
            problems += _findings(element, row, left, settings, margin)
            if row.effective_f is not None:
                changed[element.name] = row.effective_f
    resistors: list[ResistorStress] = []
    devices: list[DeviceStress] = []
    for element in parts:
        if isinstance(element, Resistor):
            resistors.append(resistor_heat(element, analysis, settings))
            problems += overloads(element, resistors[-1])
        elif isinstance(element, SemiconductorDevice):
            devices.append(device_heat(element, analysis, settings))
            problems += overloads(element, devices[-1])
    rate = slowest_pole(network.conductance[0], network.reactance[0])
    corners = analysis.corners
    low, high = _with(analysis, changed)
    return Stress(
        title=circuit.title,
        netlist=circuit.path,
        version=VERSION,
        temperature_c=circuit.temperature_c,
        margin=margin,
        capacitors=tuple(capacitors),
        resistors=tuple(resistors),
        settling_s=settling_time(rate),
        slowest_pole_hz=rate / (2.0 * np.pi) if rate else None,
        low_hz=corners.low.exact_hz,
        low_effective_hz=low,
        high_hz=corners.high.exact_hz,
        high_effective_hz=high,
        notes=tuple(_notes(capacitors, devices, inside, settings)),
        problems=(*circuit.problems, *problems),
        devices=tuple(devices),
    )


# Capacitors ---------------------------------------------------------------------------------------


def _voltage(element: Element, analysis: Analysis) -> float:
    point = analysis.point
    return point.voltage(element.nodes[0]) - point.voltage(element.nodes[1])


def _effective(
    element: Capacitor, analysis: Analysis, settings: PathSettings | None
) -> Effective | None:
    found = class_of(element.name, settings.capacitors) if settings else None
    if found is None:
        return None
    return effective(found, _voltage(element, analysis), analysis.circuit.temperature_c)


def _capacitor(
    element: Capacitor,
    analysis: Analysis,
    settings: PathSettings | None,
    margin: float,
    discharge: Discharge,
    left: Effective | None,
) -> CapacitorStress:
    found = class_of(element.name, settings.capacitors) if settings else None
    voltage = _voltage(element, analysis)
    resistance = discharge.resistance(element.nodes)
    return CapacitorStress(
        part=element.name,
        nodes=(element.nodes[0], element.nodes[1]),
        capacitance_f=element.capacitance_f,
        voltage_v=voltage,
        polarised=polarised_by(element, settings),
        rated_v=found.rated_voltage_v if found else None,
        required_v=abs(voltage) / (1.0 - margin),
        effective_f=element.capacitance_f * left.factor if left else None,
        basis=left.basis if left else "",
        discharge=", ".join(discharge.parts(element.nodes)),
        discharge_tau_s=None if resistance is None else resistance * element.capacitance_f,
    )


def _findings(
    element: Capacitor,
    row: CapacitorStress,
    left: Effective | None,
    settings: PathSettings | None,
    margin: float,
) -> Iterator[Problem]:
    shown = format_quantity(abs(row.voltage_v), "V")
    span = element.span
    if row.polarised and row.voltage_v < -REVERSED_VOLTS:
        yield Problem(
            "capacitor-reversed",
            Severity.ERROR,
            f"{row.part} is polarised by its {row.polarised} and stands reversed: {shown} with its "
            f"first node {row.nodes[0]} negative",
            span,
            f"Turn it round, or use one without polarity. {CAUTION_REVERSED}",
        )
    elif row.polarised and abs(row.voltage_v) <= REVERSED_VOLTS:
        yield Problem(
            "capacitor-unbiased",
            Severity.WARNING,
            f"{row.part} is polarised by its {row.polarised} and has next to no direct voltage "
            f"({format_quantity(row.voltage_v, 'V')}), so the signal reverses it",
            span,
            f"Use one without polarity, or see that the signal across it stays small. "
            f"{CAUTION_REVERSED}",
        )
    if row.rated_v is not None and abs(row.voltage_v) > row.rated_v * (1.0 - margin):
        over = abs(row.voltage_v) > row.rated_v
        yield Problem(
            "capacitor-overvoltage" if over else "capacitor-margin",
            Severity.ERROR if over else Severity.WARNING,
            f"{row.part} has {shown} across it and is rated {format_quantity(row.rated_v, 'V')}"
            + ("" if over else f", which leaves less than {100 * margin:.0f} % of the rating"),
            span,
            f"Fit one rated for {format_quantity(row.required_v, 'V')} or more; signal, ripple and "
            "start-up come on top."
            + (" Caution: an overloaded capacitor can burst; switch off first." if over else ""),
        )
    if row.discharge_tau_s is None and abs(row.voltage_v) >= _CHARGED_V:
        high = abs(row.voltage_v) >= HAZARDOUS_V
        yield Problem(
            "capacitor-stays-charged",
            Severity.WARNING if high else Severity.NOTE,
            f"no resistor discharges {row.part} once the supply is disconnected; it keeps {shown}",
            span,
            f"Put a bleed resistor across it or to ground. {CAUTION_CHARGED}",
        )
    if left is not None and left.beyond:
        yield Problem(
            "dielectric-beyond",
            Severity.WARNING,
            f"{row.part}: {left.beyond}, so its capacitance there is not known",
            span,
            "Take more points from the maker's curve into tauledger.toml.",
        )


def _with(analysis: Analysis, changed: dict[str, float]) -> tuple[float | None, float | None]:
    """Corners with the effective capacitances; None without any or where there is none."""
    if not changed:
        return None, None
    try:
        bench = bench_of(analysis)
    except ProblemError:
        return None, None
    varied = {name: np.array([value]) for name, value in changed.items()}
    found = measure_values(bench, analysis.network, varied)
    low, high = float(found.low_hz[0]), float(found.high_hz[0])
    return (None if np.isnan(low) else low), (None if np.isnan(high) else high)


def _notes(
    capacitors: Sequence[CapacitorStress],
    devices: Sequence[DeviceStress],
    inside: Collection[str],
    settings: PathSettings | None,
) -> Iterator[str]:
    yield "voltages are direct ones; signal, ripple and the moment of switch-on come on top"
    if inside:
        models = ", ".join(sorted({name.rpartition(".")[0] for name in inside}))
        yield f"what stands inside {models} is a model, not parts, and is left out here"
    if devices:
        yield (
            "heat is that at rest, and a rating that of the device as it is cooled: data sheets "
            "state it for one temperature, above which it falls"
        )
    if not any(row.polarised for row in capacitors):
        yield (
            "nothing says which capacitors are polarised: a class with polarised = true in "
            "tauledger.toml, or a model named so, does"
        )
    classes = settings.capacitors if settings else ()
    for found in classes:
        if found.dielectric and not found.bias_curve and code_limits(found.dielectric):
            yield (
                f"{found.name}: what {found.dielectric.upper()} loses at direct voltage is not in "
                "the code; bias_curve in tauledger.toml takes it from the maker's sheet"
            )
