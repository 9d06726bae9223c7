"""Statements → blocks: subcircuit definitions nested as they stand in the file."""

from __future__ import annotations

from collections.abc import Iterable

from tauledger.netlist.codes import fault, problem
from tauledger.netlist.statements import Assignment, Statement, Word
from tauledger.problems import Problem
from tauledger.records import dataclass

MAXIMUM_DEFINITION_DEPTH = 50
"""Of .subckt inside .subckt."""


@dataclass(frozen=True, slots=True)
class Subcircuit:
    """A ``.subckt`` … ``.ends`` block."""

    header: Statement
    name: Word
    nodes: tuple[Word, ...]
    parameters: tuple[Assignment, ...]
    statements: tuple[Statement, ...]
    subcircuits: tuple[Subcircuit, ...]
    closing: Statement | None
    """Its ``.ends``, when there is one."""


@dataclass(frozen=True, slots=True)
class Netlist:
    """A netlist and all it includes: syntax only."""

    title: str
    path: str
    statements: tuple[Statement, ...]
    subcircuits: tuple[Subcircuit, ...]
    commands: tuple[Statement, ...]
    """Lines of .control blocks, unparsed and never run; they may name the outputs of interest."""
    problems: tuple[Problem, ...]
    """Errors and warnings of reading; every other line was read all the same."""


class _Open:
    """A block being collected."""

    def __init__(self, header: Statement | None) -> None:
        self.header = header
        self.statements: list[Statement] = []
        self.subcircuits: list[Subcircuit] = []


def build_netlist(
    title: str,
    path: str,
    statements: Iterable[Statement],
    commands: Iterable[Statement],
    problems: list[Problem],
) -> Netlist:
    """Nest subcircuits; problems are added to the list that reading has begun.

    Raises ProblemError when they are nested too deeply.
    """
    stack = [_Open(None)]
    for statement in statements:
        keyword = statement.keyword
        if keyword in (".subckt", ".subcircuit", ".macro"):
            if len(stack) > MAXIMUM_DEFINITION_DEPTH:
                raise fault(
                    "nesting-too-deep",
                    f".subckt nested deeper than {MAXIMUM_DEFINITION_DEPTH}",
                    statement.span(),
                    "Define the subcircuits beside each other.",
                )
            stack.append(_Open(statement))
        elif keyword in (".ends", ".eom"):
            if len(stack) > 1:
                _close(stack, statement, problems)
            else:
                problems.append(_unmatched(statement))
        else:
            stack[-1].statements.append(statement)
    while len(stack) > 1:
        header = stack[-1].header
        assert header is not None
        problems.append(
            problem(
                "subcircuit-unclosed",
                "this .subckt is not closed",
                header.span(),
                "Add .ends after its last line.",
            )
        )
        _close(stack, None, problems)
    top = stack[0]
    body, inner = tuple(top.statements), tuple(top.subcircuits)
    if not any(statement.name.text[0] != "." for statement in body):
        body, inner = _sheet(body, inner, problems)
    return Netlist(title, path, body, inner, tuple(commands), tuple(problems))


def _sheet(
    body: tuple[Statement, ...], inner: tuple[Subcircuit, ...], problems: list[Problem]
) -> tuple[tuple[Statement, ...], tuple[Subcircuit, ...]]:
    """Some exporters put the whole sheet in one .subckt without pins and never call it."""
    sheets = [subcircuit for subcircuit in inner if not subcircuit.nodes]
    if len(sheets) != 1:
        return body, inner
    sheet = sheets[0]
    problems.append(
        problem(
            "sheet-subcircuit",
            f"nothing calls subcircuit {sheet.name.text!r}, which has no pins: its body is read "
            "as the circuit",
            sheet.header.span(),
            "",
        )
    )
    others = tuple(subcircuit for subcircuit in inner if subcircuit is not sheet)
    return body + sheet.statements, others + sheet.subcircuits


def _unmatched(statement: Statement) -> Problem:
    return problem(
        "ends-unmatched",
        "this .ends closes no .subckt; it is passed over",
        statement.span(),
        "Remove it, or add the .subckt line.",
    )


def _close(stack: list[_Open], closing: Statement | None, problems: list[Problem]) -> None:
    block = stack.pop()
    header = block.header
    assert header is not None
    if not header.items or not isinstance(header.items[0], Word):
        problems.append(
            problem(
                "line-unreadable",
                "expected the subcircuit's name after .subckt",
                header.span(),
                "Write .subckt name node node …",
            )
        )
        return
    words: list[Word] = []
    parameters: list[Assignment] = []
    for item in header.items[1:]:
        if isinstance(item, Assignment):
            parameters.append(item)
        elif isinstance(item, Word):
            if item.text.lower() not in ("params:", "param:", "optional:"):
                words.append(item)
        else:
            problems.append(
                problem(
                    "line-unreadable",
                    f"did not expect {header.text_of(item)!r} in a .subckt line",
                    header.span(item),
                    "Write .subckt name node node … params: name=value",
                )
            )
    stack[-1].subcircuits.append(
        Subcircuit(
            header,
            header.items[0],
            tuple(words),
            tuple(parameters),
            tuple(block.statements),
            tuple(block.subcircuits),
            closing,
        )
    )
