"""What can be wrong with an input, said once, in one shape.

A :class:`Problem` is plain data (it pickles, so worker processes can return it). Code that can
go on collects problems; code that cannot raises :class:`ProblemError` with what it has.
"""

from __future__ import annotations

import enum

from tauledger.records import dataclass


class Severity(enum.StrEnum):
    """How bad a problem is: an error stops the analysis, a warning does not, a note informs."""

    ERROR = "error"
    WARNING = "warning"
    NOTE = "note"


@dataclass(frozen=True, slots=True)
class SourceSpan:
    """A stretch of one physical line of a file; ``line`` and ``column`` count from 1."""

    path: str
    line: int
    column: int
    length: int
    text: str
    """The whole physical line, without its line end."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One fault: what was found, what was expected, where, and what to do about it."""

    code: str
    """Stable identifier in kebab-case, such as ``model-missing``."""
    severity: Severity
    message: str
    """What was found and what was expected, one sentence, no line end."""
    span: SourceSpan | None = None
    advice: str = ""
    """What to do, one sentence; may be empty only for notes."""


class ProblemError(Exception):
    """Raised when the work cannot go on; carries every problem known so far."""

    def __init__(self, *problems: Problem) -> None:
        super().__init__(problems[0].message if problems else "unknown problem")
        self.problems: tuple[Problem, ...] = problems
