"""``.model`` cards → :class:`Model`, looked up from where the element stands."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping
from dataclasses import replace

from tauledger.circuit.elements import Model
from tauledger.circuit.expansion import Expansion
from tauledger.circuit.model_parameters import canonical, is_known, is_rating, known_names
from tauledger.circuit.plausible import check_model
from tauledger.circuit.scope import ModelCard, Scope
from tauledger.netlist.codes import fault
from tauledger.netlist.statements import Assignment, Group, Item, Statement, Word
from tauledger.problems import ProblemError

_MAXIMUM_INHERITANCE = 20
_KNOWN_KINDS = frozenset(
    ("npn", "pnp", "d", "njf", "pjf", "nmos", "pmos", "vdmos", "r", "res", "c", "cap", "l", "ind")
)
_TOLERANCES = ("dev", "lot")


def find_model(run: Expansion, scope: Scope, name: str, kinds: Collection[str]) -> Model | None:
    """The model of that name if there is one of these kinds."""
    card = scope.models.get(name.lower())
    if card is None:
        return None
    if _kind_word(card.statement) not in kinds and not _parent(card.statement):
        return None
    return read_model(run, card)


def need_model(run: Expansion, scope: Scope, word: Word, statement: Statement) -> Model:
    """The model an element names; raises ProblemError with near names when it is missing."""
    card = scope.models.get(word.text.lower())
    if card is not None:
        return read_model(run, card)
    if any(name.startswith(word.text.lower() + ".") for name in scope.models):
        raise fault(
            "model-binned",
            f"{statement.name.text}: model {word.text!r} comes in bins by size, which are not read",
            statement.span(word),
            "Name one bin, or give a model of its own.",
        )
    near = run.near_names(word.text, scope.models)
    if run.substitute is not None:
        model, found = run.substitute(word, statement)
        explained = replace(found, message=found.message + near)
        if model is None:
            raise ProblemError(explained)
        run.report([explained])
        return model
    raise fault(
        "model-missing",
        f"{statement.name.text}: no model {word.text!r}{near}",
        statement.span(word),
        "Add its .model line, include the file that holds it, or ask for a documented generic "
        "model with --generic-models.",
    )


def read_model(run: Expansion, card: ModelCard, depth: int = 0) -> Model:
    """Evaluate a card in the scope where it stands."""
    if "model" not in card.cache:
        card.cache["model"] = _read(run, card, depth)
    return card.cache["model"]


def _read(run: Expansion, card: ModelCard, depth: int) -> Model:
    statement = card.statement
    kind, items = _kind_and_items(statement)
    inherited: Mapping[str, float] = {}
    parent = _parent(statement)
    if parent:
        base = _inherited(run, card, parent, depth)
        kind, inherited = kind or base.kind, base.parameters
    flags = {item.text.lower() for item in _flat(items) if isinstance(item, Word)}
    if kind == "vdmos":
        kind = "vdmosp" if "pchan" in flags else "vdmosn"
    given = {
        canonical(kind, item.name.text.lower()): item
        for item in _flat(items)
        if isinstance(item, Assignment) and item.name.text.lower().split("/")[0] not in _TOLERANCES
    }
    numbers = _numbers(run, card, kind, given)
    check_model(run, statement, kind, given, numbers)
    parameters = {**inherited, **numbers}
    _report_unknown(run, statement, kind, parameters.get("level", 1.0), given)
    name = statement.items[0]
    assert isinstance(name, Word)
    return Model(name.text, kind, parameters, statement.span(name))


def _numbers(
    run: Expansion, card: ModelCard, kind: str, given: Mapping[str, Assignment]
) -> dict[str, float]:
    numbers: dict[str, float] = {}
    for name, item in given.items():
        try:
            numbers[name] = run.lone_number(item.value, card.scope, card.statement)
        except ProblemError as error:
            # Rating and maker's fields hold words: mfg=ACME, type=silicon.
            if name in known_names(kind) and not is_rating(name):
                run.absorb(error)
    return numbers


def _report_unknown(
    run: Expansion,
    statement: Statement,
    kind: str,
    level: float,
    given: Mapping[str, Assignment],
) -> None:
    unknown = [name for name in given if not is_known(kind, level, name) and not is_rating(name)]
    if not unknown:
        return
    shown = ", ".join(unknown[:8]) + (" …" if len(unknown) > 8 else "")
    near = run.near_names(unknown[0], known_names(kind)) if len(unknown) == 1 else ""
    run.warn(
        "model-parameter-unknown",
        f"model {statement.text_of(statement.items[0])!r}: {shown} not used, since a model of "
        f"type {kind!r} and level {level:g} has no such parameter{near}",
        statement.span(given[unknown[0]]),
        "Correct the name if it is misspelled; otherwise nothing is to be done.",
    )


def _inherited(run: Expansion, card: ModelCard, parent: str, depth: int) -> Model:
    base = card.scope.models.get(parent.lower())
    if base is None or base is card or depth >= _MAXIMUM_INHERITANCE:
        raise fault(
            "model-missing",
            f"{parent!r}, from which this model inherits, "
            + ("does not exist" if base is None else "inherits from itself"),
            card.statement.span(card.statement.items[0]),
            "Correct the name after ako:",
        )
    return read_model(run, base, depth + 1)


def _kind_and_items(statement: Statement) -> tuple[str, tuple[Item, ...]]:
    items = statement.items[1:]
    if _parent(statement):
        items = items[1:]
        if items and isinstance(items[0], Word) and items[0].text.lower() in _KNOWN_KINDS:
            return items[0].text.lower(), items[1:]
        return "", items
    return _kind_word(statement), items[1:]


def _kind_word(statement: Statement) -> str:
    items = statement.items
    return items[1].text.lower() if len(items) > 1 and isinstance(items[1], Word) else ""


def _parent(statement: Statement) -> str:
    kind = _kind_word(statement)
    return kind[4:] if kind.startswith("ako:") else ""


def _flat(items: tuple[Item, ...]) -> Iterator[Item]:
    for item in items:
        if isinstance(item, Group):
            yield from _flat(item.items)
        else:
            yield item
