"""Operating point → linear network, by the same stamping as the bias equations."""

from __future__ import annotations

import numpy as np

from tauledger.bias.equations import DeviceGroup, Equations
from tauledger.bias.newton import linearise
from tauledger.bias.solver import BiasSolution
from tauledger.bias.stamps import Scatter
from tauledger.circuit.elements import Capacitor, Inductor
from tauledger.devices.interface import FloatArray, OperatingValues
from tauledger.smallsignal.network import LinearNetwork, ReactivePart


def linear_network(solution: BiasSolution) -> LinearNetwork:
    """Linearise at the operating point; device capacitances become parts of their own."""
    equations, state = solution.equations, solution.state
    size, boards = equations.size, equations.boards
    matrix, _ = linearise(equations, state.unknowns, state.branch_voltages)
    reactance = np.array(np.broadcast_to(equations.reactance, (boards, size + 1, size + 1)))
    parts = _circuit_parts(equations)
    for group, figures in zip(equations.groups, solution.figures, strict=True):
        parts += _device_parts(group, figures)
        _stamp_charges(reactance, group, figures)
    return LinearNetwork(
        nodes=equations.nodes,
        branches=equations.branches,
        conductance=matrix[:, :size, :size],
        reactance=reactance[:, :size, :size],
        parts=tuple(parts),
    )


def _circuit_parts(equations: Equations) -> list[ReactivePart]:
    parts = []
    for element in equations.circuit.elements:
        if isinstance(element, Capacitor | Inductor):
            key = element.name.lower()
            parts.append(
                ReactivePart(
                    name=element.name,
                    positive=equations.node_index[element.nodes[0]],
                    negative=equations.node_index[element.nodes[1]],
                    value=np.broadcast_to(equations.values[key], (equations.boards,)),
                    branch=equations.branch_index.get(key, -1),
                )
            )
    return parts


def _device_parts(group: DeviceGroup, figures: OperatingValues) -> list[ReactivePart]:
    position = {name: k for k, name in enumerate(group.device.terminals)}
    parts = []
    for i, name in enumerate(group.names):
        for k, (symbol, plus, minus) in enumerate(group.device.capacitors):
            value = figures.capacitance[:, i, k]
            a = int(group.terminal_nodes[i, position[plus]])
            b = int(group.terminal_nodes[i, position[minus]])
            if a != b and np.any(value != 0.0):
                parts.append(
                    ReactivePart(f"{name}.{symbol}", a, b, value, device=name, symbol=symbol)
                )
    return parts


def _stamp_charges(reactance: FloatArray, group: DeviceGroup, figures: OperatingValues) -> None:
    """Add dQ/dv of every device: two-terminal capacitances and transcapacitances."""
    boards, order = reactance.shape[:2]
    position = {name: k for k, name in enumerate(group.device.terminals)}
    quads = [(p, m, p, m) for _, p, m in group.device.capacitors]
    quads += list(group.device.transcapacitors)
    values = np.concatenate([figures.capacitance, figures.transcapacitance], axis=2)
    for k, quad in enumerate(quads):
        plus, minus, control_plus, control_minus = (
            group.terminal_nodes[:, position[name]] % order for name in quad
        )
        rows = np.concatenate([plus, plus, minus, minus])
        columns = np.concatenate([control_plus, control_minus, control_plus, control_minus])
        value = values[:, :, k]
        Scatter.onto(rows * order + columns, boards).add(
            reactance.reshape(boards, -1),
            np.concatenate([value, -value, -value, value], axis=1),
        )
