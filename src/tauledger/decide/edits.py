"""New numbers in a netlist, held against the circuit they are to give.

An edit is tried on the statements before any byte is written: the netlist is expanded anew, and
every element has to come out as before but for the capacitors that were to change.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

from tauledger.circuit import flatten
from tauledger.circuit.completion import add_models
from tauledger.circuit.elements import Capacitor, Circuit, Element
from tauledger.circuit.generic import generic_models
from tauledger.configuration.settings import PathSettings
from tauledger.decide.spelling import written_like
from tauledger.decide.whereabouts import Place, place_of, unwritten
from tauledger.netlist import Netlist, Subcircuit
from tauledger.netlist.source import LogicalLine
from tauledger.netlist.statements import Assignment, Statement, parse_statement
from tauledger.problems import Problem, ProblemError
from tauledger.records import dataclass

_SHOWN = 4


@dataclass(frozen=True, slots=True)
class Edit:
    """One number of a netlist to be written anew."""

    place: Place
    text: str


def edits_for(
    netlist: Netlist,
    settings: PathSettings | None,
    wanted: Iterable[tuple[Capacitor, float]],
) -> list[Edit]:
    """The edits that give each capacitor its new value in F, and change nothing else.

    Raises ProblemError with every value that cannot be written so.
    """
    problems: list[Problem] = []
    places: dict[tuple[str, int, int], tuple[Place, dict[Capacitor, float]]] = {}
    for element, value_f in wanted:
        try:
            place = place_of(netlist, element)
            places.setdefault(place.key, (place, {}))[1][element] = value_f
        except ProblemError as error:
            problems += error.problems
    before = _flat(netlist, settings) if places else None
    edits = []
    for place, values in places.values():
        edit = Edit(place, written_like(next(iter(values.values())), place.text))
        try:
            assert before is not None
            _check(before, _flat(_edited(netlist, edit), settings), edit, values)
        except ProblemError as error:
            problems += error.problems
        edits.append(edit)
    if problems:
        raise ProblemError(*problems)
    return edits


def _flat(netlist: Netlist, settings: PathSettings | None) -> Circuit:
    """The whole flat circuit, with the models that the analysis had."""
    if settings is None:
        return flatten(netlist)
    substitute = generic_models(settings.generic.kinds) if settings.generic else None
    return flatten(add_models(netlist, settings), substitute)


# What an edit does --------------------------------------------------------------------------------


def _check(before: Circuit, after: Circuit, edit: Edit, values: Mapping[Capacitor, float]) -> None:
    """Raise ProblemError when anything but the wanted values comes of an edit."""
    first = next(iter(values))
    wanted = {element.name: value for element, value in values.items()}
    if len({f"{value:.9g}" for value in wanted.values()}) > 1:
        names = " and ".join(wanted)
        raise unwritten(first, f"is the same number for {names}, which are to differ", edit.place)
    if [e.name for e in before.elements] != [e.name for e in after.elements]:
        raise unwritten(first, "also decides which parts there are", edit.place)
    pairs = list(zip(before.elements, after.elements, strict=True))
    others = [new.name for old, new in pairs if new.name not in wanted and not _alike(old, new)]
    if others:
        names = ", ".join(others[:_SHOWN]) + (" …" if len(others) > _SHOWN else "")
        raise unwritten(first, f"{_origin(edit.place)} that also sets {names}", edit.place)
    made = {e.name: e.capacitance_f for e in after.elements if isinstance(e, Capacitor)}
    if any(abs(made[name] - value) > 1e-9 * value for name, value in wanted.items()):
        why = "is not the number written, but what m, scale, tc or another line makes of it"
        raise unwritten(first, why, edit.place)


def _origin(place: Place) -> str:
    if place.parameter:
        return f"comes from parameter {place.parameter}, a number"
    return f"stands in subcircuit {place.subcircuit}" if place.subcircuit else "is a number"


def _alike(old: Element, new: Element) -> bool:
    """Whether two are the same but for where they stand."""
    return old == new or old == replace(new, span=old.span)


# The edited netlist -------------------------------------------------------------------------------


def _edited(netlist: Netlist, edit: Edit) -> Netlist:
    """The netlist with one number written anew, wherever its file is included."""
    old = edit.place.statement
    key, new = _key(old), _rewritten(old, edit)

    def body(statements: tuple[Statement, ...]) -> tuple[Statement, ...]:
        return tuple(new if _key(entry) == key else entry for entry in statements)

    def inside(entry: Subcircuit) -> Subcircuit:
        header = new if _key(entry.header) == key else entry.header
        given = tuple(item for item in header.items if isinstance(item, Assignment))
        return replace(
            entry,
            header=header,
            parameters=given if header is new else entry.parameters,
            statements=body(entry.statements),
            subcircuits=tuple(map(inside, entry.subcircuits)),
        )

    return replace(
        netlist,
        statements=body(netlist.statements),
        subcircuits=tuple(map(inside, netlist.subcircuits)),
    )


def _key(statement: Statement) -> tuple[str, int, int]:
    row, column = statement.line.pieces[0][1:]
    return statement.line.file.path, row, column + statement.name.offset


def _rewritten(statement: Statement, edit: Edit) -> Statement:
    line, place = statement.line, edit.place
    end = place.offset + len(place.text)
    text = line.text[: place.offset] + edit.text + line.text[end:]
    shift = len(edit.text) - len(place.text)
    pieces = tuple(
        (start + shift if start > place.offset else start, row, column)
        for start, row, column in line.pieces
    )
    return parse_statement(LogicalLine(text, line.file, pieces), [])
