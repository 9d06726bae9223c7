"""Dot statements that set the stage: temperature, options, sweep, outputs, initial guesses."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import field

from tauledger.circuit.expansion import Expansion
from tauledger.circuit.operands import operands
from tauledger.circuit.plausible import check_temperature
from tauledger.circuit.scope import Scope
from tauledger.netlist.codes import fault, problem
from tauledger.netlist.statements import Call, Item, Statement, Word
from tauledger.problems import Problem, ProblemError
from tauledger.records import dataclass

OUTPUTS = frozenset(
    (
        *(".print", ".probe", ".save", ".plot", ".meas", ".measure", ".tf", ".four", ".noise"),
        # the same as commands of a .control block
        *(
            "print",
            "plot",
            "save",
            "meas",
            "measure",
            "tf",
            "wrdata",
            "gnuplot",
            "asciiplot",
        ),
    )
)
GUESSES = frozenset((".ic", ".nodeset"))
IGNORED = frozenset(
    (
        # other analyses
        *(".op", ".dc", ".tran", ".fourier", ".disto", ".pz", ".sens", ".sp"),
        *(".pss", ".step", ".alter", ".wcase", ".mc", ".stim", ".distribution", ".net"),
        # how results are kept or shown
        *(".width", ".backanno", ".wave", ".savebias", ".loadbias", ".data", ".enddata", ".text"),
        *(".title", ".if", ".elseif", ".else", ".endif"),
    )
)
_VOLTAGE = re.compile(r"(?<![A-Za-z0-9_])v(?:r|i|m|p|db|g)?\s*\(", re.I)
_COMPLAINTS = 5
"""About missing nodes of one statement."""
_LONGEST_NODE = 500
_GUESS_VALUE = re.compile(r"\s*=\s*(\{[^{}]*\}|'[^']*'|[^\s,]+)")


@dataclass(slots=True)
class Directives:
    """What the dot statements of the top level say."""

    hints: list[tuple[str, ...]] = field(default_factory=list)
    ac_range_hz: tuple[float, float] | None = None
    gmin: float = 1e-12
    node_sets: dict[str, float] = field(default_factory=dict)
    initial_conditions: dict[str, float] = field(default_factory=dict)


def read_settings(run: Expansion, scope: Scope, statement: Statement, found: Directives) -> None:
    """``.temp`` and ``.options``: needed before any element is built."""
    if statement.keyword == ".temp":
        if statement.items:
            run.temperature_c = _temperature(run, scope, statement, statement.items[0])
        return
    named = operands(statement).named
    for name, item in named.items():
        if name == "temp":
            run.temperature_c = _temperature(run, scope, statement, item.value)
        elif name == "tnom":
            run.nominal_temperature_c = _temperature(run, scope, statement, item.value)
        elif name == "gmin":
            found.gmin = _gmin(run, scope, statement, item.value)


def _temperature(run: Expansion, scope: Scope, statement: Statement, item: Item | Call) -> float:
    value = run.number(item, scope, statement)
    check_temperature(run, statement, item, value)
    return value


def _gmin(run: Expansion, scope: Scope, statement: Statement, item: Item | Call) -> float:
    value = run.number(item, scope, statement)
    if value < 0.0:
        raise fault(
            "value-unusable",
            f"{statement.name.text}: GMIN is {value:g} S; expected zero or above, since a negative "
            "conductance across every junction feeds power into the circuit",
            statement.span(item),
            "Write a small conductance such as gmin=1e-12, or leave it out.",
        )
    return value


def read_directive(run: Expansion, scope: Scope, statement: Statement, found: Directives) -> None:
    """The others: after the elements, so that node names are known."""
    keyword = statement.keyword
    if keyword in OUTPUTS:
        found.hints.extend(_hints(run, scope, statement))
    elif keyword in GUESSES:
        target = found.node_sets if keyword == ".nodeset" else found.initial_conditions
        _guesses(run, scope, statement, target)
    elif keyword == ".ac":
        found.ac_range_hz = _sweep(run, scope, statement)
    elif keyword not in IGNORED:
        run.warn(
            "directive-unknown",
            f"{keyword} is not known here and is left out",
            statement.span(),
            "Check its spelling.",
        )


def read_command(run: Expansion, scope: Scope, statement: Statement, found: Directives) -> None:
    """A line of a .control block: only what it shows and the range it sweeps are of interest."""
    keyword = statement.keyword
    try:
        if keyword in OUTPUTS:
            found.hints.extend(_hints(run, scope, statement))
        elif keyword == "ac" and found.ac_range_hz is None:
            found.ac_range_hz = _sweep(run, scope, statement)
    except ProblemError:
        return  # a command may use variables that exist only while it runs


def _hints(run: Expansion, scope: Scope, statement: Statement) -> Iterator[tuple[str, ...]]:
    text = statement.tail()
    found, complaints = False, 0
    for match in _VOLTAGE.finditer(text):
        inside, end = parenthesised(text, match.end() - 1)
        parts = [part.strip() for part in _split(inside)]
        names = [(part, run.find_node(part, scope)) for part in parts]
        # v(*) and the like ask for every node, which hints at none.
        missing = [part for part, flat in names if flat is None and "*" not in part]
        found = True
        if complaints == _COMPLAINTS:
            return
        if missing and statement.keyword[0] == ".":
            complaints += 1
            word = Word(text[match.start() : end], statement.name.end + match.start())
            run.report([_no_node(statement, missing[0], word)])
        elif names and None not in [flat for _, flat in names]:
            yield tuple(flat for _, flat in names if flat is not None)
    if found or statement.keyword not in (".save", ".probe", "save", "plot"):
        return
    for bare in text.split():
        name = run.find_node(bare, scope)
        if name is not None and name != "0":
            yield (name,)


def _no_node(statement: Statement, name: str, word: Word) -> Problem:
    return problem(
        "node-missing",
        f"{statement.keyword}: no node {name!r}",
        statement.span(word),
        "Correct the name, or remove the request.",
    )


def _split(inside: str) -> list[str]:
    return inside.split(",") if "," in inside else inside.split()


def parenthesised(text: str, start: int) -> tuple[str, int]:
    """What stands in the parentheses that open at ``start``, and where they end.

    Node names may hold parentheses themselves: ``v(Net-(Q1-C))``.
    """
    depth = 0
    for position in range(start, min(start + _LONGEST_NODE, len(text))):
        if text[position] == "(":
            depth += 1
        elif text[position] == ")":
            depth -= 1
            if depth == 0:
                return text[start + 1 : position], position + 1
    end = min(start + _LONGEST_NODE, len(text))
    return text[start + 1 : end], end


def _guesses(run: Expansion, scope: Scope, statement: Statement, target: dict[str, float]) -> None:
    text = statement.tail()
    for match in _VOLTAGE.finditer(text):
        inside, end = parenthesised(text, match.end() - 1)
        value = _GUESS_VALUE.match(text, end)
        node = run.find_node(inside.strip(), scope)
        where = Word(text[match.start() : end], statement.name.end + match.start())
        if value is None:
            raise fault(
                "value-missing",
                f"{statement.keyword}: no value behind the node",
                statement.span(where),
                f"Write {statement.keyword} v(node)=value.",
            )
        if node is None:
            run.report([_no_node(statement, inside.strip(), where)])
            continue
        word = Word(value[1], statement.name.end + value.start(1))
        target[node] = run.written_number(word, scope, statement)


def _sweep(run: Expansion, scope: Scope, statement: Statement) -> tuple[float, float] | None:
    words = [
        Word(match[0], statement.name.end + match.start())
        for match in re.finditer(r"[^\s,]+", statement.tail())
    ]
    if len(words) < 4 or words[0].text.lower() not in ("dec", "oct", "lin"):
        raise fault(
            "line-unreadable",
            "expected .ac dec, oct or lin, the number of points, first and last frequency",
            statement.span(),
            "Write it as: .ac dec 10 1 1Meg",
        )
    start, stop = (run.written_number(word, scope, statement) for word in words[2:4])
    if not 0 < start < stop:
        run.warn(
            "value-out-of-range",
            f".ac from {start:g} to {stop:g} Hz; expected the lower frequency first, above zero",
            statement.span(words[2]),
            "Correct the two frequencies.",
        )
        return None
    return start, stop
