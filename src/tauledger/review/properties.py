"""What makes two parts electrically alike, whatever they are called and wherever they stand."""

from __future__ import annotations

from collections.abc import Callable, Hashable, Mapping

from tauledger.circuit.elements import (
    BehaviouralSource,
    BipolarTransistor,
    Capacitor,
    Circuit,
    ControlledSource,
    Coupling,
    CurrentSource,
    Diode,
    Element,
    IndependentSource,
    Inductor,
    JunctionFet,
    MosFet,
    Resistor,
    SemiconductorDevice,
    VoltageSource,
)
from tauledger.netlist.expression import Call, Expression, NodeVoltage, SourceCurrent

Properties = Mapping[str, tuple[float | str, str]]
"""What → (value, unit)."""
NodeMap = Callable[[str], str | None]

MODEL = "model "
"""Begins the name of a property that the model card gives."""

_KINDS: tuple[tuple[type[Element], str], ...] = (
    (Resistor, "resistor"),
    (Capacitor, "capacitor"),
    (Inductor, "inductor"),
    (Coupling, "coupling"),
    (VoltageSource, "voltage source"),
    (CurrentSource, "current source"),
    (ControlledSource, "controlled source"),
    (BehaviouralSource, "behavioural source"),
    (Diode, "diode"),
    (BipolarTransistor, "bipolar transistor"),
    (JunctionFet, "junction FET"),
    (MosFet, "MOSFET"),
)
_DIGITS = 12
"""Values that agree to this are written differently (4.7k, 4k7), not edited."""


def part_kind(element: Element) -> str:
    """The word for a part."""
    return next((word for kind, word in _KINDS if isinstance(element, kind)), "part")


def is_symmetric(element: Element) -> bool:
    """Whether the equations stay the same when its two terminals change places."""
    return isinstance(element, Resistor | Capacitor)


def properties(element: Element) -> Properties:
    """Everything that enters the equations of bias and small signal, connections apart."""
    match element:
        case Resistor():
            return {"value": (_rounded(element.resistance_ohm), "Ω")}
        case Capacitor():
            return {"value": (_rounded(element.capacitance_f), "F")}
        case Inductor():
            return {"value": (_rounded(element.inductance_h), "H")}
        case Coupling():
            return {"coefficient": (_rounded(element.coefficient), "")}
        case IndependentSource():
            unit = "V" if isinstance(element, VoltageSource) else "A"
            found: dict[str, tuple[float | str, str]] = {"DC value": (_rounded(element.dc), unit)}
            if element.ac is not None:
                found["AC value"] = (f"{element.ac:g}", unit)
            return found
        case ControlledSource():
            return {"form": (element.letter, ""), "gain": (_rounded(element.gain), "")}
        case BehaviouralSource():
            return {"output": (element.output, "")}
        case SemiconductorDevice():
            return _semiconductor(element)
    return {}


def _semiconductor(element: SemiconductorDevice) -> Properties:
    found: dict[str, tuple[float | str, str]] = {"type": (element.model.kind, "")}
    for name, value in sorted(element.parameters.items()):
        found[name.upper()] = (_rounded(value), "")
    for name, value in sorted(element.model.parameters.items()):
        found[MODEL + name.upper()] = (_rounded(value), "")
    return found


def signature(element: Element) -> Hashable:
    """Equal for two parts of one kind with equal properties."""
    return part_kind(element), tuple(properties(element).items())


def _rounded(value: float) -> float:
    return float(f"{value:.{_DIGITS}g}")


class Wires:
    """How the parts of one circuit are connected, with references to other parts followed."""

    def __init__(self, circuit: Circuit) -> None:
        self.elements = {element.name.casefold(): element for element in circuit.elements}

    def connection(self, element: Element, node: NodeMap, order: bool = False) -> Hashable:
        """The nodes it lies between, each spelled by ``node``; None when one has no spelling.

        The order of the terminals of a resistor or capacitor counts only with ``order``. A
        part that refers to others by name (a coupling, a controlled source) counts their nodes.
        """
        parts: list[Hashable] = [self._nodes(element, node, order)]
        match element:
            case Coupling():
                ends = [self._named(name, node) for name in element.inductors]
                parts.append(None if None in ends else frozenset(ends))
            case ControlledSource():
                parts += [node(name) for name in element.control_nodes]
                if element.control_source:
                    parts.append(self._named(element.control_source, node))
            case BehaviouralSource():
                parts.append(self._tree(element.expression, node))
        return None if None in parts else tuple(parts)

    def _nodes(self, element: Element, node: NodeMap, order: bool = False) -> Hashable:
        spelled = [node(name) for name in element.nodes]
        if any(name is None for name in spelled):
            return None
        if is_symmetric(element) and not order:
            return tuple(sorted(name for name in spelled if name is not None))
        return tuple(spelled)

    def _named(self, name: str, node: NodeMap) -> Hashable:
        other = self.elements.get(name.casefold())
        return name.casefold() if other is None else self._nodes(other, node)

    def _tree(self, expression: Expression, node: NodeMap) -> Hashable:
        match expression:
            case NodeVoltage():
                ends = node(expression.positive), node(expression.negative)
                return None if None in ends else ("v", *ends)
            case SourceCurrent():
                source = self._named(expression.source, node)
                return None if source is None else ("i", source)
            case Call():
                given = [self._tree(argument, node) for argument in expression.arguments]
                return None if None in given else (expression.function, *given)
        return expression
