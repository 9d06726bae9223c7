"""The check as a command: over all cores when it pays, with progress, in the format asked for."""

from __future__ import annotations

import glob
import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TextIO

from tauledger.circuit.elements import Circuit
from tauledger.configuration.settings import PathSettings
from tauledger.fleet import Target, check_targets
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.review.check import NetlistCheck, check
from tauledger.review.rows import Review

FORMATS = ("text", "markdown", "github", "gitlab", "sarif", "junit", "json")
FEW = 40
"""So many netlists are done in this process before workers would have started (measured)."""

_THREADS = ("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "OMP_NUM_THREADS")


def check_on_all_cores(targets: Sequence[Target], stream: TextIO) -> list[NetlistCheck]:
    """Check in this process or, when they are many, in one process a core.

    Progress goes to ``stream`` when that is a terminal.
    """
    show = _progress(len(targets), stream)
    workers = min(_cores(), len(targets))
    with _one_thread_each():
        if len(targets) <= FEW or workers == 1:
            return check_targets(targets, progress=show)
        return _check_in_workers(targets, workers, show)


def _check_in_workers(
    targets: Sequence[Target], workers: int, show: Callable[[int], None] | None
) -> list[NetlistCheck]:
    import multiprocessing
    from concurrent.futures import ProcessPoolExecutor

    # Not "fork", which copies whatever threads the numeric library has started.
    methods = multiprocessing.get_all_start_methods()
    context = multiprocessing.get_context("forkserver" if "forkserver" in methods else "spawn")
    # The engine is loaded once, with one thread, before the workers split off.
    context.set_forkserver_preload(["tauledger.analysis"])
    with ProcessPoolExecutor(workers, mp_context=context) as executor:
        try:
            return check_targets(targets, executor, show)
        except BaseException:
            executor.shutdown(wait=False, cancel_futures=True)
            raise


@contextmanager
def _one_thread_each() -> Iterator[None]:
    """Keep the numeric library from threads of its own where it is not loaded yet.

    On matrices of a few dozen rows they double the processor time and save nothing (measured).
    """
    names = [name for name in _THREADS if name not in os.environ]
    os.environ.update(dict.fromkeys(names, "1"))
    try:
        yield
    finally:
        for name in names:
            del os.environ[name]


def _cores() -> int:
    # The cores this process may use, which a container may have fewer of than the machine.
    if sys.platform == "linux":
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _progress(total: int, stream: TextIO) -> Callable[[int], None] | None:
    if total <= FEW or not stream.isatty():
        return None

    def show(done: int) -> None:
        stream.write(f"\rchecked {done} of {total}" if done < total else "\r\x1b[K")
        stream.flush()

    return show


def render(
    checks: Sequence[NetlistCheck], form: str, threshold: Severity, encoding: str | None
) -> str:
    """The checks in one of :data:`FORMATS`; ``encoding`` is that of the stream, for text."""
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
    from tauledger.report.starter import bare_starter, starter

    content = read(netlist)
    named = _named_from(folder, netlist.resolve())
    try:
        return starter(analyze(content, input, output).review, named)
    except ProblemError as error:
        explain(error.problems)
    circuit = flatten(content)
    return bare_starter(circuit.title, circuit.nodes, named)


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
