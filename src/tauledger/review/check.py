"""What is wrong with a circuit, and which of its limits it misses: findings with their place.

A rule of our own is one entry of :data:`RULES`: id, name, severity, message, advice, and the
function that finds its cases. Problems of reading and missed limits come from elsewhere and are
described by :func:`describe` beside them.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import field, replace

from tauledger.circuit.elements import Capacitor, Circuit
from tauledger.configuration.codes import CODES as CONFIGURATION_CODES
from tauledger.configuration.settings import PathSettings
from tauledger.netlist.codes import CODES as NETLIST_CODES
from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.quantity import format_quantity
from tauledger.records import dataclass
from tauledger.review.limits import CODES as LIMIT_CODES
from tauledger.review.limits import LimitRow, check_limits, class_of
from tauledger.review.rows import REGION_CODE, PathRow, Review

REVERSED_VOLTS = 0.1
"""Below this a polarised capacitor is not called reversed: offsets of a few millivolts round zero
are common (common practice, no source)."""

_POLARISED = re.compile(r"electrolytic|elko|tantal|polari[sz]ed", re.IGNORECASE)
_UNPOLARISED = re.compile(r"bipolar|non[-_ ]?polar|unpolar|not[-_ ]?polar", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Finding:
    """A problem, the netlist and part it is about, and the limit it misses."""

    netlist: str
    problem: Problem
    """Its span is the part's place in the netlist where there is one, else the limit's."""
    part: str = ""
    """Reference designator, or several with commas; empty for none."""
    limit: SourceSpan | None = None
    """Where the missed limit stands in ``tauledger.toml``."""


@dataclass(frozen=True, slots=True)
class NetlistCheck:
    """One netlist held against one signal path of the configuration, or against none."""

    netlist: str
    """Path as given."""
    path: str
    """Name of the signal path in the configuration; empty without one."""
    review: Review | None
    """None when the analysis could not be finished."""
    limits: tuple[LimitRow, ...]
    findings: tuple[Finding, ...]
    outcome: str = "checked"
    """``checked``, ``unusable`` (no netlist or no valid configuration) or ``internal error``."""
    details: str = ""
    """The traceback of an internal error."""

    @property
    def path_row(self) -> PathRow | None:
        """The signal path that was checked."""
        return self.review.paths[0] if self.review and self.review.paths else None


@dataclass(frozen=True, slots=True)
class Subject:
    """What a rule looks at."""

    review: Review
    path: PathRow | None
    circuit: Circuit
    settings: PathSettings | None


@dataclass(frozen=True, slots=True)
class Case:
    """Where a rule applies: the part, and the words for the rule's message."""

    part: str = ""
    words: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Rule:
    id: str
    name: str
    severity: Severity
    message: str
    """With the case's part and words in braces."""
    advice: str
    find: Callable[[Subject], Iterable[Case]]


@dataclass(frozen=True, slots=True)
class Description:
    """What a code means, for formats that list the rules beside the findings."""

    id: str
    name: str
    severity: Severity
    help: str


# Rules --------------------------------------------------------------------------------------------


def _out_of_region(subject: Subject) -> Iterator[Case]:
    """A push-pull output without bias current is cut off by design, so that is not counted."""
    if subject.path is None:
        return
    amplifying = {name for stage in subject.path.stages for name in stage.transistors}
    for row in subject.review.transistors:
        by_design = row.region == "cut off" and row.configuration.startswith("push-pull")
        if row.name in amplifying and row.region != "active" and not by_design:
            current, voltage = ("ID", "VDS") if "FET" in row.type else ("IC", "VCE")
            words = {
                "region": row.region,
                "current": f"{current} {format_quantity(row.current_a, 'A')}",
                "voltage": f"{voltage} {format_quantity(row.voltage_v, 'V')}",
            }
            yield Case(row.name, words)


def _reversed(subject: Subject) -> Iterator[Case]:
    volts = {row.node: row.voltage_v for row in subject.review.nodes}
    for element in subject.circuit.elements:
        if not isinstance(element, Capacitor) or element.name in subject.circuit.attached:
            continue
        reason = polarised_by(element, subject.settings)
        positive, negative = element.nodes
        voltage = volts.get(positive, 0.0) - volts.get(negative, 0.0)
        if reason and voltage < -REVERSED_VOLTS:
            words = {
                "reason": reason,
                "voltage": format_quantity(voltage, "V"),
                "positive": positive,
                "negative": negative,
            }
            yield Case(element.name, words)


def polarised_by(capacitor: Capacitor, settings: PathSettings | None) -> str:
    """What says that it is polarised: its model or its class in the configuration; or nothing."""
    found = class_of(capacitor.name, settings.capacitors) if settings else None
    if found is not None and found.polarised is not None:
        return f"class {found.name}" if found.polarised else ""
    names = {"model": capacitor.model_name, "class": found.name if found else ""}
    for what, name in names.items():
        if _POLARISED.search(name) and not _UNPOLARISED.search(name):
            return f"{what} {name}"
    return ""


def _no_path(subject: Subject) -> Iterator[Case]:
    if subject.path is None:
        yield Case()


def _no_limits(subject: Subject) -> Iterator[Case]:
    settings = subject.settings
    if settings is None or not (settings.limits or settings.dominance):
        yield Case()


