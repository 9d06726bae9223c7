"""The equivalent circuit that a part sees, drawn from its hand expression.

Series resistances stand one above the other, parallel ones side by side. A resistance that is no
part of the board, such as (rπ + RB)/(β+1), is one resistor with a dashed outline; a long one gets
a letter, and its expression stands under the drawing.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import field
from html import escape

from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.report.expressions import (
    Bridge,
    HandExpression,
    Node,
    hand_value,
    parse_hand,
    value_of,
    written,
)
from tauledger.report.html_text import split_symbol
from tauledger.report.inert import clip, inert

AGREES = 0.06
"""A drawing must reproduce the exact resistance this well; expressions are made to 5 %."""
_MOST_RESISTORS = 16
_WIDEST = 800.0
_LONGEST_LABEL = 16
_CHARACTER = 7.4
"""Width of a character of a label."""
_CELL, _BODY, _HALF = 58.0, 30.0, 6.0
"""Height of a resistor with its leads and without, and half its width."""
_GAP = 16.0
_LETTERS = "abcdefghijklmnopqrstuvwxyz"


@dataclass(frozen=True, slots=True)
class Drawing:
    """``svg`` is complete and escaped; ``key`` explains the letters in it."""

    svg: str
    key: tuple[tuple[str, Node], ...]
    width: float


@dataclass(frozen=True, slots=True)
class _Block:
    """A two-terminal piece: it is entered at (anchor, 0) and left at (anchor, height)."""

    width: float
    height: float
    anchor: float
    draw: Callable[[float, float], str]


@dataclass(frozen=True, slots=True)
class _Maker:
    """Turns nodes into blocks, handing out letters for what is too long to write."""

    symbols: Mapping[str, float]
    key: list[tuple[str, Node]] = field(default_factory=list)

    def block(self, node: Node) -> _Block:
        if node.kind == "sum" and all(part.kind != "minus" for part in node.parts):
            return _stacked([self.block(part) for part in node.parts])
        if node.kind == "parallel":
            return _abreast([self.block(part) for part in node.parts])
        return self.resistor(node)

    def resistor(self, node: Node) -> _Block:
        label = written(node)
        if node.kind != "name" and len(label) > _LONGEST_LABEL:
            letter = next((sign for sign, known in self.key if known == node), "")
            if not letter:
                letter = _LETTERS[len(self.key) % len(_LETTERS)]
                self.key.append((letter, node))
            label = f"({letter})"
        shown = format_quantity(value_of(node, self.symbols), "Ω")
        own = split_symbol(label)[1] == "" and node.kind == "name"
        words = _label(node if label == written(node) else None, label)
        width = _HALF + 7 + _CHARACTER * max(min(len(label), _LONGEST_LABEL + 6), len(shown))

        def draw(x: float, y: float) -> str:
            top = y + (_CELL - _BODY) / 2
            dashed = "" if own else " im"
            return (
                f"{_line(x, y, x, top)}{_line(x, top + _BODY, x, y + _CELL)}"
                f'<rect class="rs{dashed}" x="{x - _HALF:g}" y="{top:g}" width="{2 * _HALF:g}" '
                f'height="{_BODY:g}"/>'
                f'<text class="lb" x="{x + _HALF + 7:g}" y="{y + _CELL / 2 - 3:g}">{words}</text>'
                f'<text class="vl" x="{x + _HALF + 7:g}" y="{y + _CELL / 2 + 12:g}">'
                f"{escape(shown)}</text>"
            )

        return _Block(_HALF + width, _CELL, _HALF, draw)


def draw_seen(
    words: str,
    part: str,
    value: str,
    nodes: tuple[str, str],
    resistance_ohm: float | None,
    symbols: Mapping[str, float],
    anchor: str,
) -> Drawing | None:
    """The circuit a part sees, or None where its expression cannot be drawn truly.

    ``words`` is the expression, ``anchor`` a word of ours that is unique on the page. A drawing
    is made only if the values at its symbols give ``resistance_ohm``.
    """
    hand = parse_hand(words)
    if hand is None or not resistance_ohm or _resistors(hand) > _MOST_RESISTORS:
        return None
    worked_out = hand_value(hand, symbols)
    if not abs(worked_out / resistance_ohm - 1.0) <= AGREES:
        return None
    maker = _Maker(symbols)
    if isinstance(hand.body, Bridge):
        content, width, height = _narrowest_bridge(maker, hand.body, part, value)
    else:
        content, width, height = _port(maker, hand.body, part, value, nodes)
    if width > _WIDEST:
        return None
    spoken = _spoken(hand, symbols, part)
    svg = (
        f'<svg class="sch" viewBox="0 0 {width:.0f} {height:.0f}" width="{width:.0f}" '
        f'height="{height:.0f}" role="img" aria-labelledby="{anchor}-t">'
        f'<title id="{anchor}-t">{escape(spoken)}</title>{content}</svg>'
    )
    return Drawing(svg, tuple(maker.key), width)


# Two arrangements ---------------------------------------------------------------------------------

_TOP = 26.0


def _port(
    maker: _Maker, body: Node, part: str, value: str, nodes: tuple[str, str]
) -> tuple[str, float, float]:
    """The part on the left, its port, what it sees on the right."""
    seen = maker.block(body)
    name, left = _cut(part), 14.0
    port = left + 24 + _CHARACTER * max(len(name), len(value), 5)
    x = port + 22 + seen.anchor
    height = max(seen.height, 64.0)
    bottom = _TOP + height
    middle = (_TOP + bottom) / 2
    ends = [_cut(node) for node in nodes]
    if nodes[0] == "0":
        ends.reverse()
    top_end, bottom_end = ends
    content = (
        _capacitor(left, middle, upright=True, top=_TOP, bottom=bottom)
        + f'<text class="lb" x="{left + 17:g}" y="{middle - 3:g}">{escape(name)}</text>'
        + f'<text class="vl" x="{left + 17:g}" y="{middle + 12:g}">{escape(value)}</text>'
        + _line(left, _TOP, port, _TOP, "th")
        + _line(left, bottom, port, bottom, "th")
        + _line(port, _TOP, x, _TOP)
        + _line(port, bottom, x, bottom)
        + _line(x, _TOP + seen.height, x, bottom)
        + seen.draw(x, _TOP)
        + _terminal(port, _TOP)
        + _terminal(port, bottom)
        + f'<text class="nd" x="{left - 8:g}" y="{_TOP - 10:g}">{escape(top_end)}</text>'
    )
    if bottom_end == "0":
        content += _ground(left + 20, bottom)
    else:
        content += (
            f'<text class="nd" x="{left - 8:g}" y="{bottom + 19:g}">{escape(bottom_end)}</text>'
        )
    longest = left + _CHARACTER * max(len(top_end), len(bottom_end))
    return content, max(port + 22 + seen.width, longest) + 6, bottom + 26


def _narrowest_bridge(
    maker: _Maker, bridge: Bridge, part: str, value: str
) -> tuple[str, float, float]:
    """With every resistor where there is room, else with a side, or both, as one resistor."""
    for first_whole, second_whole in ((True, True), (False, True), (True, False), (False, False)):
        maker.key.clear()
        first = maker.block(bridge.first) if first_whole else maker.resistor(bridge.first)
        second = maker.block(bridge.second) if second_whole else maker.resistor(bridge.second)
        drawn = _bridge(maker, bridge, first, second, f"{_cut(part)}  {value}")
        if drawn[1] <= _WIDEST:
            break
    return drawn


def _bridge(
    maker: _Maker, bridge: Bridge, first: _Block, second: _Block, label: str
) -> tuple[str, float, float]:
    """The part across the top from input to output, both sides to ground, and the source."""
    top = 44.0
    left = 14.0 + first.anchor
    port = 14.0 + first.width + 6
    span = port + 26 + _CHARACTER * len(label)
    right = span + second.anchor
    source = span + second.width + 26
    bottom = top + max(first.height, second.height, 70.0)
    middle = (port + right) / 2
    gm = format_quantity(value_of(bridge.transconductance, maker.symbols), "S")
    content = (
        _capacitor(top, middle, upright=False, top=port, bottom=right)
        + _line(left, top, port, top)
        + f'<text class="lb mid" x="{middle:g}" y="{top - 19:g}">{escape(label)}</text>'
        + first.draw(left, top)
        + second.draw(right, top)
        + _line(left, top + first.height, left, bottom)
        + _line(right, top + second.height, right, bottom)
        + _line(right, top, source, top)
        + _line(left, bottom, source, bottom)
        + _source(source, top, bottom, f"{gm}·v")
        + _terminal(port, top)
        + _terminal(right, top)
        + f'<text class="nd" x="{left - 8:g}" y="{top - 10:g}">v</text>'
        + _ground(left + 20, bottom)
    )
    return content, source + 22 + _CHARACTER * (len(gm) + 3), bottom + 26


def _abreast(blocks: Sequence[_Block]) -> _Block:
    """In parallel: side by side between two rails."""
    height = max(block.height for block in blocks) + _GAP
    places, edge = [], 0.0
    for block in blocks:
        places.append(edge)
        edge += block.width + _GAP

    def draw(x: float, y: float) -> str:
        start = x - blocks[0].anchor
        drawn = []
        for block, place in zip(blocks, places, strict=True):
            at = start + place + block.anchor
            drawn += [
                block.draw(at, y + _GAP / 2),
                _line(at, y, at, y + _GAP / 2),
                _line(at, y + _GAP / 2 + block.height, at, y + height),
            ]
        last = start + places[-1] + blocks[-1].anchor
        drawn += [_line(x, y, last, y), _line(x, y + height, last, y + height)]
        return "".join(drawn)

    return _Block(edge - _GAP, height, blocks[0].anchor, draw)


def _stacked(blocks: Sequence[_Block]) -> _Block:
    """In series: one above the other on one line."""
    anchor = max(block.anchor for block in blocks)
    width = anchor + max(block.width - block.anchor for block in blocks)

    def draw(x: float, y: float) -> str:
        drawn = []
        for block in blocks:
            drawn.append(block.draw(x, y))
            y += block.height
        return "".join(drawn)

    return _Block(width, sum(block.height for block in blocks), anchor, draw)


# Marks --------------------------------------------------------------------------------------------


def _line(x1: float, y1: float, x2: float, y2: float, kind: str = "wr") -> str:
    if x1 == x2 and y1 == y2:
        return ""
    return f'<path class="{kind}" d="M{x1:g} {y1:g}L{x2:g} {y2:g}"/>'


def _terminal(x: float, y: float) -> str:
    return f'<circle class="tm" cx="{x:g}" cy="{y:g}" r="3"/>'


def _ground(x: float, y: float) -> str:
    return f'<path class="wr" d="M{x:g} {y:g}v8m-8 0h16m-13 4h10m-7 4h4"/>'


def _capacitor(across: float, middle: float, upright: bool, top: float, bottom: float) -> str:
    """Two plates, drawn thin: it is looked at, and no part of what it sees."""
    if upright:
        return (
            _line(across, top, across, middle - 3, "th")
            + _line(across, middle + 3, across, bottom, "th")
            + f'<path class="pl" d="M{across - 9:g} {middle - 3:g}h18m-18 6h18"/>'
        )
    return (
        _line(top, across, middle - 3, across, "th")
        + _line(middle + 3, across, bottom, across, "th")
        + f'<path class="pl" d="M{middle - 3:g} {across - 9:g}v18m6 -18v18"/>'
    )


def _source(x: float, top: float, bottom: float, label: str) -> str:
    """A controlled current source: a rhomb with an arrow down to ground."""
    middle = (top + bottom) / 2
    return (
        _line(x, top, x, middle - 15)
        + _line(x, middle + 15, x, bottom)
        + f'<path class="rs" d="M{x:g} {middle - 15:g}l10 15l-10 15l-10 -15z"/>'
        + f'<path class="wr" d="M{x:g} {middle - 8:g}v15m-3 -5l3 5l3 -5"/>'
        + f'<text class="lb" x="{x + 15:g}" y="{middle + 4:g}">{escape(label)}</text>'
    )


def _label(node: Node | None, label: str) -> str:
    """The words at a resistor, a symbol's index set low."""
    if node is None or node.kind != "name":
        return escape(inert(label))
    base, index = split_symbol(node.text)
    if not index:
        return escape(_cut(node.text))
    return (
        f'<tspan class="it">{escape(base)}</tspan>'
        f'<tspan class="sb" dy="3">{escape(_cut(index))}</tspan>'
    )


