"""The linear part of the nodal equations: what resistors, capacitors, coils and sources stamp.

The rows and columns are those of :mod:`tauledger.bias.equations`, ground being the last.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import field

import numpy as np
from numpy.typing import NDArray

from tauledger.circuit.elements import (
    Capacitor,
    Circuit,
    ControlledSource,
    Coupling,
    CurrentSource,
    Inductor,
    Resistor,
    VoltageSource,
)
from tauledger.devices.interface import BoolArray, FloatArray, Value
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


def stamp_linear(
    circuit: Circuit,
    varied: Variations,
    node_index: Mapping[str, int],
    branch_index: Mapping[str, int],
    size: int,
) -> tuple[FloatArray, FloatArray, FloatArray, dict[str, FloatArray]]:
    """G, C, the right-hand side, and the values of capacitors and coils by lower-case name.

    Each with a leading axis of boards, of length 1 where nothing varies. Raises ProblemError
    when the source that controls another, or a coupled inductor, is missing.
    """
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
