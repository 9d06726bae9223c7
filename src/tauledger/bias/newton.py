"""Newton's method on the nodal equations, batched over boards.

Each iteration linearises every device at limited branch voltages ``u`` and solves
``(G + J) x = s − (i(u) − J u)``. A board is finished when a step taken from unlimited branch
voltages moves neither them nor its unknowns; it is then frozen, so that slower boards cannot
disturb it.
"""

from __future__ import annotations

import contextlib
import dataclasses
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tauledger.bias.equations import Equations
from tauledger.circuit.elements import BehaviouralSource
from tauledger.circuit.evaluate import evaluate_with_derivatives, leaves_of
from tauledger.devices.interface import BoolArray, FloatArray
from tauledger.netlist.expression import Expression, NodeVoltage
from tauledger.records import dataclass

IntArray = NDArray[np.intp]

RELATIVE_TOLERANCE = 1e-8
VOLTAGE_TOLERANCE_V = 1e-7
CURRENT_TOLERANCE_A = 1e-12
"""Of the last step. What is left after it is its square over a few thermal voltages: 1e-11
relative in the currents, and rounding as a rule."""
MAXIMUM_ITERATIONS = 150
SPARSE_ABOVE = 1000
"""Unknowns. Ten iterations of a sparse and of a dense LU then differ by about what importing scipy
costs: at order 1000, one thread, 12 ms against 27 ms; the import takes 0.1 to 0.3 s."""
COMPACT_BELOW = 0.6
"""Part of the rows still going below which the others are dropped."""


@dataclass(frozen=True, slots=True)
class State:
    """Where Newton stands."""

    unknowns: FloatArray
    """(boards, size)."""
    branch_voltages: tuple[FloatArray, ...]
    """One a device group, (boards, n, U)."""
    converged: BoolArray
    """(boards,)."""
    movement: FloatArray
    """(boards, size): how far each unknown moved in the last iteration."""


@dataclass(frozen=True, slots=True)
class Helps:
    """What is added to the equations to make them easier, and is zero at the end."""

    node_conductance_s: float = 0.0
    """From every node to ground."""
    source_scale: float = 1.0
    """Independent sources are multiplied by this."""
    pull_conductance_s: float = 0.0
    pull_targets: FloatArray | None = None
    """(boards, nodes): nodes are tied to these voltages through the pull conductance; NaN where
    a node is left alone."""


def starting_state(equations: Equations) -> State:
    """Zero node voltages and each device's own first guess."""
    boards = equations.boards
    guesses = tuple(
        np.array(
            np.broadcast_to(
                initial := group.device.initial(group.parameters), (boards, *initial.shape[1:])
            )
        )
        for group in equations.groups
    )
    zeros = np.zeros((boards, equations.size))
    return State(zeros, guesses, np.zeros(boards, dtype=bool), zeros.copy())


def solve_newton(
    equations: Equations,
    start: State,
    helps: Helps | None = None,
    maximum_iterations: int = MAXIMUM_ITERATIONS,
) -> State:
    """Iterate from ``start``; boards that do not converge are marked, nothing is raised.

    A board whose matrix turns singular stops there, unconverged. Convergence is quadratic: the
    step that moves by less than the tolerance leaves Kirchhoff's laws at rounding.
    """
    helps = helps or Helps()
    unknowns = start.unknowns.copy()
    voltages = [array.copy() for array in start.branch_voltages]
    movement = np.full_like(unknowns, np.inf)
    converged = np.zeros(equations.boards, dtype=bool)
    rows = np.arange(equations.boards)  # which board each row of the work is
    going = np.ones(equations.boards, dtype=bool)
    # A step is final only when it was taken from where the unknowns stood, not from voltages
    # that a device had limited: those may leave the unknowns alone and still be far away.
    trusted = np.zeros(equations.boards, dtype=bool)
    work, old, old_voltages = equations, unknowns.copy(), [array.copy() for array in voltages]
    for _ in range(maximum_iterations):
        new, new_voltages, settled = _iterate(work, old, old_voltages, helps)
        kept = rows if going.all() else rows[going]
        fresh = new if kept is rows else new[going]
        movement[kept] = np.abs(fresh - (old if kept is rows else old[going]))
        unknowns[kept] = fresh
        for array, limited in zip(voltages, new_voltages, strict=True):
            array[kept] = limited if kept is rows else limited[going]
        done = settled & trusted & _still(new, old, len(equations.nodes)) & going
        trusted = settled
        converged[rows[done]] = True
        going = going & ~done & np.isfinite(new).all(axis=1)
        left = int(np.count_nonzero(going))
        if not left:
            break
        old, old_voltages = new, new_voltages
        if left < rows.size:
            old = np.where(going[:, None], new, 0.0)
        # Copying the equations costs about as much as an iteration: worth it only for many.
        if left < COMPACT_BELOW * rows.size:
            old, old_voltages = old[going], [array[going] for array in new_voltages]
            work, helps = take_boards(work, np.flatnonzero(going)), _take_helps(helps, going)
            rows, trusted, going = rows[going], trusted[going], np.ones(left, dtype=bool)
    return State(unknowns, tuple(voltages), converged, movement)


