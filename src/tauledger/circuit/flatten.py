"""Netlist → flat :class:`Circuit`: every subcircuit expanded, parameter evaluated, model found."""

from __future__ import annotations

from collections import ChainMap
from collections.abc import Callable, Sequence
from typing import TypeVar

from tauledger.circuit import controlled, passives, sources
from tauledger.circuit.aside import Aside
from tauledger.circuit.block import Block, global_nodes
from tauledger.circuit.conditionals import decide
from tauledger.circuit.directives import (
    Directives,
    read_command,
    read_directive,
    read_settings,
)
from tauledger.circuit.elements import Circuit
from tauledger.circuit.expanded_size import check_expanded_size
from tauledger.circuit.expansion import (
    MAXIMUM_DEPTH,
    WORK_OF_CALL,
    WORK_OF_CONDITIONAL_CALL,
    WORK_OF_DEFINITION,
    Expansion,
    Substitute,
    ignored,
)
from tauledger.circuit.parameters import Definition, assigned_text, collect, resolve
from tauledger.circuit.scope import ModelCard, Scope, top_scope
from tauledger.circuit.semiconductors import semiconductor
from tauledger.circuit.unused import without_unused
from tauledger.netlist import Netlist, Subcircuit
from tauledger.netlist.codes import fault, problem
from tauledger.netlist.statements import Assignment, Statement, Word
from tauledger.problems import Problem, ProblemError

T = TypeVar("T")

_FEWEST_OF_A_LINE = 4
"""Nodes of a transmission line."""
Builder = Callable[[Expansion, Scope, Statement], None]

_LEFT_OUT = {
    "t": "transmission lines are not supported",
    "o": "transmission lines are not supported",
    "y": "transmission lines are not supported",
    "p": "it reads as a connector or a coupled line",
    "s": "switches are not supported",
    "w": "switches are not supported",
    "a": "code models are not supported",
    "n": "compiled models are not supported",
    "z": "this kind of transistor is not supported",
    "u": "it reads as an integrated circuit or a distributed line; call a subcircuit with X",
}


def flatten(
    netlist: Netlist, substitute: Substitute | None = None, *, keep_unread: bool = False
) -> Circuit:
    """Expand a netlist; ``substitute`` gives what stands in for a missing model, if anything.

    Raises ProblemError with every error found, those of reading included, when there is any;
    warnings and notes go into :attr:`Circuit.problems`. With ``keep_unread`` the errors of single
    elements that may belong to a circuit apart go into :attr:`Circuit.unread` instead, when there
    are no others; :func:`tauledger.circuit.islands.restrict` then judges them.
    """
    run = Expansion()
    run.substitute = substitute
    aside = Aside()
    run.put_aside = aside.take
    found = Directives()
    scope = top_scope()
    block = Block.of(netlist.statements, netlist.subcircuits)
    check_expanded_size(netlist)
    run.globals.update(global_nodes(netlist.statements))
    active = _enter(run, scope, block, {}, [])
    _attempt_each(run, scope, active.settings, lambda r, s, t: read_settings(r, s, t, found))
    _expand(run, scope, active)
    elements = run.finish()
    unread = aside.settle(run, scope, keep_unread)
    run.report(without_unused(netlist, run.blocks))
    for place, statement in run.directives:
        _attempt_each(run, place, [statement], lambda r, s, t: read_directive(r, s, t, found))
    _attempt_each(run, scope, netlist.commands, lambda r, s, t: read_command(r, s, t, found))
    if not elements and not unread and not run.has_errors:
        run.report([_empty(netlist.path)])
    if run.has_errors:
        raise ProblemError(*run.listed_problems(netlist.path))
    return Circuit(
        netlist.title,
        netlist.path,
        elements,
        run.temperature_c,
        run.nominal_temperature_c,
        found.gmin,
        tuple(dict.fromkeys(found.hints)),
        found.ac_range_hz,
        found.node_sets,
        found.initial_conditions,
        run.listed_problems(netlist.path),
        unread=unread,
    )


