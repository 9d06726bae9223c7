"""SARIF 2.1.0 for code scanning.

Source of the format: the OASIS standard's schema, against which the tests check; which
properties a code-scanning host reads is from memory.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path, PurePath
from typing import Any
from urllib.parse import quote

from tauledger.problems import Severity
from tauledger.report.inert import clip, inert
from tauledger.report.places import fingerprints, place_of, relative_path
from tauledger.review.check import Finding, NetlistCheck, describe, distinct_findings
from tauledger.version import VERSION

_SCHEMA = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/os/schemas/sarif-schema-2.1.0.json"
_LEVELS = {Severity.ERROR: "error", Severity.WARNING: "warning", Severity.NOTE: "note"}
_TEXT_COLUMNS = 1000
_ROOT = "SRCROOT"


def sarif_log(checks: Sequence[NetlistCheck], folder: Path) -> str:
    """One run with all findings; paths are relative to ``folder``."""
    findings = distinct_findings(checks)
    rules = {finding.problem.code: _rule(finding) for finding in findings}
    order = {code: index for index, code in enumerate(rules)}
    marks = fingerprints(findings, folder)
    run = {
        "tool": {
            "driver": {
                "name": "tauledger",
                "semanticVersion": VERSION,
                "rules": list(rules.values()),
            }
        },
        "columnKind": "unicodeCodePoints",
        "originalUriBaseIds": {_ROOT: {"uri": folder.resolve().as_uri() + "/"}},
        "invocations": [
            {"executionSuccessful": all(one.outcome != "internal error" for one in checks)}
        ],
        "results": [
            _result(finding, order[finding.problem.code], mark, folder)
            for finding, mark in zip(findings, marks, strict=True)
        ],
    }
    document = {"$schema": _SCHEMA, "version": "2.1.0", "runs": [run]}
    return json.dumps(document, indent=2) + "\n"


def _rule(finding: Finding) -> dict[str, Any]:
    rule = describe(finding.problem)
    help_text = _text(rule.help)
    return {
        "id": rule.id,
        "name": "".join(word.capitalize() for word in rule.id.split("-")),
        "shortDescription": {"text": rule.name},
        "fullDescription": {"text": help_text},
        "help": {"text": help_text},
        "defaultConfiguration": {"level": _LEVELS[rule.severity]},
    }


def _result(finding: Finding, index: int, mark: str, folder: Path) -> dict[str, Any]:
    problem, place = finding.problem, place_of(finding, folder)
    region: dict[str, Any] = {
        "startLine": place.line,
        "startColumn": place.column,
        "endLine": place.line,
        "endColumn": place.end_column,
    }
    if place.text:
        region["snippet"] = {"text": _text(place.text)}
    result: dict[str, Any] = {
        "ruleId": problem.code,
        "ruleIndex": index,
        "level": _LEVELS[problem.severity],
        "message": {"text": _text(f"{problem.message}. {problem.advice}".strip())},
        "locations": [{"physicalLocation": {**_artifact(place.path), "region": region}}],
        "partialFingerprints": {"ruleFilePart/v1": mark},
    }
    if finding.part:
        result["locations"][0]["logicalLocations"] = [{"name": _text(finding.part)}]
    if finding.limit is not None:
        where = _artifact(relative_path(finding.limit.path, folder))
        limit = {**where, "region": {"startLine": finding.limit.line}}
        result["relatedLocations"] = [
            {"id": 1, "physicalLocation": limit, "message": {"text": "The limit."}}
        ]
    return result


def _artifact(path: str) -> dict[str, Any]:
    try:
        # Bytes of a name that are no UTF-8 arrive as surrogates and go out as they were.
        encoded = path.encode("utf-8", "surrogateescape")
    except UnicodeEncodeError:
        encoded = path.encode("utf-8", "backslashreplace")
    uri = quote(encoded, safe="/")
    if PurePath(path).is_absolute():
        # A path that begins with a drive wants the stroke that others bring along.
        return {"artifactLocation": {"uri": f"file:///{uri.removeprefix('/')}"}}
    return {"artifactLocation": {"uri": uri, "uriBaseId": _ROOT}}


def _text(text: str) -> str:
    return clip(inert(text), _TEXT_COLUMNS)
