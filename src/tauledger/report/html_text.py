"""Words, figures, symbols and tables set in HTML; every word of a netlist passes through here."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence
from html import escape

from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.report.expressions import Node, parse, written
from tauledger.report.inert import clip, inert

NAME_COLUMNS = 40
_TEXT_COLUMNS = 1200
_STACKED = 50
"""Longest numerator or denominator set above or below a bar; a longer one stays in the line."""
_SYMBOL = re.compile(
    r"(?P<base>g|r|C|f|β)(?P<sub>m'|mb|m|π|μx|μ|gs|gd|T|[a-z])?(?:\((?P<mark>.+)\))?"
)
_DASH = "—"
_NBSP = "\u00a0"


def text(words: str, columns: int = _TEXT_COLUMNS) -> str:
    """Any words, made inert and escaped."""
    return escape(clip(inert(words), columns))


def name(words: str) -> str:
    """A part, node or model name; long ones may break after a dot, dash or underscore."""
    shown = text(words, NAME_COLUMNS)
    return re.sub(r"(?<=[._/-])(?=\w)", "<wbr>", shown) if len(shown) > 12 else shown


def quantity(value: float | None, unit: str) -> str:
    """Three digits with prefix and unit on one line, or a dash for a figure that is not there."""
    if value is None:
        return _DASH
    plain = unit in ("V/V", "A/A")
    shown = format_quantity(value, "" if plain else unit) + (f" {unit}" if plain else "")
    return escape(shown.replace("-", "−").replace(" ", _NBSP))


def number(words: str) -> str:
    """A number of an expression, without a power of ten where it reads well so."""
    if "e" in words and " " not in words and 1e-3 <= abs(value := float(words)) < 1e6:
        words = f"{value:.6g}"
    return text(words).replace(" ", _NBSP)


def percent(value: float | None, signed: bool = False) -> str:
    """A share 0…1 in percent."""
    if value is None or not math.isfinite(value):
        return _DASH
    if not signed and 0 < value < 0.0005:
        return f"&lt;0.1{_NBSP}%"
    shown = f"{100 * value:{'+' if signed else ''}.1f}"
    return f"{'0.0' if shown == '-0.0' else shown}{_NBSP}%".replace("-", "−")


def roots(values: tuple[complex, ...], limit: int = 10) -> str:
    """Poles or zeros in Hz; pairs as ±j, repeated ones counted."""
    counted: dict[str, int] = {}
    for root in values:
        # The mate of a complex pair is the same entry.
        if root.imag < 0 and root.conjugate() in values:
            continue
        entry = _root(root)
        counted[entry] = counted.get(entry, 0) + 1
    shown = [entry if n == 1 else f"{entry} ({n}×)" for entry, n in counted.items()]
    more = len(shown) - limit
    return ", ".join(shown[:limit]) + (f" and {more} more" if more > 0 else "")


def _root(root: complex) -> str:
    if abs(root.imag) <= 1e-9 * abs(root.real) or root.imag == 0:
        return quantity(root.real, "Hz")
    imaginary = f"±{_NBSP}j{quantity(abs(root.imag), 'Hz')}"
    return imaginary if root.real == 0 else f"{quantity(root.real, 'Hz')} {imaginary}"


# Symbols and expressions --------------------------------------------------------------------------


def split_symbol(words: str) -> tuple[str, str]:
    """A symbol and its index: ``rπ(Q1)`` is r with π,Q1; a designator has no index."""
    found = _SYMBOL.fullmatch(words)
    if found is None or not (found["sub"] or found["base"] == "β"):
        return words, ""
    base, sub = found["base"], found["sub"]
    if sub == "m'":
        base, sub = "g\u2032", "m"
    return base, ",".join(filter(None, (sub, found["mark"])))


def symbol(words: str) -> str:
    """A symbol with its index set low; designators as they are."""
    base, index = split_symbol(words)
    if base == words and base != "β":
        return f'<span class="nm">{text(words, NAME_COLUMNS)}</span>'
    low = f"<sub>{text(index, NAME_COLUMNS)}</sub>" if index else ""
    return f"<i>{text(base)}</i>{low}"


def expression(words: str) -> str:
    """An expression set as a formula, or as its text where it does not follow the notation."""
    pieces = []
    for number, piece in enumerate(words.split(" = ")):
        node = parse(piece)
        shown = text(piece) if node is None else set_node(node)
        pieces.append(f'<span class="pc">{"= " if number else ""}{shown}</span>')
    return f'<span class="ex">{" ".join(pieces)}</span>'


def set_node(node: Node, within: int = 0) -> str:
    """An expression's HTML; short quotients are stacked, long ones stay in the line."""
    match node.kind:
        case "name":
            return symbol(node.text)
        case "number":
            return number(node.text)
        case "sum":
            body = set_node(node.parts[0], 1)
            for part in node.parts[1:]:
                minus = part.kind == "minus"
                body += f" {'−' if minus else '+'} "
                body += set_node(part.parts[0], 2) if minus else set_node(part, 1)
            binding = 1
        case "minus":
            body, binding = f"−{set_node(node.parts[0], 2)}", 1
        case "parallel":
            body, binding = '<span class="op">‖</span>'.join(set_node(p, 3) for p in node.parts), 2
        case "product":
            body, binding = '<span class="dot">·</span>'.join(_factor(p) for p in node.parts), 3
        case _:
            return _quotient(node, within)
    return f"({body})" if binding < within else body