def _empty(path: str) -> Problem:
    return problem(
        "circuit-empty",
        f"{path}: no element in the netlist",
        None,
        "Export the schematic again, with its parts.",
    )


def _attempt_each(
    run: Expansion, scope: Scope, statements: Sequence[Statement], action: Builder
) -> None:
    for statement in statements:
        try:
            action(run, scope, statement)
        except ProblemError as error:
            run.absorb(error)


def _enter(
    run: Expansion,
    scope: Scope,
    block: Block,
    overrides: dict[str, float],
    defaults: list[Definition],
) -> Block:
    """Make the block's names known in its scope; returns it with its conditionals decided."""
    run.count_work(
        (WORK_OF_CONDITIONAL_CALL if block.conditional else WORK_OF_CALL)
        + len(block.subcircuits)
        + len(block.models)
        + len(block.directives)
        + WORK_OF_DEFINITION * (len(defaults) + len(block.definitions) + len(block.conditional))
    )
    for subcircuit in block.subcircuits:
        _define(run, scope.subcircuits, subcircuit.header, subcircuit.name, (subcircuit, scope))
    if block.conditional:
        chosen = decide(run, scope, block.conditional, overrides, defaults)
        block = Block.of(chosen, block.subcircuits)
    else:
        resolve(run, scope, defaults + collect(run, scope, block.definitions), overrides)
    for statement in block.models:
        name = statement.items[0] if statement.items else None
        if isinstance(name, Word) and len(statement.items) > 1:
            _define(run, scope.models, statement, name, ModelCard(statement, scope))
        else:
            run.report([_nameless_model(statement)])
    return block


def _nameless_model(statement: Statement) -> Problem:
    return problem(
        "line-unreadable",
        "expected a name and a type after .model",
        statement.span(),
        "Write it as: .model name type(parameter=value …)",
    )


def _define(
    run: Expansion, table: ChainMap[str, T], statement: Statement, name: Word, entry: T
) -> None:
    """Of two definitions of one name in one place the first counts, as in ngspice."""
    first = table.maps[0].setdefault(name.text.lower(), entry)
    if first is not entry:
        run.warn(
            "definition-repeated",
            f"{statement.keyword} {name.text!r} is defined before; the first one counts",
            statement.span(name),
            "Remove one of them, or rename it.",
        )


def _expand(run: Expansion, scope: Scope, block: Block) -> None:
    builders = _BUILDERS
    run.directives.extend((scope, statement) for statement in block.directives)
    for statement in block.elements:
        if id(statement) in run.failed:
            continue  # in another instance of the same subcircuit
        builder = builders.get(statement.name.text[0].lower(), _unknown)
        try:
            builder(run, scope, statement)
        except ProblemError as error:
            if not run.put_aside(scope, statement, error):
                run.absorb(error)
            run.failed.add(id(statement))


def _unknown(run: Expansion, scope: Scope, statement: Statement) -> None:
    letter = statement.name.text[0].lower()
    last = statement.items[-1] if statement.items else None
    if letter == "u" and isinstance(last, Word) and last.text.lower() in scope.subcircuits:
        _call(run, scope, statement)
        return
    if letter == "t" and len(statement.items) < _FEWEST_OF_A_LINE:
        run.leave_out(statement, "it reads as a test point or a transformer", scope)
        return
    if letter in _LEFT_OUT:
        run.leave_out(statement, _LEFT_OUT[letter], scope)
        return
    raise fault(
        "line-unreadable",
        f"no element begins with {statement.name.text[0]!r}",
        statement.span(),
        'Begin the line with "*" if it is a comment, or with "+" if it continues the one above.',
    )


