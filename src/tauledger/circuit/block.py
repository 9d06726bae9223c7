"""The statements of the netlist or of one subcircuit, sorted by what they are for."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from tauledger.netlist import Subcircuit
from tauledger.netlist.statements import Statement, Word
from tauledger.records import dataclass

DEFINITIONS = frozenset((".param", ".params", ".parameters", ".func", ".csparam"))
"""Statements that give names a value or a formula."""


@dataclass(slots=True)
class Block:
    """Statements by purpose, each list in the order of the file.

    Where there are conditionals, only ``conditional`` and ``subcircuits`` are filled: what counts
    is known when the conditions are.
    """

    definitions: list[Statement]
    models: list[Statement]
    settings: list[Statement]
    directives: list[Statement]
    elements: list[Statement]
    conditional: list[Statement]
    """All statements in order, when there are conditionals among them."""
    subcircuits: tuple[Subcircuit, ...]

    @classmethod
    def of(cls, statements: Sequence[Statement], subcircuits: tuple[Subcircuit, ...]) -> Block:
        """Sort the statements of the top level, or of one body."""
        block = cls([], [], [], [], [], [], subcircuits)
        for statement in statements:
            block.put(statement)
        if any(statement.keyword == ".if" for statement in block.directives):
            block = cls([], [], [], [], [], list(statements), subcircuits)
        return block

    @property
    def defines_names(self) -> bool:
        """Whether a scope of its own is needed for parameters, models or subcircuits."""
        return bool(self.definitions or self.models or self.subcircuits or self.conditional)

    def put(self, statement: Statement) -> None:
        """Sort in one statement; ``.global`` is not kept (see :func:`global_nodes`)."""
        if statement.name.text[0] != ".":
            self.elements.append(statement)
            return
        keyword = statement.keyword
        if keyword in DEFINITIONS:
            self.definitions.append(statement)
        elif keyword == ".model":
            self.models.append(statement)
        elif keyword in (".temp", ".option", ".options", ".opt"):
            self.settings.append(statement)
        elif keyword != ".global":
            self.directives.append(statement)


def global_nodes(statements: Sequence[Statement]) -> Iterator[str]:
    """Names in ``.global`` lines, in lower case."""
    for statement in statements:
        if statement.keyword == ".global":
            for item in statement.items:
                if isinstance(item, Word):
                    yield item.text.lower()
