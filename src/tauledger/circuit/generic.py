"""Generic small-signal models for parts whose model is missing: put in only when asked for.

The figures are round textbook values of a small-signal part (common practice, no source). They
give the right order of magnitude and nothing more; every model is named ``generic-…`` and comes
with a warning, so that no figure made with it can pass for that of the real part.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from types import MappingProxyType

from tauledger.circuit.elements import Model
from tauledger.circuit.expansion import Substitute
from tauledger.netlist.statements import Statement, Word
from tauledger.problems import Problem, Severity, SourceSpan

_BIPOLAR = {
    "is": 10e-15, "bf": 150.0, "vaf": 100.0, "rb": 100.0, "br": 4.0,
    "cje": 12e-12, "cjc": 4e-12, "tf": 0.5e-9,
}  # fmt: skip
_JUNCTION_FET = {"beta": 1e-3, "vto": -2.0, "lambda": 0.01, "cgs": 4e-12, "cgd": 2e-12}
_MOS = {"vto": 1.0, "kp": 2e-3, "lambda": 0.01}
_VERTICAL_MOS = {
    "vto": 2.0, "kp": 0.1, "lambda": 0.01, "cgs": 20e-12, "cgdmin": 3e-12, "cgdmax": 20e-12,
}  # fmt: skip
_DIODE = {"is": 5e-9, "n": 1.8, "rs": 0.6, "cjo": 2e-12, "tt": 5e-9}

CARDS: Mapping[str, Mapping[str, float]] = MappingProxyType(
    {
        "npn": _BIPOLAR,
        "pnp": _BIPOLAR,
        "njf": _JUNCTION_FET,
        "pjf": _JUNCTION_FET,
        "nmos": _MOS,
        "pmos": {**_MOS, "vto": -1.0},
        "vdmosn": _VERTICAL_MOS,
        "vdmosp": {**_VERTICAL_MOS, "vto": -2.0},
        "d": _DIODE,
    }
)
"""Type → parameters."""

_KINDS = {"q": ("npn", "pnp"), "j": ("njf", "pjf"), "m": ("nmos", "pmos"), "d": ("d",)}
_FAMILIES = {
    "npn": r"bc(10[789]|33[78]|54[6-9]|550|81[78]|84[6-9]|850)|bd13[579]|(2n|mmbt)(2222|3904|4401"
    r"|508[89])|2n3055|mpsa18",
    "pnp": r"bc(32[78]|55[6-9]|560|80[78]|85[6-9]|860)|bd1(36|38|40)|(2n|mmbt)(2907|3906|4403"
    r"|508[67])",
    "njf": r"j(11[123]|201|30[89]|310)|2n(3819|545[789])|bf(245|256)",
    "pjf": r"j17[4-7]|2n(3820|546[0-2])",
    "nmos": r"2n700[02]|bs170|bss138",
    "pmos": r"bs250|bss84",
}
"""Type → common type numbers of that polarity [M: from memory]."""


def generic_models(kinds: Mapping[str, str]) -> Substitute:
    """How to replace a model: from the word that names it and the element's statement.

    ``kinds`` says the type of models (lower-case names) whose own name does not.
    """

    def replace(word: Word, statement: Statement) -> tuple[Model | None, Problem]:
        letter = statement.name.text[0].lower()
        kind = kinds.get(word.text.lower()) or _kind_of(letter, word.text.lower())
        if not kind:
            return None, _refusal(word, statement, _KINDS[letter])
        if letter == "m" and statement.items.index(word) == 3:
            kind = {"nmos": "vdmosn", "pmos": "vdmosp"}.get(kind, kind)
        span = statement.span(word)
        model = Model(_name(kind), kind, CARDS[kind], span)
        return model, _warning(word, statement, model, span)

    return replace


def _kind_of(letter: str, name: str) -> str:
    kinds = _KINDS[letter]
    if len(kinds) == 1:
        return kinds[0]
    for kind in kinds:
        if kind in name or re.match(_FAMILIES[kind], name):
            return kind
    return ""


def _name(kind: str) -> str:
    return "generic-diode" if kind == "d" else f"generic-{kind}"


def _warning(word: Word, statement: Statement, model: Model, span: SourceSpan) -> Problem:
    return Problem(
        "model-generic",
        Severity.WARNING,
        f"{statement.name.text}: no model {word.text[:60]!r}; {model.name} stands in for it, "
        "round textbook values and not this part's",
        span,
        "Give the real model before relying on any figure.",
    )


def _refusal(word: Word, statement: Statement, kinds: tuple[str, ...]) -> Problem:
    name = word.text[:60]
    return Problem(
        "model-missing",
        Severity.ERROR,
        f"{statement.name.text}: no model {name!r}, and its name does not tell whether it is "
        f"{' or '.join(kinds)}, so no generic model can stand in for it",
        statement.span(word),
        f'Say which in tauledger.toml: generic_models = {{ "{name}" = "{kinds[0]}" }}',
    )
