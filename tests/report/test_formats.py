"""Every format for machines is read back by a reader that is not ours."""

from __future__ import annotations

import json
import re
import unicodedata
from dataclasses import replace
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from junitparser import Error, Failure, JUnitXml

from report.amplifier import (
    CE_LINE,
    FLOATING,
    GARBLED,
    LIMITS,
    NETLIST,
    REVERSED,
    SATURATED,
    SMALL_BYPASS,
    checked,
    checked_files,
    write,
)
from report.fixtures import ONE_STAGE, TWO_STAGES
from report.report_schema import SHIPPED, schema_text
from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.report.check_json import check_json
from tauledger.report.check_text import check_findings, check_summary
from tauledger.report.json_report import json_report
from tauledger.report.junit import junit_report
from tauledger.report.quality import quality_report
from tauledger.report.sarif import sarif_log
from tauledger.report.workflow import MOST_PER_LEVEL, workflow_annotations
from tauledger.review.check import Finding, NetlistCheck
from tauledger.review.rows import Review

_SARIF = json.loads((Path(__file__).parent / "outside" / "sarif-2.1.0-rtm.5.json").read_text())
_SARIF_VALIDATOR = jsonschema.Draft4Validator(_SARIF)
_HOSTILE = st.text(st.characters(codec=None), max_size=40) | st.sampled_from(
    [
        "a\n::error file=x::forged",
        "::stop-commands::x",
        "  ::set-env name=PATH::/tmp",
        "##[add-mask]x",
        "]]><x a='b\"c&amp;",
        "a,title=forged:%0A::warning::x",
        "\x1b[31mred\u202e\x00\ufffe",
    ]
)


@pytest.fixture
def checks(tmp_path: Path) -> list[NetlistCheck]:
    texts = [NETLIST, SMALL_BYPASS, SATURATED, REVERSED, FLOATING, GARBLED]
    limits = LIMITS.replace("amp.cir", "*.cir")
    files = [write(tmp_path, text, limits, f"{i}.cir") for i, text in enumerate(texts)]
    return checked_files([*files, tmp_path / "gone.cir"])


def _with(text: str, severity: Severity = Severity.ERROR, span: bool = True) -> list[NetlistCheck]:
    """A check in which every word that a netlist can bring is ``text``."""
    place = SourceSpan(text or "x", 3, 2, 4, text) if span else None
    problem = Problem("limit-missed", severity, text, place, text)
    finding = Finding(text or "x", problem, text, place)
    return [NetlistCheck(text or "x", text, None, (), (finding,))]


# SARIF --------------------------------------------------------------------------------------------


def _sarif(checks: list[NetlistCheck], folder: Path) -> dict[str, Any]:
    log = json.loads(sarif_log(checks, folder))
    _SARIF_VALIDATOR.validate(log)
    return dict(log["runs"][0])


def test_sarif_has_what_code_scanning_needs(checks: list[NetlistCheck], tmp_path: Path) -> None:
    run = _sarif(checks, tmp_path)
    rules = run["tool"]["driver"]["rules"]
    assert len(run["results"]) == sum(len(one.findings) for one in checks)
    for result in run["results"]:
        rule = rules[result["ruleIndex"]]
        assert rule["id"] == result["ruleId"]
        assert rule["help"]["text"]
        (location,) = result["locations"]
        region = location["physicalLocation"]["region"]
        assert region["startLine"] == region["endLine"] >= 1
        assert region["endColumn"] > region["startColumn"] >= 1
        uri = location["physicalLocation"]["artifactLocation"]["uri"]
        assert (tmp_path / uri).exists() or uri == "gone.cir"
    marks = [result["partialFingerprints"]["ruleFilePart/v1"] for result in run["results"]]
    assert len(set(marks)) == len(marks)


def test_the_annotation_stands_on_the_small_capacitor(tmp_path: Path) -> None:
    (result,) = _sarif(checked(tmp_path, SMALL_BYPASS, LIMITS), tmp_path)["results"]
    place = result["locations"][0]
    region = place["physicalLocation"]["region"]
    assert region["startLine"] == CE_LINE
    assert region["snippet"]["text"].startswith("CE ")
    assert place["logicalLocations"] == [{"name": "CE"}]
    related = result["relatedLocations"][0]["physicalLocation"]
    assert related["artifactLocation"]["uri"] == "tauledger.toml"


