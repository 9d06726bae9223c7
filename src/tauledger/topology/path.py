"""From which source to which node: taken from the options, else from what the netlist shows."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Sequence

from tauledger.circuit.elements import (
    GROUND,
    Capacitor,
    Circuit,
    CurrentSource,
    Inductor,
    Resistor,
    VoltageSource,
)
from tauledger.problems import Problem, ProblemError, Severity, SourceSpan
from tauledger.topology.model import SignalPath
from tauledger.topology.wiring import Branch, Wiring, wire

Source = VoltageSource | CurrentSource

_OUTPUT_NAME = re.compile(r"/?(?:[vu]_?)?(?:out|output)", re.IGNORECASE)
_LOAD_RESISTOR = re.compile(r"r+_?l(?:oad)?\d*", re.IGNORECASE)
_LOAD_CAPACITOR = re.compile(r"c+_?l(?:oad)?\d*", re.IGNORECASE)
_SHOWN = 10
"""Candidates listed in one message."""


def choose_path(circuit: Circuit, input_name: str | None, output: str | None) -> SignalPath:
    """Settle source, input node, output node and load.

    ``output`` is a node or ``"a,b"`` for the difference of two; letter case does not matter.
    Raises ProblemError when several candidates, or none, are left, naming them and the option
    (``--input NAME``, ``--output NODE``) that settles it.
    """
    source = _choose_source(circuit, input_name)
    wiring = wire(circuit, source.name)
    live = _live_node(source, wiring)
    resistor = None if isinstance(source, CurrentSource) else _series_resistor(source, live, wiring)
    input_node = _other_node(resistor, live) if resistor else live
    node, reference = _choose_output(wiring, output, live, input_node)
    if node == input_node:
        resistor, input_node = None, live
    return SignalPath(
        source=source.name,
        source_is_current=isinstance(source, CurrentSource),
        input_node=input_node,
        source_resistor=resistor.name if resistor else "",
        output_node=node,
        output_reference=reference,
        load=_load(wiring, node, reference),
        notes=() if output is not None else tuple(_passed_over(wiring, live, input_node, node)),
    )


def _choose_source(circuit: Circuit, name: str | None) -> Source:
    sources = [e for e in circuit.elements if isinstance(e, Source)]
    if name is not None:
        for source in sources:
            if source.name.casefold() == name.casefold():
                return source
        raise _unknown_source(name, sources)
    driven = [source for source in sources if source.ac]
    if len(driven) == 1:
        return driven[0]
    if driven:
        raise ProblemError(
            Problem(
                "input-ambiguous",
                Severity.ERROR,
                f"{len(driven)} sources have an AC value, one was expected: {_list(driven)}",
                driven[1].span,
                "Say which one drives the amplifier with --input NAME.",
            )
        )
    likely = [source for source in sources if source.time_function]
    name = likely[0].name if len(likely) == 1 else "NAME"
    shown = likely or sources
    raise ProblemError(
        Problem(
            "input-missing",
            Severity.ERROR,
            "no source has an AC value, so nothing says where the signal enters; "
            f"sources seen: {_list(sources) or 'none'}",
            shown[0].span if shown else None,
            f"Give the signal source an AC value (AC 1), or name it with --input {name}.",
        )
    )


def _unknown_source(name: str, sources: Sequence[Source]) -> ProblemError:
    return ProblemError(
        Problem(
            "input-unknown",
            Severity.ERROR,
            f"there is no voltage or current source named {name}; "
            f"sources seen: {_list(sources) or 'none'}",
            advice="Name one of them with --input NAME.",
        )
    )


def _list(sources: Iterable[Source]) -> str:
    return _shorten([f"{s.name} (between {s.nodes[0]} and {s.nodes[1]})" for s in sources])


def _shorten(words: Sequence[str]) -> str:
    more = f" and {len(words) - _SHOWN} more" if len(words) > _SHOWN else ""
    return ", ".join(words[:_SHOWN]) + more


def _live_node(source: Source, wiring: Wiring) -> str:
    first, second = source.nodes[:2]
    return second if first in wiring.held and second not in wiring.held else first


def _series_resistor(source: Source, live: str, wiring: Wiring) -> Resistor | None:
    """The resistor that alone stands between the source's live node and the rest."""
    there = [
        element
        for element in wiring.circuit.elements
        if live in element.nodes or live in getattr(element, "control_nodes", ())
    ]
    others = [element for element in there if element.name != source.name]
    if len(others) == 1 and isinstance(others[0], Resistor):
        far = _other_node(others[0], live)
        if far not in wiring.held and far != live:
            return others[0]
    return None


