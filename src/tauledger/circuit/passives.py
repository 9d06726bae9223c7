"""R, C, L and K elements.

Values follow ngspice: a number or expression, ``r=``/``c=``/``l=``, or a model with dimensions;
times ``scale``, times or divided by ``m``, and times ``1 + tc1·ΔT + tc2·ΔT²`` (or
``1.01^(tce·ΔT)``), ΔT from the temperature the value was measured at.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

from tauledger.circuit.elements import Capacitor, Coupling, Inductor, Model, Resistor
from tauledger.circuit.expansion import Expansion, ignored, refuse_decimal_comma
from tauledger.circuit.models import find_model
from tauledger.circuit.operands import is_word, node_words, operands
from tauledger.circuit.plausible import check_temperature
from tauledger.circuit.scope import Scope
from tauledger.netlist.codes import fault
from tauledger.netlist.statements import Item, Statement, Word
from tauledger.problems import ProblemError
from tauledger.quantity import format_quantity, parse_number

_KINDS = {"r": ("r", "res"), "c": ("c", "cap"), "l": ("l", "ind")}
_VALUE_NAMES = {
    "r": ("r", "resistance", "value"),
    "c": ("c", "capacitance", "cap", "value"),
    "l": ("l", "inductance", "value"),
}
_MODEL_VALUE = {"r": "r", "c": "cap", "l": "ind"}
_KNOWN = frozenset(
    (
        *("r", "c", "l", "resistance", "capacitance", "cap", "inductance", "value", "w", "m"),
        *("tc", "tc1", "tc2", "tce", "scale", "temp", "dtemp", "ic", "ac", "noisy", "noise"),
        *("nt", "bv_max"),
        # Ratings and maker's data that exporters add.
        *("mfg", "type", "v", "irms", "ipk", "pwr", "pn", "tol"),
    )
)
_OHMS_FOR_ZERO = 1e-3


def resistor(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add an R element, its value at its own temperature; 0 Ω becomes 1 mΩ with a note.

    Like the others here, raises ProblemError where the line does not say one.
    """
    nodes = node_words(statement, 2, "Rname node node value")
    value = _Reading(run, scope, statement).value()
    if value == 0.0:
        run.warn(
            "value-zero",
            f"{statement.name.text}: a resistor of 0 Ω is taken as 1 mΩ, as in ngspice",
            statement.span(),
            "Join its two nodes, or give it a value.",
        )
        value = _OHMS_FOR_ZERO
    elif value < 0.0:
        run.warn(
            "value-out-of-range",
            f"{statement.name.text}: a negative resistance, {format_quantity(value, 'Ω')}",
            statement.span(),
            "The analysis goes on with it; take the minus sign away unless it is meant.",
        )
    name = scope.prefix + statement.name.text
    run.add(Resistor(name, run.nodes(nodes, scope), statement.span(), value))


