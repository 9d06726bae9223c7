"""Modified nodal equations of a flat circuit: ``G x + i(x) = s``.

Unknowns are node voltages (the circuit's, then those inside devices), then the currents of
elements that need one: voltage sources, E and H sources, inductors. Kirchhoff's current law is
written as the sum of currents *leaving* a node. Everything has a leading axis of boards, of
length 1 where nothing varies.

Matrices carry one extra row and column for ground, so that index −1 is ground and stamping needs
no test; solving drops it.

Source of the method: C.-W. Ho, A. Ruehli, P. Brennan, "The modified nodal approach to network
analysis", IEEE Trans. Circuits and Systems CAS-22 (1975) 504-509 (from memory, not re-read).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from tauledger.bias.stamps import IntArray, Scatter, Variations, stamp_linear
from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    BipolarTransistor,
    Circuit,
    ControlledSource,
    Element,
    Inductor,
    MosFet,
    SemiconductorDevice,
    VoltageSource,
)
from tauledger.devices import device_for
from tauledger.devices.interface import AnyDevice, Card, FloatArray, Value
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class DeviceGroup:
    """All instances of one device kind, with where their terminals stand."""

    device: AnyDevice
    names: tuple[str, ...]
    parameters: Any
    terminal_nodes: IntArray
    """(n, T): unknown index of each terminal; −1 for ground."""
    plus: IntArray
    minus: IntArray
    """(n, U): unknown indices of the two ends of each branch voltage."""
    incidence: FloatArray
    """(U, T): branch voltages from terminal voltages."""
    matrix_scatter: Scatter
    vector_scatter: Scatter


@dataclass(frozen=True, slots=True)
class Equations:
    """The circuit as arrays; ``size`` unknowns, matrices (boards, size + 1, size + 1)."""

    circuit: Circuit
    nodes: tuple[str, ...]
    branches: tuple[str, ...]
    boards: int
    conductance: FloatArray
    """Linear part of G, (boards or 1, size + 1, size + 1)."""
    reactance: FloatArray
    """C of capacitors and −L of inductors, same shape; device charges come at linearisation."""
    sources: FloatArray
    """(boards or 1, size + 1): independent sources on the right-hand side, at DC."""
    groups: tuple[DeviceGroup, ...]
    behavioural: tuple[BehaviouralSource, ...]
    node_index: Mapping[str, int]
    branch_index: Mapping[str, int]
    """Lower-case element name to unknown index."""
    values: Mapping[str, FloatArray]
    """Lower-case name of each capacitor and inductor to its value, (boards or 1,)."""

    @property
    def size(self) -> int:
        return len(self.nodes) + len(self.branches)


def build_equations(
    circuit: Circuit,
    variations: Variations | None = None,
    temperature_c: Value | None = None,
) -> Equations:
    """Write the equations of a circuit.

    Parameters
    ----------
    circuit
        The flat circuit.
    variations
        What differs from board to board, see :data:`Variations`.
    temperature_c
        In place of the circuit's temperature; one number, or (boards,).

    Raises
    ------
    ProblemError
        When a model type or level has no device, or a control source is missing.
    """
    varied = dict(variations or {})
    temperature = circuit.temperature_c if temperature_c is None else temperature_c
    groups_of = _gather_devices(circuit)
    outer_nodes = circuit.nodes
    node_index = {GROUND: -1} | {node: i for i, node in enumerate(outer_nodes)}
    inner: list[str] = []
    prepared = []
    for device, elements in groups_of:
        cards = [_card(element, varied) for element in elements]
        parameters = device.prepare(cards, temperature, circuit.nominal_temperature_c)
        terminals = _place_terminals(device, elements, parameters, node_index, inner)
        prepared.append((device, elements, parameters, terminals))
    nodes = (*outer_nodes, *inner)
    branch_elements = [e for e in circuit.elements if _has_branch(e)]
    branch_index = {e.name.lower(): len(nodes) + i for i, e in enumerate(branch_elements)}
    size = len(nodes) + len(branch_elements)
    conductance, reactance, sources, values = stamp_linear(
        circuit, varied, node_index, branch_index, size
    )
    boards = max(
        [conductance.shape[0], reactance.shape[0], sources.shape[0], np.size(temperature)]
        + [np.size(v) for v in varied.values()]
    )
    groups = tuple(_group(*item, size, boards) for item in prepared)
    return Equations(
        circuit=circuit,
        nodes=nodes,
        branches=tuple(e.name for e in branch_elements),
        boards=boards,
        conductance=conductance,
        reactance=reactance,
        sources=sources,
        groups=groups,
        behavioural=tuple(e for e in circuit.elements if isinstance(e, BehaviouralSource)),
        node_index=node_index,
        branch_index=branch_index,
        values=values,
    )


def _has_branch(element: Element) -> bool:
    if isinstance(element, ControlledSource):
        return element.letter in "EH"
    if isinstance(element, BehaviouralSource):
        return element.output == "voltage"
    return isinstance(element, VoltageSource | Inductor)


def _gather_devices(
    circuit: Circuit,
) -> list[tuple[AnyDevice, list[SemiconductorDevice]]]:
    found: dict[str, tuple[AnyDevice, list[SemiconductorDevice]]] = {}
    missing: list[Problem] = []
    for element in circuit.elements:
        if not isinstance(element, SemiconductorDevice):
            continue
        level = int(element.model.parameters.get("level", 1))
        device = device_for(element.model.kind, level)
        if device is None:
            missing.append(_no_device(element, level))
            continue
        found.setdefault(device.name, (device, []))[1].append(element)
    if missing:
        raise ProblemError(*missing)
    return list(found.values())


def _no_device(element: SemiconductorDevice, level: int) -> Problem:
    return Problem(
        "model-level-unsupported",
        Severity.ERROR,
        f"{element.name} uses model {element.model.name} of type {element.model.kind}, "
        f"level {level}, which has no equations here",
        element.span,
        "Give the device a model of a supported type and level.",
    )


def _card(element: SemiconductorDevice, variations: Variations) -> Card:
    prefix = element.name.lower() + "."
    model: dict[str, Value] = dict(element.model.parameters)
    instance: dict[str, Value] = dict(element.parameters)
    for key, value in variations.items():
        if key.startswith(prefix):
            name = key[len(prefix) :]
            (instance if name in instance else model)[name] = value
    return Card(element.name, element.model.kind, model, instance)


def _outer_nodes(device: AnyDevice, element: SemiconductorDevice) -> tuple[str, ...]:
    """The element's nodes, filled up to what the device has (a missing substrate is ground)."""
    nodes = element.nodes[: device.outer]
    missing = device.outer - len(nodes)
    if missing and isinstance(element, BipolarTransistor):
        return nodes + (GROUND,) * missing
    if missing and isinstance(element, MosFet):
        return (*nodes, nodes[2])
    return nodes


