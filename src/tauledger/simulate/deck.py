"""A flat circuit → the deck ngspice is given, and the way back to the circuit's own names.

Nothing of the netlist's text is copied. Nodes are ``n1``, ``n2`` …, elements a letter and a number;
values are printed from floats; models hold only parameters whose name stands in our own table for
that kind. Every finished line is checked against the few characters and forms that such a deck can
have, so that a mistake here ends in an error and never in ngspice.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping

from tauledger.circuit.elements import (
    GROUND,
    BehaviouralSource,
    BipolarTransistor,
    Capacitor,
    Circuit,
    ControlledSource,
    Coupling,
    Diode,
    Element,
    IndependentSource,
    Inductor,
    JunctionFet,
    Model,
    MosFet,
    Resistor,
    SemiconductorDevice,
    VoltageSource,
)
from tauledger.circuit.model_parameters import INSTANCE_PARAMETERS, is_known, known_names
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass
from tauledger.simulate.formula import FormulaError, FormulaPrinter, number

TITLE = "deck rebuilt from parsed elements"
# Three digits tighter than ngspice's defaults, so that its rounding is no part of a difference.
_OPTIONS = "reltol=1e-6 abstol=1e-15 vntol=1e-9 itl1=500"
_TYPES = {
    "d": "d", "npn": "npn", "pnp": "pnp", "njf": "njf", "pjf": "pjf",
    "nmos": "nmos", "pmos": "pmos", "vdmosn": "vdmos nchan", "vdmosp": "vdmos pchan",
}  # fmt: skip
_LETTERS: tuple[tuple[type[Element], str], ...] = (
    (Resistor, "r"), (Capacitor, "c"), (Inductor, "l"), (Coupling, "k"),
    (VoltageSource, "v"), (IndependentSource, "i"), (BehaviouralSource, "b"),
    (Diode, "d"), (BipolarTransistor, "q"), (JunctionFet, "j"), (MosFet, "m"),
)  # fmt: skip
_VERTICAL_INSTANCE = frozenset(("m", "temp", "dtemp"))

_NUMBER = r"-?[0-9]+(?:\.[0-9]+)?(?:meg|[tgkmunpf]|e-?[0-9]+)?"
_PLACE = r"(?: (?:0|[nh][0-9]+))"
_SETTING = rf"(?: [a-z][a-z0-9_]*={_NUMBER})"
_FORMS = tuple(
    map(
        re.compile,
        (
            rf"[rcl][0-9]+{_PLACE}{{2}} {_NUMBER}",
            rf"k[0-9]+ l[0-9]+ l[0-9]+ {_NUMBER}",
            rf"[vi][0-9]+{_PLACE}{{2}} dc {_NUMBER}(?: ac 1)?",
            rf"[eg][0-9]+{_PLACE}{{4}} {_NUMBER}",
            rf"[fh][0-9]+{_PLACE}{{2}} v[0-9]+ {_NUMBER}",
            rf"bh?[0-9]+{_PLACE}{{2}} [vi]=[a-z0-9.,()+*/<>=!&|?:-]+",
            rf"[dqjm][0-9]+{_PLACE}{{2,4}} y[0-9]+{_SETTING}*",
            rf"\.model y[0-9]+ (?:{'|'.join(_TYPES.values())}){_SETTING}*",
            rf"\.options{_SETTING}+",
            rf"\.nodeset v\(n[0-9]+\)={_NUMBER}",
            r"\.end",
        ),
    )
)


@dataclass(frozen=True, slots=True)
class Deck:
    """Lines for ngspice, title first and ``.end`` last, and what its names stand for."""

    lines: tuple[str, ...]
    nodes: Mapping[str, str]
    """Name in the deck to node of the circuit."""
    elements: Mapping[str, str]
    """Name in the deck to element of the circuit."""


def print_deck(circuit: Circuit, driven: str) -> Deck:
    """Print a circuit for ngspice, with 1 V or 1 A of signal from the source ``driven`` alone.

    Raises
    ------
    ProblemError
        When an element, or a function in one, has no form in the deck.
    """
    printer = _Printer(circuit, driven)
    lines = (TITLE, *printer.lines(), ".end")
    for line in lines[1:]:
        if not any(form.fullmatch(line) for form in _FORMS):
            raise AssertionError(f"a line of the rebuilt deck has no known form: {line!r}")
    return Deck(
        lines,
        {name: node for node, name in printer.nodes.items() if name != GROUND},
        {name: element.name for element, name in zip(circuit.elements, printer.own, strict=True)},
    )


class _Printer:
    """Prints one circuit; names are given before the first line is printed."""

    def __init__(self, circuit: Circuit, driven: str) -> None:
        self.circuit, self.driven = circuit, driven
        self.nodes = {GROUND: GROUND}
        self.nodes |= {node: f"n{i}" for i, node in enumerate(circuit.nodes, 1)}
        self.own = [f"{_letter(element)}{i}" for i, element in enumerate(circuit.elements, 1)]
        self.names = {
            element.name.lower(): name
            for element, name in zip(circuit.elements, self.own, strict=True)
        }
        self.formulas = FormulaPrinter(
            {node.lower(): name for node, name in self.nodes.items()},
            {key: name for key, name in self.names.items() if name[0] == "v"},
        )
        self.models: dict[int, tuple[str, Model]] = {}
        self.couplings = len(circuit.elements)

    def lines(self) -> list[str]:
        result = [self._options()]
        for element, own in zip(self.circuit.elements, self.own, strict=True):
            try:
                result += self._element(element, own)
            except (FormulaError, ValueError) as error:
                raise _unprintable(element, str(error)) from None
        result += [f"b{node} {node} 0 v={text}" for node, text in self.formulas.helpers]
        result += [_model_line(name, model) for name, model in self.models.values()]
        nodes = self.formulas.nodes
        for node, value in self.circuit.node_sets.items():
            if nodes.get(node.lower(), GROUND) != GROUND:
                result.append(f".nodeset v({nodes[node.lower()]})={number(value)}")
        return result

    def _options(self) -> str:
        circuit = self.circuit
        return (
            f".options {_OPTIONS} gmin={number(circuit.gmin)} "
            f"temp={number(circuit.temperature_c)} tnom={number(circuit.nominal_temperature_c)}"
        )

    def _element(self, element: Element, own: str) -> Iterable[str]:
        if isinstance(element, Coupling):
            return self._couplings(element)
        return (" ".join((own, *(self.nodes[n] for n in element.nodes), self._rest(element))),)

    def _rest(self, element: Element) -> str:
        """What stands behind the nodes."""
        match element:
            case Resistor(resistance_ohm=value) | Capacitor(capacitance_f=value):
                return number(value)
            case Inductor(inductance_h=value):
                return number(value)
            case IndependentSource():
                signal = " ac 1" if element.name == self.driven else ""
                return f"dc {number(element.dc)}{signal}"
            case ControlledSource():
                return self._control(element)
            case BehaviouralSource():
                kind = "v" if element.output == "voltage" else "i"
                return f"{kind}={self.formulas.text(element.expression)}"
            case SemiconductorDevice():
                return self._device(element)
        raise ValueError(f"an element of kind {type(element).__name__} cannot be printed")

    def _control(self, element: ControlledSource) -> str:
        gain = number(element.gain)
        if element.letter in "EG":
            positive, negative = (self.nodes[node] for node in element.control_nodes)
            return f"{positive} {negative} {gain}"
        return f"{self.names[element.control_source.lower()]} {gain}"

    def _couplings(self, element: Coupling) -> Iterable[str]:
        """One line for every pair."""
        inductors = [self.names[name.lower()] for name in element.inductors]
        for i, first in enumerate(inductors):
            for second in inductors[i + 1 :]:
                self.couplings += 1
                yield f"k{self.couplings} {first} {second} {number(element.coefficient)}"

    def _device(self, element: SemiconductorDevice) -> str:
        model = element.model
        if model.kind not in _TYPES:
            raise ValueError(f"a model of type {model.kind} cannot be printed")
        name, _ = self.models.setdefault(id(model), (f"y{len(self.models) + 1}", model))
        allowed = INSTANCE_PARAMETERS[_letter(element)]
        if model.kind.startswith("vdmos"):
            allowed = allowed & _VERTICAL_INSTANCE
        return " ".join((name, *_settings(element.parameters, allowed)))


def _letter(element: Element) -> str:
    if isinstance(element, ControlledSource):
        return element.letter.lower()
    return next((letter for kind, letter in _LETTERS if isinstance(element, kind)), "?")


def _model_line(name: str, model: Model) -> str:
    level = model.parameters.get("level", 1.0)
    # npn=1 and its like would change the type.
    allowed = {
        parameter
        for parameter in model.parameters
        if parameter not in _TYPES
        and parameter != "vdmos"
        and (parameter in known_names(model.kind) or model.kind in ("nmos", "pmos"))
        and is_known(model.kind, level, parameter)
        and not (parameter == "level" and level == 1.0)
    }
    return " ".join((f".model {name} {_TYPES[model.kind]}", *_settings(model.parameters, allowed)))


def _settings(parameters: Mapping[str, float], allowed: Iterable[str]) -> list[str]:
    names = set(allowed)
    return [f"{name}={number(value)}" for name, value in parameters.items() if name in names]


def _unprintable(element: Element, why: str) -> ProblemError:
    return ProblemError(
        Problem(
            "simulate-unsupported",
            Severity.ERROR,
            f"{element.name} cannot be given to ngspice: {why}",
            element.span,
            "Leave --simulate out, or write the element in another form.",
        )
    )