def test_a_fingerprint_survives_moved_lines_and_new_values(tmp_path: Path) -> None:
    moved = SMALL_BYPASS.replace("22u", "18u").replace("\nVCC", "\n* a new comment\nVCC")
    marks = []
    for text in (SMALL_BYPASS, moved):
        (result,) = _sarif(checked(tmp_path, text, LIMITS), tmp_path)["results"]
        marks.append(result["partialFingerprints"])
    assert marks[0] == marks[1]


@settings(deadline=None)
@given(text=_HOSTILE)
def test_sarif_is_valid_whatever_the_netlist_says(text: str) -> None:
    _sarif(_with(text), Path("/work"))


# JUnit --------------------------------------------------------------------------------------------


def test_junit_counts_and_names(checks: list[NetlistCheck], tmp_path: Path) -> None:
    root = JUnitXml.fromstring(junit_report(checks, Severity.ERROR).encode())
    suites = list(root)
    assert [suite.name for suite in suites][1].endswith("1.cir (voice)")
    assert root.tests == sum(len(list(suite)) for suite in suites)
    assert [suite.failures for suite in suites] == [0, 1, 3, 1, 1, 1, 0]
    assert [suite.errors for suite in suites] == [0] * 6 + [1]
    good = list(suites[0])
    assert [case.name for case in good] == [
        "midband gain at least 40 dB",
        "low corner at most 120 Hz",
        "low corner set by CE",
        "nothing wrong in itself",
    ]
    failed = [case for case in suites[1] if not case.is_passed]
    assert [case.name for case in failed] == ["low corner at most 120 Hz"]
    assert isinstance(failed[0].result[0], Failure)
    assert f":{CE_LINE}:" in failed[0].result[0].text
    assert isinstance(next(iter(suites[6])).result[0], Error)


def test_what_is_below_the_threshold_is_no_failure() -> None:
    warned = _with("only a warning", Severity.WARNING)
    for threshold, failures in ((Severity.ERROR, 0), (Severity.WARNING, 1)):
        root = JUnitXml.fromstring(junit_report(warned, threshold).encode())
        assert root.failures == failures


@given(text=_HOSTILE)
def test_junit_is_valid_whatever_the_netlist_says(text: str) -> None:
    root = JUnitXml.fromstring(junit_report(_with(text), Severity.ERROR).encode())
    assert root.failures == 1
    assert len(list(root)) == 1


# Code quality -------------------------------------------------------------------------------------


def test_code_quality_has_its_keys(checks: list[NetlistCheck], tmp_path: Path) -> None:
    entries = json.loads(quality_report(checks, tmp_path))
    assert len({entry["fingerprint"] for entry in entries}) == len(entries) > 5
    for entry in entries:
        assert set(entry) == {"description", "check_name", "fingerprint", "severity", "location"}
        assert entry["severity"] in ("info", "minor", "major", "critical", "blocker")
        assert entry["location"]["lines"]["begin"] >= 1
        assert not Path(entry["location"]["path"]).is_absolute()


# Workflow annotations -----------------------------------------------------------------------------

_COMMAND = re.compile(r"::(error|warning|notice) ((?:[a-zA-Z]+=[^,:]*,?)+)::(.*)")


def _commands(text: str) -> list[tuple[str, dict[str, str], str]]:
    """As the runner reads them: a command begins a line, properties end at the next ``::``."""
    found = []
    for line in text.split("\n"):
        if line.lstrip().startswith("::") or "##[" in line:
            match = _COMMAND.fullmatch(line)
            assert match is not None, line
            properties = dict(entry.split("=", 1) for entry in match[2].split(","))
            found.append((match[1], properties, match[3]))
    return found


def test_annotation_of_the_small_capacitor(tmp_path: Path) -> None:
    text = workflow_annotations(checked(tmp_path, SMALL_BYPASS, LIMITS), tmp_path)
    ((level, properties, message),) = _commands(text)
    assert level == "error"
    assert properties == {
        "file": "amp.cir",
        "line": str(CE_LINE),
        "col": "1",
        "endColumn": "3",
        "title": "Limit missed%3A CE",
    }
    assert "above the 120 Hz allowed" in message
    assert "%25" in message  # the percent sign of the message
    assert message.endswith("%0ALimit: tauledger.toml, line 4")


