"""The edits between two circuits, each of which can be made alone.

The new circuit is rewritten in the names of the old one, so that any choice of edits gives a
circuit: every part is either as it was or as it has become.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import replace

from tauledger.circuit.elements import (
    BehaviouralSource,
    Capacitor,
    Circuit,
    ControlledSource,
    Coupling,
    Element,
    SemiconductorDevice,
)
from tauledger.circuit.evaluate import substitute
from tauledger.records import dataclass
from tauledger.review.changes import Detail, PartChange
from tauledger.review.matching import Matching
from tauledger.review.properties import Wires, part_kind, properties, signature

_PARTS_NAMED = 6
_SETTINGS = (
    ("temperature_c", "temperature", "°C"),
    ("nominal_temperature_c", "nominal temperature", "°C"),
    ("gmin", "GMIN", "S"),
)


@dataclass(frozen=True, slots=True)
class Swap:
    """One part before and after, both in the old circuit's names; None where there is none."""

    before: Element | None
    after: Element | None
    name: str
    """As the new netlist has it, or the old one when the part is gone."""


@dataclass(frozen=True, slots=True)
class Edit:
    """Parts that change together: one part, all parts of one model, or parts that share a net
    which only one of the circuits has."""

    label: str
    parts: tuple[str, ...]
    swaps: tuple[Swap, ...]
    settings: Mapping[str, float]
    """Fields of the circuit itself that change, such as the temperature."""


def part_changes(old: Circuit, new: Circuit, matching: Matching) -> tuple[PartChange, ...]:
    """Every part that is not the same in both, in the order of the old netlist, then the new."""
    rows = []
    before, after = Wires(old), Wires(new)
    for a, b in matching.pairs:
        details = _details(a, b, before, after, matching.nodes)
        renamed = a.name.casefold() != b.name.casefold()
        if not details and not renamed:
            continue
        rows.append(
            PartChange(
                "changed" if details else "renamed",
                part_kind(a),
                a.name,
                b.name,
                details,
                _is_edited(a, b, before, after, matching.nodes),
                a.span,
                b.span,
            )
        )
    for element in matching.removed:
        details = _whole(element, "old")
        rows.append(
            PartChange(
                "removed", part_kind(element), element.name, "", details, True, element.span, None
            )
        )
    for element in matching.added:
        details = _whole(element, "new")
        rows.append(
            PartChange(
                "added", part_kind(element), "", element.name, details, True, None, element.span
            )
        )
    return (*rows, *_setting_changes(old, new))


def find_edits(old: Circuit, new: Circuit, matching: Matching) -> tuple[Edit, ...]:
    """What was edited, renumbering and new names of nets apart, in the old netlist's order."""
    before, after = Wires(old), Wires(new)
    translate = _Translation(old, new, matching)
    swaps = [
        Swap(a, translate(b), b.name)
        for a, b in matching.pairs
        if _is_edited(a, b, before, after, matching.nodes)
    ]
    swaps += [Swap(element, None, element.name) for element in matching.removed]
    swaps += [Swap(None, translate(element), element.name) for element in matching.added]
    edits = [_edit(group) for group in _grouped(swaps, set(old.nodes), translate.kept_nodes)]
    for field, label, _ in _SETTINGS:
        if getattr(old, field) != getattr(new, field):
            edits.append(Edit(label, (), (), {field: getattr(new, field)}))
    return tuple(edits)


def apply(old: Circuit, edits: Collection[Edit]) -> Circuit:
    """The old circuit with these edits made."""
    swaps = [swap for edit in edits for swap in edit.swaps]
    instead = {swap.before.name: swap.after for swap in swaps if swap.before is not None}
    elements = [instead.get(element.name, element) for element in old.elements]
    elements += [swap.after for swap in swaps if swap.before is None]
    settings = {field: value for edit in edits for field, value in edit.settings.items()}
    circuit = replace(old, elements=tuple(e for e in elements if e is not None))
    return replace(circuit, **settings) if settings else circuit  # type: ignore[arg-type]


# What differs -------------------------------------------------------------------------------------


def _is_edited(
    a: Element, b: Element, before: Wires, after: Wires, nodes: Mapping[str, str]
) -> bool:
    return signature(a) != signature(b) or before.connection(a, str) != after.connection(
        b, nodes.get
    )


def _details(
    a: Element, b: Element, before: Wires, after: Wires, nodes: Mapping[str, str]
) -> tuple[Detail, ...]:
    rows = []
    if before.connection(a, str) != after.connection(b, nodes.get):
        rows.append(_connection(a, b, nodes))
    elif isinstance(a, Capacitor) and before.connection(a, str, True) != after.connection(
        b, nodes.get, True
    ):
        # The same to the equations, not to an electrolytic capacitor.
        rows.append(Detail("terminals (polarity)", " ".join(a.nodes), " ".join(b.nodes)))
    old_model, new_model = _model_name(a), _model_name(b)
    if old_model.casefold() != new_model.casefold():
        rows.append(Detail("model", old_model, new_model))
    old, new = properties(a), properties(b)
    for key in {**old, **new}:
        if old.get(key) != new.get(key):
            unit = (new.get(key) or old[key])[1]
            values = [side[key][0] if key in side else None for side in (old, new)]
            rows.append(Detail(key, values[0], values[1], unit))
    return tuple(rows)


def _model_name(element: Element) -> str:
    return element.model.name if isinstance(element, SemiconductorDevice) else ""