def take_boards(equations: Equations, boards: IntArray) -> Equations:
    """The equations of some boards only."""

    def take(array: FloatArray) -> FloatArray:
        return array if array.shape[0] == 1 else array[boards]

    groups = tuple(
        dataclasses.replace(group, parameters=_take_parameters(group.parameters, boards))
        for group in equations.groups
    )
    return dataclasses.replace(
        equations,
        boards=boards.size,
        conductance=take(equations.conductance),
        reactance=take(equations.reactance),
        sources=take(equations.sources),
        values={name: take(value) for name, value in equations.values.items()},
        groups=groups,
    )


def _take_parameters(parameters: Any, boards: IntArray) -> Any:
    changes: dict[str, Any] = {}
    for entry in dataclasses.fields(parameters):
        value = getattr(parameters, entry.name)
        if isinstance(value, np.ndarray) and value.ndim >= 2 and value.shape[0] > 1:
            changes[entry.name] = value[boards]
        elif dataclasses.is_dataclass(value) and not isinstance(value, type):
            changes[entry.name] = _take_parameters(value, boards)
    return dataclasses.replace(parameters, **changes) if changes else parameters


def _take_helps(helps: Helps, boards: BoolArray) -> Helps:
    if helps.pull_targets is None or helps.pull_targets.shape[0] == 1:
        return helps
    return dataclasses.replace(helps, pull_targets=helps.pull_targets[boards])


def linearise(
    equations: Equations, unknowns: FloatArray, voltages: Sequence[FloatArray]
) -> tuple[FloatArray, FloatArray]:
    """Jacobian (boards, size + 1, size + 1) and right-hand side (boards, size + 1) at a point.

    The right-hand side already holds ``s − (i(u) − J u)``, with sources at full scale.
    """
    boards, order = equations.boards, equations.size + 1
    matrix, right = np.empty((boards, order, order)), np.empty((boards, order))
    matrix[...] = equations.conductance
    right[...] = equations.sources
    for group, u in zip(equations.groups, voltages, strict=True):
        evaluation = group.device.evaluate(group.parameters, u, equations.circuit.gmin)
        stamp = evaluation.jacobian @ group.incidence
        equivalent = np.einsum("bntu,bnu->bnt", evaluation.jacobian, u) - evaluation.current
        group.matrix_scatter.add(matrix.reshape(boards, -1), stamp.reshape(boards, -1))
        group.vector_scatter.add(right, equivalent.reshape(boards, -1))
    for source in equations.behavioural:
        _stamp_behavioural(equations, source, unknowns, matrix, right)
    return matrix, right


def _iterate(
    equations: Equations, old: FloatArray, voltages: Sequence[FloatArray], helps: Helps
) -> tuple[FloatArray, list[FloatArray], BoolArray]:
    matrix, right = linearise(equations, old, voltages)
    if helps.source_scale != 1.0:
        right -= (1.0 - helps.source_scale) * equations.sources
    _add_helps(equations, helps, matrix, right)
    size = equations.size
    new = solve_boards(matrix[:, :size, :size], right[:, :size])
    limited = []
    settled = np.ones(equations.boards, dtype=bool)
    finite = np.isfinite(new)
    padded = np.zeros((new.shape[0], size + 1))  # with ground
    padded[:, :size] = new if finite.all() else np.where(finite, new, 0.0)
    for group, previous in zip(equations.groups, voltages, strict=True):
        proposed = padded[:, group.plus] - padded[:, group.minus]
        allowed = group.device.limit(group.parameters, proposed, previous)
        limited.append(allowed)
        gap = np.abs(allowed - proposed) <= VOLTAGE_TOLERANCE_V + RELATIVE_TOLERANCE * np.abs(
            proposed
        )
        settled &= gap.all(axis=(1, 2))
    return new, limited, settled


