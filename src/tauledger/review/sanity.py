"""What an engineer checks at a glance: regions, clipping, the divider by hand, ignored parameters.

Headroom is a linear extrapolation: the midband signal of every transistor on the path, at the
operating point, is scaled up until one of them reaches zero current or its saturation voltage.
The true limits differ, since gm and β change on the way; it is an estimate. The collector-emitter
saturation voltage is taken as 0.2 V and the hand value of VBE as 0.65 V (both common practice, no
source).
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

from tauledger.bias import DevicePoint, OperatingPoint
from tauledger.circuit.elements import (
    GROUND,
    BipolarTransistor,
    Capacitor,
    Circuit,
    CurrentSource,
    Element,
    JunctionFet,
    Model,
    MosFet,
    Resistor,
    SemiconductorDevice,
    VoltageSource,
)
from tauledger.corners import Corners
from tauledger.problems import Problem, Severity
from tauledger.quantity import format_quantity
from tauledger.review.rows import REGION_CODE, DividerRow, HeadroomRow
from tauledger.smallsignal import DeviceAdmittance, LinearNetwork
from tauledger.topology.model import Topology, TransistorRole
from tauledger.topology.transistors import PUSH_PULL, SERIES_CHANNEL, SWITCHED_OFF

HAND_BASE_EMITTER_V = 0.65
SATURATION_V = 0.2
DISAGREEMENT = 0.10
"""Of the emitter current by hand, beyond which the reason is given."""
_NEGLIGIBLE = 0.02
"""A cause that moves the current by less is not named."""
_LONGEST_CHAIN = 4
"""Resistors in series from an emitter to its rail."""

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
    """How far the output can move either way at midband; None without a midband signal."""
    if corners.midband is None or not corners.gain:
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


# The divider by hand ------------------------------------------------------------------------------


def divider_checks(circuit: Circuit, point: OperatingPoint) -> tuple[DividerRow, ...]:
    """Emitter currents by hand, of transistors with a base divider and an emitter resistor."""
    touching: dict[str, list[Element]] = {}
    for element in circuit.elements:
        for node in dict.fromkeys(element.nodes):
            touching.setdefault(node, []).append(element)
    rails = _rails(circuit)
    rows = (
        _divider_row(element, point.devices[element.name], touching, rails)
        for element in circuit.elements
        if isinstance(element, BipolarTransistor)
    )
    return tuple(row for row in rows if row is not None)


def _rails(circuit: Circuit) -> dict[str, float]:
    """Nodes whose DC voltage chains of sources from ground dictate."""
    rails = {GROUND: 0.0}
    sources = [e for e in circuit.elements if isinstance(e, VoltageSource)]
    for _ in sources:
        for source in sources:
            plus, minus = source.nodes[:2]
            if minus in rails:
                rails.setdefault(plus, rails[minus] + source.dc)
            elif plus in rails:
                rails.setdefault(minus, rails[plus] - source.dc)
    return rails


def _divider_row(
    transistor: BipolarTransistor,
    device: DevicePoint,
    touching: Mapping[str, list[Element]],
    rails: Mapping[str, float],
) -> DividerRow | None:
    _, base, emitter = transistor.nodes[:3]
    arms = _arms(transistor, base, touching, rails)
    chain = _emitter_chain(transistor, emitter, touching, rails)
    if arms is None or chain is None:
        return None
    siemens = math.fsum(1.0 / ohm for ohm, _ in arms)
    source_v = math.fsum(volts / ohm for ohm, volts in arms) / siemens
    emitter_ohm, rail_v = chain
    sign = -1.0 if transistor.model.kind != "npn" else 1.0
    hand = sign * (source_v - rail_v - sign * HAND_BASE_EMITTER_V) / emitter_ohm
    solved = -sign * float(device.values["ie"][0])
    if hand <= 0.0 or solved <= 0.0:
        return None
    row = DividerRow(
        transistor=transistor.name,
        source_v=source_v,
        source_ohm=1.0 / siemens,
        emitter_ohm=emitter_ohm,
        hand_a=hand,
        solved_a=solved,
        difference=hand / solved - 1.0,
        reason="",
        method=f"Thévenin of the divider, VBE = {HAND_BASE_EMITTER_V:g} V, no base current",
    )
    if abs(row.difference) <= DISAGREEMENT:
        return row
    return _with_reason(row, device, sign)


def _with_reason(row: DividerRow, device: DevicePoint, sign: float) -> DividerRow:
    """The hand value is too high by (base current · divider + VBE − 0.65 V) over the resistor."""
    base_a = sign * float(device.values["ib"][0])
    vbe = sign * float(device.values["vbe"][0])
    loading_v, excess_v = base_a * row.source_ohm, vbe - HAND_BASE_EMITTER_V
    emitter_v = row.solved_a * row.emitter_ohm
    causes = []
    if abs(loading_v) > _NEGLIGIBLE * emitter_v:
        causes.append(
            f"the base current of {format_quantity(base_a, 'A')} drops "
            f"{format_quantity(loading_v, 'V')} in the divider's "
            f"{format_quantity(row.source_ohm, 'Ω')}"
        )
    if abs(excess_v) > _NEGLIGIBLE * emitter_v:
        causes.append(f"VBE is {format_quantity(vbe, 'V')}")
    if device.region != "active":
        causes.append(f"{row.transistor} is {_in_words(device.region)}")
    return dataclasses.replace(row, reason="; ".join(causes))


def _arms(
    transistor: Element,
    base: str,
    touching: Mapping[str, list[Element]],
    rails: Mapping[str, float],
) -> list[tuple[float, float]] | None:
    """Resistance and rail voltage of each resistor at the base; None when it is no divider."""
    arms = []
    for element in _at_dc(base, touching, transistor):
        if not isinstance(element, Resistor):
            return None
        other = element.nodes[1] if element.nodes[0] == base else element.nodes[0]
        if other not in rails or element.resistance_ohm <= 0.0:
            return None
        arms.append((element.resistance_ohm, rails[other]))
    return arms if len(arms) >= 2 else None


def _emitter_chain(
    transistor: Element,
    node: str,
    touching: Mapping[str, list[Element]],
    rails: Mapping[str, float],
) -> tuple[float, float] | None:
    """Resistance from the emitter to a rail, all in series, and the rail's voltage."""
    total, previous = 0.0, transistor
    for _ in range(_LONGEST_CHAIN):
        onward = _at_dc(node, touching, previous)
        if len(onward) != 1 or not isinstance(resistor := onward[0], Resistor):
            return None
        total += resistor.resistance_ohm
        node = resistor.nodes[1] if resistor.nodes[0] == node else resistor.nodes[0]
        if node in rails:
            return (total, rails[node]) if total > 0.0 else None
        previous = resistor
    return None


def _at_dc(node: str, touching: Mapping[str, list[Element]], without: Element) -> list[Element]:
    """What carries direct current at a node, apart from one element."""
    return [
        element
        for element in touching[node]
        if element is not without
        and not isinstance(element, Capacitor)
        and not (isinstance(element, CurrentSource) and element.dc == 0.0)
        and not _only_senses(element, node)
    ]


def _only_senses(element: Element, node: str) -> bool:
    """The gate of a MOSFET draws no direct current."""
    return isinstance(element, MosFet) and all(
        other != node for k, other in enumerate(element.nodes) if k != 1
    )


def sanity_problems(
    circuit: Circuit, point: OperatingPoint, topology: Topology | None
) -> Iterable[Problem]:
    """Everything this module warns of."""
    yield from ignored_parameters(circuit)
    if topology is not None:
        yield from region_problems(circuit, point, topology)