def _connection(a: Element, b: Element, nodes: Mapping[str, str]) -> Detail:
    if list(a.nodes) != [nodes.get(node) for node in b.nodes]:
        return Detail("nodes", " ".join(a.nodes), " ".join(b.nodes))
    return Detail("written as", a.span.text.strip(), b.span.text.strip())


def _whole(element: Element, side: str) -> tuple[Detail, ...]:
    """What an added or removed part is, in short: its value and its nodes, or its model."""
    found: list[tuple[str, float | str, str]] = []
    if isinstance(element, SemiconductorDevice):
        found.append(("model", element.model.name, ""))
    else:
        found += [(what, *given) for what, given in properties(element).items()]
    if element.nodes:
        found.append(("nodes", " ".join(element.nodes), ""))
    return tuple(
        Detail(what, value if side == "old" else None, value if side == "new" else None, unit)
        for what, value, unit in found
    )


def _setting_changes(old: Circuit, new: Circuit) -> list[PartChange]:
    rows = []
    for field, label, unit in _SETTINGS:
        a, b = getattr(old, field), getattr(new, field)
        if a != b:
            detail = Detail(label, a, b, unit)
            rows.append(PartChange("changed", "circuit", label, label, (detail,), True, None, None))
    return rows


# Edits --------------------------------------------------------------------------------------------


class _Translation:
    """Parts of the new circuit in the names of the old one; what is new keeps a free name."""

    def __init__(self, old: Circuit, new: Circuit, matching: Matching) -> None:
        self.nodes = dict(matching.nodes)
        taken = {node.casefold() for node in old.nodes}
        self.kept_nodes = set(self.nodes.values())
        for node in new.nodes:
            if node not in self.nodes:
                self.nodes[node] = _free(node, taken)
        self.names = {b.name.casefold(): a.name for a, b in matching.pairs}
        taken = {element.name.casefold() for element in old.elements}
        for element in matching.added:
            self.names[element.name.casefold()] = _free(element.name, taken)

    def __call__(self, element: Element) -> Element:
        moved = replace(
            element,
            name=self._name(element.name),
            nodes=tuple(self.nodes[node] for node in element.nodes),
        )
        match moved:
            case Coupling():
                return replace(moved, inductors=tuple(map(self._name, moved.inductors)))
            case ControlledSource():
                return replace(
                    moved,
                    control_nodes=tuple(self._node(node) for node in moved.control_nodes),
                    control_source=self._name(moved.control_source),
                )
            case BehaviouralSource():
                expression = substitute(moved.expression, {}, None, self._node, self._name)
                return replace(moved, expression=expression)
        return moved

    def _node(self, node: str) -> str:
        return self.nodes.get(node, node)

    def _name(self, name: str) -> str:
        return self.names.get(name.casefold(), name)


def _free(wanted: str, taken: set[str]) -> str:
    """The wanted name, with a mark behind it while it is taken; it is taken from now on."""
    name = wanted
    while name.casefold() in taken:
        name += "'"
    taken.add(name.casefold())
    return name


def _grouped(swaps: Sequence[Swap], old_nodes: set[str], kept_nodes: set[str]) -> list[list[Swap]]:
    """Swaps that only make sense together, in the order of their first.

    They touch a net that only one circuit has, refer to a part that comes or goes, or change
    one and the same model card.
    """
    keys: dict[object, int] = {}
    leader = list(range(len(swaps)))

    def root(index: int) -> int:
        while leader[index] != index:
            index = leader[index]
        return index

    for index, swap in enumerate(swaps):
        for key in _ties(swap, old_nodes, kept_nodes):
            first = root(keys.setdefault(key, index))
            leader[max(first, root(index))] = min(first, root(index))
    groups: dict[int, list[Swap]] = {}
    for index, swap in enumerate(swaps):
        groups.setdefault(root(index), []).append(swap)
    return list(groups.values())


def _ties(swap: Swap, old_nodes: set[str], kept_nodes: set[str]) -> Iterable[object]:
    a, b = swap.before, swap.after
    for element in (a, b):
        if element is None:
            continue
        for node in element.nodes:
            if node != "0" and (node not in old_nodes or node not in kept_nodes):
                yield "node", node
        for name in _references(element):
            yield "part", name.casefold()
    if a is None or b is None:
        yield from (("part", element.name.casefold()) for element in (a, b) if element)
    if model := _edited_model(a, b):
        yield "model", model


def _references(element: Element) -> tuple[str, ...]:
    if isinstance(element, Coupling):
        return element.inductors
    if isinstance(element, ControlledSource) and element.control_source:
        return (element.control_source,)
    return ()


def _edited_model(a: Element | None, b: Element | None) -> str:
    """The name of the model when its card is all that changed."""
    if not isinstance(a, SemiconductorDevice) or not isinstance(b, SemiconductorDevice):
        return ""
    if a.model.name.casefold() != b.model.name.casefold() or a.nodes != b.nodes:
        return ""
    return a.model.name.casefold() if a.parameters == b.parameters else ""


def _edit(swaps: Sequence[Swap]) -> Edit:
    parts = tuple(swap.name for swap in swaps)
    models = {_edited_model(swap.before, swap.after) for swap in swaps}
    label = _listed(parts)
    if "" not in models and len(models) == 1:
        model = swaps[0].after
        assert isinstance(model, SemiconductorDevice)
        label = f"model {model.model.name} ({label})"
    return Edit(label, parts, tuple(swaps), {})


def _listed(parts: Sequence[str]) -> str:
    shown = parts[:_PARTS_NAMED]
    more = len(parts) - len(shown)
    if more:
        return f"{', '.join(shown)} and {more} more"
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"
