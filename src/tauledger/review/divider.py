"""The divider check an engineer does by hand, beside the solved emitter current.

The base divider is replaced by its Thévenin source, the base current left out and VBE taken as
0.65 V (common practice, no source). Then ``IE = (V − VBE − rail)/RE``; the solved current differs
by exactly ``(IB·R + VBE − 0.65 V)/RE``, which gives the reason where the two are far apart.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping

from tauledger.bias import DevicePoint, OperatingPoint
from tauledger.circuit.elements import (
    GROUND,
    BipolarTransistor,
    Capacitor,
    Circuit,
    CurrentSource,
    Element,
    MosFet,
    Resistor,
    VoltageSource,
)
from tauledger.quantity import format_quantity
from tauledger.review.rows import DividerRow

HAND_BASE_EMITTER_V = 0.65
DISAGREEMENT = 0.10
"""Of the emitter current by hand, beyond which the reason is given."""
_NEGLIGIBLE = 0.02
"""A cause that moves the current by less is not named."""
_LONGEST_CHAIN = 4
"""Resistors in series from an emitter to its rail."""


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
        causes.append(f"{row.transistor} is {device.region}")
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
