"""Elements that cannot be read, set aside until it is known whether their circuit matters.

Only those whose words are all that can join them to others: parts, transistors and calls of the
top level. A source may be the one that drives the path, and a controlled one reaches further than
its own nodes; with them nothing is set aside. Neither is a call of a subcircuit that is there: a
coupling inside may reach an inductor outside.
"""

from __future__ import annotations

from collections.abc import Iterator

from tauledger.circuit.elements import Unread
from tauledger.circuit.expansion import MAXIMUM_PROBLEMS, Expansion
from tauledger.circuit.scope import Scope
from tauledger.netlist.statements import Statement, Word
from tauledger.problems import ProblemError

_FEWEST_NODES = {"r": 2, "c": 2, "l": 2, "d": 2, "q": 3, "j": 3, "m": 3}
_OF_PARTS = frozenset(
    (
        *("value-unreadable", "value-missing", "value-range", "value-decimal-comma"),
        "model-missing",
    )
)
_CODES = {**dict.fromkeys(_FEWEST_NODES, _OF_PARTS), "x": frozenset(("subcircuit-missing",))}
"""What may be wrong with an element that is set aside, by its letter."""


class Aside:
    """Mutable while :func:`tauledger.circuit.flatten` runs; gone afterwards."""

    def __init__(self) -> None:
        self._found: list[tuple[Statement, ProblemError]] = []

    def take(self, scope: Scope, statement: Statement, error: ProblemError) -> bool:
        """Whether the error can wait; it is then kept here."""
        codes = _CODES.get(statement.name.text[0].lower(), frozenset())
        waits = (
            not scope.prefix
            and all(entry.code in codes for entry in error.problems)
            and len(self._found) < MAXIMUM_PROBLEMS
        )
        if waits:
            self._found.append((statement, error))
        return waits

    def settle(self, run: Expansion, scope: Scope, keep: bool) -> tuple[Unread, ...]:
        """What was kept, as elements with the nodes they may have; or as errors of the run.

        They become errors when ``keep`` is false, when others stop the reading anyway, or when a
        name is that of another element. Raises ProblemError as :meth:`Expansion.absorb` does.
        """
        names = [statement.name.text.lower() for statement, _ in self._found]
        twice = len(set(names)) < len(names) or any(run.has_element(name) for name in names)
        if not keep or run.has_errors or twice:
            for _, error in self._found:
                run.absorb(error)
            return ()
        return tuple(
            Unread(
                statement.name.text,
                tuple(dict.fromkeys(_touched(run, scope, statement))),
                statement.span(),
                error.problems,
            )
            for statement, error in self._found
        )


def _touched(run: Expansion, scope: Scope, statement: Statement) -> Iterator[str]:
    """Its nodes for certain, then every other word that is a node: which is the model, who knows.

    A call reaches global nodes as well.
    """
    letter = statement.name.text[0].lower()
    words = [item.text for item in statement.items if isinstance(item, Word)]
    certain = _FEWEST_NODES.get(letter, len(words) - 1)
    for place, word in enumerate((*words, *(run.globals if letter == "x" else ()))):
        node = run.find_node(word, scope)
        if node is not None or place < certain:
            yield node or word.lower()
