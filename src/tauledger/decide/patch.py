"""A choice of parts as a change of the netlist: a unified diff that touches only the numbers."""

from __future__ import annotations

import codecs
import difflib
import os
import re
from collections.abc import Sequence
from pathlib import Path

from tauledger.analysis import Analysis
from tauledger.circuit.elements import Capacitor
from tauledger.configuration.settings import PathSettings
from tauledger.decide.edits import Edit, edits_for
from tauledger.netlist.include import default_roots
from tauledger.netlist.source import decode, read_bytes
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass
from tauledger.review.decisions import Alternative


@dataclass(frozen=True, slots=True)
class Patch:
    """What ``git apply`` and ``patch -p1`` take, and where."""

    diff: bytes
    """Unified diff with a/ and b/ before its paths; empty when nothing changes."""
    folder: str
    """Its paths are relative to this folder."""


def patch(
    analysis: Analysis, alternative: Alternative, settings: PathSettings | None = None
) -> Patch:
    """The unified diff that writes the values of an alternative into the netlist and its includes.

    Bytes of the files pass through unchanged, line ends and encoding included. Paths are relative
    to the current folder where all files are below it, else to the root of the netlist.

    Raises
    ------
    ProblemError
        When a value is not one number that sets this capacitor alone, or a file has changed.
    """
    elements = {e.name: e for e in analysis.circuit.elements if isinstance(e, Capacitor)}
    wanted = [(elements[r.part], r.new_f) for r in alternative.parts if r.series != "unchanged"]
    files: dict[str, list[Edit]] = {}
    for edit in edits_for(analysis.netlist, settings, wanted):
        files.setdefault(edit.place.statement.line.file.path, []).append(edit)
    folder, names = _named(sorted(files), analysis.circuit.path)
    changes = (_file(path, name, files[path]) for path, name in names)
    return Patch(b"".join(changes), folder)


def _named(paths: Sequence[str], netlist: str) -> tuple[str, list[tuple[str, str]]]:
    """The folder the paths are relative to, and each with its relative name."""
    # Of the files themselves: what applies a patch refuses links.
    here = os.path.realpath(os.getcwd())
    whole = [os.path.realpath(path) for path in paths]
    if not all(_below(path, here) for path in whole):
        here = str(default_roots(Path(netlist))[0])
        if not all(_below(path, here) for path in whole):
            here = os.path.commonpath([os.path.dirname(path) for path in whole])
    return here, [(p, os.path.relpath(w, here)) for p, w in zip(paths, whole, strict=True)]


def _below(path: str, folder: str) -> bool:
    return path.startswith(folder.rstrip(os.sep) + os.sep)


# Bytes --------------------------------------------------------------------------------------------

_LINE_END = re.compile(r"\r\n|\n|\r")
_ENCODINGS = (
    (codecs.BOM_UTF16_LE, "utf-16-le"),
    (codecs.BOM_UTF16_BE, "utf-16-be"),
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF8, "latin-1"),
    (b"", "utf-8"),
    (b"", "utf-16-le"),
    (b"", "utf-16-be"),
    (b"", "latin-1"),
)
"""Marks and encodings a netlist may have; the reader says which by what it read."""


def _file(path: str, name: str, edits: Sequence[Edit]) -> bytes:
    """The diff of one file."""
    old = read_bytes(Path(path))
    new = _changed(old, path, edits)
    headers = (_header("a", name), _header("b", name))
    return b"".join(
        line if line.endswith(b"\n") else line + b"\n\\ No newline at end of file\n"
        for line in difflib.diff_bytes(difflib.unified_diff, _lines(old), _lines(new), *headers)
    )


def _lines(content: bytes) -> list[bytes]:
    """As a patch counts lines: a carriage return ends none."""
    return re.findall(rb"[^\n]*\n|[^\n]+", content)


def _header(side: str, name: str) -> bytes:
    """A path as both programs read it: in quotes when it would not end where it should."""
    path = f"{side}/{name}".replace(os.sep, "/").encode("utf-8", "surrogateescape")
    if any(byte < 32 or byte in b'"\\' for byte in path):
        quoted = (f"\\{b:03o}" if b < 32 or b in b'"\\' else chr(b) for b in path)
        return ('"' + "".join(quoted) + '"').encode("latin-1")
    return path + b"\t" if b" " in path else path


def _changed(content: bytes, path: str, edits: Sequence[Edit]) -> bytes:
    """The content with each number replaced, from the last to the first."""
    mark, encoding, text = _decoded(content, path)
    starts = [0, *(match.end() for match in _LINE_END.finditer(text))]
    rows = _LINE_END.split(text)
    spots = []
    for edit in edits:
        place = edit.place
        span = place.statement.line.span(place.offset, len(place.text))
        if span.line > len(rows) or rows[span.line - 1].removesuffix("\x1a") != span.text:
            raise _not_as_read(path)
        spots.append((starts[span.line - 1] + span.column - 1, len(place.text), edit.text))
    for start, length, new in sorted(spots, reverse=True):
        text = text[:start] + new + text[start + length :]
    return mark + text.encode(encoding)


def _decoded(content: bytes, path: str) -> tuple[bytes, str, str]:
    """Mark, encoding and text; the encoding is the one that gives the lines the reader gives."""
    read = decode(content, path).lines
    for mark, encoding in _ENCODINGS:
        if content.startswith(mark):
            try:
                text = content[len(mark) :].decode(encoding)
            except UnicodeDecodeError:
                continue
            if tuple(_LINE_END.split(text.removesuffix("\x1a")))[: len(read)] == read:
                return mark, encoding, text
    raise _not_as_read(path)


def _not_as_read(path: str) -> ProblemError:
    return ProblemError(
        Problem(
            "netlist-changed",
            Severity.ERROR,
            f"{path}: the file is no longer what was analysed, so no patch is made",
            None,
            "Run the command again.",
        )
    )
