"""The outcome of a check for people: each finding with its line, then how many there are."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from pathlib import Path

from tauledger.problems import Severity
from tauledger.report.inert import inert
from tauledger.report.places import relative_path
from tauledger.report.problems import format_problem
from tauledger.review.check import Finding, NetlistCheck, distinct_findings


def check_findings(checks: Sequence[NetlistCheck], folder: Path) -> str:
    """Errors and warnings, worst first; empty when there are none."""
    return "".join(
        _shown(finding, folder)
        for finding in distinct_findings(checks)
        if finding.problem.severity is not Severity.NOTE
    )


def check_summary(checks: Sequence[NetlistCheck]) -> str:
    """One line with the counts, and one on missing limits; empty when there is nothing to say."""
    findings = distinct_findings(checks)
    counts = Counter(finding.problem.severity for finding in findings)
    netlists = {one.netlist for one in checks}
    lines = []
    if counts[Severity.ERROR] or counts[Severity.WARNING]:
        words = [_counted(counts[s], s.value) for s in (Severity.ERROR, Severity.WARNING)]
        lines.append(f"{' and '.join(words)} in {_counted(len(netlists), 'netlist')}")
    unlimited = {f.netlist for f in findings if f.problem.code == "limits-absent"}
    if unlimited:
        which = "this netlist" if len(netlists) == 1 else f"{len(unlimited)} of {len(netlists)}"
        lines.append(f"no limits are set for {which}: only what is wrong in itself was looked for")
    return "".join(f"{line}\n" for line in lines)


def _counted(number: int, word: str) -> str:
    return f"{number} {word}{'' if number == 1 else 's'}"


def _shown(finding: Finding, folder: Path) -> str:
    text = format_problem(finding.problem)
    if finding.limit is not None and finding.limit != finding.problem.span:
        place = inert(relative_path(finding.limit.path, folder))
        text += f"    The limit stands at {place}:{finding.limit.line}.\n"
    return text
