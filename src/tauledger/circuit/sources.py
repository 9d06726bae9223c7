"""V and I elements: DC value, phasor, and the transient function's value at time zero.

The DC value, when none is written, is that of the transient function at time zero, as in ngspice.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence

from tauledger.circuit.elements import CurrentSource, VoltageSource
from tauledger.circuit.expansion import Expansion, ignored
from tauledger.circuit.operands import node_words
from tauledger.circuit.scope import Scope
from tauledger.netlist.codes import fault
from tauledger.netlist.statements import Assignment, Call, Formula, Group, Item, Statement, Word
from tauledger.quantity import parse_number

FUNCTIONS = frozenset(
    ("sin", "sine", "pulse", "pwl", "exp", "sffm", "am", "trnoise", "trrandom", "external")
)
_IGNORED = frozenset(("distof1", "distof2", "portnum", "z0", "pwr", "freq", "phase"))


def source(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add an independent source."""
    form = "Vname node node [DC value] [AC magnitude [phase]] [SIN(…)]"
    nodes = run.nodes(node_words(statement, 2, form), scope)
    reading = _Reading(run, scope, statement)
    reading.read()
    dc = reading.at_zero if reading.dc is None else reading.dc
    kind = VoltageSource if statement.name.text[0] in "vV" else CurrentSource
    run.add(
        kind(
            scope.prefix + statement.name.text,
            nodes,
            statement.span(),
            dc,
            reading.ac,
            reading.function,
        )
    )


class _Reading:
    """Reads the items behind the nodes from left to right."""

    def __init__(self, run: Expansion, scope: Scope, statement: Statement) -> None:
        self.run, self.scope, self.statement = run, scope, statement
        self.items = list(statement.items[2:])
        self.dc: float | None = None
        self.ac: complex | None = None
        self.at_zero = 0.0
        self.function = ""

    def read(self) -> None:
        while self.items:
            item = self.items.pop(0)
            if isinstance(item, Assignment):
                self.assignment(item)
            elif isinstance(item, Word) and item.text.lower() in ("dc", "ac"):
                self.keyword(item.text.lower())
            elif isinstance(item, Word) and item.text.lower() in FUNCTIONS:
                self.transient(item)
            elif isinstance(item, Word | Formula) and self.dc is None:
                self.dc = self.lone_number(item)
            elif not (isinstance(item, Word) and item.text.lower() in _IGNORED):
                ignored(self.run, self.statement, item)

    def number(self, item: Item | Call) -> float:
        return self.run.number(item, self.scope, self.statement)

    def lone_number(self, item: Item | Call) -> float:
        return self.run.lone_number(item, self.scope, self.statement)

    def assignment(self, item: Assignment) -> None:
        name = item.name.text.lower()
        if name == "dc":
            self.dc = self.lone_number(item.value)
        elif name in ("ac", "acmag"):
            self.phasor(self.number(item.value))
        elif name == "acphase" and self.ac is not None:
            self.ac = cmath.rect(abs(self.ac), math.radians(self.number(item.value)))
        elif name in FUNCTIONS and isinstance(item.value, Group):
            self.evaluate(name, item.name, item.value.items)
        elif name not in ("r", "td", *_IGNORED):
            ignored(self.run, self.statement, item)

    def keyword(self, name: str) -> None:
        if name == "ac":
            self.phasor(self.number(self.items.pop(0)) if self.value_next() else 1.0)
        elif self.value_next():
            self.dc = self.lone_number(self.items.pop(0))

    def phasor(self, magnitude: float) -> None:
        """Magnitude with the phase in degrees that may follow it."""
        phase = self.number(self.items.pop(0)) if self.value_next() else 0.0
        self.ac = cmath.rect(magnitude, math.radians(phase)) if phase else complex(magnitude)

    def value_next(self) -> bool:
        if not self.items:
            return False
        item = self.items[0]
        if isinstance(item, Word):
            text = item.text
            return (
                text.lower() in self.scope.parameters
                or parse_number(text, leading_letter=False) is not None
            )
        return isinstance(item, Formula)

    def transient(self, word: Word) -> None:
        if self.items and isinstance(self.items[0], Group):
            group = self.items.pop(0)
            assert isinstance(group, Group)
            self.evaluate(word.text.lower(), word, group.items)
            return
        arguments: list[Item] = []
        while self.value_next():
            arguments.append(self.items.pop(0))
        self.evaluate(word.text.lower(), word, arguments)

    def evaluate(self, name: str, word: Word, items: Sequence[Item]) -> None:
        name = "sin" if name == "sine" else name
        self.function = name
        if name == "pwl" and any(isinstance(item, Assignment) for item in items):
            items = [item for item in items if not isinstance(item, Assignment)]
        values = [self.number(item) for item in items if isinstance(item, Word | Formula)]
        if not values:
            raise fault(
                "element-incomplete",
                f"{self.statement.name.text}: {name} has no values",
                self.statement.span(word),
                f"Write the values in parentheses behind {name}.",
            )
        self.at_zero = at_time_zero(name, values)


def at_time_zero(name: str, values: Sequence[float]) -> float:
    """Value of a transient function at time zero, with ngspice's argument order."""

    def argument(index: int) -> float:
        return values[index] if index < len(values) else 0.0

    if name == "sin":
        offset, amplitude, frequency, delay, damping, phase = (argument(i) for i in range(6))
        elapsed = max(-delay, 0.0)
        angle = 2 * math.pi * frequency * elapsed + math.radians(phase)
        return offset + amplitude * math.sin(angle) * math.exp(-min(elapsed * damping, 700.0))
    if name == "sffm":
        offset, amplitude, _, index, _, carrier, signal = (argument(i) for i in range(7))
        inner = index * math.sin(math.radians(signal))
        return offset + amplitude * math.sin(math.radians(carrier) + inner)
    if name == "pwl":
        return _piecewise_linear(values)
    # A pulse and an exponential begin at their first value; the others at zero.
    return values[0] if name in ("pulse", "exp") else 0.0


def _piecewise_linear(values: Sequence[float]) -> float:
    times, levels = values[::2], values[1::2]
    if not levels:
        return 0.0
    previous = (times[0], levels[0])
    for time, level in zip(times, levels, strict=False):
        if time > 0:
            start, value = previous
            if start > 0 or time == start:
                return value
            return value + (level - value) * (0.0 - start) / (time - start)
        previous = (time, level)
    return previous[1]