def _cut(words: str) -> str:
    return clip(inert(words), 14)


# Words --------------------------------------------------------------------------------------------


def _resistors(hand: HandExpression) -> int:
    if isinstance(hand.body, Bridge):
        return _leaves(hand.body.first) + _leaves(hand.body.second)
    return _leaves(hand.body)


def _leaves(node: Node) -> int:
    if node.kind in ("sum", "parallel"):
        return sum(_leaves(part) for part in node.parts)
    return 1


def _spoken(hand: HandExpression, symbols: Mapping[str, float], part: str) -> str:
    """The drawing in words."""
    if isinstance(hand.body, Bridge):
        gm = format_quantity(value_of(hand.body.transconductance, symbols), "S")
        seen = (
            f"on its input side {_said(hand.body.first, symbols)}; on its output side "
            f"{_said(hand.body.second, symbols)} and a current source of {gm} times the input"
        )
    else:
        seen = _said(hand.body, symbols)
    return f"{_cut(part)} sees {seen}"


def _said(node: Node, symbols: Mapping[str, float], inner: bool = False) -> str:
    if node.kind in ("sum", "parallel"):
        joint = " in series with " if node.kind == "sum" else " in parallel with "
        words = joint.join(_said(part, symbols, True) for part in node.parts)
        return f"({words})" if inner else words
    value = value_of(node, symbols)
    shown = f" {format_quantity(value, 'Ω')}" if math.isfinite(value) else ""
    return inert(written(node)) + shown
