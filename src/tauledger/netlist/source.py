"""Bytes → text → logical lines: encodings, line ends, comments, continuation."""

from __future__ import annotations

import codecs
import os
import re
import stat
from collections.abc import Callable, Iterator
from pathlib import Path

from tauledger.netlist.codes import fault, problem
from tauledger.problems import Problem, ProblemError, SourceSpan
from tauledger.records import dataclass

MAXIMUM_BYTES = 8 * 1024 * 1024
"""Of one run: the netlist and all it includes."""
MAXIMUM_LINES = 500_000
"""Physical lines of one file."""
MAXIMUM_LINE = 100_000
"""Characters of one logical line, continuations included."""

Report = Callable[[Problem], None]

_FOREIGN = re.compile(
    r"\s*(?:<[?!A-Za-z](?=.*>\s*\Z)|\(\w+\s+\((?=.*\)\s*\Z)|\{(?=.*\}\s*\Z)|%PDF-)"
    r"|Version \d+\s+SHEET ",
    re.DOTALL,
)
"""Drawings, pages, schematics and data as programs keep them: the title of no netlist."""
_LINE_END = re.compile(r"\r\n|\n|\r")
_CONTROL = re.compile(r"[\x00-\x08\x0e-\x1a\x1c-\x1f]")
# "$ comment" starts one; "$N_0001" is a node of schematic exporters that write $N_, $G_, $D_.
_COMMENT = re.compile(r';|(?:(?<=[\s,])|^)(?:\$(?![A-Za-z]_)|//)|"[^"]*"')


@dataclass(frozen=True, slots=True)
class SourceFile:
    """A text file as read: ``lines`` are physical lines without their ends."""

    path: str
    lines: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class LogicalLine:
    """A statement's text with continuations joined, and where each part of it came from."""

    text: str
    file: SourceFile
    pieces: tuple[tuple[int, int, int], ...]
    """(offset in :attr:`text`, physical line from 0, offset in that line), in rising order."""

    def span(self, offset: int = 0, length: int | None = None) -> SourceSpan:
        """Position of a stretch of :attr:`text` in the file; cut at the end of its line."""
        piece = self.pieces[0]
        limit = len(self.text)
        for following in self.pieces:
            if following[0] > offset:
                limit = following[0]
                break
            piece = following
        start, row, column = piece
        physical = self.file.lines[row]
        length = limit - offset if length is None else min(length, limit - offset)
        return SourceSpan(
            self.file.path, row + 1, column + offset - start + 1, max(length, 1), physical
        )


def read_bytes(path: Path, limit: int = MAXIMUM_BYTES) -> bytes:
    """Read a regular file of at most ``limit`` bytes; never blocks on a pipe or device.

    Raises ProblemError when there is no such file, it is of another kind, unreadable or larger.
    """
    try:
        handle = os.open(path, os.O_RDONLY | getattr(os, "O_NONBLOCK", 0))
    except FileNotFoundError:
        raise fault(
            "file-missing", f"{path}: no such file", None, "Check the spelling of the path."
        ) from None
    except (OSError, ValueError) as error:
        # Windows opens no folder, and calls that a matter of permissions.
        if isinstance(error, PermissionError) and path.is_dir():
            raise _not_regular(path) from None
        raise _unreadable(path, error) from None
    if not stat.S_ISREG(os.fstat(handle).st_mode):
        os.close(handle)
        raise _not_regular(path)
    with os.fdopen(handle, "rb") as stream:
        try:
            content = stream.read(limit + 1)
        except OSError as error:
            raise _unreadable(path, error) from None
    if len(content) > limit:
        raise fault(
            "file-too-large",
            f"{path}: larger than the {limit} bytes allowed for a netlist and what it includes",
            None,
            "Include only the model files the circuit needs.",
        )
    return content


def _not_regular(path: Path) -> ProblemError:
    return fault(
        "file-not-regular",
        f"{path}: expected a file, found a folder, device or pipe",
        None,
        "Give the path of the netlist file itself.",
    )


def _unreadable(path: Path, error: Exception) -> ProblemError:
    reason = getattr(error, "strerror", None) or "not a usable path"
    return fault(
        "file-unreadable",
        f"{path}: cannot be read ({reason})",
        None,
        "Check the path and the file's permissions.",
    )


