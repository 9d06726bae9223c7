"""Where each key and value of a TOML text stands, which the parser of the standard library drops.

Works only on text that :mod:`tomllib` has accepted, so that it need not look for faults.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right
from collections import Counter
from collections.abc import Mapping

from tauledger.problems import SourceSpan

Keys = tuple[str | int, ...]
"""Keys and list indices from the top of the file to a value."""

_BLANK = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_KEY = re.compile(r"[A-Za-z0-9_-]+|\"(?:\\.|[^\"\\])*\"|'[^']*'")
_STRING = re.compile(
    r'"""(?:\\.|[^\\])*?"""(?:"{1,2}(?!"))?|\'\'\'.*?\'\'\'(?:\'{1,2}(?!\'))?'
    r"|\"(?:\\.|[^\"\\])*\"|'[^']*'",
    re.DOTALL,
)
_BARE = re.compile(r"[^,\]}#\n]*")


class Positions:
    """Spans of keys and values; those of a missing one are its table's."""

    def __init__(self, text: str, path: str) -> None:
        self._path = path
        self._lines = text.split("\n")
        self._starts = [0]
        for line in self._lines:
            self._starts.append(self._starts[-1] + len(line) + 1)
        scanner = _Scanner(text)
        scanner.document()
        self._keys, self._values = scanner.keys, scanner.values

    def key(self, keys: Keys) -> SourceSpan:
        return self._span(self._keys, keys)

    def value(self, keys: Keys) -> SourceSpan:
        return self._span(self._values if keys in self._values else self._keys, keys)

    def place(self, line: int, column: int) -> SourceSpan:
        """One character, counted from 1."""
        row = min(max(line, 1), len(self._lines)) - 1
        return SourceSpan(self._path, row + 1, column, 1, self._lines[row].rstrip("\r"))

    def _span(self, found: Mapping[Keys, tuple[int, int]], keys: Keys) -> SourceSpan:
        while keys and keys not in found:
            keys, found = keys[:-1], self._keys
        start, end = found.get(keys, (0, 1))
        row = bisect_right(self._starts, start) - 1
        column = start - self._starts[row]
        line = self._lines[row].rstrip("\r")
        length = min(end - start, len(line) - column)
        return SourceSpan(self._path, row + 1, column + 1, max(length, 1), line)


class _Scanner:
    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.keys: dict[Keys, tuple[int, int]] = {}
        self.values: dict[Keys, tuple[int, int]] = {}
        self._tables: Counter[Keys] = Counter()
        """Tables seen so far of each list of tables, ``[[name]]``."""

    def document(self) -> None:
        table: Keys = ()
        self.skip(_BLANK)
        while self.at < len(self.text):
            if self.text[self.at] == "[":
                table = self.header()
            else:
                self.pair(table)
            self.skip(_BLANK)

    def skip(self, pattern: re.Pattern[str]) -> None:
        match = pattern.match(self.text, self.at)
        assert match is not None
        self.at = match.end()

    def header(self) -> Keys:
        is_list = self.text.startswith("[[", self.at)
        self.at += 2 if is_list else 1
        keys = self.dotted((), tables=True)
        self.at += 2 if is_list else 1
        if is_list:
            self._tables[keys] += 1
            keys = (*keys, self._tables[keys] - 1)
        return keys

    def dotted(self, table: Keys, tables: bool = False) -> Keys:
        """Read a dotted key; ``tables`` when its parts may be lists of tables."""
        keys = table
        while True:
            self.skip(_SPACE)
            match = _KEY.match(self.text, self.at)
            assert match is not None
            keys = (*keys, _unquoted(match[0]))
            self.keys.setdefault(keys, match.span())
            self.at = match.end()
            self.skip(_SPACE)
            if not self.text.startswith(".", self.at):
                return keys
            self.at += 1
            if tables and self._tables[keys]:
                keys = (*keys, self._tables[keys] - 1)

    def pair(self, table: Keys) -> None:
        keys = self.dotted(table)
        self.at += 1
        self.skip(_SPACE)
        self.value(keys)

    def value(self, keys: Keys) -> None:
        start = self.at
        first = self.text[self.at]
        if first == "[":
            self.sequence(keys)
        elif first == "{":
            self.inline(keys)
        elif match := _STRING.match(self.text, self.at):
            self.at = match.end()
        else:
            match = _BARE.match(self.text, self.at)
            assert match is not None
            self.at = match.end()
            self.values[keys] = (start, start + len(match[0].rstrip()))
            return
        self.values[keys] = (start, self.at)

    def sequence(self, keys: Keys) -> None:
        self.at += 1
        index = 0
        while not self._is_closed("]"):
            self.value((*keys, index))
            index += 1

    def inline(self, keys: Keys) -> None:
        self.at += 1
        while not self._is_closed("}"):
            self.pair(keys)

    def _is_closed(self, closing: str) -> bool:
        """Step over a comma, and over the closing bracket when it comes."""
        self.skip(_BLANK)
        if self.text[self.at] == ",":
            self.at += 1
            self.skip(_BLANK)
        if self.text[self.at] != closing:
            return False
        self.at += 1
        return True


def _unquoted(key: str) -> str:
    if key[0] == '"':
        return str(tomllib.loads(f"key = {key}")["key"])
    return key[1:-1] if key[0] == "'" else key
