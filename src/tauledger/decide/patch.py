"""A choice of parts as a change of the netlist: a unified diff that touches only the values."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable
from pathlib import Path

from tauledger.circuit.elements import Capacitor, Circuit
from tauledger.netlist.source import read_bytes
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.quantity import parse_number
from tauledger.review.decisions import Alternative

_STATEMENT = re.compile(rb"(\s*(\S+)\s+\S+\s+\S+\s+)([^\s;$]+)")
_SUFFIXES = ((1.0, ""), (1e-3, "m"), (1e-6, "u"), (1e-9, "n"), (1e-12, "p"), (1e-15, "f"))


def spice_value(value_f: float) -> str:
    """A capacitance as a netlist writes it.

    >>> spice_value(4.7e-7)
    '470n'
    """
    scale, suffix = next((s for s in _SUFFIXES if value_f >= s[0] * (1.0 - 1e-9)), _SUFFIXES[-1])
    return f"{value_f / scale:.4g}{suffix}"


def patch(circuit: Circuit, alternative: Alternative) -> bytes:
    """The unified diff that fits the values of an alternative; empty when none changes.

    Bytes of the files pass through unchanged, line ends included.

    Raises
    ------
    ProblemError
        When a value does not stand as a plain number on the line of its part.
    """
    elements = {e.name: e for e in circuit.elements if isinstance(e, Capacitor)}
    changes: dict[str, dict[int, tuple[Capacitor, float]]] = {}
    for row in alternative.parts:
        if row.series != "unchanged":
            element = elements[row.part]
            lines = changes.setdefault(element.span.path, {})
            lines[element.span.line] = (element, row.new_f)
    return b"".join(_file(path, lines) for path, lines in sorted(changes.items()))


def _file(path: str, changes: dict[int, tuple[Capacitor, float]]) -> bytes:
    old = _lines(read_bytes(Path(path)))
    new = list(old)
    problems = []
    for line, (element, value) in changes.items():
        found = _replaced(old[line - 1] if line <= len(old) else b"", element, value)
        if found is None:
            problems.append(_not_plain(element))
        else:
            new[line - 1] = found
    if problems:
        raise ProblemError(*problems)
    name = path.encode("utf-8", "surrogateescape")
    diff = difflib.diff_bytes(difflib.unified_diff, old, new, name, name)
    return b"".join(_ended(diff))


def _lines(content: bytes) -> list[bytes]:
    return content.splitlines(keepends=True)


def _ended(diff: Iterable[bytes]) -> Iterable[bytes]:
    for line in diff:
        yield line if line.endswith((b"\n", b"\r")) else line + b"\n\\ No newline at end of file\n"


def _replaced(line: bytes, element: Capacitor, value_f: float) -> bytes | None:
    """The line with another value; None when the value found there is not the part's."""
    match = _STATEMENT.match(line)
    if match is None:
        return None
    text = match[3].decode("utf-8", "replace")
    found = parse_number(text)
    name = match[2].decode("utf-8", "replace")
    if found is None or name.casefold() != element.name.casefold():
        return None
    if abs(found.value - element.capacitance_f) > 1e-9 * element.capacitance_f:
        return None
    return match[1] + spice_value(value_f).encode() + line[match.end() :]


def _not_plain(element: Capacitor) -> Problem:
    return Problem(
        "patch-value",
        Severity.ERROR,
        f"the value of {element.name} is not a plain number on its line, so no patch is made",
        element.span,
        "Change it by hand, or write the value there as a number.",
    )
