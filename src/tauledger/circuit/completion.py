"""What the schematic leaves out, put in from the configuration: models, supplies, source, load.

An added element's span is the line of the configuration that asked for it, which marks it as
added. The signal source has an AC value of 1.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

from tauledger.circuit.elements import (
    GROUND,
    Capacitor,
    Circuit,
    Element,
    Resistor,
    VoltageSource,
)
from tauledger.configuration.codes import near, problem
from tauledger.configuration.settings import Input, ModelFile, Output, PathSettings, Supply
from tauledger.netlist import Netlist
from tauledger.netlist.reader import parse, read_library
from tauledger.netlist.statements import Statement, Word
from tauledger.problems import Problem, ProblemError, SourceSpan
from tauledger.quantity import format_quantity

_DEFINITIONS = frozenset(
    (".model", ".param", ".params", ".parameters", ".func", ".csparam", ".if", ".elseif", ".else",
     ".endif")
)  # fmt: skip


def add_models(netlist: Netlist, settings: PathSettings) -> Netlist:
    """The netlist with the models, subcircuits and temperature of the configuration.

    What the netlist itself defines counts before the files. Only definitions are taken from
    them. Raises ProblemError when a file cannot be read.
    """
    libraries = [_library(file) for file in settings.models]
    own = {_model_name(statement) for statement in netlist.statements} - {None}
    own |= {subcircuit.name.text.lower() for subcircuit in netlist.subcircuits}
    # Of two parameters of one name the last counts, of two models the first.
    statements = [
        statement
        for library in libraries
        for statement in library.statements
        if statement.keyword in _DEFINITIONS and _model_name(statement) not in own
    ]
    subcircuits = [
        subcircuit
        for library in libraries
        for subcircuit in library.subcircuits
        if subcircuit.name.text.lower() not in own
    ]
    last: tuple[Statement, ...] = ()
    if settings.temperature is not None:
        last = parse(f"\n.temp {settings.temperature.value!r}").statements
    return replace(
        netlist,
        statements=(*statements, *netlist.statements, *last),
        subcircuits=(*netlist.subcircuits, *subcircuits),
        problems=(*(p for library in libraries for p in library.problems), *netlist.problems),
    )


def _model_name(statement: Statement) -> str | None:
    """The lower-case name a .model statement defines; None for any other."""
    if statement.keyword != ".model" or not statement.items:
        return None
    name = statement.items[0]
    return name.text.lower() if isinstance(name, Word) else None


def _library(file: ModelFile) -> Netlist:
    try:
        return read_library(file.path, (file.root,))
    except ProblemError as error:
        placed = (
            entry if entry.span else replace(entry, span=file.span) for entry in error.problems
        )
        raise ProblemError(*placed) from None


def complete(circuit: Circuit, settings: PathSettings) -> tuple[Circuit, str | None, str | None]:
    """The circuit with supplies, signal source and load attached to its nets.

    Returns it with the name of the input source and the output (a node, or two with a comma
    between) for the choice of the path; None where the configuration leaves one open.

    Raises ProblemError with every net that the circuit does not have, or that two sources would
    hold.
    """
    work = _Completion(circuit)
    for supply in settings.supplies:
        work.attach_supply(supply)
    source = work.attach_input(settings.input) if settings.input else None
    output = work.attach_output(settings.output) if settings.output else None
    if work.problems:
        raise ProblemError(*work.problems)
    completed = replace(
        circuit,
        elements=(*circuit.elements, *work.added),
        attached=circuit.attached | {element.name for element in work.added},
        problems=tuple(found for found in circuit.problems if not work.answers(found)),
    )
    return completed, source, output


class _Completion:
    """Elements to add, and the names and nets already taken."""

    def __init__(self, circuit: Circuit) -> None:
        self.added: list[Element] = []
        self.problems: list[Problem] = []
        self._nodes = {node.casefold(): node for node in circuit.nodes}
        self._nodes |= {"0": GROUND, "gnd": GROUND}
        self._names = {element.name.casefold() for element in circuit.elements}
        self._answered = {GROUND}
        self._held = {
            frozenset(element.nodes): element
            for element in circuit.elements
            if isinstance(element, VoltageSource)
        }

    def answers(self, found: Problem) -> bool:
        """Whether a connector was left out at whose every net something is attached now."""
        if found.code != "element-left-out" or "connector" not in found.message or not found.span:
            return False
        words = (word.casefold() for word in found.span.text.split()[1:])
        nodes = {self._nodes[word] for word in words if word in self._nodes}
        return bool(nodes) and nodes <= self._answered

    def attach_supply(self, supply: Supply) -> None:
        node = self._node(supply.node, supply.span)
        if node is None:
            return
        self._answered.add(node)
        present = self._held.get(frozenset((node, GROUND)))
        if present is not None:
            voltage = present.dc if present.nodes[0] == node else -present.dc
            if voltage != supply.voltage_v:
                self._refuse_held(supply.node, present, voltage, supply.span)
            return
        name = self._free_name(f"Vsupply_{node}")
        self._add(VoltageSource(name, (node, GROUND), supply.span, supply.voltage_v, None))

    def attach_input(self, asked: Input) -> str | None:
        if asked.source:
            return asked.source
        nodes = self._pair(asked.nodes, asked.span)
        if nodes is None:
            return None
        live, reference = nodes
        self._answered.update(nodes)
        if asked.resistance_ohm > 0.0:
            inner = self._free_node("signal")
            name = self._free_name("Rsource")
            self._add(Resistor(name, (inner, live), asked.span, asked.resistance_ohm))
            live = inner
        elif present := self._held.get(frozenset(nodes)):
            self._refuse_held(asked.nodes[0], present, present.dc, asked.span)
            return None
        source = VoltageSource(
            self._free_name("Vsignal"), (live, reference), asked.span, 0.0, complex(1.0)
        )
        self._add(source)
        return source.name

    def attach_output(self, asked: Output) -> str | None:
        nodes = self._pair(asked.nodes, asked.span)
        if nodes is None:
            return None
        self._answered.update(nodes)
        if asked.load_resistance_ohm is not None:
            name = self._free_name("Rload")
            self._add(Resistor(name, nodes, asked.span, asked.load_resistance_ohm))
        if asked.load_capacitance_f is not None:
            name = self._free_name("Cload")
            self._add(Capacitor(name, nodes, asked.span, asked.load_capacitance_f))
        return nodes[0] if nodes[1] == GROUND else f"{nodes[0]},{nodes[1]}"

    def _add(self, element: Element) -> None:
        self.added.append(element)
        self._names.add(element.name.casefold())
        if isinstance(element, VoltageSource):
            self._held[frozenset(element.nodes)] = element

    def _pair(self, nets: tuple[str, ...], span: SourceSpan) -> tuple[str, str] | None:
        found = [self._node(net, span) for net in nets]
        nodes = [node for node in found if node is not None]
        if len(nodes) < len(nets):
            return None
        first, second = (*nodes, GROUND)[:2]
        if first == second:
            message = f"{nets[0]!r} is ground; expected a net with the signal"
            self.problems.append(problem("config-value", message, span, "Name another net."))
            return None
        return first, second

    def _node(self, net: str, span: SourceSpan) -> str | None:
        node = self._nodes.get(net.casefold())
        if node is None:
            known = [name for name in self._nodes.values() if name != GROUND]
            shown = ", ".join(known[:10]) + (" …" if len(known) > 10 else "")
            self.problems.append(
                problem(
                    "config-node-unknown",
                    f"no part of the netlist reaches a net {net[:60]!r}{near(net, known)}",
                    span,
                    f"Nets seen: {shown}.",
                )
            )
        return node

    def _refuse_held(
        self, net: str, present: VoltageSource, voltage: float, span: SourceSpan
    ) -> None:
        self.problems.append(
            problem(
                "config-net-held",
                f"{present.name} already holds net {net!r} at {format_quantity(voltage, 'V')}",
                span,
                "Remove the source from the netlist, or this line from the configuration.",
            )
        )

    def _free_name(self, wanted: str) -> str:
        return _free(wanted, self._names)

    def _free_node(self, wanted: str) -> str:
        return _free(wanted, self._nodes)


def _free(wanted: str, taken: Iterable[str]) -> str:
    """The wanted name, with a number behind it when it is taken."""
    used = set(taken)
    name, number = wanted, 2
    while name.casefold() in used:
        name, number = f"{wanted}{number}", number + 1
    return name
