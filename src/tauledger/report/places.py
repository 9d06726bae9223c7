"""Where a finding stands, as hosts of repositories want it: path from the top, line, columns."""

from __future__ import annotations

import hashlib
from collections import Counter
from collections.abc import Sequence
from pathlib import Path, PurePath

from tauledger.problems import SourceSpan
from tauledger.records import dataclass
from tauledger.review.check import Finding


@dataclass(frozen=True, slots=True)
class Place:
    path: str
    """With forward slashes, relative to the folder asked for when it lies inside."""
    line: int
    column: int
    end_column: int
    """One past the last column; columns count from 1."""
    text: str
    """The line itself; empty when unknown."""


def place_of(finding: Finding, folder: Path) -> Place:
    """The finding's place; the first line of its netlist when it has none."""
    span = finding.problem.span or SourceSpan(finding.netlist, 1, 1, 1, "")
    column = max(span.column, 1)
    return Place(
        relative_path(span.path, folder),
        max(span.line, 1),
        column,
        column + max(span.length, 1),
        span.text,
    )


def relative_path(path: str, folder: Path) -> str:
    """The path from ``folder`` to a file inside it, else the path as it is."""
    whole = Path(folder, path)
    if whole.is_relative_to(folder) and ".." not in PurePath(path).parts:
        return whole.relative_to(folder).as_posix()
    return PurePath(path).as_posix()


def fingerprints(findings: Sequence[Finding], folder: Path) -> list[str]:
    """For each finding 32 hexadecimal digits from its rule, file and designator.

    They stay when lines move or a value changes. Findings alike in all three are told apart by
    their order.
    """
    seen: Counter[tuple[str, str, str]] = Counter()
    result = []
    for finding in findings:
        path = place_of(finding, folder).path
        key = (finding.problem.code, path, finding.part)
        seen[key] += 1
        text = "\0".join((*key, str(seen[key])))
        result.append(hashlib.sha256(text.encode("utf-8", "backslashreplace")).hexdigest()[:32])
    return result