RULES = (
    Rule(
        "device-out-of-region",
        "Transistor out of its region",
        Severity.ERROR,
        "{part} on the signal path is {region} ({current}, {voltage}); expected active, so that "
        "it amplifies",
        "Check its bias resistors, its supply and its model.",
        _out_of_region,
    ),
    Rule(
        "capacitor-reversed",
        "Polarised capacitor reversed",
        Severity.ERROR,
        "{part} is polarised by its {reason} and stands reversed: {voltage} from {positive} to "
        "{negative} at the operating point",
        "Turn it round, or use one without polarity. Caution: a reversed electrolytic or tantalum "
        "capacitor can burst or burn; switch off and discharge it before you touch it.",
        _reversed,
    ),
    Rule(
        "path-unnamed",
        "No signal path",
        Severity.NOTE,
        "nothing names one signal path, so only the operating point was checked",
        "Give one source an AC value and name the output with .print ac v(NODE), or name both in "
        "tauledger.toml.",
        _no_path,
    ),
    Rule(
        "limits-absent",
        "No limits set",
        Severity.NOTE,
        "no limits are set for this netlist",
        "Write them in tauledger.toml; tauledger start NETLIST prints one to fill in.",
        _no_limits,
    ),
)

_OTHERS = {
    "definitions-only": (Severity.NOTE, "the file holds definitions and no circuit"),
    "internal-error": (Severity.ERROR, "the check of this netlist broke off: a fault of tauledger"),
}


def describe(problem: Problem) -> Description:
    """What the code of a problem means, with help for whoever meets it."""
    for rule in RULES:
        if rule.id == problem.code:
            return Description(rule.id, rule.name, rule.severity, rule.advice)
    meanings = {**NETLIST_CODES, **LIMIT_CODES, **_OTHERS}
    severity, meaning = meanings.get(problem.code, (problem.severity, ""))
    meaning = meaning or CONFIGURATION_CODES.get(problem.code, "")
    words = problem.code.replace("-", " ")
    explained = f"{meaning[:1].upper()}{meaning[1:]}." if meaning else problem.advice or words
    return Description(problem.code, words[:1].upper() + words[1:], severity, explained)


def note(code: str, message: str, span: SourceSpan | None, advice: str) -> Problem:
    """A problem of this module that no rule finds; its severity stands beside its meaning."""
    return Problem(code, _OTHERS[code][0], message, span, advice)


# Checking -----------------------------------------------------------------------------------------


def check(
    circuit: Circuit, review: Review, settings: PathSettings | None
) -> tuple[tuple[LimitRow, ...], tuple[Finding, ...]]:
    """Limits and findings of the first signal path of a review.

    Findings come in the order: reading, rules, limits. One about a part stands at the part's line.
    """
    path = review.paths[0] if review.paths else None
    subject = Subject(review, path, circuit, settings)
    places = {element.name: element.span for element in circuit.elements}
    rows = check_limits(settings, review, path) if settings and path else ()
    limits = tuple(_placed(row, settings.name if settings else "", places) for row in rows)
    return limits, (
        # A check has its own rule for regions, with its own severity.
        *(Finding(review.netlist, p) for p in review.problems if p.code != REGION_CODE),
        *(_found(rule, case, subject, places) for rule in RULES for case in rule.find(subject)),
        *(
            Finding(review.netlist, row.problem, row.part, given.problem.span)
            for row, given in zip(limits, rows, strict=True)
            if row.problem is not None and given.problem is not None
        ),
    )


def _found(rule: Rule, case: Case, subject: Subject, places: Mapping[str, SourceSpan]) -> Finding:
    message = rule.message.format(part=case.part, **case.words)
    problem = Problem(rule.id, rule.severity, message, _place(case.part, places), rule.advice)
    return Finding(subject.review.netlist, problem, case.part)


def _placed(row: LimitRow, path: str, places: Mapping[str, SourceSpan]) -> LimitRow:
    """The row with its problem at the line of the part that sets the figure."""
    if row.problem is None:
        return row
    message = f"{path}: {row.problem.message}" if path else row.problem.message
    span = _place(row.part.partition(",")[0], places) or row.problem.span
    return replace(row, problem=replace(row.problem, message=message, span=span))


def _place(part: str, places: Mapping[str, SourceSpan]) -> SourceSpan | None:
    """Line of a part; that of its transistor for a capacitance inside one, such as Q1.Cμ."""
    while part and part not in places:
        part = part.rpartition(".")[0]
    return places.get(part)


# Reading the result -------------------------------------------------------------------------------

_RANK = {Severity.ERROR: 0, Severity.WARNING: 1, Severity.NOTE: 2}


def distinct_findings(checks: Iterable[NetlistCheck]) -> tuple[Finding, ...]:
    """Every finding once, worst first; those of one severity stay in order.

    A problem in a shared file (an include, the configuration) comes once for all its netlists.
    """
    found: dict[tuple[str, Problem], Finding] = {}
    for one in checks:
        for finding in one.findings:
            netlist = finding.netlist if finding.problem.span is None else ""
            found.setdefault((netlist, finding.problem), finding)
    return tuple(sorted(found.values(), key=lambda finding: _RANK[finding.problem.severity]))


def fails(finding: Finding, threshold: Severity) -> bool:
    """Whether a finding is as bad as the threshold or worse."""
    return _RANK[finding.problem.severity] <= _RANK[threshold]


def exit_code(checks: Iterable[NetlistCheck], threshold: Severity) -> int:
    """0 fine; 1 a finding at or above the threshold; 2 unusable input; 3 internal error."""
    worst = 0
    for one in checks:
        if one.outcome != "checked":
            worst = max(worst, 3 if one.outcome == "internal error" else 2)
        elif any(fails(finding, threshold) for finding in one.findings):
            worst = max(worst, 1)
    return worst
