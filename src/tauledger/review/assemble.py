"""Everything found about one netlist → the rows a report shows."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from tauledger.bias import DevicePoint, OperatingPoint
from tauledger.circuit.elements import (
    BipolarTransistor,
    Circuit,
    CurrentSource,
    JunctionFet,
    MosFet,
    Resistor,
    SemiconductorDevice,
    VoltageSource,
)
from tauledger.corners import Corner, Corners, HandExpression, PartAccount, StageFormula
from tauledger.review.divider import divider_checks
from tauledger.review.rows import (
    CornerRow,
    NamedValue,
    NodeRow,
    PathRow,
    ResponsePoint,
    Review,
    StageRow,
    TimeConstantRow,
    TransistorRow,
)
from tauledger.review.sanity import headroom, sanity_problems, stability_problems
from tauledger.smallsignal import DeviceAdmittance, LinearNetwork, Response
from tauledger.smallsignal.network import FloatArray
from tauledger.topology.model import SignalPath, StageOutline, Topology

_BIPOLAR_FIGURES = (
    ("gm", "gm", "S"),
    ("rπ", "r_pi", "Ω"),
    ("ro", "r_o", "Ω"),
    ("β", "beta_ac", ""),
    ("Cπ", "c_pi", "F"),
    ("Cμ", "c_mu", "F"),
    ("fT", "f_t", "Hz"),
)
_FET_FIGURES = (
    ("gm", "gm", "S"),
    ("ro", "r_o", "Ω"),
    ("gmb", "gmb", "S"),
    ("Cgs", "c_gs", "F"),
    ("Cgd", "c_gd", "F"),
    ("fT", "f_t", "Hz"),
)
_BEYOND = 10.0
"""How far the response is shown beyond its corners."""
_MOST_POINTS = 40
_TYPES = {
    "npn": "NPN",
    "pnp": "PNP",
    "lpnp": "PNP",
    "njf": "N-JFET",
    "pjf": "P-JFET",
    "nmos": "N-MOSFET",
    "pmos": "P-MOSFET",
    "vdmosn": "N-MOSFET",
    "vdmosp": "P-MOSFET",
}


def path_row(
    circuit: Circuit,
    point: OperatingPoint,
    network: LinearNetwork,
    admittances: Mapping[str, DeviceAdmittance],
    topology: Topology,
    corners: Corners,
    exact: Response,
    expressions: Mapping[str, HandExpression],
    formulas: Sequence[StageFormula],
) -> PathRow:
    """One signal path with its stages, time constants and corners."""
    path = topology.path
    moves = {corner.end: dict(corner.movers) for corner in (corners.low, corners.high)}
    gain = math.copysign(corners.exact_gain, corners.gain) if corners.exact_gain > 0 else None
    output = path.output_node
    if path.output_reference != "0":
        output += f" − {path.output_reference}"
    return PathRow(
        input=path.source,
        output=output,
        midband_hz=corners.midband_hz if gain is not None else None,
        gain=gain,
        gain_unit="Ω" if path.source_is_current else "V/V",
        gain_db=20.0 * math.log10(abs(gain)) if gain else None,
        input_resistance_ohm=_input_resistance(circuit, network, path, corners),
        output_resistance_ohm=_output_resistance(circuit, network, path, corners),
        stages=tuple(
            _stage_row(
                i + 1,
                stage,
                network,
                corners,
                _entry_resistance(stage, network, admittances, topology, corners),
                formula,
            )
            for i, (stage, formula) in enumerate(zip(topology.stages, formulas, strict=True))
        ),
        time_constants=tuple(
            _time_constant_row(account, circuit, point, network, topology, moves, expressions)
            for account in corners.accounts
        ),
        low=_corner_row(corners.low),
        high=_corner_row(corners.high),
        notes=(*corners.notes, *topology.notes),
        unstable_hz=corners.unstable_hz,
        gain_by_formulas=_product(network, corners, topology.stages, formulas),
        gain_by_inspection=corners.gain if corners.midband is not None else None,
        response=_response_points(corners, exact),
        headroom=headroom(circuit, point, network, admittances, topology, corners),
    )


def transistor_rows(
    circuit: Circuit, point: OperatingPoint, topology: Topology | None
) -> tuple[TransistorRow, ...]:
    """Bias and small-signal figures of every transistor, in netlist order."""
    rows = []
    for element in circuit.elements:
        if not isinstance(element, BipolarTransistor | JunctionFet | MosFet):
            continue
        role = topology.transistors.get(element.name) if topology else None
        rows.append(
            _transistor_row(
                element, point.devices[element.name], role.configuration if role else ""
            )
        )
    return tuple(rows)


def review_of(
    circuit: Circuit,
    point: OperatingPoint,
    topology: Topology | None,
    paths: Iterable[PathRow],
    version: str,
) -> Review:
    """Gather the rows of a whole report."""
    paths = tuple(paths)
    return Review(
        title=circuit.title,
        netlist=circuit.path,
        version=version,
        temperature_c=circuit.temperature_c,
        nodes=tuple(NodeRow(node, point.voltage(node)) for node in circuit.nodes),
        transistors=transistor_rows(circuit, point, topology),
        paths=paths,
        problems=(
            *circuit.problems,
            *sanity_problems(circuit, point, topology),
            *stability_problems(paths),
        ),
        supply_power_w=_supply_power(circuit, point),
        dividers=divider_checks(circuit, point),
    )


def _transistor_row(
    element: SemiconductorDevice, device: DevicePoint, configuration: str
) -> TransistorRow:
    bipolar = isinstance(element, BipolarTransistor)
    figures = _BIPOLAR_FIGURES if bipolar else _FET_FIGURES
    values = {name: float(array[0]) for name, array in device.values.items()}
    return TransistorRow(
        name=element.name,
        type=_TYPES.get(element.model.kind, element.model.kind),
        model=element.model.name,
        configuration=configuration,
        region=device.region,
        current_a=values["ic" if bipolar else "id"],
        voltage_v=values["vce" if bipolar else "vds"],
        values=tuple(
            NamedValue(symbol, values[name], unit)
            for symbol, name, unit in figures
            if name in values and not (name == "gmb" and values[name] == 0.0)
        ),
        power_w=values["power"],
        beta_dc=values["beta_dc"] if bipolar and math.isfinite(values["beta_dc"]) else None,
    )


def _supply_power(circuit: Circuit, point: OperatingPoint) -> float | None:
    """Power the independent sources deliver at DC."""
    total = 0.0
    for element in circuit.elements:
        if isinstance(element, VoltageSource | CurrentSource):
            voltage = point.voltage(element.nodes[0]) - point.voltage(element.nodes[1])
            current = (
                element.dc
                if isinstance(element, CurrentSource)
                else float(point.currents[0, point.branches.index(element.name)])
            )
            total -= voltage * current
    return total


def _stage_row(
    number: int,
    stage: StageOutline,
    network: LinearNetwork,
    corners: Corners,
    entry_resistance_ohm: float | None,
    formula: StageFormula,
) -> StageRow:
    entry = _signal(network, corners, stage.input_node)
    leaving = _signal(network, corners, stage.output_node)
    gain = leaving / entry if entry and leaving is not None else None
    resistance = None
    if corners.midband is not None and network.index(stage.output_node) >= 0:
        resistance = corners.midband.resistance_seen_ohm(_probe(network, stage.output_node, "0"))
    return StageRow(
        number=number,
        transistors=stage.transistors,
        configuration=stage.configuration,
        input_node=stage.input_node,
        output_node=stage.output_node,
        gain=gain,
        input_resistance_ohm=entry_resistance_ohm,
        output_resistance_ohm=resistance,
        formula=formula.text,
        formula_value=formula.value,
        formula_reason=formula.reason,
    )


def _product(
    network: LinearNetwork,
    corners: Corners,
    stages: Sequence[StageOutline],
    formulas: Sequence[StageFormula],
) -> float | None:
    values = [formula.value for formula in formulas if formula.value is not None]
    if not stages or len(values) < len(stages):
        return None
    entries = [_signal(network, corners, stage.input_node) for stage in stages]
    leaving = [_signal(network, corners, stage.output_node) for stage in stages]
    # The divisions before, between and behind the stages come from the network.
    product = corners.gain
    for entry, value, left in zip(entries, values, leaving, strict=True):
        if not entry or not left:
            return None
        product *= value * entry / left
    return product


def _entry_resistance(
    stage: StageOutline,
    network: LinearNetwork,
    admittances: Mapping[str, DeviceAdmittance],
    topology: Topology,
    corners: Corners,
) -> float | None:
    """Signal voltage over signal current looking into the terminal the signal enters."""
    entry = _signal(network, corners, stage.input_node)
    if corners.midband is None or entry is None:
        return None
    index = network.index(stage.input_node)
    current = 0.0
    for name in stage.transistors:
        role, admittance = topology.transistors.get(name), admittances.get(name)
        if role is None or admittance is None or role.input_terminal not in admittance.terminals:
            continue
        if admittance.unknowns[admittance.terminals.index(role.input_terminal)] == index:
            current += admittance.current_into(role.input_terminal, corners.midband.unknowns)
    if abs(current) < 1e-15 * abs(entry):
        return math.inf if stage.transistors else None
    return entry / current


def _signal(network: LinearNetwork, corners: Corners, node: str) -> float | None:
    """Midband signal at a node for a drive of one, signed."""
    if corners.midband is None or node == "0":
        return None
    return float(corners.midband.unknowns[network.index(node)])


def _input_resistance(
    circuit: Circuit, network: LinearNetwork, path: SignalPath, corners: Corners
) -> float | None:
    """What the source sees, without its own series resistor."""
    if corners.midband is None:
        return None
    unknowns = corners.midband.unknowns
    if path.source_is_current:
        index = network.index(path.input_node)
        return abs(float(unknowns[index])) if index >= 0 else None
    current = -float(unknowns[len(network.nodes) + network.branches.index(path.source)])
    if current == 0.0:
        return math.inf
    series = sum(
        e.resistance_ohm
        for e in circuit.elements
        if isinstance(e, Resistor) and e.name == path.source_resistor
    )
    return 1.0 / current - series


def _output_resistance(
    circuit: Circuit, network: LinearNetwork, path: SignalPath, corners: Corners
) -> float | None:
    """What the load sees, the source at zero; resistors of the load are taken out."""
    if corners.midband is None:
        return None
    probe = _probe(network, path.output_node, path.output_reference)
    seen = corners.midband.resistance_seen_ohm(probe)
    load = sum(
        1.0 / e.resistance_ohm
        for e in circuit.elements
        if isinstance(e, Resistor) and e.name in path.load
    )
    conductance = (1.0 / seen if seen else math.inf) - load
    return 1.0 / conductance if conductance else math.inf


def _probe(network: LinearNetwork, node: str, reference: str) -> FloatArray:
    """(N,): a unit current into one node and out of the other."""
    probe = np.zeros(len(network.nodes) + len(network.branches))
    for name, sign in ((node, 1.0), (reference, -1.0)):
        if (index := network.index(name)) >= 0:
            probe[index] += sign
    return probe


def _time_constant_row(
    account: PartAccount,
    circuit: Circuit,
    point: OperatingPoint,
    network: LinearNetwork,
    topology: Topology,
    moves: Mapping[str, Mapping[str, float]],
    expressions: Mapping[str, HandExpression],
) -> TimeConstantRow:
    part = account.part
    nodes = (_node_name(network, part.positive), _node_name(network, part.negative))
    role = topology.capacitors.get(part.name)
    hand = expressions.get(part.name)
    on_board = not (part.device or part.is_inductor or part.name in circuit.attached)
    return TimeConstantRow(
        name=part.name,
        nodes=nodes,
        value=float(part.value[0]),
        unit="H" if part.is_inductor else "F",
        role=role.role if role else ("inductor" if part.is_inductor else "device"),
        end=account.end,
        resistance_ohm=account.resistance_ohm,
        tau_s=account.tau_s,
        corner_hz=account.corner_hz,
        share=account.share,
        zero_hz=account.zero_hz,
        dc_voltage_v=point.voltage(nodes[0]) - point.voltage(nodes[1]) if on_board else None,
        reason=account.reason,
        expression=hand.text if hand else "",
        expression_deviation=hand.deviation if hand else None,
        expression_reason=hand.reason if hand else "",
        exact_move=moves[account.end].get(part.name, 0.0) if account.end in moves else None,
    )


def _node_name(network: LinearNetwork, index: int) -> str:
    return network.nodes[index] if index >= 0 else "0"


def _corner_row(corner: Corner) -> CornerRow:
    return CornerRow(
        end=corner.end,
        estimate_hz=corner.estimate_hz,
        exact_hz=corner.exact_hz,
        estimate_error=_relative(corner.estimate_hz, corner.exact_hz),
        set_by=corner.set_by,
        poles_hz=corner.poles_hz,
        zeros_hz=corner.zeros_hz,
        notes=corner.notes,
        improved_hz=corner.improved_hz,
        improved_method=corner.improved_method,
        improved_error=_relative(corner.improved_hz, corner.exact_hz),
        lowest_hz=corner.lowest_hz,
        highest_hz=corner.highest_hz,
        changes=corner.changes,
        timing=corner.timing,
    )


def _response_points(corners: Corners, exact: Response) -> tuple[ResponsePoint, ...]:
    """The band and what lies beyond its corners, in 25 to 40 equal steps of log frequency."""
    low, high = corners.low.exact_hz, corners.high.exact_hz
    first = math.floor(math.log10((low or corners.midband_hz / 100.0) / _BEYOND))
    last = math.ceil(math.log10((high or corners.midband_hz * 100.0) * _BEYOND))
    # Steps a decade that start each decade afresh; a band of 40 decades has fewer than one.
    steps = next((n for n in (10, 8, 6, 5, 4, 3, 2) if n * (last - first) <= _MOST_POINTS), 1)
    count = min(steps * (last - first), _MOST_POINTS) + 1
    frequency = np.logspace(first, last, count)
    gains = np.abs(exact.at(frequency))
    return tuple(map(ResponsePoint, frequency.tolist(), gains.tolist()))


def _relative(value: float | None, reference: float | None) -> float | None:
    return value / reference - 1.0 if value is not None and reference is not None else None