def _other_node(resistor: Resistor, node: str) -> str:
    return resistor.nodes[1] if resistor.nodes[0] == node else resistor.nodes[0]


def _choose_output(
    wiring: Wiring, asked: str | None, live: str, input_node: str
) -> tuple[str, str]:
    """The output asked for, else found; a node behind the source's resistor only at need."""
    if asked is not None:
        return _asked_output(wiring, asked)
    try:
        return _find_output(wiring, {live, input_node})
    except ProblemError:
        if input_node == live or not _can_be_output(wiring, input_node, {live}):
            raise
        hinted = (input_node,) in wiring.circuit.output_hints
        if not hinted and not _is_output_name(input_node):
            raise
        return input_node, GROUND


def _find_output(wiring: Wiring, taken: set[str]) -> tuple[str, str]:
    hints = [
        hint
        for hint in dict.fromkeys(wiring.circuit.output_hints)
        if hint and _can_be_output(wiring, hint[0], taken)
    ]
    if len(hints) == 1:
        return hints[0][0], hints[0][1] if len(hints[0]) > 1 else GROUND
    free = [node for node in wiring.circuit.nodes if _can_be_output(wiring, node, taken)]
    hinted = [hint[0] for hint in hints if len(hint) == 1]
    rounds = (
        [node for node in hinted if _is_output_name(node)],
        [node for node in free if _is_output_name(node)],
        [node for node in free if _is_loaded(wiring, node)],
    )
    for candidates in rounds:
        if len(candidates) == 1:
            return candidates[0], GROUND
    seen = [",".join(hint) for hint in hints] or next((found for found in rounds if found), [])
    raise _no_output(wiring, seen, free, tuple(_useless_hints(wiring, taken)))


def _passed_over(wiring: Wiring, live: str, input_node: str, output: str) -> Iterator[str]:
    """A note on what the netlist asks to see, when nothing of it can be the output."""
    taken = {live, input_node} - {output}
    for said in _useless_hints(wiring, taken):
        yield f"{said}; {output} is taken for the output instead"


def _useless_hints(wiring: Wiring, taken: set[str]) -> Iterator[str]:
    """Why the nodes that the netlist asks to see cannot be the output, if none of them can."""
    hints = [hint for hint in dict.fromkeys(wiring.circuit.output_hints) if hint]
    if any(_can_be_output(wiring, hint[0], taken) for hint in hints):
        return
    reasons: dict[str, list[str]] = {}
    for hint in hints:
        if hint[0] not in wiring.joined:
            reason = "no part the input drives is there"
        elif hint[0] in wiring.held:
            reason = "it is ground, or a voltage source holds it"
        else:
            reason = "the signal enters there"
        reasons.setdefault(reason, []).append(f"v({','.join(hint)})")
    for reason, names in reasons.items():
        yield (
            f"{_shorten(names)}, asked for by .print or a statement like it, cannot be the "
            f"output: {reason}"
        )


def _asked_output(wiring: Wiring, asked: str) -> tuple[str, str]:
    spelling = {node.casefold(): node for node in (GROUND, *wiring.circuit.nodes)}
    words = [word.strip() for word in asked.split(",")]
    found = [spelling.get(word.casefold()) for word in words]
    for word, node in zip(words, found, strict=True):
        if node is None:
            raise ProblemError(
                Problem(
                    "output-unknown",
                    Severity.ERROR,
                    f"there is no node named {word or '(empty)'}; "
                    f"nodes seen: {_shorten(wiring.circuit.nodes)}",
                    advice="Name a node, or two with a comma between, with --output NODE.",
                )
            )
    nodes = [node for node in found if node is not None]
    if len(nodes) > 2 or all(node in wiring.held for node in nodes):
        raise ProblemError(
            Problem(
                "output-useless",
                Severity.ERROR,
                f"--output {asked}: expected a node that carries the signal, or two with a comma "
                "between; this one is ground or held by a voltage source",
                advice="Name the node of the amplifier's output with --output NODE.",
            )
        )
    return nodes[0], nodes[1] if len(nodes) == 2 else GROUND


