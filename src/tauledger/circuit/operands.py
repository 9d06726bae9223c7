"""The items of a statement sorted by what they are, before their meaning is known."""

from __future__ import annotations

from tauledger.netlist.codes import fault
from tauledger.netlist.statements import Assignment, Group, Item, Statement, Table, Word
from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class Operands:
    """Positional items in order, and assignments by lower-case name (the last one counts)."""

    positional: tuple[Item, ...]
    named: dict[str, Assignment]


def operands(statement: Statement) -> Operands:
    """Sort what follows the statement's name."""
    positional: list[Item] = []
    named: dict[str, Assignment] = {}
    for item in statement.items:
        if isinstance(item, Assignment):
            named[item.name.text.lower()] = item
        else:
            positional.append(item)
    return Operands(tuple(positional), named)


def node_words(statement: Statement, count: int, form: str) -> list[Word]:
    """The first ``count`` items as node names; raises ProblemError when there are fewer."""
    words: list[Word] = []
    for item in statement.items[:count]:
        if not isinstance(item, Word):
            raise fault(
                "line-unreadable",
                f"expected a node name, found {statement.text_of(item)!r}",
                statement.span(item),
                f"Write it as: {form}",
            )
        words.append(item)
    if len(words) < count:
        raise fault(
            "element-incomplete",
            f"{statement.name.text}: expected {count} nodes, found {len(words)}",
            statement.span(),
            f"Write it as: {form}",
        )
    return words


def ungrouped(items: tuple[Item, ...]) -> list[Item]:
    """Items with the parentheses round node pairs taken off."""
    flat: list[Item] = []
    for item in items:
        if isinstance(item, Group):
            flat.extend(item.items)
        elif isinstance(item, Table):
            flat.extend((item.formula, item.group))
        else:
            flat.append(item)
    return flat


def is_word(item: Item | None, text: str) -> bool:
    """Whether an item is this word, given in lower case."""
    return isinstance(item, Word) and item.text.lower() == text
