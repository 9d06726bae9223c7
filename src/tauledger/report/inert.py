"""Text from a netlist made safe to show: nothing in it can steer a terminal or hide.

Everything Python calls unprintable (control characters, terminal escapes, bidirectional and
zero-width controls, line and paragraph separators, private and unassigned code points,
undecodable bytes) is shown as its escape, such as ``\\x1b`` or ``\\u202e``.
"""

from __future__ import annotations

import unicodedata

CUT = "..."
"""Stands for what was left out; plain ASCII, so that any stream carries it."""


def inert(text: str) -> str:
    """The text on one line with every unprintable character shown as its escape.

    A tab becomes one space, since exporters indent with tabs and that is harmless.
    """
    if text.isprintable():
        return text
    return "".join(_shown(character) for character in text)


def _shown(character: str) -> str:
    if character == "\t":
        return " "
    if character.isprintable():
        return character
    return character.encode("unicode_escape", "backslashreplace").decode("ascii")


def display_width(text: str) -> int:
    """Columns the text takes on a terminal: wide characters two, combining marks none."""
    if text.isascii():
        return len(text)
    return sum(_columns(character) for character in text)


def _columns(character: str) -> int:
    if unicodedata.combining(character) or unicodedata.category(character) == "Me":
        return 0
    return 2 if unicodedata.east_asian_width(character) in "WF" else 1


def clip(text: str, columns: int) -> str:
    """The text cut in its middle to at most ``columns``; both ends of a name tell most."""
    if display_width(text) <= columns:
        return text
    room = columns - len(CUT)
    if room <= 0:
        return _fitting(text, columns)
    tail = _fitting(text[::-1], room // 2)[::-1]
    return _fitting(text, room - display_width(tail)) + CUT + tail


def _fitting(text: str, columns: int) -> str:
    """The longest beginning that takes at most ``columns``."""
    used = 0
    for index, character in enumerate(text):
        used += _columns(character)
        if used > columns:
            return text[:index]
    return text
