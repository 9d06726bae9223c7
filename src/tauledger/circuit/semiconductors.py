"""D, Q, J and M elements: nodes, model and instance parameters."""

from __future__ import annotations

import re

from tauledger.circuit.elements import (
    BipolarTransistor,
    Diode,
    JunctionFet,
    Model,
    MosFet,
    SemiconductorDevice,
)
from tauledger.circuit.expansion import Expansion, ignored
from tauledger.circuit.model_parameters import INITIAL_CONDITIONS, INSTANCE_PARAMETERS
from tauledger.circuit.models import need_model
from tauledger.circuit.operands import operands
from tauledger.circuit.plausible import check_temperature
from tauledger.circuit.scope import Scope
from tauledger.netlist.codes import fault
from tauledger.netlist.statements import Assignment, Formula, Item, Statement, Word

_CLASSES: dict[str, type[SemiconductorDevice]] = {
    "d": Diode, "q": BipolarTransistor, "j": JunctionFet, "m": MosFet,
}  # fmt: skip
_NODES = {"d": (2,), "q": (3, 4, 5), "j": (3,), "m": (4, 3, 5)}
_KINDS = {
    "d": ("d",),
    "q": ("npn", "pnp"),
    "j": ("njf", "pjf"),
    "m": ("nmos", "pmos", "vdmosn", "vdmosp"),
}
_LEVELS = {
    "d": (1.0,), "npn": (1.0, 2.0), "pnp": (1.0, 2.0), "njf": (1.0,), "pjf": (1.0,),
    "nmos": (1.0, 2.0, 3.0), "pmos": (1.0, 2.0, 3.0), "vdmosn": (1.0,), "vdmosp": (1.0,),
}  # fmt: skip
_FORMS = {
    "d": "Dname anode cathode model",
    "q": "Qname collector base emitter model",
    "j": "Jname drain gate source model",
    "m": "Mname drain gate source bulk model",
}
# Not 2N3904, which is a code for 2.3904 nano elsewhere and a model here.
_DECIMAL = re.compile(r"[\d.]+(?:e[+-]?\d+)?", re.I)
_FLAGS = frozenset(("off", "thermal"))


def semiconductor(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add a D, Q, J or M element with its model and instance parameters.

    One whose model level has no equations is left out with a warning. Raises ProblemError where
    nodes or model are missing or of another kind.
    """
    letter = statement.name.text[0].lower()
    given = operands(statement)
    words = [item for item in given.positional if isinstance(item, Word)]
    count = _node_count(run, scope, statement, letter, words)
    if count is None:
        return
    model = need_model(run, scope, words[count], statement)
    _check_kind(statement, letter, words[count], model)
    level = model.parameters.get("level", 1.0)
    if level not in _LEVELS[model.kind]:
        run.leave_out(
            statement,
            f"model {model.name!r} of level {level:g} is not supported",
            scope,
        )
        return
    nodes = words[:count]
    if letter == "q":
        nodes = [_without_brackets(word) for word in nodes[:4]]
    elif letter == "m":
        nodes = nodes[:3] if model.kind.startswith("vdmos") else nodes[:4]
        if len(nodes) == 3 and not model.kind.startswith("vdmos"):
            raise _incomplete(statement, letter, "three nodes, and the model needs a bulk node")
    rest = given.positional[count + 1 :]
    parameters = _instance_parameters(run, scope, statement, letter, rest, given.named)
    run.add(
        _CLASSES[letter](
            scope.prefix + statement.name.text,
            run.nodes(nodes, scope),
            statement.span(),
            model,
            parameters,
        )
    )


def _without_brackets(word: Word) -> Word:
    """A substrate node may stand in square brackets."""
    if word.text.startswith("[") and word.text.endswith("]"):
        return Word(word.text[1:-1], word.offset + 1)
    return word


def _node_count(
    run: Expansion, scope: Scope, statement: Statement, letter: str, words: list[Word]
) -> int | None:
    """How many words come before the model's name; None when the element is no device at all."""
    for count in sorted(_NODES[letter]):
        if count < len(words) and words[count].text.lower() in scope.models:
            return count
    fewest = min(_NODES[letter])
    if len(words) <= fewest:
        if letter == "j":
            run.leave_out(statement, "it reads as a connector, not as a junction FET", scope)
            return None
        raise _incomplete(statement, letter, _counted(max(len(words) - 1, 0)))
    if letter == "j" and words[-1].text.lower().startswith("conn"):
        run.leave_out(statement, "it reads as a connector, not as a junction FET", scope)
        return None
    # The model is not known: it is the last word that is neither a number nor a flag.
    last = len(words) - 1
    while last > fewest and _is_number_or_flag(words[last].text):
        last -= 1
    if letter == "j" and last > max(_NODES[letter]):
        run.leave_out(statement, "it reads as a connector, not as a junction FET", scope)
        return None
    return min(last, max(_NODES[letter]))


def _counted(nodes: int) -> str:
    return f"{nodes} node{'' if nodes == 1 else 's'} and a model"


def _is_number_or_flag(text: str) -> bool:
    return text.lower() in _FLAGS or _DECIMAL.fullmatch(text) is not None


def _incomplete(statement: Statement, letter: str, found: str) -> Exception:
    return fault(
        "element-incomplete",
        f"{statement.name.text}: found {found}",
        statement.span(),
        f"Write it as: {_FORMS[letter]}",
    )


def _check_kind(statement: Statement, letter: str, word: Word, model: Model) -> None:
    if model.kind not in _KINDS[letter]:
        raise fault(
            "model-kind",
            f"{statement.name.text}: model {word.text!r} is of type {model.kind!r}; expected "
            + " or ".join(_KINDS[letter]),
            statement.span(word),
            "Name a model of the right type.",
        )


def _instance_parameters(
    run: Expansion,
    scope: Scope,
    statement: Statement,
    letter: str,
    rest: tuple[Item, ...],
    named: dict[str, Assignment],
) -> dict[str, float]:
    parameters: dict[str, float] = {}
    for item in rest:
        if isinstance(item, Word) and item.text.lower() in _FLAGS:
            continue
        if isinstance(item, Word | Formula) and letter != "m" and "area" not in parameters:
            parameters["area"] = run.number(item, scope, statement)
        elif isinstance(item, Word | Formula):
            ignored(run, statement, item)
    for name, assignment in named.items():
        if name in INSTANCE_PARAMETERS[letter]:
            parameters[name] = run.number(assignment.value, scope, statement)
            if name == "temp":
                check_temperature(run, statement, assignment.value, parameters[name])
        elif name not in INITIAL_CONDITIONS:
            ignored(run, statement, assignment)
    return parameters
