"""Comment lines in a netlist: put before the statement they are about, taken out to the byte.

A comment always goes before a line, never after the last one, so it makes no difference whether
the file ends with a line end; and before the first line of a statement, never between it and its
continuation. It takes the line end of the line above. Its text is ASCII, so that every encoding
of a netlist holds it; ``*`` begins a comment in every dialect, and ``*#`` (which ngspice runs as
a command) is avoided.
"""

from __future__ import annotations

import codecs
import re
from collections.abc import Iterable, Mapping

from tauledger.annotate.notes import PartNote, part_notes, summary_of
from tauledger.problems import Problem, ProblemError, Severity, SourceSpan
from tauledger.records import dataclass
from tauledger.review.rows import Review

MARKER = "*tauledger> "
"""Begins every line that is ours."""
MOST_INSTANCES = 4
"""Listed for one part of a subcircuit."""

_LINE = re.compile(r"[^\r\n]*(?:\r\n|\n|\r)|[^\r\n]+")
_SPELLED = str.maketrans(
    {"Ω": "Ohm", "µ": "u", "μ": "mu", "π": "pi", "τ": "tau", "β": "beta", "−": "-", "‖": "||",
     "°": " deg ", "∞": "inf", "—": "-"}
)  # fmt: skip


def annotate_netlist(content: bytes, review: Review, places: Mapping[str, SourceSpan]) -> bytes:
    """The netlist with the results as comments; those of an earlier run are replaced.

    Parameters
    ----------
    content
        The file as it was analysed, perhaps with comments of an earlier run.
    review
        What the analysis of that file gave.
    places
        Where each part stands, by its flat name; those in other files are passed over.

    Raises
    ------
    ProblemError
        ``netlist-changed`` when the file no longer is what was analysed.
    """
    text = _Text.of(content)
    lines = _lines(text.body)
    comments = {row: _comments(notes) for row, notes in _by_line(review, places, lines).items()}
    free = (row for row, line in enumerate(lines) if row and not _is_ours(row, line))
    head = next((row for row in free if not lines[row].lstrip().startswith("+")), None)
    if head is not None:
        comments[head] = _head(review) + comments.get(head, [])
    pieces: list[str] = []
    end = "\n"
    for row, line in enumerate(lines):
        if not _is_ours(row, line):
            pieces += [MARKER + comment + end for comment in comments.get(row, ())]
            pieces.append(line)
            end = line[len(line.rstrip("\r\n")) :]
    result = text.with_body("".join(pieces))
    if remove_comments(result) != remove_comments(content):
        raise _fault(
            "netlist-unmarkable",
            f"{review.netlist}: comments in this file could not be removed again to the byte",
            "Save the netlist as UTF-8 text.",
        )
    return result


def remove_comments(content: bytes) -> bytes:
    """The netlist without our comments; a file that has none comes back as it is."""
    text = _Text.of(content)
    lines = _lines(text.body)
    return text.with_body(
        "".join(line for row, line in enumerate(lines) if not _is_ours(row, line))
    )


def _lines(body: str) -> list[str]:
    """Lines with their ends, counted as the reader of netlists counts them."""
    return _LINE.findall(body)


def _is_ours(row: int, line: str) -> bool:
    """The first line is the title, whatever it looks like."""
    return row > 0 and line.startswith(MARKER)


def _by_line(
    review: Review, places: Mapping[str, SourceSpan], lines: list[str]
) -> dict[int, list[PartNote]]:
    """Notes by line (from 0) of the part's statement."""
    found: dict[int, list[PartNote]] = {}
    for note in part_notes(review):
        span = places.get(note.name)
        if span is None or span.path != review.netlist:
            continue
        row = span.line - 1
        if not 0 < row < len(lines) or not _is_same(lines[row], span.text):
            raise _fault(
                "netlist-changed",
                f"{review.netlist}: line {span.line} changed while the file was read",
                "Run the command again.",
            )
        found.setdefault(row, []).append(note)
    return found


def _is_same(line: str, analysed: str) -> bool:
    """Compare a line as :class:`_Text` spells it (UTF-8 byte by byte) with the decoded one."""
    bare = line.rstrip("\r\n").removesuffix("\x1a")
    return bare == analysed or bare == analysed.encode("utf-8").decode("latin-1")


def _comments(notes: list[PartNote]) -> list[str]:
    several = len(notes) > 1
    comments = [
        _ascii((f"{note.name}: " if several else "") + " | ".join(note.facts))
        for note in notes[:MOST_INSTANCES]
    ]
    if len(notes) > MOST_INSTANCES:
        comments.append(f"and {len(notes) - MOST_INSTANCES} more instances")
    return comments


def _head(review: Review) -> list[str]:
    summary = summary_of(review)
    parts: Iterable[str] = (
        f"version {review.version}, {review.temperature_c:g} C: {summary.path}",
        summary.gain,
        *(" | ".join(corner) for corner in summary.corners),
    )
    return [_ascii(part) for part in parts if part]


def _ascii(text: str) -> str:
    """Units spelled out; what is not ASCII in a name as its escape."""
    spelled = text.translate(_SPELLED).encode("ascii", "backslashreplace").decode("ascii")
    return "".join(c if c.isprintable() else f"\\x{ord(c):02x}" for c in spelled)


@dataclass(frozen=True, slots=True)
class _Text:
    """A file's bytes as text in which line ends and ASCII can be told, and back without loss.

    Only UTF-16 is truly decoded. In every other encoding of a netlist the bytes below 128 are
    ASCII, so one byte is one character here.
    """

    mark: bytes
    body: str
    odd: bytes
    """A last byte that is half a character."""
    encoding: str

    @classmethod
    def of(cls, content: bytes) -> _Text:
        encoding, mark = _encoding(content)
        if encoding == "latin-1":
            return cls(mark, content.decode("latin-1"), b"", encoding)
        body = content[len(mark) :]
        whole = len(body) // 2 * 2
        return cls(mark, body[:whole].decode(encoding, "surrogatepass"), body[whole:], encoding)

    def with_body(self, body: str) -> bytes:
        return self.mark + body.encode(self.encoding, "surrogatepass") + self.odd


def _encoding(content: bytes) -> tuple[str, bytes]:
    """The encoding and the mark before the text, by the rules of the netlist's reader."""
    for mark, encoding in (
        (codecs.BOM_UTF16_LE, "utf-16-le"),
        (codecs.BOM_UTF16_BE, "utf-16-be"),
    ):
        if content.startswith(mark):
            return encoding, mark
    head = content[:200]
    for first, encoding in ((1, "utf-16-le"), (0, "utf-16-be")):
        half = head[first::2]
        if half and half.count(0) > 0.9 * len(half) and head[1 - first :: 2].count(0) == 0:
            return encoding, b""
    return "latin-1", b""


def _fault(code: str, message: str, advice: str) -> ProblemError:
    return ProblemError(Problem(code, Severity.ERROR, message, advice=advice))
