"""Annotations of a workflow run: one workflow command a finding, worst first.

The syntax and its escapes are those the host documents for workflow commands (from memory): in a
message ``%``, carriage return and line feed, in a property also ``:`` and ``,`` are written as
percent codes. A run shows at most ten annotations of each level.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from pathlib import Path

from tauledger.problems import Severity
from tauledger.report.inert import clip, inert
from tauledger.report.places import place_of, relative_path
from tauledger.review.check import Finding, NetlistCheck, describe, distinct_findings

MOST_PER_LEVEL = 10
_MESSAGE_COLUMNS = 1000
_LEVELS = {Severity.ERROR: "error", Severity.WARNING: "warning", Severity.NOTE: "notice"}


def workflow_annotations(checks: Sequence[NetlistCheck], folder: Path) -> str:
    """Lines to print in a workflow step; paths are relative to ``folder``."""
    shown: Counter[Severity] = Counter()
    lines = []
    findings = distinct_findings(checks)
    for finding in findings:
        severity = finding.problem.severity
        if shown[severity] < MOST_PER_LEVEL:
            shown[severity] += 1
            lines.append(_command(finding, folder))
    if more := len(findings) - len(lines):
        lines.append(f"{more} more findings have no annotation of their own")
    return "".join(f"{line}\n" for line in lines)


def _command(finding: Finding, folder: Path) -> str:
    problem, place = finding.problem, place_of(finding, folder)
    title = describe(problem).name
    properties = {
        "file": place.path,
        "line": str(place.line),
        "col": str(place.column),
        "endColumn": str(place.end_column),
        "title": f"{title}: {finding.part}" if finding.part else title,
    }
    # A real line feed, so that the advice stands on a line of its own.
    message = "%0A".join(_escaped(text) for text in (problem.message, *_after(finding, folder)))
    listed = ",".join(f"{name}={_property(value)}" for name, value in properties.items())
    return f"::{_LEVELS[problem.severity]} {listed}::{message}"


def _after(finding: Finding, folder: Path) -> tuple[str, ...]:
    advice = (finding.problem.advice,) if finding.problem.advice else ()
    if finding.limit is None:
        return advice
    return (
        *advice,
        f"Limit: {relative_path(finding.limit.path, folder)}, line {finding.limit.line}",
    )


def _escaped(text: str) -> str:
    shown = clip(inert(text), _MESSAGE_COLUMNS)
    return shown.replace("%", "%25").replace("\r", "%0D").replace("\n", "%0A")


def _property(text: str) -> str:
    return _escaped(text).replace(":", "%3A").replace(",", "%2C")
