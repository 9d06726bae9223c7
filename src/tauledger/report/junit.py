"""JUnit's XML: a suite for each netlist and path, a case for each limit and each finding.

No standard fixes this format; the elements and attributes used are those that parsers of the
trade share (from memory, checked against one in the tests).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from xml.etree import ElementTree

from tauledger.problems import Severity
from tauledger.report.inert import inert
from tauledger.report.problems import format_problem
from tauledger.review.check import Finding, NetlistCheck, fails
from tauledger.review.limits import LimitRow


def junit_report(checks: Sequence[NetlistCheck], threshold: Severity) -> str:
    """The whole file; a finding at or above the threshold is a failure."""
    root = ElementTree.Element("testsuites", name="tauledger")
    for one in checks:
        name = f"{one.netlist} ({one.path})" if one.path else one.netlist
        suite = ElementTree.SubElement(root, "testsuite", name=_text(name))
        for case in _cases(one, threshold):
            case.set("classname", _text(name))
            suite.append(case)
        _count(suite)
    _count(root)
    ElementTree.indent(root)
    text = ElementTree.tostring(root, encoding="unicode")
    return f'<?xml version="1.0" encoding="UTF-8"?>\n{text}\n'


def _cases(check: NetlistCheck, threshold: Severity) -> Iterator[ElementTree.Element]:
    of_limits = {row.problem for row in check.limits}
    for row in check.limits:
        findings = [finding for finding in check.findings if finding.problem == row.problem]
        yield _case(_limit_name(row), findings, threshold)
    others = [finding for finding in check.findings if finding.problem not in of_limits]
    failing = [finding for finding in others if fails(finding, threshold)]
    for finding in failing:
        name = f"{finding.problem.code} {finding.part}".strip()
        yield _case(name, [finding], threshold, broken=check.outcome != "checked")
    if not failing:
        yield _case("nothing wrong in itself", others, threshold)


def _limit_name(row: LimitRow) -> str:
    ends = (("at least", row.minimum), ("at most", row.maximum))
    return " ".join([row.figure, *(f"{words} {end}" for words, end in ends if end)])


def _case(
    name: str, findings: Sequence[Finding], threshold: Severity, broken: bool = False
) -> ElementTree.Element:
    case = ElementTree.Element("testcase", name=_text(name), time="0")
    quiet = []
    for finding in findings:
        text = _text(format_problem(finding.problem))
        if not fails(finding, threshold):
            quiet.append(text)
            continue
        kind = "error" if broken else "failure"
        fault = ElementTree.SubElement(
            case, kind, message=_text(finding.problem.message), type=finding.problem.code
        )
        fault.text = text
    if quiet:
        ElementTree.SubElement(case, "system-out").text = "\n".join(quiet)
    return case


def _count(element: ElementTree.Element) -> None:
    element.set("tests", str(len(list(element.iter("testcase")))))
    for kind in ("failure", "error"):
        counted = sum(1 for case in element.iter("testcase") if case.find(kind) is not None)
        element.set(f"{kind}s", str(counted))
    element.set("skipped", "0")
    element.set("time", "0")


def _text(text: str) -> str:
    """Printable, its line feeds apart: XML has no way to write most control characters."""
    return "\n".join(inert(line) for line in text.split("\n"))
