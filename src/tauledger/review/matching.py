"""Which part of the new circuit is which part of the old one.

A part is first looked for under its designator, letter case ignored. What then differs, and what
has no namesake, is looked for by its position in the graph: same kind, same value, same
neighbourhood. Nets are matched the same way, since an exporter may rename every one of them.

Two ways lead to the nets. The parts of one name vote for the nets at their terminals; and, for a
netlist numbered afresh, the colours of both graphs are refined together from kinds and values
(the refinement of Weisfeiler and Leman, 1968 [M]), and nets whose colour is unique are the same.
The names count, unless the colours leave less than half as many parts unexplained.
"""

from __future__ import annotations

from collections import Counter, defaultdict
from collections.abc import Hashable, Iterable, Mapping, Sequence

from tauledger.circuit.elements import GROUND, Circuit, Element
from tauledger.records import dataclass
from tauledger.review.properties import Wires, is_symmetric, part_kind, signature

_ROUNDS = 12
_ALIKE, _EDITED, _DECISIVE = 4, 1, 1_000_000
"""Votes of a part that is alike in both circuits, and of one that was edited."""

Pair = tuple[Element, Element]


@dataclass(frozen=True, slots=True)
class Matching:
    """The parts of both circuits, paired; ``nodes`` is from new nodes to old ones."""

    pairs: tuple[Pair, ...]
    removed: tuple[Element, ...]
    added: tuple[Element, ...]
    nodes: Mapping[str, str]


def match(old: Circuit, new: Circuit) -> Matching:
    """Pair the parts and nets of two circuits."""
    namesakes = _namesakes(old.elements, new.elements)
    nodes = _by_votes(old, new, namesakes)
    settled = _settle(old, new, nodes)
    if unexplained := min(len(old.elements), len(new.elements)) - len(settled):
        structural = _spread(old, new, _by_structure(old, new))
        other = _settle(old, new, structural)
        # Names that hold for most of the circuit are the engineer's own account of the edit.
        if 2 * (unexplained - (len(other) - len(settled))) < unexplained:
            nodes, settled = structural, other
    return _with_edited(old, new, nodes, settled)


def _namesakes(old: Iterable[Element], new: Iterable[Element]) -> list[Pair]:
    by_name = {element.name.casefold(): element for element in new}
    found = []
    for element in old:
        other = by_name.get(element.name.casefold())
        if other is not None and part_kind(other) == part_kind(element):
            found.append((element, other))
    return found


# Nets ---------------------------------------------------------------------------------------------


def _by_votes(old: Circuit, new: Circuit, namesakes: Sequence[Pair]) -> dict[str, str]:
    """New node → old node, from the terminals of parts with one name.

    A net that keeps its name at a terminal of a transistor or source is the same one, however
    many resistors and capacitors were moved to another.
    """
    votes: Counter[tuple[str, str]] = Counter()
    for before, after in namesakes:
        weight = _ALIKE if signature(before) == signature(after) else _EDITED
        for a, b in _terminal_pairs(before, after):
            votes[a, b] += weight
            if a.casefold() == b.casefold() and not is_symmetric(before):
                votes[a, b] += _DECISIVE
    same = {node.casefold(): node for node in new.nodes}
    for node in old.nodes:
        if (other := same.get(node.casefold())) is not None:
            votes[node, other] += _EDITED
    return _injective(votes)


def _terminal_pairs(before: Element, after: Element) -> list[tuple[str, str]]:
    """Which node of the one is which of the other; resistors and capacitors may be turned."""
    straight = list(zip(before.nodes, after.nodes, strict=False))
    if not is_symmetric(before) or _agree(straight):
        return straight
    turned = list(zip(before.nodes, reversed(after.nodes), strict=False))
    return turned if _agree(turned) else straight


def _agree(pairs: Iterable[tuple[str, str]]) -> bool:
    return any(a.casefold() == b.casefold() for a, b in pairs)


