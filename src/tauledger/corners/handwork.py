"""The hand expression of every counted capacitor: network and device figures → symbols."""

from __future__ import annotations

import functools
import math
from collections.abc import Callable, Iterable, Mapping, Sequence

import numpy as np

from tauledger.bias import OperatingPoint
from tauledger.circuit.elements import (
    BehaviouralSource,
    BipolarTransistor,
    Circuit,
    ControlledSource,
    Diode,
    Element,
    JunctionFet,
    MosFet,
    Resistor,
    SemiconductorDevice,
)
from tauledger.corners.inspection import (
    ActiveDevice,
    NoExpressionError,
    ResistorBranch,
    SignalNetwork,
    merge_nodes,
)
from tauledger.corners.model import Corners, PartAccount
from tauledger.corners.ports import midband_network
from tauledger.records import dataclass
from tauledger.smallsignal import DeviceAdmittance, LinearNetwork, ReactivePart, Response
from tauledger.smallsignal.network import FloatArray

AGREEMENT = 0.05
"""An expression is shown only when it reproduces the exact resistance this well."""
IDEAL = 0.03
"""So well must it do to leave out the devices' own series resistances."""
MOST_EXPRESSIONS = 60
"""Capacitors looked at, largest share first."""
NO_FEEDBACK = 0.005
"""Return ratios below this are not worth writing down."""
LONGEST_EXPRESSION = 320
"""Letters; a longer one explains less than the number alone."""
MOST_TRIALS = 3
"""Feedback loops tried for one capacitor."""


NetworkOf = Callable[[tuple[tuple[int, int], ...], str, bool], SignalNetwork]
"""Node pairs tied, name of the dead device, whether series resistances are left out."""


@dataclass(frozen=True, slots=True)
class HandExpression:
    """``text`` with its ``deviation`` (value over exact, minus one); or why there is none."""

    text: str
    deviation: float | None
    reason: str = ""


@dataclass(frozen=True, slots=True)
class Transactor:
    """A current from one pair of unknowns controlled by the voltage of another."""

    name: str
    control: tuple[int, int]
    output: tuple[int, int]
    transconductance: float


@dataclass(frozen=True, slots=True)
class Workbench:
    """What the expressions of one circuit are made from, whatever capacitor is looked at."""

    resistors: tuple[ResistorBranch, ...]
    devices: tuple[ActiveDevice, ...]
    sources: tuple[Transactor, ...]
    """Linear G elements, which the rules cannot see through unless they are dead."""
    held: tuple[tuple[int, int], ...]
    opaque: Mapping[int, str]
    inner: tuple[tuple[int, int], ...]
    """Ends of the devices' own series resistances."""

    def network(
        self, shorted: tuple[tuple[int, int], ...], dead: str = "", ideal: bool = False
    ) -> SignalNetwork:
        """The signal network with these node pairs tied as well.

        ``dead`` names a device or G element whose transconductance is zero. ``ideal`` leaves out
        the devices' own series resistances.
        """
        pairs = [*self.held, *shorted, *(self.inner if ideal else ())]
        resistors = list(self.resistors)
        dead_devices = [d for d in self.devices if d.name == dead or d.transconductance <= 0.0]
        for device in dead_devices:
            resistors += device.passive()
        return SignalNetwork(
            resistors,
            [device for device in self.devices if device not in dead_devices],
            merge_nodes(pairs),
            {node: name for node, name in self.opaque.items() if name != dead},
        )

    @property
    def transactors(self) -> tuple[Transactor, ...]:
        return self.sources + tuple(
            Transactor(d.name, (d.control, d.common), (d.output, d.common), d.transconductance)
            for d in self.devices
            if d.transconductance > 0.0
        )


