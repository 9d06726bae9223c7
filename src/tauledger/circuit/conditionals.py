"""``.if`` … ``.elseif`` … ``.else`` … ``.endif``: which statements count."""

from __future__ import annotations

from collections.abc import Sequence

from tauledger.circuit.block import DEFINITIONS
from tauledger.circuit.expansion import Expansion
from tauledger.circuit.parameters import Definition, collect, resolve
from tauledger.circuit.scope import Scope
from tauledger.netlist.codes import fault
from tauledger.netlist.statements import Statement, Word
from tauledger.problems import Problem, ProblemError

_BRANCHES = frozenset((".if", ".elseif", ".else", ".endif"))


def decide(
    run: Expansion,
    scope: Scope,
    statements: Sequence[Statement],
    overrides: dict[str, float],
    defaults: list[Definition],
) -> list[Statement]:
    """Statements of the branches that hold; parameters of the scope are resolved on the way.

    A condition may use every parameter defined outside conditionals and those of branches
    already taken.
    """
    outside, depth = [], 0
    for statement in statements:
        depth += (statement.keyword == ".if") - (statement.keyword == ".endif")
        if depth == 0 and statement.keyword in DEFINITIONS:
            outside.append(statement)
    definitions = defaults + collect(run, scope, outside)
    resolve(run, scope, definitions, overrides, quiet=True)
    kept: list[Statement] = []
    # One entry a level: is this branch taken, has any branch been taken, is the level around live?
    levels: list[tuple[bool, bool, bool]] = []
    for statement in statements:
        keyword = statement.keyword
        live = not levels or (levels[-1][0] and levels[-1][2])
        if keyword not in _BRANCHES:
            if live:
                kept.append(statement)
                if levels and keyword in DEFINITIONS:
                    definitions = definitions + collect(run, scope, [statement])
                    resolve(run, scope, definitions, overrides, quiet=True)
        elif keyword == ".if":
            holds = live and _holds(run, scope, statement)
            levels.append((holds, holds, live))
        elif not levels:
            run.report(_unbalanced(statement))
        elif keyword == ".endif":
            levels.pop()
        else:
            _, taken, around = levels[-1]
            holds = around and not taken and (keyword == ".else" or _holds(run, scope, statement))
            levels[-1] = (holds, taken or holds, around)
    if levels:
        run.report(_unbalanced(statements[-1]))
    resolve(run, scope, definitions, overrides)
    return kept


def _unbalanced(statement: Statement) -> tuple[Problem, ...]:
    return fault(
        "conditional-unbalanced",
        f"{statement.keyword} stands where the .if and .endif lines do not match",
        statement.span(),
        "Give every .if its .endif.",
    ).problems


def _holds(run: Expansion, scope: Scope, statement: Statement) -> bool:
    raw = statement.tail()
    text = raw.strip()
    word = Word(text, statement.name.end + len(raw) - len(raw.lstrip()))
    try:
        return run.arithmetic(text, word, scope, statement) != 0.0
    except ProblemError as error:
        run.absorb(error)
        return False
