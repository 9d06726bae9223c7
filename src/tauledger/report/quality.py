"""Code quality for a merge request: a JSON list with one entry a finding.

The keys are those the host documents for its code-quality artifact (from memory).
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path

from tauledger.problems import Severity
from tauledger.report.inert import clip, inert
from tauledger.report.places import fingerprints, place_of
from tauledger.review.check import NetlistCheck, distinct_findings

_SEVERITIES = {Severity.ERROR: "major", Severity.WARNING: "minor", Severity.NOTE: "info"}
_TEXT_COLUMNS = 1000


def quality_report(checks: Sequence[NetlistCheck], folder: Path) -> str:
    """The list as indented JSON; paths are relative to ``folder``."""
    findings = distinct_findings(checks)
    entries = []
    for finding, mark in zip(findings, fingerprints(findings, folder), strict=True):
        problem, place = finding.problem, place_of(finding, folder)
        entries.append(
            {
                "description": clip(inert(problem.message), _TEXT_COLUMNS),
                "check_name": problem.code,
                "fingerprint": mark,
                "severity": _SEVERITIES[problem.severity],
                "location": {"path": inert(place.path), "lines": {"begin": place.line}},
            }
        )
    return json.dumps(entries, indent=2) + "\n"
