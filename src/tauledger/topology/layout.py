"""Where every node stands along the way of the signal."""

from __future__ import annotations

from collections.abc import Mapping

from tauledger.circuit.elements import GROUND, Capacitor, Inductor, Resistor
from tauledger.records import dataclass
from tauledger.topology.flow import Flow, control_nodes, follow
from tauledger.topology.model import SignalPath, TransistorRole
from tauledger.topology.stages import Stage
from tauledger.topology.wiring import Branch, Transistor, Wiring


@dataclass(frozen=True, slots=True)
class Layout:
    """The wiring with the way of the signal drawn in."""

    wiring: Wiring
    path: SignalPath
    flow: Flow
    stages: tuple[Stage, ...]
    transistors: Mapping[str, TransistorRole]
    level: Mapping[str, int]
    """Nodes of the way and terminals of its transistors to the number of stages before them."""
    on_way: frozenset[str]
    """Joined nodes the signal passes; a differential output's second node included."""

    def enters_base(self, transistor: Transistor) -> bool:
        """Whether the signal comes in at its base or gate."""
        role = self.transistors[transistor.name]
        return role.input_terminal == transistor.word("base")


def lay_out(
    wiring: Wiring,
    flow: Flow,
    stages: tuple[Stage, ...],
    transistors: Mapping[str, TransistorRole],
    path: SignalPath,
) -> Layout:
    """Number the nodes by the stages before them, those beside the way included."""
    level: dict[str, int] = {}
    done = 0
    for node in flow.nodes:
        if done < len(stages) and node == stages[done].exit and node not in level:
            done += 1
        level.setdefault(node, done)
    on_way = set(flow.nodes)
    for node in _way_to_reference(wiring, flow, stages, path):
        on_way.add(node)
        level.setdefault(node, len(stages))
    for number, stage in enumerate(stages):
        for name in stage.members:
            transistor = wiring.transistors.get(name)
            if transistor is not None:
                follows = transistors[name].output_terminal == transistor.word("emitter")
                level.setdefault(transistor.base, number)
                level.setdefault(transistor.emitter, number + follows)
                if not follows or transistor.collector not in wiring.shunted:
                    level.setdefault(transistor.collector, number + 1)
    elements = {element.name: element for element in wiring.circuit.elements}
    for number, stage in enumerate(stages):
        for step in stage.passed:
            if step.kind == "source":
                for node in control_nodes(wiring, elements[step.part]):
                    level.setdefault(node, number)
    level.pop(GROUND, None)
    return Layout(wiring, path, flow, stages, transistors, level, frozenset(on_way - {GROUND}))


def _way_to_reference(
    wiring: Wiring, flow: Flow, stages: tuple[Stage, ...], path: SignalPath
) -> tuple[str, ...]:
    """The second node of a differential output, and what lies between it and the last stage."""
    reference = wiring.joined.get(path.output_reference, GROUND)
    if reference == GROUND or not flow.steps or not stages:
        return () if reference == GROUND else (reference,)
    nodes = [reference]
    for step in reversed(follow(wiring, flow.steps[0].start, reference).steps):
        if step.part in stages[-1].members:
            return tuple(nodes)
        if step.kind in {"transistor", "source"}:
            break
        nodes.append(step.start)
    return (reference,)


def series_neighbours(wiring: Wiring, node: str) -> dict[str, str]:
    """Nodes one resistor or inductor away, ground left out, with the part's name."""
    return {
        branch.far(node): branch.element.name
        for branch in wiring.at(node)
        if isinstance(branch.element, Resistor | Inductor)
        and branch.far(node) not in (GROUND, node)
    }


def touches_rail(wiring: Wiring, node: str) -> bool:
    """Whether a resistor, inductor or diode leads straight to a node that a source holds."""
    return any(
        not isinstance(branch.element, Capacitor) and GROUND not in branch.element.nodes[:2]
        for branch in wiring.between(node, GROUND)
    )


def spelt(branch: Branch) -> tuple[str, str]:
    """The two nodes of a part as the netlist spells them."""
    return branch.element.nodes[0], branch.element.nodes[1]
