"""What names mean at one place of the hierarchy: parameters, functions, models, subcircuits.

As in ngspice (seen with ngspice-39), a parameter not known in a subcircuit is looked up where the
subcircuit is called, and so on up to the top; functions, models and subcircuits are looked up
where the subcircuit is defined.
"""

from __future__ import annotations

from collections import ChainMap
from collections.abc import MutableMapping
from dataclasses import field

from tauledger.circuit.elements import Model
from tauledger.circuit.evaluate import UserFunction
from tauledger.netlist import Subcircuit
from tauledger.netlist.statements import Statement
from tauledger.records import dataclass


@dataclass(slots=True)
class Scope:
    """One instance of a block, while it is being expanded. Keys are lower case."""

    prefix: str
    parameters: ChainMap[str, float]
    functions: ChainMap[str, UserFunction]
    models: ChainMap[str, ModelCard]
    subcircuits: ChainMap[str, tuple[Subcircuit, Scope]]
    """With the scope in which each is defined."""
    nodes: dict[str, str]
    """Local spelling → flat node; ports are put in before the body is read."""
    depth: int = 0

    def inner(
        self, home: Scope, prefix: str, nodes: dict[str, str], *, parameters: bool, names: bool
    ) -> Scope:
        """The scope of a subcircuit called here and defined in ``home``.

        What the body does not define (``parameters``; ``names`` are functions, models and
        subcircuits) is shared with those two: long chains of empty maps would cost much time.
        """
        return Scope(
            prefix,
            self.parameters.new_child() if parameters else self.parameters,
            home.functions.new_child() if names else home.functions,
            home.models.new_child() if names else home.models,
            home.subcircuits.new_child() if names else home.subcircuits,
            nodes,
            self.depth + 1,
        )


def top_scope() -> Scope:
    """The scope of the netlist itself: no prefix, no names yet."""
    return Scope("", ChainMap(), ChainMap(), ChainMap(), ChainMap(), {})


@dataclass(slots=True)
class ModelCard:
    """A ``.model`` statement in its scope; read when first used, since it may never be."""

    statement: Statement
    scope: Scope
    cache: MutableMapping[str, Model] = field(default_factory=dict)
