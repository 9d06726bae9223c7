"""Problems for people, on stderr: place, code, message, the line with a mark, the advice."""

from __future__ import annotations

import re
from collections.abc import Iterable

from tauledger.problems import Problem, SourceSpan
from tauledger.report.inert import CUT, clip, display_width, inert

_LINE_COLUMNS = 92
"""Of the source line, so that it stays within 100 with its indent."""
_MESSAGE_COLUMNS = 600
"""A message may quote a name as long as the file allows."""
_INDENT = "    "
_COMMAND_START = re.compile(r"^(\s*):(?=:)", re.MULTILINE)


def format_problems(problems: Iterable[Problem]) -> str:
    """All problems in the given order, each ended by a line feed; empty when there are none."""
    return "".join(format_problem(problem) for problem in problems)


def format_problem(problem: Problem) -> str:
    """One problem::

    amp.cir:4:12: error[model-missing]: Q1 asks for BC547X, which no .model card defines
        Q1 out b e BC547X
                   ~~~~~~
        Add the .model card, or include the file that holds it.
    """
    lines = [_headline(problem)]
    if problem.span is not None and problem.span.text.strip():
        lines += [_INDENT + line for line in _marked_line(problem.span)]
    if problem.advice:
        lines.append(_INDENT + clip(inert(problem.advice), _MESSAGE_COLUMNS))
    return _unforgeable("\n".join(lines) + "\n")


def _unforgeable(text: str) -> str:
    """No line that the runner of a workflow would take for one of its commands.

    It looks for ``::`` at the first letter of a line, and for ``##[`` (from memory).
    """
    return _COMMAND_START.sub(r"\1: ", text).replace("##[", "# #[")


def _headline(problem: Problem) -> str:
    place = ""
    if (span := problem.span) is not None:
        place = f"{inert(span.path)}:{span.line}:{span.column}: "
    message = clip(inert(problem.message), _MESSAGE_COLUMNS)
    return f"{place}{problem.severity.value}[{problem.code}]: {message}"


def _marked_line(span: SourceSpan) -> tuple[str, str]:
    """The source line and the mark under it, cut to a window round the marked text."""
    start = min(max(span.column - 1, 0), len(span.text))
    end = min(start + max(span.length, 1), len(span.text))
    before = inert(span.text[:start]).lstrip()
    marked = _head(inert(span.text[start:end]), _LINE_COLUMNS // 2)
    after = inert(span.text[end:]).rstrip()
    if display_width(before + marked + after) > _LINE_COLUMNS:
        before = _head(before[::-1], _LINE_COLUMNS // 4)[::-1]
        after = _head(after, _LINE_COLUMNS - display_width(before + marked))
    mark = " " * display_width(before) + "~" * max(display_width(marked), 1)
    return before + marked + after, mark


def _head(text: str, columns: int) -> str:
    """The beginning of the text that fits, its cut end marked."""
    if display_width(text) <= columns:
        return text
    kept = text[: columns - len(CUT)]
    while display_width(kept) > columns - len(CUT):
        kept = kept[:-1]
    return kept + CUT