def _call(run: Expansion, scope: Scope, statement: Statement) -> None:
    """An X element: bind nodes and parameters, then expand the body."""
    if _is_connector(scope, statement):
        run.leave_out(statement, "it reads as a connector", scope)
        return
    name, (subcircuit, home), given = _called(run, scope, statement)
    _check_call(scope, statement, name, subcircuit, given)
    _warn_multiplier(run, statement, subcircuit)
    ports = dict(
        zip((word.text.lower() for word in subcircuit.nodes), run.nodes(given, scope), strict=True)
    )
    overrides = {
        item.name.text.lower(): run.number(item.value, scope, statement)
        for item in statement.items
        if isinstance(item, Assignment)
    }
    run.count_call(statement.span())
    block = run.blocks.get(id(subcircuit))
    if block is None:
        block = Block.of(subcircuit.statements, subcircuit.subcircuits)
        run.blocks[id(subcircuit)] = block
    inner = scope.inner(
        home,
        scope.prefix + statement.name.text + ".",
        ports,
        parameters=bool(overrides or subcircuit.parameters or block.defines_names),
        names=block.defines_names,
    )
    header = subcircuit.header
    defaults = [
        Definition(item.name.text.lower(), *assigned_text(item, header), header)
        for item in subcircuit.parameters
    ]
    _expand(run, inner, _enter(run, inner, block, overrides, defaults))


def _is_connector(scope: Scope, statement: Statement) -> bool:
    """An X element of no known subcircuit whose name or designator is a connector's."""
    words = [item.text.lower() for item in statement.items if isinstance(item, Word)]
    if not words or words[-1] in scope.subcircuits:
        return False
    return words[-1].startswith("conn") or statement.name.text.lower().startswith(("xj", "xp"))


def _called(
    run: Expansion, scope: Scope, statement: Statement
) -> tuple[Word, tuple[Subcircuit, Scope], list[Word]]:
    """The subcircuit's name, its definition with its scope, and the nodes given."""
    words = [
        item
        for item in statement.items
        if isinstance(item, Word) and item.text.lower() not in ("params:", "param:")
    ]
    if not words:
        raise fault(
            "element-incomplete",
            f"{statement.name.text}: expected nodes and the name of a subcircuit",
            statement.span(),
            "Write it as: Xname node node … subcircuit",
        )
    name = words.pop()
    definition = scope.subcircuits.get(name.text.lower())
    if definition is None:
        raise fault(
            "subcircuit-missing",
            f"{statement.name.text}: no subcircuit {name.text!r}"
            + run.near_names(name.text, scope.subcircuits),
            statement.span(name),
            "Add its .subckt lines, or include the file that holds them.",
        )
    return name, definition, words


def _check_call(
    scope: Scope, statement: Statement, name: Word, subcircuit: Subcircuit, given: list[Word]
) -> None:
    expected = subcircuit.nodes
    if len(given) != len(expected):
        raise fault(
            "subcircuit-nodes",
            f"{statement.name.text}: {len(given)} nodes; subcircuit {name.text!r} has "
            f"{len(expected)} ({' '.join(node.text for node in expected[:20])})",
            statement.span(),
            "Give as many nodes as the .subckt line.",
        )
    if scope.depth >= MAXIMUM_DEPTH:
        raise fault(
            "circuit-too-large",
            f"subcircuits call each other more than {MAXIMUM_DEPTH} deep",
            statement.span(),
            "A subcircuit that calls itself never ends; remove the call.",
        )


def _warn_multiplier(run: Expansion, statement: Statement, subcircuit: Subcircuit) -> None:
    """``m=`` on a call multiplies every device inside in ngspice; that is not done here."""
    declared = {item.name.text.lower() for item in subcircuit.parameters}
    for item in statement.items:
        if isinstance(item, Assignment) and item.name.text.lower() == "m" and "m" not in declared:
            ignored(run, statement, item)


_BUILDERS: dict[str, Builder] = {
    "r": passives.resistor,
    "c": passives.capacitor,
    "l": passives.inductor,
    "k": passives.coupling,
    "v": sources.source,
    "i": sources.source,
    "e": controlled.controlled,
    "f": controlled.controlled,
    "g": controlled.controlled,
    "h": controlled.controlled,
    "b": controlled.behavioural,
    "d": semiconductor,
    "q": semiconductor,
    "j": semiconductor,
    "m": semiconductor,
    "x": _call,
}