def _injective(votes: Mapping[tuple[str, str], int]) -> dict[str, str]:
    """The most voted pairs first, each node once; ground is ground."""
    ranked = sorted(
        votes, key=lambda pair: (-votes[pair], pair[0].casefold() != pair[1].casefold())
    )
    found, taken = {GROUND: GROUND}, {GROUND}
    for old, new in ranked:
        if new not in found and old not in taken:
            found[new] = old
            taken.add(old)
    return found


def _by_structure(old: Circuit, new: Circuit) -> dict[str, str]:
    """New node → old node, by colours that only one node of each circuit has."""
    palette: dict[Hashable, int] = {}
    sides = [_Colouring(circuit, palette) for circuit in (old, new)]
    history = []
    for _ in range(_ROUNDS):
        history.append([dict(side.nodes) for side in sides])
        for side in sides:
            side.refine()
    found, taken = {GROUND: GROUND}, {GROUND}
    # The deepest colours see most of the circuit; near an edit only shallow ones still agree.
    for old_colours, new_colours in reversed(history):
        before = _unique({n: c for n, c in old_colours.items() if n not in taken})
        after = _unique({n: c for n, c in new_colours.items() if n not in found})
        for colour in (colour for colour in before if colour in after):
            found[after[colour]] = before[colour]
            taken.add(before[colour])
    return found


def _spread(old: Circuit, new: Circuit, nodes: dict[str, str]) -> dict[str, str]:
    """More nodes, from parts that nothing else resembles as seen from the nodes known so far.

    First parts of equal value, then parts of one kind: what was edited itself still tells where
    its other end goes.
    """
    found, taken = dict(nodes), set(nodes.values())
    for _ in range(_ROUNDS):
        before = len(found)
        for valued in (True, False):
            here = _lone(old, {node: node for node in taken}, valued)
            there = _lone(new, found, valued)
            # In the order of the circuit, not of a set: which comes first can decide.
            for key in (key for key in here if key in there):
                for a, b in _open_ends(here[key], there[key], found, taken):
                    found[b] = a
                    taken.add(a)
            if len(found) > before:
                break
        if len(found) == before:
            return found
    return found


def _lone(circuit: Circuit, known: Mapping[str, str], valued: bool) -> dict[Hashable, Element]:
    """The parts with an unknown node that are alone in what they are and in what they touch."""
    groups: dict[Hashable, list[Element]] = defaultdict(list)
    for element in circuit.elements:
        around = [known.get(node, "") for node in element.nodes]
        if "" in around:
            seen = tuple(sorted(around) if is_symmetric(element) else around)
            groups[(signature(element) if valued else part_kind(element)), seen].append(element)
    return {key: group[0] for key, group in groups.items() if len(group) == 1}


def _open_ends(
    before: Element, after: Element, known: Mapping[str, str], taken: set[str]
) -> list[tuple[str, str]]:
    """The unknown nodes of two parts, paired; none when they could be paired either way."""
    a = [node for node in before.nodes if node not in taken]
    b = [node for node in after.nodes if node not in known]
    if len(a) != len(b) or len(set(a)) != len(a) or (is_symmetric(before) and len(a) > 1):
        return []
    return list(zip(a, b, strict=True))


def _unique(colours: Mapping[str, int]) -> dict[int, str]:
    counts = Counter(colours.values())
    return {colour: node for node, colour in colours.items() if counts[colour] == 1}


class _Colouring:
    """Nodes and parts of one circuit with colours from a palette shared with the other."""

    def __init__(self, circuit: Circuit, palette: dict[Hashable, int]) -> None:
        self.palette = palette
        self.elements = circuit.elements
        self.kinds = [self._colour(("part", signature(e))) for e in circuit.elements]
        self.nodes = {node: self._colour("node") for node in circuit.nodes}
        self.nodes[GROUND] = self._colour("ground")

    def refine(self) -> None:
        """One round: a part takes in its nodes' colours, a node those of its parts."""
        seen: dict[str, list[tuple[int, int]]] = defaultdict(list)
        for element, kind in zip(self.elements, self.kinds, strict=True):
            around: Sequence[int] = [self.nodes[node] for node in element.nodes]
            turned = is_symmetric(element)
            colour = self._colour(("part", kind, tuple(sorted(around) if turned else around)))
            for place, node in enumerate(element.nodes):
                seen[node].append((colour, 0 if turned else place))
        self.nodes = {
            node: self._colour(("node", colour, tuple(sorted(seen[node]))))
            for node, colour in self.nodes.items()
        }

    def _colour(self, key: Hashable) -> int:
        return self.palette.setdefault(key, len(self.palette))