def workbench(
    circuit: Circuit,
    network: LinearNetwork,
    point: OperatingPoint,
    admittances: Mapping[str, DeviceAdmittance],
    held: Iterable[tuple[int, int]],
) -> Workbench:
    """Gather resistors and transistors at the operating point; ``held`` as the engine has it."""
    transistors = [
        e for e in circuit.elements if isinstance(e, BipolarTransistor | JunctionFet | MosFet)
    ]
    resistors = [
        ResistorBranch(e.name, _ends(network, e), e.resistance_ohm)
        for e in circuit.elements
        if isinstance(e, Resistor)
    ]
    devices, inner = [], []
    for element in circuit.elements:
        if not isinstance(element, SemiconductorDevice):
            continue
        admittance = admittances[element.name]
        mark = f"({element.name})" if len(transistors) > 1 else ""
        own = _series_resistors(mark, admittance)
        resistors += own
        inner += [r.nodes for r in own]
        if isinstance(element, Diode):
            resistors.append(_junction(element, admittance, point))
        else:
            devices.append(_device(element, mark, admittance, point))
    linear = [e for e in circuit.elements if isinstance(e, ControlledSource)]
    return Workbench(
        resistors=tuple(resistors),
        devices=tuple(devices),
        sources=tuple(
            Transactor(
                e.name,
                (network.index(e.control_nodes[0]), network.index(e.control_nodes[1])),
                _ends(network, e),
                e.gain,
            )
            for e in linear
            if e.letter == "G"
        ),
        held=tuple(held),
        opaque=_opaque_nodes(circuit, network),
        inner=tuple(inner),
    )


def _opaque_nodes(circuit: Circuit, network: LinearNetwork) -> dict[int, str]:
    """Nodes fed by a dependent current source, which the rules cannot see through."""
    return {
        node: e.name
        for e in circuit.elements
        if (isinstance(e, ControlledSource) and e.letter in "FG")
        or (isinstance(e, BehaviouralSource) and e.output == "current")
        for node in _ends(network, e)
        if node >= 0
    }


def hand_expressions(
    bench: Workbench, corners: Corners, response: Response
) -> dict[str, HandExpression]:
    """By name, for every capacitor with a share in one of the sums."""
    midband = corners.midband
    if midband is None:
        return {}
    coils = tuple(_pair(p) for p in midband.high.parts if p.is_inductor)
    # All capacitors of the high end look at one network, so each is built once.
    network = functools.cache(bench.network)
    result = {}
    leading = sorted(corners.accounts, key=lambda account: -(account.share or 0.0))
    for account in leading[:MOST_EXPRESSIONS]:
        if account.share is None or account.resistance_ohm is None or account.part.is_inductor:
            continue
        others: Sequence[ReactivePart] = midband.low.parts
        if account.end == "low" and corners.low.model is not None:
            own = {*_pair(account.part)}
            others = [p for p in corners.low.model.parts if {*_pair(p)} != own]
        shorted = coils + tuple(_pair(p) for p in others if not p.is_inductor)
        expression = _by_rules(network, shorted, account)
        if not expression.text:
            inverse = midband.inverse
            if account.end == "low":
                inverse = midband_network(response, others, midband.high.parts).inverse
            expression = (
                _with_feedback(network, bench.transactors, shorted, account, inverse) or expression
            )
        result[account.part.name] = expression
    return result


def _by_rules(
    network: NetworkOf, shorted: tuple[tuple[int, int], ...], account: PartAccount
) -> HandExpression:
    """By the rules alone; without the devices' series resistances where they hardly count."""
    exact = account.resistance_ohm or 0.0
    for ideal in (True, False):
        found = _attempt(network(shorted, "", ideal), account, exact)
        if found.deviation is not None and abs(found.deviation) <= (IDEAL if ideal else AGREEMENT):
            return found
    return found if not found.text else HandExpression("", None, found.reason)


def _attempt(signal: SignalNetwork, account: PartAccount, exact: float) -> HandExpression:
    try:
        term = signal.between(account.part.positive, account.part.negative)
    except NoExpressionError as error:
        return HandExpression("", None, str(error))
    if not math.isfinite(term.value) or exact <= 0.0:
        return HandExpression("", None, "the rules leave the port open")
    deviation = term.value / exact - 1.0
    off = abs(deviation) * 100
    reason = (
        "" if off <= 100 * AGREEMENT else f"the rules are {off:.0f} % off: feedback or a bridge"
    )
    text = ", ".join([term.text, *term.where])
    if len(text) > LONGEST_EXPRESSION:
        return HandExpression("", None, "too many parts count to write them down")
    return HandExpression(text, deviation, reason)


