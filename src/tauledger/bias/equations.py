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

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    BipolarTransistor,
    Capacitor,
    Circuit,
    ControlledSource,
    Coupling,
    CurrentSource,
    Element,
    Inductor,
    MosFet,
    Resistor,
    SemiconductorDevice,
    VoltageSource,
)
from tauledger.devices import device_for
from tauledger.devices.interface import AnyDevice, BoolArray, Card, FloatArray, Value
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass

IntArray = NDArray[np.intp]
Variations = Mapping[str, FloatArray]
"""Lower-case ``r1`` (a value) or ``q1.bf`` (a model or instance parameter) to (boards,)."""


@dataclass(frozen=True, slots=True)
class Scatter:
    """Adds values into a flat array whose positions repeat, for every board at once."""

    positions: IntArray
    layers: tuple[tuple[IntArray, IntArray], ...]
    """Targets and where their values stand, no target twice in a layer; for batches only."""

    @classmethod
    def onto(cls, positions: IntArray, boards: int, kept: BoolArray | None = None) -> Scatter:
        """``kept`` marks the values worth adding to a batch: those outside the ground row."""
        if boards == 1:
            return cls(positions, ())
        sources = np.arange(positions.size) if kept is None else np.flatnonzero(kept)
        order = sources[np.argsort(positions[sources], kind="stable")]
        targets, starts, counts = np.unique(positions[order], return_index=True, return_counts=True)
        layers = []
        for depth in range(counts.max(initial=0)):
            here = counts > depth
            layers.append((targets[here], order[starts[here] + depth]))
        return cls(positions, tuple(layers))

    def add(self, flat: FloatArray, values: FloatArray) -> None:
        """``flat`` is (boards, M), ``values`` (boards or 1, number of positions)."""
        if flat.shape[0] == 1:
            flat[0] += np.bincount(self.positions, values[0], flat.shape[1])
            return
        for targets, sources in self.layers:
            flat[:, targets] += values[:, sources]


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


