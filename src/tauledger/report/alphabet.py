"""Spelling for output streams whose encoding lacks Greek letters, blocks or rules.

The replacement happens before the layout, because a name such as ``tau`` is wider than τ.
"""

from __future__ import annotations

from collections.abc import Callable

Spell = Callable[[str], str]
"""From the text as meant to the text as the stream can carry it."""

_PLAIN = {
    "α": "alpha",
    "β": "beta",
    "γ": "gamma",
    "λ": "lambda",
    # The micro sign is a prefix, the Greek letter a subscript.
    "\u00b5": "u",
    "\u03bc": "mu",
    "π": "pi",
    "Σ": "sum ",
    "τ": "tau",
    "Ω": "Ohm",
    "\u2126": "Ohm",
    "−": "-",
    "–": "-",
    "—": "-",
    "×": "x",
    "·": "*",
    "±": "+-",
    "≈": "~",
    "≤": "<=",
    "≥": ">=",
    "‖": "||",
    "∥": "||",
    "√": "sqrt ",
    "∞": "inf",
    "°": "deg ",
    "…": "...",
    "→": "->",
    "─": "-",
    "█": "#",
    "▉": "#",
    "▊": "#",
    "▋": "#",
    "▌": "#",
    "▍": "",
    "▎": "",
    "▏": "",
    # Binds a number to its unit until the page is printed as text.
    "\u00a0": "\u00a0",
    "\u202f": " ",
}


def alphabet(encoding: str | None) -> Spell:
    """How to spell for a stream of this encoding; an unknown encoding is taken as ASCII.

    Characters with no plain spelling come out as escapes, so writing never fails.
    """
    try:
        "".encode(encoding or "ascii")
    except LookupError:
        encoding = "ascii"
    target = encoding or "ascii"

    def spell(text: str) -> str:
        if text.isascii() or _carries(target, text):
            return text
        return "".join(_spelt(target, character) for character in text)

    return spell


def _carries(encoding: str, text: str) -> bool:
    try:
        text.encode(encoding)
    except UnicodeEncodeError:
        return False
    return True


def _spelt(encoding: str, character: str) -> str:
    if _carries(encoding, character):
        return character
    plain = _PLAIN.get(character)
    if plain is not None:
        return plain
    return character.encode("ascii", "backslashreplace").decode("ascii")
