"""What an engineer checks at a glance: regions, clipping, ignored parameters.

Headroom is a linear extrapolation: the midband signal of every transistor on the path, at the
operating point, is scaled up until one of them reaches zero current or its saturation voltage.
The true limits differ, since gm and β change on the way; it is an estimate. The collector-emitter
saturation voltage is taken as 0.2 V (common practice, no source).
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping

from tauledger.bias import DevicePoint, OperatingPoint
from tauledger.circuit.elements import (
    BipolarTransistor,
    Circuit,
    Element,
    JunctionFet,
    Model,
    MosFet,
    SemiconductorDevice,
)
from tauledger.corners import Corners
from tauledger.problems import Problem, Severity
from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.review.rows import REGION_CODE, HeadroomRow, PathRow
from tauledger.smallsignal import DeviceAdmittance, LinearNetwork
from tauledger.topology.model import Topology, TransistorRole
from tauledger.topology.transistors import PUSH_PULL, SERIES_CHANNEL, SWITCHED_OFF

SATURATION_V = 0.2

_IGNORED: Mapping[str, tuple[str, ...]] = {
    "bjt": ("rco", "vo", "gamma", "qco", "quasimod", "ptf", "tlev", "tlevc", "rth0"),
    "diode": ("jtun", "jtunsw", "tlev", "tlevc", "rth0", "cth0", "lm", "lp", "wm", "wp"),
    "mos": ("xd", "alpha"),
    "vdmos": ("rthjc", "rthca", "cthj", "rth_ext", "derating"),
}
"""Parameters that are read and have no effect here; where they are zero they have none anywhere."""
_EFFECT = {
    **dict.fromkeys(("rco", "vo", "gamma", "qco", "quasimod"), "quasi-saturation"),
    "ptf": "excess phase",
    **dict.fromkeys(("tlev", "tlevc"), "another temperature law"),
    **dict.fromkeys(("jtun", "jtunsw"), "tunnelling"),
    **dict.fromkeys(("rth0", "cth0", "rthjc", "rthca", "cthj", "rth_ext", "derating"),
                    "self-heating"),
    **dict.fromkeys(("lm", "lp", "wm", "wp"), "metal and polysilicon capacitance"),
    **dict.fromkeys(("xd", "alpha"), "a rarely used correction of the channel"),
}  # fmt: skip


# Model parameters ---------------------------------------------------------------------------------


def stability_problems(paths: Iterable[PathRow]) -> Iterable[Problem]:
    """A warning for every path whose linear network grows by itself."""
    for path in paths:
        if path.unstable_hz is not None:
            yield Problem(
                "path-unstable",
                Severity.WARNING,
                f"the path from {path.input} to {path.output} is unstable as drawn: a natural "
                f"frequency at {format_quantity(path.unstable_hz, 'Hz')} grows",
                None,
                "Check the polarity of the feedback, and the compensation.",
            )


def ignored_parameters(circuit: Circuit) -> tuple[Problem, ...]:
    """One note a model with parameters that are accepted but have no effect here."""
    models: dict[str, Model] = {}
    for element in circuit.elements:
        if isinstance(element, SemiconductorDevice):
            models.setdefault(element.model.name.lower(), element.model)
    return tuple(note for model in models.values() if (note := _ignored_note(model)) is not None)


def _ignored_note(model: Model) -> Problem | None:
    names = [
        name
        for name in _IGNORED.get(_family(model.kind), ())
        if model.parameters.get(name, 0.0) != 0.0
    ]
    # GAMMA and its like act only together with RCO.
    if _family(model.kind) == "bjt" and model.parameters.get("rco", 0.0) == 0.0:
        names = [name for name in names if _EFFECT[name] != "quasi-saturation"]
    if not names:
        return None
    effects = " and ".join(dict.fromkeys(_EFFECT[name] for name in names))
    listed = ", ".join(name.upper() for name in names)
    return Problem(
        "model-parameter-ignored",
        Severity.NOTE,
        f"model {model.name}: {listed} {'are' if len(names) > 1 else 'is'} ignored "
        f"({effects} is not modelled)",
        model.span,
        "Compare with a simulator if the transistor works where this matters.",
    )


def _family(kind: str) -> str:
    if kind in ("npn", "pnp", "lpnp"):
        return "bjt"
    return {"d": "diode", "nmos": "mos", "pmos": "mos"}.get(kind, kind.rstrip("np"))


# Regions ------------------------------------------------------------------------------------------


def region_problems(
    circuit: Circuit, point: OperatingPoint, topology: Topology
) -> tuple[Problem, ...]:
    """A warning for each transistor on the signal path that is not where an amplifier needs it."""
    problems = []
    for element in circuit.elements:
        role = topology.transistors.get(element.name)
        device = point.devices.get(element.name)
        if role is None or device is None or device.region == "active":
            continue
        if device.region == "cut off" and (
            role.configuration == PUSH_PULL or _has_opposite(element, circuit)
        ):
            continue  # a push-pull output without bias current is so by design
        if role.configuration == SWITCHED_OFF:
            problems.append(_off(element, device))
        elif role.on_path and role.configuration != SERIES_CHANNEL:
            problems.append(_unsuited(element, role, device))
    return tuple(problems)


def _has_opposite(element: Element, circuit: Circuit) -> bool:
    """Whether a transistor of the other polarity has its emitter (source) on the same node."""
    return isinstance(element, BipolarTransistor | MosFet) and any(
        isinstance(other, type(element))
        and other.nodes[2] == element.nodes[2]
        and other.model.kind != element.model.kind
        for other in circuit.elements
    )


def _unsuited(element: Element, role: TransistorRole, device: DevicePoint) -> Problem:
    bipolar = isinstance(element, BipolarTransistor)
    current, voltage = _bias(device, bipolar)
    return Problem(
        REGION_CODE,
        Severity.WARNING,
        f"{element.name} ({role.configuration}) is {_in_words(device.region)} at the operating "
        f"point: {'IC' if bipolar else 'ID'} = {format_quantity(current, 'A')}, "
        f"{'VCE' if bipolar else 'VDS'} = {format_quantity(voltage, 'V')}; an amplifier needs it "
        "active",
        element.span,
        _cure(device.region),
    )


def _off(element: Element, device: DevicePoint) -> Problem:
    return Problem(
        "transistor-off",
        Severity.NOTE,
        f"{element.name} is {_in_words(device.region)} at the operating point and takes no part",
        element.span,
        "Give its control node the voltage that turns it on, if it should conduct.",
    )


def _in_words(region: str) -> str:
    return {
        "triode": "in its triode region",
        "reverse": "reversed (collector and emitter have changed their parts)",
        "breakdown": "in breakdown",
    }.get(region, region)


def _cure(region: str) -> str:
    if region == "cut off":
        return "Raise the bias of its base or gate, or check the supply and the pin order."
    if region in ("saturated", "triode"):
        return "Lower its current or its load resistor, or raise the supply."
    return "Check the pin order and the polarity of the supply."


def _bias(device: DevicePoint, bipolar: bool) -> tuple[float, float]:
    names = ("ic", "vce") if bipolar else ("id", "vds")
    current, voltage = (float(device.values[name][0]) for name in names)
    return current, voltage


_NO_ROOM = ("saturated", "triode")

# Headroom -----------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Limit:
    """Signed drive at which a transistor leaves its region, and which way."""

    drive: float
    name: str
    what: str


def headroom(
    circuit: Circuit,
    point: OperatingPoint,
    network: LinearNetwork,
    admittances: Mapping[str, DeviceAdmittance],
    topology: Topology,
    corners: Corners,
) -> HeadroomRow | None:
    """How far the output can move either way at midband.

    None without a midband signal, or when a transistor on its way has no room to begin with.
    """
    if corners.midband is None or not corners.gain:
        return None
    if any(
        role.on_path and name in point.devices and point.devices[name].region in _NO_ROOM
        for name, role in topology.transistors.items()
    ):
        return None
    limits = [
        limit
        for element in circuit.elements
        if (role := topology.transistors.get(element.name)) is not None
        and role.on_path
        and element.name in admittances
        for limit in _limits(
            element, role, point.devices[element.name], admittances[element.name], corners
        )
    ]
    sides = []
    for sign in (1.0, -1.0):
        reached = [limit for limit in limits if limit.drive * corners.gain * sign > 0.0]
        nearest = min(reached, key=lambda limit: abs(limit.drive), default=None)
        sides.append(nearest)
    if sides == [None, None]:
        return None
    up, down = sides
    return HeadroomRow(
        up_v=abs(up.drive * corners.gain) if up else None,
        up_limit=f"{up.name} {up.what}" if up else "",
        down_v=abs(down.drive * corners.gain) if down else None,
        down_limit=f"{down.name} {down.what}" if down else "",
        method="linear extrapolation of the midband signal to cut-off or saturation, an estimate",
    )


def _limits(
    element: Element,
    role: TransistorRole,
    device: DevicePoint,
    admittance: DeviceAdmittance,
    corners: Corners,
) -> Iterator[_Limit]:
    assert corners.midband is not None
    unknowns = corners.midband.unknowns
    if device.region != "active" or not isinstance(
        element, BipolarTransistor | JunctionFet | MosFet
    ):
        return
    bipolar = isinstance(element, BipolarTransistor)
    current, voltage = _bias(device, bipolar)
    top, control, bottom = ("collector", "base", "emitter") if bipolar else (
        "drain", "gate", "source")  # fmt: skip

    def signal(terminal: str) -> float:
        index = admittance.unknowns[admittance.terminals.index(terminal)]
        return float(unknowns[index]) if index >= 0 else 0.0

    # One half of a push-pull output hands over to the other at zero current; that is no limit.
    moving = admittance.current_into(top, unknowns)
    if moving and role.configuration != PUSH_PULL:
        yield _Limit(-current / moving, element.name, "cuts off")
    across = signal(top) - signal(bottom)
    if bipolar:
        least, least_moves = math.copysign(SATURATION_V, voltage), 0.0
    else:
        least = math.copysign(float(device.values["vdsat"][0]), voltage)
        least_moves = signal(control) - signal(bottom)
    if abs(voltage) > abs(least) and across != least_moves:
        what = "saturates" if bipolar else "enters its triode region"
        yield _Limit((least - voltage) / (across - least_moves), element.name, what)


def sanity_problems(
    circuit: Circuit, point: OperatingPoint, topology: Topology | None
) -> Iterable[Problem]:
    """Everything this module warns of."""
    yield from ignored_parameters(circuit)
    if topology is not None:
        yield from region_problems(circuit, point, topology)