# Parts --------------------------------------------------------------------------------------------


def _settle(old: Circuit, new: Circuit, nodes: Mapping[str, str]) -> list[Pair]:
    """Pairs that are the same part: kind, value and connections; a namesake counts first."""
    before, after = Wires(old), Wires(new)
    places: dict[Hashable, dict[str, Element]] = defaultdict(dict)
    for element in new.elements:
        connection = after.connection(element, nodes.get)
        if connection is not None:
            places[signature(element), connection][element.name.casefold()] = element
    keys = {
        element.name: (signature(element), before.connection(element, str))
        for element in old.elements
    }
    pairs = []
    for namesake in (True, False):
        for element in old.elements:
            candidates = places.get(keys.get(element.name))
            if not candidates:
                continue
            name = element.name.casefold() if namesake else next(iter(candidates))
            if name in candidates:
                pairs.append((element, candidates.pop(name)))
                del keys[element.name]
    return pairs


def _with_edited(
    old: Circuit, new: Circuit, nodes: Mapping[str, str], settled: Sequence[Pair]
) -> Matching:
    """Pair what is left by name, then by place alone, then by value and one end; what is left
    then was removed or added."""
    pairs = list(settled)
    removed, added = _left(old, new, pairs)
    pairs += _namesakes(removed, added)
    removed, added = _left(old, new, pairs)
    pairs += _in_one_place(Wires(old), Wires(new), removed, added, nodes)
    removed, added = _left(old, new, pairs)
    pairs += _with_one_end_in_place(removed, added, nodes)
    removed, added = _left(old, new, pairs)
    order = {element.name: index for index, element in enumerate(old.elements)}
    pairs.sort(key=lambda pair: order[pair[0].name])
    return Matching(tuple(pairs), tuple(removed), tuple(added), nodes)


def _left(old: Circuit, new: Circuit, pairs: Iterable[Pair]) -> tuple[list[Element], list[Element]]:
    pairs = list(pairs)
    before = {pair[0].name for pair in pairs}
    after = {pair[1].name for pair in pairs}
    return (
        [element for element in old.elements if element.name not in before],
        [element for element in new.elements if element.name not in after],
    )


def _in_one_place(
    before: Wires,
    after: Wires,
    removed: Iterable[Element],
    added: Iterable[Element],
    nodes: Mapping[str, str],
) -> list[Pair]:
    """Parts of one kind between the same nodes, where only one went and only one came."""
    gone: dict[Hashable, list[Element]] = defaultdict(list)
    come: dict[Hashable, list[Element]] = defaultdict(list)
    for element in removed:
        gone[part_kind(element), before.connection(element, str)].append(element)
    for element in added:
        if (connection := after.connection(element, nodes.get)) is not None:
            come[part_kind(element), connection].append(element)
    return [
        (gone[key][0], come[key][0])
        for key in gone
        if len(gone[key]) == 1 and len(come.get(key, ())) == 1
    ]


def _with_one_end_in_place(
    removed: Iterable[Element], added: Iterable[Element], nodes: Mapping[str, str]
) -> list[Pair]:
    """Parts of one kind and value that kept one end: another part was put in series, say."""
    gone: dict[Hashable, list[Element]] = defaultdict(list)
    come: dict[Hashable, list[Element]] = defaultdict(list)
    for element in removed:
        for node in element.nodes:
            gone[signature(element), node].append(element)
    for element in added:
        for node in element.nodes:
            come[signature(element), nodes.get(node)].append(element)
    pairs: dict[str, Pair] = {}
    taken: set[str] = set()
    for key, group in gone.items():
        others = come.get(key, [])
        lone = len(group) == 1 and len(others) == 1
        if lone and group[0].name not in pairs and others[0].name not in taken:
            pairs[group[0].name] = group[0], others[0]
            taken.add(others[0].name)
    return list(pairs.values())