def _add_helps(equations: Equations, helps: Helps, matrix: FloatArray, right: FloatArray) -> None:
    nodes = len(equations.nodes)
    diagonal = np.arange(nodes)
    if helps.node_conductance_s:
        matrix[:, diagonal, diagonal] += helps.node_conductance_s
    if helps.pull_targets is not None:
        pulled = ~np.isnan(helps.pull_targets)
        matrix[:, diagonal, diagonal] += np.where(pulled, helps.pull_conductance_s, 0.0)
        right[:, :nodes] += np.where(pulled, helps.pull_conductance_s * helps.pull_targets, 0.0)


def solve_boards(matrix: FloatArray, right: FloatArray) -> FloatArray:
    """Solve every board; NaN where a matrix is singular."""
    if matrix.shape[1] > SPARSE_ABOVE:
        with contextlib.suppress(ImportError):  # scipy is no requirement: dense is only slower
            return _solve_sparse(matrix, right)
    try:
        return np.asarray(np.linalg.solve(matrix, right[:, :, None])[:, :, 0])
    except np.linalg.LinAlgError:
        if matrix.shape[0] == 1:
            return np.full_like(right, np.nan)
    return np.concatenate(
        [solve_boards(matrix[i : i + 1], right[i : i + 1]) for i in range(matrix.shape[0])]
    )


def _solve_sparse(matrix: FloatArray, right: FloatArray) -> FloatArray:
    # Imported here: it takes longer than the whole analysis of a small amplifier.
    from scipy.sparse import csc_matrix  # type: ignore[import-untyped]
    from scipy.sparse.linalg import splu  # type: ignore[import-untyped]

    result = np.full_like(right, np.nan)
    for board in range(matrix.shape[0]):
        if not np.isfinite(matrix[board]).all():
            continue
        # "Factor is exactly singular" is a RuntimeError.
        with contextlib.suppress(RuntimeError):
            result[board] = splu(csc_matrix(matrix[board])).solve(right[board])
    return result


def _still(new: FloatArray, old: FloatArray, nodes: int) -> BoolArray:
    absolute = np.full(new.shape[1], CURRENT_TOLERANCE_A)
    absolute[:nodes] = VOLTAGE_TOLERANCE_V
    with np.errstate(invalid="ignore"):
        near = np.abs(new - old) <= absolute + RELATIVE_TOLERANCE * np.abs(new)
    return np.asarray(near.all(axis=1))


def _stamp_behavioural(
    equations: Equations,
    source: BehaviouralSource,
    unknowns: FloatArray,
    matrix: FloatArray,
    right: FloatArray,
) -> None:
    """Linearise an expression: value + Σ derivative·(x − x₀).

    A voltage source's own branch terms are already in the linear part.
    """
    leaves = {leaf: _leaf_columns(equations, leaf) for leaf in leaves_of(source.expression)}
    padded = np.concatenate([unknowns, np.zeros((unknowns.shape[0], 1))], axis=1)
    points = {
        leaf: sum((sign * padded[:, column] for column, sign in columns), np.zeros(len(padded)))
        for leaf, columns in leaves.items()
    }
    value, derivatives = evaluate_with_derivatives(source.expression, points)
    offset = np.broadcast_to(value, (len(padded),)).copy()
    a, b = equations.node_index[source.nodes[0]], equations.node_index[source.nodes[1]]
    rows = (
        [(a, 1.0), (b, -1.0)]
        if source.output == "current"
        else [(equations.branch_index[source.name.lower()], -1.0)]
    )
    for leaf, derivative in derivatives.items():
        offset -= derivative * points[leaf]
        for column, column_sign in leaves[leaf]:
            for row, row_sign in rows:
                matrix[:, row, column] += row_sign * column_sign * derivative
    for row, row_sign in rows:
        right[:, row] -= row_sign * offset


def _leaf_columns(equations: Equations, leaf: Expression) -> list[tuple[int, float]]:
    if isinstance(leaf, NodeVoltage):
        return [
            (equations.node_index[leaf.positive], 1.0),
            (equations.node_index[leaf.negative], -1.0),
        ]
    return [(equations.branch_index[leaf.source.lower()], 1.0)]  # type: ignore[attr-defined]