def _factor(node: Node) -> str:
    return set_node(node, 3)


def _quotient(node: Node, within: int) -> str:
    above, below = node.parts
    if max(len(written(above)), len(written(below))) > _STACKED or _holds_quotient(node.parts):
        body = f"{set_node(above, 3)}/{set_node(below, 4)}"
        return f"({body})" if within > 3 else body
    # The slash is for those who listen or copy; the bar is drawn.
    return (
        f'<span class="fr"><span>{set_node(above)}</span><span class="vh">/</span>'
        f"<span>{set_node(below)}</span></span>"
    )


def _holds_quotient(nodes: Iterable[Node]) -> bool:
    return any(node.kind == "quotient" or _holds_quotient(node.parts) for node in nodes)


# Blocks -------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Head:
    """A column's head; ``set_right`` for figures, ``is_prose`` for words that may wrap."""

    html: str
    set_right: bool = False
    is_prose: bool = False


def table(
    caption: str, heads: Sequence[Head], rows: Iterable[Sequence[str]], hidden_caption: bool = False
) -> str:
    """A table whose first column names its rows; cells come as HTML."""
    cells = "".join(
        f'<th scope="col"{_right(head)}>{head.html}</th>' if head.html else "<td></td>"
        for head in heads
    )
    body = "".join(_table_row(heads, row) for row in rows)
    hide = ' class="vh"' if hidden_caption else ""
    return (
        f'<div class="sc" tabindex="0" role="group" aria-label="{caption}"><table>'
        f"<caption{hide}><span>{caption}</span></caption>"
        f"<thead><tr>{cells}</tr></thead><tbody>{body}</tbody></table></div>"
    )


def _table_row(heads: Sequence[Head], row: Sequence[str]) -> str:
    first, *others = row
    cells = "".join(
        f"<td{_right(head)}>{cell}</td>" for head, cell in zip(heads[1:], others, strict=True)
    )
    return f'<tr><th scope="row">{first}</th>{cells}</tr>'


def _right(head: Head) -> str:
    return ' class="r"' if head.set_right else ' class="w"' if head.is_prose else ""


def bar(share: float | None, kind: str) -> str:
    """A share 0…1 as a bar, in the colour of ``kind``; the figure itself stands beside it."""
    length = 100.0 * min(max(share or 0.0, 0.0), 1.0)
    return (
        '<svg class="bar" viewBox="0 0 100 8" preserveAspectRatio="none" aria-hidden="true">'
        f'<rect class="tk0" width="100" height="8"/>'
        f'<rect class="{kind}" width="{length:.2f}" height="8"/></svg>'
    )


def listing(lines: Iterable[str], kind: str = "notes") -> str:
    """A list of lines that come as HTML; nothing when there are none."""
    items = "".join(f"<li>{line}</li>" for line in lines)
    return f'<ul class="{kind}">{items}</ul>' if items else ""


def section(anchor: str, heading: str, body: str, aside: str = "") -> str:
    """A landmark with its heading in the margin; ``anchor`` is ours, never a netlist's word."""
    note = f'<p class="aside">{aside}</p>' if aside else ""
    return (
        f'<section id="{anchor}" aria-labelledby="{anchor}-h"><div class="mg">'
        f'<h2 id="{anchor}-h">{heading}</h2>{note}</div><div class="bd">{body}</div></section>'
    )
