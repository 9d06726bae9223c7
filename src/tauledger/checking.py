"""The check as a command: over all cores when it pays, with progress, in the format asked for."""

from __future__ import annotations

import glob
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from tauledger.circuit.elements import Circuit
from tauledger.configuration.settings import PathSettings
from tauledger.fleet import (
    Target,
    check_targets,
    one_thread_each,
    usable_cores,
    worker_processes,
)
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.review.check import NetlistCheck, check
from tauledger.review.rows import Review

if TYPE_CHECKING:
    from tauledger.report.starter_parts import PartFound
    from tauledger.review.decisions import Stress

FEW = 40
"""So many netlists are done in this process before workers would have started (measured)."""


def check_on_all_cores(targets: Sequence[Target], stream: TextIO) -> list[NetlistCheck]:
    """Check in this process or, when they are many, in one process a core.

    Progress goes to ``stream`` when that is a terminal.
    """
    show = _progress(len(targets), stream)
    workers = min(usable_cores(), len(targets))
    if len(targets) <= FEW or workers == 1:
        with one_thread_each():
            return check_targets(targets, progress=show)
    with worker_processes(workers, "tauledger.analysis") as executor:
        return check_targets(targets, executor, show)


def _progress(total: int, stream: TextIO) -> Callable[[int], None] | None:
    if total <= FEW or not stream.isatty():
        return None

    def show(done: int) -> None:
        # Blanks, since not every console of Windows knows the code that clears a line.
        stream.write(f"\rchecked {done} of {total}" if done < total else f"\r{'':<40}\r")
        stream.flush()

    return show


def render(
    checks: Sequence[NetlistCheck], form: str, threshold: Severity, encoding: str | None
) -> str:
    """The checks in one format; ``encoding`` is that of the stream, for text."""
    folder = Path.cwd()
    match form:
        case "markdown":
            from tauledger.report.markdown import markdown_report

            return markdown_report(checks, threshold)
        case "github":
            from tauledger.report.workflow import workflow_annotations

            return workflow_annotations(checks, folder)
        case "gitlab":
            from tauledger.report.quality import quality_report

            return quality_report(checks, folder)
        case "sarif":
            from tauledger.report.sarif import sarif_log

            return sarif_log(checks, folder)
        case "junit":
            from tauledger.report.junit import junit_report

            return junit_report(checks, threshold)
        case "json":
            from tauledger.report.check_json import check_json

            return check_json(checks)
    from tauledger.report.alphabet import alphabet
    from tauledger.report.check_text import check_findings

    return alphabet(encoding)(check_findings(checks, folder))


def markdown_of(circuit: Circuit, review: Review, settings: PathSettings | None) -> str:
    """The Markdown report of one analysis."""
    from tauledger.report.markdown import markdown_report

    limits, findings = check(circuit, review, settings)
    name = settings.name if settings else ""
    one = NetlistCheck(review.netlist, name, review, limits, findings)
    return markdown_report([one], Severity.ERROR)


def starter_for(
    netlist: Path,
    folder: Path | None,
    input: str | None,
    output: str | None,
    explain: Callable[[Sequence[Problem]], None],
) -> str:
    """A configuration to start from; ``explain`` is told what could not be found.

    It is for ``folder``, left out for the working folder or the netlist's own. A netlist that
    says too little for an analysis, a board with connectors for sources say, gives one with its
    nets listed. Raises ProblemError when it cannot be read, or lies outside ``folder``.
    """
    from tauledger.analysis import analyze, read
    from tauledger.circuit import flatten
    from tauledger.circuit.generic import generic_models
    from tauledger.decide.stress import stress
    from tauledger.report.starter import bare_starter, starter

    content = read(netlist)
    named = _named_from(folder, netlist.resolve())
    try:
        analysis = analyze(content, input, output)
        found = _parts(analysis.circuit, _strains(stress(analysis)))
        return starter(analysis.review, named, found)
    except ProblemError as error:
        # Whatever cannot be read is raised here, and so told once.
        circuit = flatten(content, generic_models({}))
        explain(error.problems)
    return bare_starter(circuit.title, circuit.nodes, named, _parts(circuit, {}))


def _strains(found: Stress) -> dict[str, float]:
    """Voltage or heat of every part at the operating point, magnitudes."""
    strains = {row.part: abs(row.voltage_v) for row in found.capacitors}
    strains |= {row.part: row.power_w for row in found.resistors}
    return strains | {row.part: row.power_w for row in found.devices}


def _parts(circuit: Circuit, strains: Mapping[str, float]) -> list[PartFound]:
    """What stands on the board, in the order of the netlist."""
    from tauledger.circuit import elements as of
    from tauledger.report.starter_parts import PartFound

    kinds: dict[type[of.Element], str] = {
        of.Resistor: "resistor",
        of.Capacitor: "capacitor",
        of.BipolarTransistor: "bipolar",
        of.JunctionFet: "jfet",
        of.MosFet: "mosfet",
        of.Diode: "diode",
    }
    return [
        PartFound(
            name=element.name,
            kind=kinds[type(element)],
            value=element.capacitance_f if isinstance(element, of.Capacitor) else None,
            strain=strains.get(element.name),
        )
        for element in circuit.elements
        if type(element) in kinds
    ]


def _named_from(folder: Path | None, netlist: Path) -> str:
    """The netlist as a pattern of the configuration."""
    home = (folder or Path.cwd()).resolve()
    if not netlist.is_relative_to(home):
        if folder is not None:
            message = f"{netlist} lies outside {home}, where the configuration would stand"
            advice = "Write tauledger.toml in the folder of its netlists, or above it."
            raise ProblemError(Problem("config-refused", Severity.ERROR, message, None, advice))
        home = netlist.parent
    return glob.escape(netlist.relative_to(home).as_posix())
