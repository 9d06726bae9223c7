"""Midband gain of each stage by inspection: the formula in symbols, with numbers put in."""

from __future__ import annotations

import math
from collections.abc import Mapping

from tauledger.corners.handwork import AGREEMENT, IDEAL, Workbench
from tauledger.corners.inspection import ActiveDevice, NoExpressionError, SignalNetwork
from tauledger.corners.model import Corners
from tauledger.corners.symbols import FACTOR, OPEN, Term
from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.smallsignal import LinearNetwork
from tauledger.topology.model import StageOutline, Topology, TransistorRole

INVERTING = {"common emitter", "common source"}
FOLLOWING = {"emitter follower", "source follower"}
UPRIGHT = {"common base", "common gate"}


@dataclass(frozen=True, slots=True)
class StageFormula:
    """``text`` such as ``−gm·(RC‖RL‖ro) = −55.3 mS·2.57 kΩ``, or why there is none."""

    text: str
    value: float | None
    reason: str = ""


def stage_formulas(
    bench: Workbench, network: LinearNetwork, topology: Topology, corners: Corners
) -> tuple[StageFormula, ...]:
    """One for each stage of the path, in order; checked against the midband network within 5 %."""
    if corners.midband is None:
        return tuple(StageFormula("", None, "no flat passband") for _ in topology.stages)
    midband = corners.midband
    short = [(p.positive, p.negative) for p in midband.low.parts if not p.is_inductor]
    short += [(p.positive, p.negative) for p in midband.high.parts if p.is_inductor]
    devices = {d.name: d for d in bench.devices if d.transconductance > 0.0}
    plain, full = (bench.network(tuple(short), "", ideal) for ideal in (True, False))
    formulas = []
    for stage in topology.stages:
        found = _formula(plain, devices, network, stage, topology, corners, IDEAL)
        if not found.text:
            found = _formula(full, devices, network, stage, topology, corners, AGREEMENT)
        formulas.append(found)
    return tuple(formulas)


def _formula(
    signal: SignalNetwork,
    devices: Mapping[str, ActiveDevice],
    network: LinearNetwork,
    stage: StageOutline,
    topology: Topology,
    corners: Corners,
    agreement: float,
) -> StageFormula:
    assert corners.midband is not None
    unknowns = corners.midband.unknowns
    entry, leaving = (network.index(node) for node in (stage.input_node, stage.output_node))
    if entry < 0 or leaving < 0 or unknowns[entry] == 0.0:
        return StageFormula("", None, "the stage does not lie between two signal nodes")
    exact = float(unknowns[leaving] / unknowns[entry])
    try:
        found = _by_configuration(signal, devices, leaving, stage, topology.transistors)
    except NoExpressionError as error:
        return StageFormula("", None, str(error))
    if found is None:
        return StageFormula("", None, f"no rule for a {stage.configuration}")
    text, value = found
    if not math.isfinite(value) or abs(value / exact - 1.0) > agreement:
        return StageFormula("", None, "feedback or coupling that the rule does not see")
    return StageFormula(text, value)


def _by_configuration(
    signal: SignalNetwork,
    devices: Mapping[str, ActiveDevice],
    leaving: int,
    stage: StageOutline,
    roles: Mapping[str, TransistorRole],
) -> tuple[str, float] | None:
    members = [devices[name] for name in stage.transistors if name in devices]
    if not members:
        return None
    first = members[0]
    if stage.configuration in INVERTING:
        return _transconductance_stage(signal, first, leaving, -1.0)
    if stage.configuration in FOLLOWING:
        return _follower(signal, first)
    if stage.configuration in UPRIGHT:
        gm, symbol = first.source_transconductance, first.source_symbol
        return _load_gain(gm, symbol, signal.see(leaving), 1.0)
    if stage.configuration == "cascode":
        return _transconductance_stage(signal, first, leaving, -1.0)
    if stage.configuration == "differential pair":
        return _pair_gain(signal, first, leaving, roles)
    return None


def _transconductance_stage(
    signal: SignalNetwork, device: ActiveDevice, leaving: int, sign: float
) -> tuple[str, float]:
    load = signal.see(leaving)
    below = signal.see(device.common, frozenset({device.name}))
    gain = device.source_transconductance * below.value
    if gain < 0.01:
        return _load_gain(device.transconductance, device.s("gm"), load, sign)
    text = f"(1 + {device.source_symbol}·{below.within(FACTOR)})"
    factor = sign / (1.0 + gain)
    return _load_gain(device.transconductance, device.s("gm"), load, factor, f"/{text}")


def _load_gain(
    gm: float, symbol: str, load: Term, factor: float, divisor: str = ""
) -> tuple[str, float]:
    value = factor * gm * load.value
    minus = "−" if factor < 0 else ""
    numbers = f"{minus}{format_quantity(gm, 'S')}·{format_quantity(load.value, 'Ω')}"
    if divisor:
        numbers += f"/{1.0 / abs(factor):.3g}"
    return f"{minus}{symbol}·{load.within(FACTOR)}{divisor} = {numbers}", value


def _follower(signal: SignalNetwork, device: ActiveDevice) -> tuple[str, float]:
    load = signal.see(device.common, frozenset({device.name}))
    if load is OPEN:
        return "1", 1.0
    drive = device.transconductance * load.value
    loop = device.source_transconductance * load.value
    if math.isfinite(device.input_resistance_ohm):
        drive *= 1.0 + 1.0 / (device.beta_plus_one - 1.0)
        loop = drive
    text = f"{device.s('gm')}·{load.within(FACTOR)}"
    below = f"{device.source_symbol}·{load.within(FACTOR)}"
    return f"{text}/(1 + {below}) = {drive:.3g}/{1.0 + loop:.3g}", drive / (1.0 + loop)


def _pair_gain(
    signal: SignalNetwork,
    device: ActiveDevice,
    leaving: int,
    roles: Mapping[str, TransistorRole],
) -> tuple[str, float]:
    """One half drives the other through its emitter; a mirror for load adds both currents."""
    mirrored = any(
        role.on_path and role.configuration in ("active load", "current mirror")
        for role in roles.values()
    )
    sign = -1.0 if signal.same(device.output, leaving) else 1.0
    text, value = _transconductance_stage(signal, device, leaving, sign)
    if not mirrored:
        return text, value
    # Twice each side of the equation, a minus kept in front.
    sides = text.split(" = ")
    doubled = [f"−2·{side[1:]}" if side.startswith("−") else f"2·{side}" for side in sides]
    return " = ".join(doubled), 2.0 * value
