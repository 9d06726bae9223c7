"""What the equations ask of a device, whatever its physics.

A device kind is written in terms of *branch voltages* ``u``: the junction, control and
series-resistance voltages its formulas use, each the difference of two terminals. The solver
computes ``u`` from node voltages, lets the device limit the step, and stamps what
:meth:`Device.evaluate` returns. Internal terminals (behind a series resistance) whose resistance
is zero are merged with their outer terminal by the solver, as :meth:`Device.merged` says.

Shapes: ``boards`` is the leading batch axis (1 when there is a single board and nothing varies);
``n`` counts instances of the kind, ``T`` terminals, ``U`` branches, ``K`` capacitors. Parameters
have shape (boards or 1, n); voltages (boards, n, U). Units are SI.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping, Sequence
from typing import Any, Generic, TypeVar

import numpy as np
from numpy.typing import NDArray

from tauledger.records import dataclass

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]
Value = float | FloatArray
"""A parameter: one number, or one a board with shape (boards,)."""

BOLTZMANN_J_PER_K = 1.380649e-23
ELEMENTARY_CHARGE_C = 1.602176634e-19
"""CODATA 2018, exact by definition of the SI (references C7, read)."""
ZERO_CELSIUS_K = 273.15


@dataclass(frozen=True, slots=True)
class Card:
    """One instance as the circuit states it."""

    name: str
    kind: str
    """Lower-case model type: ``npn``, ``pnp``, ``d``, ``njf``, ``pjf``, ``nmos``, ``pmos``, …"""
    model: Mapping[str, Value]
    instance: Mapping[str, Value]


@dataclass(frozen=True, slots=True)
class Evaluation:
    """Static equations at the given branch voltages."""

    current: FloatArray
    """(boards, n, T): current flowing from the circuit into each terminal, in A. Sums to zero."""
    jacobian: FloatArray
    """(boards, n, T, U): exact derivative of ``current`` to each branch voltage, in S."""


@dataclass(frozen=True, slots=True)
class OperatingValues:
    """Small-signal figures at the operating point."""

    capacitance: FloatArray
    """(boards, n, K): the two-terminal capacitances named in :attr:`Device.capacitors`, in F."""
    transcapacitance: FloatArray
    """(boards, n, M): charge on a branch per volt on another, :attr:`Device.transcapacitors`."""
    values: Mapping[str, FloatArray]
    """Field names to (boards, n), see :attr:`Device.value_units`; the sign is that of an N-type
    device, so ``gm`` and the resistances are positive for both polarities in normal use, while
    terminal currents and voltages (``ic``, ``vce``) carry their real sign."""
    region: NDArray[np.str_]
    """(boards, n): ``active``, ``saturated``, ``cut off``, ``triode``, ``reverse``,
    ``breakdown``, ``forward`` …"""


P = TypeVar("P")


class Device(ABC, Generic[P]):
    """One kind of device, without state; ``P`` is its frozen dataclass of prepared parameters."""

    name: str
    terminals: tuple[str, ...]
    """Outer terminals first, in SPICE order, then internal ones."""
    outer: int
    """How many of :attr:`terminals` are outer."""
    branches: tuple[tuple[str, str], ...]
    """Positive and negative terminal of each branch voltage."""
    capacitors: tuple[tuple[str, str, str], ...]
    """Symbol, positive and negative terminal of each two-terminal capacitance, e.g. ``Cπ``."""
    transcapacitors: tuple[tuple[str, str, str, str], ...] = ()
    """Charge terminals (+, −) and controlling terminals (+, −)."""
    value_units: Mapping[str, str]
    """Units of :attr:`OperatingValues.values`: ``S``, ``Ω``, ``A``, ``V``, ``F``, ``Hz``, ``W``
    or empty."""

    @abstractmethod
    def prepare(
        self, cards: Sequence[Card], temperature_c: Value, nominal_temperature_c: Value
    ) -> P:
        """Parameters at temperature, scaled by area and multiplier, arrays (boards or 1, n)."""

    @abstractmethod
    def merged(self, parameters: P) -> BoolArray:
        """(n, internal terminals): True where the internal terminal is its outer one."""

    @abstractmethod
    def initial(self, parameters: P) -> FloatArray:
        """(boards or 1, n, U): branch voltages to start Newton from."""

    @abstractmethod
    def limit(self, parameters: P, proposed: FloatArray, previous: FloatArray) -> FloatArray:
        """Branch voltages to evaluate at, so that exponentials stay in reach."""

    @abstractmethod
    def evaluate(self, parameters: P, voltages: FloatArray, gmin: float) -> Evaluation:
        """Currents and exact derivatives; ``gmin`` in S stands across every junction."""

    @abstractmethod
    def operating(self, parameters: P, voltages: FloatArray, gmin: float) -> OperatingValues:
        """Small-signal figures at the converged branch voltages."""


def columns(values: Sequence[Value]) -> FloatArray:
    """One value an instance, each a number or (boards,), side by side: (boards or 1, n)."""
    if all(isinstance(value, float) for value in values):
        return np.array([values], dtype=float)
    arrays = [np.atleast_1d(np.asarray(value, dtype=float)) for value in values]
    boards = max((array.size for array in arrays), default=1)
    return np.stack([np.broadcast_to(array, (boards,)) for array in arrays], axis=-1)


def stack(
    cards: Sequence[Card], name: str, default: Value, *, instance: bool = False
) -> FloatArray:
    """Collect one parameter of every card into (boards or 1, n).

    >>> stack([Card("Q1", "npn", {"bf": 200.0}, {})], "bf", 100.0)
    array([[200.]])
    """
    return columns(
        [(card.instance if instance else card.model).get(name, default) for card in cards]
    )


AnyDevice = Device[Any]