def capacitor(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add a C element with the name of its model, which ratings may be given for."""
    nodes = node_words(statement, 2, "Cname node node value")
    reading = _Reading(run, scope, statement)
    value, initial = reading.value(), reading.named("ic")
    _check_storage(run, statement, value, "capacitance", "F", "nothing at any frequency")
    model = "" if reading.model is None else reading.model.name
    name = scope.prefix + statement.name.text
    run.add(Capacitor(name, run.nodes(nodes, scope), statement.span(), value, initial, model))


def inductor(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add an L element."""
    nodes = node_words(statement, 2, "Lname node node value")
    value = _Reading(run, scope, statement).value()
    _check_storage(run, statement, value, "inductance", "H", "a short circuit at any frequency")
    name = scope.prefix + statement.name.text
    run.add(Inductor(name, run.nodes(nodes, scope), statement.span(), value))


def _check_storage(
    run: Expansion, statement: Statement, value: float, what: str, unit: str, zero: str
) -> None:
    """A negative one has no time constant; one of zero is a slip more often than meant."""
    name = statement.name.text
    if value < 0.0:
        raise fault(
            "value-unusable",
            f"{name}: a negative {what}, {format_quantity(value, unit)}, has no time constant",
            statement.span(),
            "Give it a value above zero.",
        )
    if value == 0.0:
        run.warn(
            "value-out-of-range",
            f"{name}: a {what} of 0 {unit} is {zero}",
            statement.span(),
            "Give it a value, or take the part out.",
        )


def coupling(run: Expansion, scope: Scope, statement: Statement) -> None:
    """Add a K element once the inductors it names are known."""
    words = [item for item in statement.items[:-1] if isinstance(item, Word)]
    if len(words) < 2 or len(words) != len(statement.items) - 1:
        raise fault(
            "element-incomplete",
            f"{statement.name.text}: expected two inductors and a coefficient",
            statement.span(),
            "Write it as: Kname L1 L2 coefficient",
        )
    last = statement.items[-1]
    value = run.number(last, scope, statement)
    if not -1.0 <= value <= 1.0:
        raise fault(
            "coupling-out-of-range",
            f"{statement.name.text}: a coupling coefficient of {value:g}; expected −1 to 1",
            statement.span(last),
            "Give the coefficient, not the mutual inductance.",
        )

    def build() -> Coupling:
        inductors = tuple(
            run.element_name(word.text, scope, statement, word, Inductor) for word in words
        )
        return Coupling(scope.prefix + statement.name.text, (), statement.span(), inductors, value)

    run.add_later(build, statement.span())


class _Reading:
    """The items behind the two nodes of an R, C or L element."""

    def __init__(self, run: Expansion, scope: Scope, statement: Statement) -> None:
        self.run, self.scope, self.statement = run, scope, statement
        self.letter = statement.name.text[0].lower()
        given = operands(statement)
        self.assigned = given.named
        self.rest: list[Item] = list(given.positional[2:])
        self.model = self._take_model()

    def _take_model(self) -> Model | None:
        """A model's name stands before or behind the value."""
        for index, item in enumerate(self.rest[:2]):
            if isinstance(item, Word):
                model = find_model(self.run, self.scope, item.text, _KINDS[self.letter])
                if model is not None:
                    del self.rest[index]
                    return model
        return None

    def named(self, name: str) -> float | None:
        item = self.assigned.get(name)
        return None if item is None else self.run.number(item.value, self.scope, self.statement)

    def value(self) -> float:
        """In SI units, at the element's temperature."""
        nominal = self._nominal()
        factor = self._temperature_factor()
        extra = [item for item in self.rest if not is_word(item, "polarized")]
        if extra:
            ignored(self.run, self.statement, extra[0])
        for name, assignment in self.assigned.items():
            if name not in _KNOWN:
                ignored(self.run, self.statement, assignment)
        scale, multiplier = self.named("scale"), self.named("m")
        multiplier = 1.0 if multiplier is None else multiplier
        if multiplier <= 0:
            raise self._unusable(f"a multiplier m of {multiplier:g}", "Give m a value above zero.")
        value = nominal * factor * (1.0 if scale is None else scale)
        value = value * multiplier if self.letter == "c" else value / multiplier
        if not math.isfinite(value):
            raise self._unusable("too large a value", "Check the exponent and the suffix.")
        return value

    def _unusable(self, found: str, advice: str) -> ProblemError:
        name = self.statement.name.text
        return fault("value-unusable", f"{name}: {found}", self.statement.span(), advice)

    def _nominal(self) -> float:
        for name in _VALUE_NAMES[self.letter]:
            if name in self.assigned:
                refuse_decimal_comma(self.assigned[name].value, self.statement)
        if self.rest:
            if self._is_potentiometer():
                raise fault(
                    "element-incomplete",
                    f"{self.statement.name.text}: found three nodes, expected two and a value",
                    self.statement.span(),
                    "Write a potentiometer as two resistors that meet at its wiper.",
                )
            return self.run.lone_number(self.rest.pop(0), self.scope, self.statement)
        for name in _VALUE_NAMES[self.letter]:
            # With a model, l= is a length.
            if name in self.assigned and not (name == "l" and self.model is not None):
                return self.run.number(self.assigned[name].value, self.scope, self.statement)
        value = self._from_model({} if self.model is None else self.model.parameters)
        if value is None:
            raise fault(
                "value-missing",
                f"{self.statement.name.text}: no value",
                self.statement.span(),
                "Write the value after the two nodes.",
            )
        return value

    def _is_potentiometer(self) -> bool:
        """Whether a plain value follows on a name, as on the third node of a resistor."""
        if self.letter != "r" or len(self.rest) != 2:
            return False
        name, value = self.rest
        return (
            isinstance(name, Word)
            and isinstance(value, Word)
            and (name.text[0].isalpha() or name.text[0] in "/_+")
            and name.text.lower() not in self.scope.parameters
            and parse_number(value.text, leading_letter=False) is not None
        )

    def _from_model(self, parameters: Mapping[str, float]) -> float | None:
        """From sheet resistance or junction dimensions, else the model's own value."""
        length = self.named("l") or parameters.get("defl", 0.0)
        width = self.named("w") or parameters.get("defw", 1e-5)
        length -= parameters.get("short", 0.0)
        width -= parameters.get("narrow", 0.0)
        if length > 0 and width > 0:
            if self.letter == "r" and "rsh" in parameters:
                return parameters["rsh"] * length / width
            if self.letter == "c" and "cj" in parameters:
                rim = 2 * parameters.get("cjsw", 0.0) * (length + width)
                return parameters["cj"] * length * width + rim
        return parameters.get(_MODEL_VALUE[self.letter])

    def _temperature_factor(self) -> float:
        parameters: Mapping[str, float] = {} if self.model is None else self.model.parameters
        first, second = self.named("tc1"), self.named("tc2")
        if "tc" in self.assigned:
            first = self.named("tc")
            if self.rest:  # tc=1m,2u leaves its second number among the positional items
                second = self.run.number(self.rest.pop(0), self.scope, self.statement)
        first = parameters.get("tc1", 0.0) if first is None else first
        second = parameters.get("tc2", 0.0) if second is None else second
        exponential = self.named("tce")
        exponential = parameters.get("tce") if exponential is None else exponential
        temperature = self.named("temp")
        if temperature is not None:
            check_temperature(self.run, self.statement, self.assigned["temp"].value, temperature)
        else:
            temperature = self.run.temperature_c + (self.named("dtemp") or 0.0)
        difference = temperature - parameters.get("tnom", self.run.nominal_temperature_c)
        if exponential is not None:
            return float(1.01 ** min(exponential * difference, 1e4))
        return 1.0 + difference * (first + difference * second)