def _can_be_output(wiring: Wiring, node: str, taken: set[str]) -> bool:
    return node in wiring.joined and node not in wiring.held and node not in taken


def _is_output_name(node: str) -> bool:
    return _OUTPUT_NAME.fullmatch(node) is not None


def _is_loaded(wiring: Wiring, node: str) -> bool:
    """A resistor to ground behind capacitors, one of them from a transistor's output."""
    here = wiring.joined[node]
    coupling, resistors = _hanging(wiring, here)
    return bool(
        any(isinstance(branch.element, Resistor) for branch in resistors)
        and any(
            terminal != "base"
            for branch in coupling
            for _, terminal in wiring.terminals.get(branch.far(here), ())
        )
    )


def _no_output(
    wiring: Wiring, seen: Sequence[str], free: Sequence[str], useless: Sequence[str]
) -> ProblemError:
    if seen:
        found = f"{len(seen)} nodes could be the output, one was expected: {_shorten(seen)}"
    else:
        outputs = [
            node
            for node in free
            if any(t != "base" for _, t in wiring.terminals.get(wiring.joined[node], ()))
        ]
        seen = outputs or list(free)
        found = (
            f"nothing {'else ' if useless else ''}says which node is the output; nodes seen: "
            f"{_shorten(seen) or 'none'}"
        )
    return ProblemError(
        Problem(
            "output-ambiguous",
            Severity.ERROR,
            "; ".join((*useless, found)),
            _place(wiring.circuit, seen),
            "Say which one with --output NODE, or with .print ac v(NODE) in the netlist.",
        ),
        # A node asked for may lie in a circuit that was left out for standing apart.
        *(p for p in wiring.circuit.problems if p.code == "circuit-independent"),
    )


def _place(circuit: Circuit, nodes: Sequence[str]) -> SourceSpan | None:
    """Where the first of the nodes is named last."""
    there = [e.span for e in circuit.elements if nodes and nodes[0].split(",")[0] in e.nodes]
    return there[-1] if there else None


def _hanging(wiring: Wiring, node: str) -> tuple[list[Branch], list[Branch]]:
    """Coupling capacitors at a node, and what hangs from it to ground, if that is all."""
    coupling: list[Branch] = []
    hanging: list[Branch] = []
    if wiring.terminals.get(node) or node in wiring.fed:
        return [], []
    for branch in wiring.at(node):
        to_ground = branch.far(node) == GROUND
        if isinstance(branch.element, Capacitor) and not to_ground:
            coupling.append(branch)
        elif isinstance(branch.element, Resistor | Capacitor) and to_ground:
            hanging.append(branch)
        else:
            return [], []
    return coupling, hanging


def _load(wiring: Wiring, output: str, reference: str) -> tuple[str, ...]:
    node, other = wiring.joined[output], wiring.joined[reference]
    coupling, hanging = _hanging(wiring, node)
    if coupling:
        return tuple(branch.element.name for branch in hanging)
    return tuple(
        branch.element.name
        for branch in wiring.at(node)
        if _is_named_load(branch) and _true_far(wiring, branch, node) in {GROUND, other}
    )


def _true_far(wiring: Wiring, branch: Branch, node: str) -> str:
    """The far end, telling ground from a supply rail, which would make it a collector load."""
    ends = branch.element.nodes[:2]
    far = ends[1] if wiring.joined[ends[0]] == node else ends[0]
    return GROUND if far == GROUND else wiring.joined[far] if far not in wiring.held else far


def _is_named_load(branch: Branch) -> bool:
    name = branch.element.name.rpartition(".")[2]
    pattern = _LOAD_RESISTOR if isinstance(branch.element, Resistor) else _LOAD_CAPACITOR
    return not isinstance(branch.element, Inductor) and pattern.fullmatch(name) is not None