def _with_feedback(
    network: NetworkOf,
    transactors: Sequence[Transactor],
    shorted: tuple[tuple[int, int], ...],
    account: PartAccount,
    inverse: FloatArray,
) -> HandExpression | None:
    """Blackman's form R = R₀·(1 + T_short)/(1 + T_open) (references B14, read).

    One transconductance is set to zero, the rules are tried on what is left, and its two return
    ratios, with the port shorted and open, come from the inverse of the live network.
    """
    exact = account.resistance_ohm or 0.0
    port = _vector(_pair(account.part), inverse.shape[0])
    candidates = []
    for source in transactors:
        control, output = (_vector(v, inverse.shape[0]) for v in (source.control, source.output))
        loop = source.transconductance * float(control @ inverse @ output)
        if loop >= 1.0:
            continue
        one_plus_open = 1.0 / (1.0 - loop)
        change = source.transconductance * float(port @ inverse @ output)
        dead = exact + change * float(control @ inverse @ port) * one_plus_open
        if dead > 0.0 and exact > 0.0:
            candidates.append((abs(math.log(exact / dead)), source.name, dead, one_plus_open))
    for _, name, dead, one_plus_open in sorted(candidates, reverse=True)[:MOST_TRIALS]:
        for ideal in (True, False):
            found = _attempt(network(shorted, name, ideal), account, dead)
            if found.deviation is None or abs(found.deviation) > AGREEMENT:
                continue
            one_plus_short = exact * one_plus_open / dead
            if max(abs(one_plus_short - 1.0), abs(one_plus_open - 1.0)) < NO_FEEDBACK:
                return found
            body, *where = found.text.split(", ", 1)
            factor = f"{_one_plus(one_plus_short - 1)}/{_one_plus(one_plus_open - 1)}"
            text = ", ".join([f"({body})·{factor}", *where, f"return ratios of {name}"])
            return HandExpression(text, found.deviation)
    return None


def _one_plus(value: float) -> str:
    """``(1 + T)``, with the sign of T written as one does."""
    return f"(1 {'−' if value < 0 else '+'} {abs(value):.3g})" if abs(value) >= 0.001 else "1"


def _vector(pair: tuple[int, int], size: int) -> FloatArray:
    vector = np.zeros(size)
    for node, sign in zip(pair, (1.0, -1.0), strict=True):
        if node >= 0:
            vector[node] += sign
    return vector


def _pair(part: ReactivePart) -> tuple[int, int]:
    return part.positive, part.negative


def _ends(network: LinearNetwork, element: Element) -> tuple[int, int]:
    return network.index(element.nodes[0]), network.index(element.nodes[1])


def _series_resistors(mark: str, admittance: DeviceAdmittance) -> list[ResistorBranch]:
    """The device's own series resistances, where an inner terminal stands apart."""
    found = []
    for inner, terminal in enumerate(admittance.terminals):
        outer_name, _, rest = terminal.partition("_")
        if rest != "internal":
            continue
        outer = admittance.terminals.index(outer_name)
        nodes = admittance.unknowns[outer], admittance.unknowns[inner]
        conductance = -float(admittance.matrix[outer, inner])
        if nodes[0] != nodes[1] and conductance > 0.0:
            found.append(ResistorBranch(f"r{outer_name[0]}{mark}", nodes, 1.0 / conductance))
    return found


def _junction(
    element: Diode, admittance: DeviceAdmittance, point: OperatingPoint
) -> ResistorBranch:
    conductance = float(point.devices[element.name].values["gd"][0])
    inner = admittance.unknowns[admittance.terminals.index("anode_internal")]
    cathode = admittance.unknowns[admittance.terminals.index("cathode")]
    resistance = 1.0 / conductance if conductance > 0 else math.inf
    return ResistorBranch(f"rd({element.name})", (inner, cathode), resistance)


def _device(
    element: SemiconductorDevice, mark: str, admittance: DeviceAdmittance, point: OperatingPoint
) -> ActiveDevice:
    values = {name: float(array[0]) for name, array in point.devices[element.name].values.items()}
    place = dict(zip(admittance.terminals, admittance.unknowns, strict=True))
    if isinstance(element, BipolarTransistor):
        control, common, output = "base", "emitter", "collector"
        gm, r_pi, body = values["gm"], values["r_pi"], 0.0
    else:
        control, common, output = "gate", "source", "drain"
        gm, r_pi = values["gm"], math.inf
        bulk = place.get("bulk")
        apart = bulk is not None and bulk != place["source"]
        body = max(values.get("gmb", 0.0), 0.0) if apart else 0.0
    return ActiveDevice(
        name=element.name,
        mark=mark,
        control=place.get(f"{control}_internal", place[control]),
        common=place.get(f"{common}_internal", place[common]),
        output=place.get(f"{output}_internal", place[output]),
        transconductance=gm,
        input_resistance_ohm=r_pi,
        output_resistance_ohm=values["r_o"],
        body_transconductance=body,
    )