def test_at_most_ten_of_a_level_worst_first() -> None:
    findings = [
        Finding("amp.cir", Problem("x", severity, f"number {i}", None, "Do."), f"C{i}")
        for i in range(MOST_PER_LEVEL + 3)
        for severity in (Severity.NOTE, Severity.WARNING, Severity.ERROR)
    ]
    checks = [NetlistCheck("amp.cir", "", None, (), tuple(findings))]
    text = workflow_annotations(checks, Path("/work"))
    levels = [level for level, _, _ in _commands(text)]
    assert levels == ["error"] * 10 + ["warning"] * 10 + ["notice"] * 10
    assert text.splitlines()[-1].startswith("9 more findings")


@given(text=_HOSTILE, span=st.booleans())
def test_no_netlist_forges_a_command(text: str, span: bool) -> None:
    checks = _with(text, span=span)
    printed = workflow_annotations(checks, Path("/work"))
    ((level, properties, _),) = _commands(printed)
    assert level == "error"
    assert set(properties) == {"file", "line", "col", "endColumn", "title"}
    assert printed.count("\n") == 1


@given(text=_HOSTILE)
def test_the_text_for_people_forges_none_either(text: str) -> None:
    printed = check_findings(_with(text), Path("/work"))
    for line in printed.split("\n"):
        assert not line.lstrip().startswith("::")
        assert "##[" not in line
        assert all(unicodedata.category(c) not in ("Cc", "Cf", "Cs") for c in line)


# Text ---------------------------------------------------------------------------------------------


def test_text_is_quiet_when_green_and_counts_when_not(tmp_path: Path) -> None:
    green = checked(tmp_path, NETLIST, LIMITS)
    assert check_findings(green, tmp_path) + check_summary(green) == ""
    red = checked(tmp_path, SMALL_BYPASS, LIMITS)
    assert "The limit stands at tauledger.toml:4." in check_findings(red, tmp_path)
    assert check_summary(red) == "1 error and 0 warnings in 1 netlist\n"
    (tmp_path / "tauledger.toml").unlink()
    assert check_summary(checked(tmp_path, NETLIST)).startswith("no limits are set")


# JSON ---------------------------------------------------------------------------------------------


def _schema() -> jsonschema.Draft202012Validator:
    schema = json.loads(SHIPPED.read_text(encoding="utf-8"))
    jsonschema.Draft202012Validator.check_schema(schema)
    return jsonschema.Draft202012Validator(schema)


def test_the_shipped_schema_is_that_of_the_rows() -> None:
    assert SHIPPED.read_text(encoding="utf-8") == schema_text(), (
        "a row has changed; run python tests/report/report_schema.py"
    )


@pytest.mark.parametrize("review", [ONE_STAGE, TWO_STAGES])
def test_a_report_satisfies_the_schema(review: Review) -> None:
    document = json.loads(json_report(review))
    _schema().validate(document)
    for key in ("nodes", "format"):
        broken = {k: v for k, v in document.items() if k != key}
        assert not _schema().is_valid(broken)
    document["paths"][0]["gain"] = "large"
    assert not _schema().is_valid(document)


def test_a_check_satisfies_the_schema(checks: list[NetlistCheck]) -> None:
    document = json.loads(check_json(checks))
    _schema().validate(document)
    assert [one["outcome"] for one in document["checks"]] == ["checked"] * 6 + ["unusable"]
    (missed,) = document["checks"][1]["findings"]
    assert missed["problem"]["span"]["line"] == CE_LINE
    document["checks"][1]["findings"][0]["part"] = 3
    assert not _schema().is_valid(document)


@settings(max_examples=25, deadline=None)
@given(text=_HOSTILE)
def test_a_check_is_json_whatever_the_netlist_says(text: str) -> None:
    checks = [replace(_with(text)[0], review=replace(ONE_STAGE, title=text))]
    _schema().validate(json.loads(check_json(checks)))
