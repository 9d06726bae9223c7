"""Where the value of a capacitor is written: on its line, on a .param line, or where its
subcircuit is called.

A bare parameter name leads on to where the parameter has its number, as the netlist's own rules
look it up: where the subcircuit is called, in its body, on its .subckt line, and so on in the
caller (:mod:`tauledger.circuit.scope`).
"""

from __future__ import annotations

import re
from collections.abc import Iterator

from tauledger.circuit.block import DEFINITIONS
from tauledger.circuit.elements import Capacitor
from tauledger.netlist import Netlist, Subcircuit
from tauledger.netlist.statements import Assignment, Formula, Statement, Word
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.quantity import parse_number
from tauledger.records import dataclass

_NAME = re.compile(r"[A-Za-z_][A-Za-z_0-9.]*")
_ROUND = {"{": "}", "'": "'", '"': '"'}
_VALUE_NAMES = ("c", "capacitance", "cap", "value")
_LONGEST_WAY = 60
"""Of parameters that name each other."""


@dataclass(frozen=True, slots=True)
class Place:
    """A number in a statement: ``offset`` counts characters of its logical line."""

    statement: Statement
    offset: int
    text: str
    parameter: str = ""
    """The one whose number it is; empty for the value on the capacitor's own line."""
    subcircuit: str = ""
    """In whose body or head it stands; empty at the top."""

    @property
    def key(self) -> tuple[str, int, int]:
        """File, line and column: the same for a file that is included twice."""
        span = self.statement.line.span(self.offset, len(self.text))
        return span.path, span.line, span.column


@dataclass(frozen=True, slots=True)
class _Block:
    """The netlist itself or one subcircuit, with the block it is defined in."""

    statements: tuple[Statement, ...]
    subcircuits: tuple[Subcircuit, ...]
    own: Subcircuit | None = None
    home: _Block | None = None

    @property
    def name(self) -> str:
        return self.own.name.text if self.own else ""

    def find(self, name: str) -> _Block | None:
        """The subcircuit of this name as seen from here."""
        block: _Block | None = self
        while block is not None:
            for entry in block.subcircuits:
                if entry.name.text.lower() == name.lower():
                    return _Block(entry.statements, entry.subcircuits, entry, block)
            block = block.home
        return None


@dataclass(frozen=True, slots=True)
class _Level:
    """One block on the way to an element, and the call that led into it."""

    block: _Block
    call: Statement | None


def place_of(netlist: Netlist, element: Capacitor) -> Place:
    """Where the number stands that gives an element its value.

    Raises ProblemError, with the line and what to do, where no single number does.
    """
    top = _Block(netlist.statements, netlist.subcircuits)
    way = next(_ways(element, element.name, (_Level(top, None),)), None)
    if way is None:
        raise unwritten(element, "is not a number on a line of the netlist")
    statement, levels = way
    for item in _value_items(statement):
        text, offset = bare(statement, item)
        found = _followed(element, statement, text, offset, levels)
        if found is not None:
            return found
    raise unwritten(element, "does not stand on its line, but in a model")


def unwritten(element: Capacitor, why: str, place: Place | None = None) -> ProblemError:
    """The refusal to write the value of an element, at the line that keeps it from it."""
    span = element.span
    if place is not None:
        span = place.statement.line.span(place.offset, len(place.text))
    return ProblemError(
        Problem(
            "patch-value",
            Severity.ERROR,
            f"the value of {element.name} {why}, so no patch is made",
            span,
            "Write its value as a number on its own line, or change it there by hand.",
        )
    )


def _ways(
    element: Capacitor, rest: str, levels: tuple[_Level, ...]
) -> Iterator[tuple[Statement, tuple[_Level, ...]]]:
    """Calls from the top down to the statement of an element, by its flat name."""
    block = levels[-1].block
    for statement in block.statements:
        name = statement.name.text
        if name.casefold() == rest.casefold():
            if _stands(statement) == (element.span.path, element.span.line, element.span.column):
                yield statement, levels
        elif name[0] in "xXuU" and rest.casefold().startswith(name.casefold() + "."):
            called = [i.text for i in statement.items if isinstance(i, Word)]
            called = [word for word in called if word.lower() not in ("params:", "param:")]
            inner = block.find(called[-1]) if called else None
            if inner is not None and len(levels) < _LONGEST_WAY:
                yield from _ways(
                    element, rest[len(name) + 1 :], (*levels, _Level(inner, statement))
                )


def _stands(statement: Statement) -> tuple[str, int, int]:
    span = statement.span()
    return span.path, span.line, span.column


def _value_items(statement: Statement) -> Iterator[Word | Formula | Assignment]:
    """What may be the value of a capacitor, in the order in which it is looked for."""
    for item in statement.items[2:]:
        if isinstance(item, Word | Formula):
            yield item
    for name in _VALUE_NAMES:
        for item in statement.items:
            if isinstance(item, Assignment) and item.name.text.lower() == name:
                yield item


def bare(statement: Statement, item: Word | Formula | Assignment) -> tuple[str, int]:
    """The text of a value without braces, quotes and blanks round it, and where it begins."""
    value = item.value if isinstance(item, Assignment) else item
    text, offset = statement.line.text[value.offset : value.end], value.offset
    while text:
        stripped = text.lstrip()
        offset += len(text) - len(stripped)
        text = stripped.rstrip()
        if len(text) < 2 or _ROUND.get(text[0]) != text[-1]:
            break
        text, offset = text[1:-1], offset + 1
    return text, offset


def _followed(
    element: Capacitor, statement: Statement, text: str, offset: int, levels: tuple[_Level, ...]
) -> Place | None:
    """From a value to its number; None for a word that is neither, as a model's name is."""
    parameter = ""
    for _ in range(_LONGEST_WAY):
        block = levels[-1].block
        place = Place(statement, offset, text, parameter, block.name)
        if _NAME.fullmatch(text):
            found = _definition(text.lower(), levels)
            if found is not None:
                parameter = text
                statement, item, levels = found
                text, offset = bare(statement, item)
                continue
        if parse_number(text) is not None:
            return place
        if parameter == "" and _NAME.fullmatch(text):
            return None
        why = f"comes from the expression {text[:60]!r}"
        raise unwritten(element, f"{why} of parameter {parameter}" if parameter else why, place)
    raise unwritten(element, "comes from parameters that name each other", place)


def _definition(
    name: str, levels: tuple[_Level, ...]
) -> tuple[Statement, Assignment, tuple[_Level, ...]] | None:
    """Where a parameter gets its value, and the levels that this place sees."""
    while levels:
        block, call = levels[-1].block, levels[-1].call
        if call is not None and (item := _assigned(call, name)):
            return call, item, levels[:-1]
        for statement in reversed(block.statements):
            if statement.keyword in DEFINITIONS and (item := _assigned(statement, name)):
                return statement, item, levels
        if block.own is not None and (item := _assigned(block.own.header, name)):
            return block.own.header, item, levels
        levels = levels[:-1]
    return None


def _assigned(statement: Statement, name: str) -> Assignment | None:
    """The last assignment of a name in a statement."""
    for item in reversed(statement.items):
        if isinstance(item, Assignment) and item.name.text.lower() == name:
            return item
    return None
