"""Hand expressions read back into structure, so that they can be typeset, worked out and drawn.

The notation is the one of :mod:`tauledger.corners`: ``+`` is series, ``‖`` parallel and binds
tighter, ``·`` and ``/`` bind tightest, from left to right. Reading never fails loudly: what does
not follow the notation (a designator with a plus sign in it, say) gives None, and stays text.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import field, replace

from tauledger.records import dataclass

LONGEST = 2000
_DEEPEST = 40
_TOKEN = re.compile(
    r"(?P<number>\d+(?:\.\d+)?(?:e[+-]?\d+)?(?: [fpnµmkMGT]?[ΩSAVFsH](?![\w.]))?(?![\w.]))"
    r"|(?P<name>[^\s+−‖·/()=,\[\]]+(?:\([^\s+−‖·/()=,\[\]]+\))?)"
    r"|(?P<op> \+ | − |\+|‖|·|/|\(|\)|−)"
)
_MILLER = re.compile(r" \[Miller: [^\[\]]*\]")
_FEEDBACK = re.compile(
    r"\((?P<body>.*)\)·(?P<short>1|\(1 [+−] [\d.e+-]+\))/(?P<open>1|\(1 [+−] [\d.e+-]+\))"
)
_BRIDGE = re.compile(r"R_in \+ R_out \+ (?P<gm>gm[^\s·]*)·R_in·R_out")


@dataclass(frozen=True, slots=True)
class Node:
    """One step of an expression.

    ``kind`` is ``name``, ``number``, ``sum``, ``parallel``, ``product``, ``quotient`` or
    ``minus``; ``text`` is a leaf's own text, ``parts`` what an inner node joins.
    """

    kind: str
    text: str = ""
    parts: tuple[Node, ...] = ()


@dataclass(frozen=True, slots=True)
class Bridge:
    """What a part from the input to the inverted output of a transistor sees."""

    first: Node
    second: Node
    transconductance: Node


@dataclass(frozen=True, slots=True)
class HandExpression:
    """The resistance a part sees, in structure."""

    body: Node | Bridge
    feedback: tuple[float, float] | None = None
    """Return ratios with the port shorted and open, by which the body is multiplied."""
    around: str = ""
    """What was set to zero to find them."""
    definitions: Mapping[str, Node] = field(default_factory=dict)


def parse(text: str) -> Node | None:
    """One expression without abbreviations, or None when it does not follow the notation."""
    if len(text) > LONGEST:
        return None
    tokens: list[tuple[str, str]] = []
    place = 0
    while place < len(text):
        found = _TOKEN.match(text, place)
        if found is None:
            return None
        tokens.append((found.lastgroup or "", found[0].strip()))
        place = found.end()
    reader = _Reader(tokens)
    try:
        node = reader.sum(0)
    except ValueError:
        return None
    return node if reader.at_end else None


def without_miller(text: str) -> str:
    """A hand expression without the second form in brackets."""
    return _MILLER.sub("", text)


def parse_hand(text: str) -> HandExpression | None:
    """A whole hand expression with its abbreviations and its feedback factor, or None."""
    body, *rest = without_miller(text).split(", ")
    definitions: dict[str, Node] = {}
    around = ""
    for entry in rest:
        name, sign, value = entry.partition(" = ")
        node = parse(value) if sign else None
        if node is not None:
            definitions[name] = node
        elif entry.startswith("return ratios of "):
            around = entry.removeprefix("return ratios of ")
        else:
            return None
    feedback = None
    if around:
        found = _FEEDBACK.fullmatch(body)
        if found is None:
            return None
        body, feedback = found["body"], (_ratio(found["short"]), _ratio(found["open"]))
    whole = _body(body, definitions)
    return None if whole is None else HandExpression(whole, feedback, around, definitions)


def _ratio(text: str) -> float:
    """T of ``(1 + T)``, ``(1 − T)`` or ``1``."""
    _, sign, size = text.strip("()").partition("−" if "−" in text else " + ")
    return (-1.0 if sign == "−" else 1.0) * float(size) if sign else 0.0


def _body(text: str, definitions: Mapping[str, Node]) -> Node | Bridge | None:
    bridge = _BRIDGE.fullmatch(text)
    if bridge is None or not {"R_in", "R_out"} <= set(definitions):
        return parse(text)
    gm = definitions.get(bridge["gm"]) or parse(bridge["gm"])
    return None if gm is None else Bridge(definitions["R_in"], definitions["R_out"], gm)


class _Reader:
    """Recursive descent over the tokens; raises ValueError where they do not fit."""

    def __init__(self, tokens: list[tuple[str, str]]) -> None:
        self._tokens = tokens
        self._next = 0

    @property
    def at_end(self) -> bool:
        return self._next == len(self._tokens)

    def sum(self, depth: int) -> Node:
        if depth > _DEEPEST:
            raise ValueError("nested too deeply")
        terms = [self._signed(depth)]
        while operator := self._take("+", "−"):
            term = self._parallel(depth)
            terms.append(term if operator == "+" else Node("minus", parts=(term,)))
        return terms[0] if len(terms) == 1 else Node("sum", parts=tuple(terms))

    def _signed(self, depth: int) -> Node:
        if self._take("−"):
            return Node("minus", parts=(self._parallel(depth),))
        return self._parallel(depth)

    def _parallel(self, depth: int) -> Node:
        branches = [self._product(depth)]
        while self._take("‖"):
            branches.append(self._product(depth))
        return branches[0] if len(branches) == 1 else Node("parallel", parts=tuple(branches))

    def _product(self, depth: int) -> Node:
        node = self._atom(depth)
        while operator := self._take("·", "/"):
            other = self._atom(depth)
            if operator == "/":
                node = Node("quotient", parts=(node, other))
            elif node.kind == "product":
                node = replace(node, parts=(*node.parts, other))
            else:
                node = Node("product", parts=(node, other))
        return node

    def _atom(self, depth: int) -> Node:
        if self._take("("):
            inner = self.sum(depth + 1)
            if not self._take(")"):
                raise ValueError("a parenthesis is left open")
            return inner
        if self.at_end or self._tokens[self._next][0] == "op":
            raise ValueError("a symbol is missing")
        kind, text = self._tokens[self._next]
        self._next += 1
        if "+" in text:
            raise ValueError("a sign inside a name")
        return Node(kind, text)

    def _take(self, *operators: str) -> str:
        if not self.at_end and self._tokens[self._next][1] in operators:
            kind, text = self._tokens[self._next]
            if kind == "op":
                self._next += 1
                return text
        return ""


def value_of(node: Node, symbols: Mapping[str, float]) -> float:
    """The value with these symbols; not-a-number when one is unknown or it cannot be worked out."""
    values = [value_of(part, symbols) for part in node.parts]
    try:
        match node.kind:
            case "name":
                return symbols.get(node.text, math.nan)
            case "number":
                return math.nan if " " in node.text else float(node.text)
            case "sum":
                return math.fsum(values)
            case "parallel":
                return 1.0 / math.fsum(1.0 / value for value in values)
            case "product":
                return math.prod(values)
            case "quotient":
                return values[0] / values[1]
            case "minus":
                return -values[0]
    except (ZeroDivisionError, OverflowError):
        pass
    return math.nan


def hand_value(hand: HandExpression, symbols: Mapping[str, float]) -> float:
    """The resistance in Ω, the feedback factor included; not-a-number as in :func:`value_of`."""
    if isinstance(hand.body, Bridge):
        first, second, gm = (
            value_of(node, symbols)
            for node in (hand.body.first, hand.body.second, hand.body.transconductance)
        )
        value = first + second + gm * first * second
    else:
        value = value_of(hand.body, {**symbols, **_defined(hand, symbols)})
    if hand.feedback:
        short, opened = hand.feedback
        value *= (1.0 + short) / (1.0 + opened) if opened != -1.0 else math.nan
    return value


def _defined(hand: HandExpression, symbols: Mapping[str, float]) -> dict[str, float]:
    return {name: value_of(node, symbols) for name, node in hand.definitions.items()}


_BINDING = {"sum": 1, "minus": 1, "parallel": 2, "product": 3, "quotient": 3}


def written(node: Node, within: int = 0) -> str:
    """The expression as text again, with no more parentheses than it needs."""
    match node.kind:
        case "sum":
            text = written(node.parts[0], 1)
            for part in node.parts[1:]:
                minus = part.kind == "minus"
                shown = written(part.parts[0], 2) if minus else written(part, 1)
                text += f" {'−' if minus else '+'} {shown}"
        case "minus":
            text = f"−{written(node.parts[0], 2)}"
        case "parallel":
            text = "‖".join(written(part, 3) for part in node.parts)
        case "product":
            text = "·".join(written(part, 3) for part in node.parts)
        case "quotient":
            divisor = node.parts[1]
            text = f"{written(node.parts[0], 3)}/{written(divisor, 4)}"
        case _:
            return node.text
    return f"({text})" if _BINDING[node.kind] < within else text