def _place_terminals(
    device: AnyDevice,
    elements: Sequence[SemiconductorDevice],
    parameters: Any,
    node_index: dict[str, int],
    inner: list[str],
) -> IntArray:
    """(n, T) unknown indices; internal nodes are added to ``node_index`` and ``inner``."""
    merged = device.merged(parameters)
    outer_count = len(node_index) - 1
    table = np.empty((len(elements), len(device.terminals)), dtype=np.intp)
    for row, element in enumerate(elements):
        outer = _outer_nodes(device, element)
        table[row, : device.outer] = [node_index[node] for node in outer]
        for k, terminal in enumerate(device.terminals[device.outer :]):
            if merged[row, k]:
                twin = device.terminals.index(terminal.partition("_")[0])
                table[row, device.outer + k] = table[row, twin]
                continue
            name = f"{element.name}.{terminal}"
            node_index[name] = outer_count
            table[row, device.outer + k] = outer_count
            inner.append(name)
            outer_count += 1
    return table


def _group(
    device: AnyDevice,
    elements: Sequence[SemiconductorDevice],
    parameters: Any,
    terminals: IntArray,
    size: int,
    boards: int,
) -> DeviceGroup:
    position = {name: k for k, name in enumerate(device.terminals)}
    plus = np.array([position[p] for p, _ in device.branches])
    minus = np.array([position[m] for _, m in device.branches])
    incidence = np.zeros((len(device.branches), len(device.terminals)))
    rows = np.arange(len(device.branches))
    incidence[rows, plus] += 1.0
    incidence[rows, minus] -= 1.0
    wrapped = terminals % (size + 1)
    pairs = wrapped[:, :, None] * (size + 1) + wrapped[:, None, :]
    inside = wrapped < size
    return DeviceGroup(
        device=device,
        names=tuple(e.name for e in elements),
        parameters=parameters,
        terminal_nodes=terminals,
        plus=terminals[:, plus],
        minus=terminals[:, minus],
        incidence=incidence,
        matrix_scatter=Scatter.onto(
            pairs.ravel(), boards, (inside[:, :, None] & inside[:, None, :]).ravel()
        ),
        vector_scatter=Scatter.onto(wrapped.ravel(), boards, inside.ravel()),
    )