@dataclass(slots=True)
class _Triplets:
    """Rows, columns and values collected while walking the elements (builder only)."""

    rows: list[int] = field(default_factory=list)
    columns: list[int] = field(default_factory=list)
    values: list[Value] = field(default_factory=list)

    def add(self, row: int, column: int, value: Value) -> None:
        self.rows.append(row)
        self.columns.append(column)
        self.values.append(value)

    def two_terminal(self, a: int, b: int, value: Value) -> None:
        self.add(a, a, value)
        self.add(b, b, value)
        self.add(a, b, -value)
        self.add(b, a, -value)

    def matrix(self, size: int) -> FloatArray:
        boards = _boards(self.values)
        result = np.zeros((boards, (size + 1) ** 2))
        rows = np.asarray(self.rows, dtype=np.intp) % (size + 1)
        columns = np.asarray(self.columns, dtype=np.intp) % (size + 1)
        Scatter.onto(rows * (size + 1) + columns, boards).add(result, _columns(self.values, boards))
        return result.reshape(boards, size + 1, size + 1)


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
    conductance, reactance, sources, values = _stamp_linear(
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


def _stamp_linear(
    circuit: Circuit,
    varied: Variations,
    node_index: Mapping[str, int],
    branch_index: Mapping[str, int],
    size: int,
) -> tuple[FloatArray, FloatArray, FloatArray, dict[str, FloatArray]]:
    conductance, reactance = _Triplets(), _Triplets()
    right_rows: list[int] = []
    right_values: list[Value] = []
    values: dict[str, FloatArray] = {}
    for element in circuit.elements:
        key = element.name.lower()
        a, b = (
            (node_index[element.nodes[0]], node_index[element.nodes[1]])
            if len(element.nodes) > 1
            else (-1, -1)
        )
        branch = branch_index.get(key, -1)
        if branch >= 0:
            _stamp_branch(conductance, a, b, branch)
        match element:
            case Resistor(resistance_ohm=nominal):
                conductance.two_terminal(a, b, 1.0 / _value(varied, key, nominal))
            case Capacitor(capacitance_f=nominal):
                value = _value(varied, key, nominal)
                values[key] = np.atleast_1d(value)
                reactance.two_terminal(a, b, value)
            case Inductor(inductance_h=nominal):
                value = _value(varied, key, nominal)
                values[key] = np.atleast_1d(value)
                reactance.add(branch, branch, -value)
            case VoltageSource(dc=nominal):
                right_rows.append(branch)
                right_values.append(_value(varied, key, nominal))
            case CurrentSource(dc=nominal):
                current = _value(varied, key, nominal)
                right_rows += [a, b]
                right_values += [-current, current]
            case ControlledSource():
                gain = _value(varied, key, element.gain)
                _stamp_controlled(
                    conductance, element, gain, (a, b, branch), node_index, branch_index
                )
            case _:
                pass
    for element in circuit.elements:
        if isinstance(element, Coupling):
            _stamp_coupling(reactance, element, varied, values, branch_index)
    sources = np.zeros((_boards(right_values), size + 1))
    wrapped = np.asarray(right_rows, dtype=np.intp) % (size + 1)
    Scatter.onto(wrapped, sources.shape[0]).add(sources, _columns(right_values, sources.shape[0]))
    return conductance.matrix(size), reactance.matrix(size), sources, values


def _stamp_branch(conductance: _Triplets, a: int, b: int, branch: int) -> None:
    """The branch current leaves node a and enters node b; its row holds v_a − v_b."""
    conductance.add(a, branch, 1.0)
    conductance.add(b, branch, -1.0)
    conductance.add(branch, a, 1.0)
    conductance.add(branch, b, -1.0)


def _stamp_controlled(
    conductance: _Triplets,
    element: ControlledSource,
    gain: Value,
    place: tuple[int, int, int],
    node_index: Mapping[str, int],
    branch_index: Mapping[str, int],
) -> None:
    a, b, branch = place
    if element.letter in "EG":
        controls = [(node_index[element.control_nodes[0]], 1.0)]
        controls.append((node_index[element.control_nodes[1]], -1.0))
    else:
        control = branch_index.get(element.control_source.lower())
        if control is None:
            raise ProblemError(_no_control(element))
        controls = [(control, 1.0)]
    for column, sign in controls:
        if element.letter in "EH":
            conductance.add(branch, column, -sign * gain)
        else:
            conductance.add(a, column, sign * gain)
            conductance.add(b, column, -sign * gain)


def _no_control(element: ControlledSource) -> Problem:
    return Problem(
        "control-source-missing",
        Severity.ERROR,
        f"{element.name} is controlled by the current of {element.control_source}, "
        "which is not a voltage source of this circuit",
        element.span,
        "Name a voltage source (0 V will do) in series with the controlling current.",
    )


def _stamp_coupling(
    reactance: _Triplets,
    element: Coupling,
    varied: Variations,
    values: Mapping[str, FloatArray],
    branch_index: Mapping[str, int],
) -> None:
    """M = k·√(L1·L2) on the crossed branch terms, for every pair named."""
    names = [name.lower() for name in element.inductors]
    unknown = [name for name in names if name not in branch_index or name not in values]
    if unknown:
        raise ProblemError(
            Problem(
                "coupling-inductor-missing",
                Severity.ERROR,
                f"{element.name} couples {', '.join(unknown)}, not an inductor of this circuit",
                element.span,
                "Name two inductors that stand in the same circuit.",
            )
        )
    coefficient = _value(varied, element.name.lower(), element.coefficient)
    for i, first in enumerate(names):
        for second in names[i + 1 :]:
            mutual = -coefficient * np.sqrt(values[first] * values[second])
            reactance.add(branch_index[first], branch_index[second], mutual)
            reactance.add(branch_index[second], branch_index[first], mutual)


def _value(variations: Variations, key: str, nominal: float) -> Value:
    return variations.get(key, nominal)


def _boards(values: Iterable[Value]) -> int:
    return max((value.size for value in values if isinstance(value, np.ndarray)), default=1)


def _columns(values: Sequence[Value], boards: int) -> FloatArray:
    """Values as (boards, m)."""
    if boards == 1:
        return np.array([[v.item() if isinstance(v, np.ndarray) else v for v in values]], float)
    return np.stack([np.broadcast_to(v, (boards,)) for v in values], axis=1)