def decode(content: bytes, path: str) -> SourceFile:
    """Text in UTF-8 or UTF-16 with or without a mark, else Latin-1.

    Raises ProblemError when the file is binary, empty, too long or plainly of another kind.
    """
    text = _decode_text(content.removesuffix(b"\x1a"))  # the end-of-file mark of old systems
    if text is None or _CONTROL.search(text):
        raise fault(
            "file-binary",
            f"{path}: expected a text netlist, found binary data",
            None,
            "Export the schematic as a SPICE netlist and give that file.",
        )
    if not text.strip():
        raise fault("file-empty", f"{path}: the file is empty", None, "Export the netlist again.")
    if _FOREIGN.match(text):
        raise fault(
            "file-foreign",
            f"{path}: expected a netlist, found a drawing, a schematic or another kind of file",
            None,
            "Export the schematic as a SPICE netlist and give that file.",
        )
    return source_file(text, path)


def source_file(text: str, path: str) -> SourceFile:
    """Text split into physical lines, of any kind of line end; ProblemError for too many."""
    if text.count("\n") + text.count("\r") > 2 * MAXIMUM_LINES:
        raise fault(
            "file-too-large",
            f"{path}: more than {MAXIMUM_LINES} lines",
            None,
            "Include only the model files the circuit needs.",
        )
    lines = _LINE_END.split(text)
    if lines and not lines[-1]:
        lines.pop()
    return SourceFile(path, tuple(lines))


def _decode_text(content: bytes) -> str | None:
    if content.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        return _try(content, "utf-16")
    if content.startswith(codecs.BOM_UTF8):
        content = content[3:]
    # A netlist is mostly ASCII: zero bytes in every second place mean UTF-16 without a mark.
    head = content[:200]
    for first, encoding in ((1, "utf-16-le"), (0, "utf-16-be")):
        half = head[first::2]
        if half and half.count(0) > 0.9 * len(half) and head[1 - first :: 2].count(0) == 0:
            return _try(content, encoding)
    decoded = _try(content, "utf-8")
    return content.decode("latin-1") if decoded is None else decoded


def _try(content: bytes, encoding: str) -> str | None:
    try:
        return content.decode(encoding)
    except UnicodeDecodeError:
        return None


def without_comment(line: str) -> str:
    """Cut an end-of-line comment (``;``, ``$`` or ``//`` after a blank); quoted text is kept."""
    if ";" not in line and "$" not in line and "//" not in line:
        return line
    for match in _COMMENT.finditer(line):
        if not match[0].startswith('"'):
            return line[: match.start()]
    return line


def logical_lines(file: SourceFile, first: int, report: Report) -> Iterator[LogicalLine]:
    """Join continuations from physical line ``first`` (from 0) on; skip comments and blanks."""
    parts: list[tuple[str, int, int]] = []
    for row in range(first, len(file.lines)):
        text = without_comment(file.lines[row])
        body = text.lstrip()
        if not body or body[0] == "*":
            continue
        if body[0] != "+":
            if parts:
                yield from _joined(file, parts, report)
            parts = [(text, row, 0)]
        elif parts:
            start = len(text) - len(body) + 1
            parts.append((text[start:], row, start))
        else:
            report(
                problem(
                    "continuation-orphan",
                    'a line that begins with "+" continues the one before it, and there is none',
                    SourceSpan(file.path, row + 1, 1, len(text), file.lines[row]),
                    'Remove the "+", or put the statement before it.',
                )
            )
    if parts:
        yield from _joined(file, parts, report)


def _joined(
    file: SourceFile, parts: list[tuple[str, int, int]], report: Report
) -> Iterator[LogicalLine]:
    if len(parts) == 1:
        text, row, column = parts[0]
        line = LogicalLine(text, file, ((0, row, column),))
    else:
        pieces: list[tuple[int, int, int]] = []
        offset = 0
        for text, row, column in parts:
            pieces.append((offset, row, column))
            offset += len(text) + 1
        line = LogicalLine(" ".join(text for text, _, _ in parts), file, tuple(pieces))
    if len(line.text) <= MAXIMUM_LINE:
        yield line
        return
    row = parts[0][1]
    physical = file.lines[row][:200]
    report(
        problem(
            "line-too-long",
            f"a statement of {len(line.text)} characters; at most {MAXIMUM_LINE} are read",
            SourceSpan(file.path, row + 1, 1, len(physical), physical),
            "Shorten the statement.",
        )
    )
