"""How large a netlist must grow, found before anything is built."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

from tauledger.circuit.expansion import MAXIMUM_DEPTH, MAXIMUM_ELEMENTS, too_large
from tauledger.netlist import Netlist, Subcircuit
from tauledger.netlist.statements import Statement, Word


def check_expanded_size(netlist: Netlist) -> None:
    """Raise ProblemError when a netlist must grow past the limit.

    Every subcircuit is counted once, however often it is called. What stands inside conditionals
    is left to the running count.
    """
    _size(netlist.statements, netlist.subcircuits, {}, {}, 0)


def _size(
    statements: Sequence[Statement],
    subcircuits: Sequence[Subcircuit],
    known: Mapping[str, Subcircuit],
    sizes: dict[int, int],
    depth: int,
) -> int:
    """Elements and calls of a block, ``sizes`` being those of subcircuits (by id) so far."""
    if subcircuits:
        # Reversed, since of two with one name the first counts.
        known = {**known, **{entry.name.text.lower(): entry for entry in reversed(subcircuits)}}
    total = 0
    for statement in _unconditional(statements):
        total += 1
        called = _called(statement, known)
        if called is not None and depth < MAXIMUM_DEPTH:
            if id(called) not in sizes:
                size = _size(called.statements, called.subcircuits, known, sizes, depth + 1)
                sizes[id(called)] = size
            total += sizes[id(called)]
        if total > MAXIMUM_ELEMENTS:
            raise too_large(statement.span())
    return total


def _unconditional(statements: Sequence[Statement]) -> Iterator[Statement]:
    """The elements outside ``.if`` … ``.endif``."""
    level = 0
    for statement in statements:
        if statement.name.text[0] == ".":
            level += (statement.keyword == ".if") - (statement.keyword == ".endif")
        elif level == 0:
            yield statement


def _called(statement: Statement, known: Mapping[str, Subcircuit]) -> Subcircuit | None:
    if statement.name.text[0] not in "xX":
        return None
    for item in reversed(statement.items):
        if isinstance(item, Word) and not item.text.endswith(":"):
            return known.get(item.text.lower())
    return None
