"""Heat in resistors, transistors and diodes at the operating point, against ratings that are given.

A rating is one that the configuration states or that stands on the model card (``ptot=0.5``,
ngspice's ``pd_max``); no device has one of its own accord.
"""

from __future__ import annotations

import fnmatch
from collections.abc import Iterable, Iterator
from typing import Protocol, TypeVar

from tauledger.analysis import Analysis
from tauledger.circuit.elements import Diode, Element, Resistor, SemiconductorDevice
from tauledger.configuration.settings import PathSettings
from tauledger.problems import Problem, Severity
from tauledger.quantity import format_quantity
from tauledger.review.decisions import DeviceStress, ResistorStress

_CARD_RATINGS = ("ptot", "pd", "pd_max")
"""Names under which cards hold the power a device stands: the first two are those of data sheets
(common practice, no source), the third is ngspice's (its ``devhelp``, read)."""
_CAUTION = "Caution: it gets hot enough to burn skin and board."


class _Rated(Protocol):
    @property
    def name(self) -> str: ...
    @property
    def match(self) -> tuple[str, ...]: ...
    @property
    def rated_power_w(self) -> float | None: ...


_Class = TypeVar("_Class", bound=_Rated)


def resistor_heat(
    element: Resistor, analysis: Analysis, settings: PathSettings | None
) -> ResistorStress:
    """Direct voltage squared over resistance."""
    point = analysis.point
    voltage = point.voltage(element.nodes[0]) - point.voltage(element.nodes[1])
    power = voltage * voltage / abs(element.resistance_ohm) if element.resistance_ohm else 0.0
    found = _class_of(element.name, settings.resistors) if settings else None
    rated = found.rated_power_w if found else None
    return ResistorStress(element.name, power, rated, power / rated if rated else None)


def device_heat(
    element: SemiconductorDevice, analysis: Analysis, settings: PathSettings | None
) -> DeviceStress:
    """Power into all terminals, VCE·IC + VBE·IB for a bipolar transistor; all of it is heat.

    A rating is that of one device: ``m`` of them in parallel stand m times as much.
    """
    device = analysis.point.devices[element.name]
    power = float(device.values["power"][0])
    rated, basis = _rating(element, settings)
    together = None if rated is None else rated * element.parameters.get("m", 1.0)
    return DeviceStress(
        part=element.name,
        model=element.model.name,
        power_w=power,
        rated_w=together,
        load=power / together if together else None,
        basis=basis,
    )


def _rating(
    element: SemiconductorDevice, settings: PathSettings | None
) -> tuple[float | None, str]:
    """The rating of one device, and what states it."""
    if settings is not None:
        diode = isinstance(element, Diode)
        found: _Rated | None = (
            _class_of(element.name, settings.diodes)
            if diode
            else _class_of(element.name, settings.transistors)
        )
        if found is not None and found.rated_power_w is not None:
            return found.rated_power_w, f"class {found.name}"
    for name in _CARD_RATINGS:
        stated = element.model.parameters.get(name, 0.0)
        if stated > 0.0:
            return stated, f"{name} of model {element.model.name}"
    return None, ""


def _class_of(name: str, classes: Iterable[_Class]) -> _Class | None:
    """The first class one of whose patterns matches the designator."""
    lower = name.lower()
    return next((c for c in classes if any(fnmatch.fnmatchcase(lower, p) for p in c.match)), None)


def overloads(element: Element, row: ResistorStress | DeviceStress) -> Iterator[Problem]:
    """The finding, when a part turns more power into heat than its rating."""
    if row.rated_w is None or row.power_w <= row.rated_w:
        return
    heat = format_quantity(row.power_w, "W")
    rated = format_quantity(row.rated_w, "W")
    message = f"{row.part} turns {heat} into heat and is rated {rated}"
    if isinstance(row, DeviceStress):
        yield Problem(
            "device-overloaded",
            Severity.ERROR,
            f"{message} ({row.basis})",
            element.span,
            f"Cool it better, fit a larger one, or lower its current or voltage. {_CAUTION}",
        )
    else:
        yield Problem(
            "resistor-overloaded",
            Severity.ERROR,
            message,
            element.span,
            f"Fit a larger one. {_CAUTION}",
        )
