"""A netlist file with all it includes → :class:`~tauledger.netlist.blocks.Netlist`."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import field
from pathlib import Path

from tauledger.netlist.blocks import Netlist, build_netlist
from tauledger.netlist.codes import fault, problem
from tauledger.netlist.include import default_roots, find_include
from tauledger.netlist.source import (
    MAXIMUM_BYTES,
    LogicalLine,
    SourceFile,
    decode,
    logical_lines,
    read_bytes,
    source_file,
)
from tauledger.netlist.statements import Statement, Word, parse_statement
from tauledger.problems import Problem, ProblemError, SourceSpan
from tauledger.records import dataclass

MAXIMUM_INCLUDE_DEPTH = 20
MAXIMUM_INCLUDES = 200
MAXIMUM_WORDS = 1_000_000
MAXIMUM_PROBLEMS = 100
"""Listed in one run; a file that is not a netlist at all would have one on every line."""

_FATAL = frozenset(("too-many-problems", "file-too-large"))
_INCLUDE = frozenset((".include", ".inc", ".incl"))
_STATEMENT_LIKE = re.compile(r"\s*(?:[.][a-z]+\b|[rclvi]\w+(?:\s+\S+){2}\s+[\d.]+\S*\s*$)", re.I)


def read(path: Path, roots: Sequence[Path] | None = None) -> Netlist:
    """Read a netlist file and what it includes.

    Parameters: ``roots`` are the folders inside which includes may lie; by default the top of
    the netlist's git working tree, or its own folder. Faults of single lines are collected in
    :attr:`Netlist.problems`. Raises ProblemError when the file itself cannot be read. Nothing is
    ever written.
    """
    content = read_bytes(path)
    file = decode(content, str(path))
    allowed = default_roots(path) if roots is None else tuple(root.resolve() for root in roots)
    return _Reading(path, allowed, len(content)).netlist(file)


def read_library(path: Path, roots: Sequence[Path]) -> Netlist:
    """Read a file of models and subcircuits, which has no title line; else as :func:`read`."""
    content = read_bytes(path)
    file = decode(content, str(path))
    reading = _Reading(path, tuple(root.resolve() for root in roots), len(content))
    statements = list(reading.statements(file, 0, path, ()))
    return build_netlist("", file.path, statements, reading.commands, reading.problems)


def parse(text: str, path: str = "netlist") -> Netlist:
    """Read a netlist from text, which cannot include files; ``path`` is what messages call it.

    Faults of single lines are collected in :attr:`Netlist.problems`. Raises ProblemError when the
    text is empty or too long.
    """
    if len(text) > MAXIMUM_BYTES:
        raise fault(
            "file-too-large",
            f"{path}: longer than the {MAXIMUM_BYTES} characters allowed",
            None,
            "Include only the models the circuit needs.",
        )
    if not text.strip():
        raise fault("file-empty", f"{path}: the netlist is empty", None, "Export it again.")
    return _Reading(Path(path), None, len(text)).netlist(source_file(text, path))


@dataclass(slots=True)
class _Reading:
    """What one run of the reader keeps account of."""

    top: Path
    roots: tuple[Path, ...] | None
    size: int
    words: int = 0
    includes: int = 0
    problems: list[Problem] = field(default_factory=list)
    commands: list[Statement] = field(default_factory=list)

    def netlist(self, file: SourceFile) -> Netlist:
        title, first = self.title(file)
        statements = list(self.statements(file, first, self.top, ()))
        for statement in statements:
            if statement.keyword == ".title":
                title = statement.tail().strip()
        return build_netlist(title, file.path, statements, self.commands, self.problems)

    def title(self, file: SourceFile) -> tuple[str, int]:
        """The title and the physical line to go on from (from 0).

        ngspice takes the first line as the title whatever it says, but follows an .include there.
        """
        line = file.lines[0]
        words = line.split(maxsplit=1)
        keyword = words[0].lower() if words else ""
        if keyword == ".title":
            return (words[1].strip() if len(words) > 1 else ""), 1
        if keyword in _INCLUDE or (keyword == ".lib" and len(words) > 1):
            return "", 0
        if len(line) < 200 and _STATEMENT_LIKE.match(line):
            self.problems.append(
                problem(
                    "title-is-statement",
                    "the first line of a netlist is its title, so this statement is not read",
                    SourceSpan(file.path, 1, 1, max(len(line), 1), line),
                    "Put a title line above it.",
                )
            )
        return line.strip().lstrip("*").strip(), 1

    def statements(
        self, file: SourceFile, first: int, path: Path, chain: tuple[Path, ...]
    ) -> Iterator[Statement]:
        """Statements of one file from physical line ``first`` on, includes spliced in."""
        sectioned = any(line.lstrip()[:5].lower() == ".endl" for line in file.lines)
        section = ""
        lines = logical_lines(file, first, self.report)
        for line in lines:
            statement = self.parsed(line)
            if statement is None:
                continue
            keyword = statement.keyword
            if keyword == ".end":
                return
            if keyword == ".control":
                self.control(statement, lines)
            elif keyword == ".endl":
                section = ""
            elif sectioned and keyword == ".lib" and len(_file_words(statement)) == 1:
                section = _file_words(statement)[0]
            elif section:
                continue
            elif keyword in _INCLUDE or keyword == ".lib":
                yield from self.included(statement, path, chain)
            else:
                yield statement

    def control(self, opening: Statement, lines: Iterator[LogicalLine]) -> None:
        """Take the commands up to .endc; they need not follow any syntax known here."""
        for line in lines:
            words = line.text.split(maxsplit=1)
            if words[0].lower() == ".endc":
                return
            name = Word(words[0], line.text.index(words[0]))
            self.commands.append(Statement(name, (), line))
        self.report(
            problem(
                "control-unclosed",
                "this .control block is not closed; all after it is passed over",
                opening.span(),
                "Add .endc after its last command.",
            )
        )

    def parsed(self, line: LogicalLine) -> Statement | None:
        text = line.text
        self.words += 1 + sum(text.count(character) for character in " \t,=(")
        if self.words > MAXIMUM_WORDS:
            raise fault(
                "file-too-large",
                f"{line.file.path}: more than {MAXIMUM_WORDS} words, with all it includes",
                line.span(),
                "Include only the model files the circuit needs.",
            )
        warnings: list[Problem] = []
        try:
            return parse_statement(line, warnings)
        except ProblemError as error:
            warnings.extend(error.problems)
            return None
        finally:
            for entry in warnings:
                self.report(entry)

    def report(self, entry: Problem) -> None:
        self.problems.append(entry)
        if len(self.problems) > MAXIMUM_PROBLEMS:
            raise ProblemError(
                *self.problems[:MAXIMUM_PROBLEMS],
                problem(
                    "too-many-problems",
                    f"more than {MAXIMUM_PROBLEMS} problems; reading stopped here",
                    entry.span,
                    "Check that the file is a SPICE netlist.",
                ),
            )

    def included(
        self, statement: Statement, path: Path, chain: tuple[Path, ...]
    ) -> Iterator[Statement]:
        """Statements of an included file; its faults stay on their own lines."""
        try:
            name, section = _target(statement)
            file, found = self.open(name, path, (*chain, path.resolve()), statement)
            yield from (
                self.section(file, section, found, (*chain, path.resolve()), statement)
                if section
                else self.statements(file, 0, found, (*chain, path.resolve()))
            )
        except ProblemError as error:
            if error.problems[-1].code in _FATAL:
                raise
            for entry in error.problems:
                self.report(entry)

    def open(
        self, name: str, path: Path, chain: tuple[Path, ...], statement: Statement
    ) -> tuple[SourceFile, Path]:
        span = _target_span(statement)
        if self.roots is None:
            raise fault(
                "include-refused",
                f"{name!r}: a netlist given as text cannot include files",
                span,
                "Read the netlist from a file, or put the models into the text.",
            )
        found = find_include(name, path, self.top, self.roots, span)
        if found.path in chain:
            raise fault(
                "include-cycle",
                f"{name!r} includes itself, directly or through another file",
                span,
                "Remove one of the includes.",
            )
        self.includes += 1
        if len(chain) > MAXIMUM_INCLUDE_DEPTH or self.includes > MAXIMUM_INCLUDES:
            raise fault(
                "include-too-deep",
                f"includes nested deeper than {MAXIMUM_INCLUDE_DEPTH} or more than "
                f"{MAXIMUM_INCLUDES} in all",
                span,
                "Put the models the circuit needs into one file.",
            )
        if found.problem is not None:
            self.report(found.problem)
        try:
            content = read_bytes(found.path, MAXIMUM_BYTES - self.size)
            self.size += len(content)
            return decode(content, self.shown(found.path)), found.path
        except ProblemError as error:
            (cause,) = error.problems
            raise fault(cause.code, cause.message, span, cause.advice) from None

    def shown(self, path: Path) -> str:
        """An included file's path, spelled from where the netlist's own path is."""
        try:
            return str(self.top.parent / path.relative_to(self.top.parent.resolve()))
        except ValueError:
            return str(path)

    def section(
        self,
        file: SourceFile,
        section: str,
        path: Path,
        chain: tuple[Path, ...],
        asking: Statement,
    ) -> Iterator[Statement]:
        """The statements between ``.lib section`` and ``.endl`` of a library."""
        inside = found = False
        for line in logical_lines(file, 0, self.report):
            head = line.text.split(maxsplit=2)
            keyword = head[0].lower()
            if keyword == ".endl":
                inside = False
            elif keyword == ".lib" and len(head) == 2 and not inside:
                inside = head[1].strip("'\"").lower() == section.lower()
                found = found or inside
            elif inside and (statement := self.parsed(line)) is not None:
                if statement.keyword in _INCLUDE or statement.keyword == ".lib":
                    yield from self.included(statement, path, chain)
                else:
                    yield statement
        if not found:
            raise fault(
                "library-section-missing",
                f"{path.name!r} has no section {section!r}",
                asking.span(),
                "Correct the section's name.",
            )


def _file_words(statement: Statement) -> list[str]:
    """The words of a file statement; quotes hold a name with blanks together."""
    return [
        match[0].strip("'\"") for match in re.finditer(r"\"[^\"]*\"|'[^']*'|\S+", statement.tail())
    ]


def _target(statement: Statement) -> tuple[str, str]:
    """File name and section (or empty)."""
    words = _file_words(statement)
    if not words:
        raise fault(
            "line-unreadable",
            f"expected a file name after {statement.keyword}",
            statement.span(),
            "Name the file, in quotes when it holds blanks.",
        )
    if statement.keyword == ".lib" and len(words) == 2:
        return words[0], words[1]
    if len(words) > 1:
        # An unquoted name with blanks.
        return statement.tail().strip(), ""
    return words[0], ""


def _target_span(statement: Statement) -> SourceSpan:
    tail = statement.tail()
    start = statement.name.end + len(tail) - len(tail.lstrip())
    return statement.span(Word(tail.strip() or " ", start))
