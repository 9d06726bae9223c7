"""Everything found about one netlist → the rows a report shows."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping

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
from tauledger.corners import Corner, Corners, PartAccount
from tauledger.review.rows import (
    CornerRow,
    NamedValue,
    NodeRow,
    PathRow,
    Review,
    StageRow,
    TimeConstantRow,
    TransistorRow,
)
from tauledger.smallsignal import DeviceAdmittance, LinearNetwork
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
) -> PathRow:
    """One signal path with its stages, time constants and corners."""
    path = topology.path
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
            )
            for i, stage in enumerate(topology.stages)
        ),
        time_constants=tuple(
            _time_constant_row(account, point, network, topology) for account in corners.accounts
        ),
        low=_corner_row(corners.low),
        high=_corner_row(corners.high),
        notes=(*corners.notes, *topology.notes),
        gain_by_inspection=corners.gain if corners.midband is not None else None,
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
    return Review(
        title=circuit.title,
        netlist=circuit.path,
        version=version,
        temperature_c=circuit.temperature_c,
        nodes=tuple(NodeRow(node, point.voltage(node)) for node in circuit.nodes),
        transistors=transistor_rows(circuit, point, topology),
        paths=tuple(paths),
        problems=circuit.problems,
        supply_power_w=_supply_power(circuit, point),
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
) -> StageRow:
    entry = _signal(network, corners, stage.input_node)
    leaving = _signal(network, corners, stage.output_node)
    gain = leaving / entry if entry and leaving is not None else None
    resistance = None
    if corners.midband is not None and (k := network.index(stage.output_node)) >= 0:
        resistance = float(corners.midband.inverse[k, k])
    return StageRow(
        number=number,
        transistors=stage.transistors,
        configuration=stage.configuration,
        input_node=stage.input_node,
        output_node=stage.output_node,
        gain=gain,
        input_resistance_ohm=entry_resistance_ohm,
        output_resistance_ohm=resistance,
    )


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
    probe = np.zeros(corners.midband.inverse.shape[0])
    for node, sign in ((path.output_node, 1.0), (path.output_reference, -1.0)):
        if (index := network.index(node)) >= 0:
            probe[index] += sign
    seen = float(probe @ corners.midband.inverse @ probe)
    load = sum(
        1.0 / e.resistance_ohm
        for e in circuit.elements
        if isinstance(e, Resistor) and e.name in path.load
    )
    conductance = (1.0 / seen if seen else math.inf) - load
    return 1.0 / conductance if conductance else math.inf


def _time_constant_row(
    account: PartAccount, point: OperatingPoint, network: LinearNetwork, topology: Topology
) -> TimeConstantRow:
    part = account.part
    nodes = (_node_name(network, part.positive), _node_name(network, part.negative))
    role = topology.capacitors.get(part.name)
    on_board = not part.device and not part.is_inductor
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
    )


def _node_name(network: LinearNetwork, index: int) -> str:
    return network.nodes[index] if index >= 0 else "0"


def _corner_row(corner: Corner) -> CornerRow:
    return CornerRow(
        end=corner.end,
        estimate_hz=corner.estimate_hz,
        exact_hz=corner.exact_hz,
        estimate_error=corner.estimate_error,
        set_by=corner.set_by,
        poles_hz=corner.poles_hz,
        zeros_hz=corner.zeros_hz,
        notes=corner.notes,
    )
