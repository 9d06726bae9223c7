"""Many netlists: which ones, held against what, on all cores.

The engine is imported where it is used, so that a process that only deals out the work never
waits for it.
"""

from __future__ import annotations

import os
import sys
import traceback
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from tauledger.configuration.codes import problem
from tauledger.configuration.files import FILE_NAME, find_configuration, from_here, is_match
from tauledger.netlist.include import default_roots
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass
from tauledger.review.check import Finding, NetlistCheck, check, note
from tauledger.version import VERSION

if TYPE_CHECKING:
    from concurrent.futures import Executor

    from tauledger.configuration.settings import Configuration, PathSettings
    from tauledger.netlist import Netlist

PATH_CODES = frozenset(("input-ambiguous", "input-missing", "output-ambiguous"))
"""Problems that leave the signal path open; without a configuration that is no fault."""
_MODEL_SUFFIXES = frozenset((".lib", ".mod", ".sub", ".subckt"))
_FILES_WALKED = 100_000
_THREADS = ("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "OMP_NUM_THREADS")
_MOST_ON_WINDOWS = 61
"""Worker processes, says the documentation of ``concurrent.futures`` (from memory)."""


@dataclass(frozen=True, slots=True)
class Target:
    """One netlist and what it is held against."""

    netlist: str
    settings: PathSettings | None = None
    problems: tuple[Problem, ...] = ()
    """Of its configuration; then it is not checked."""


# Which netlists -----------------------------------------------------------------------------------


def named_targets(netlists: Sequence[Path], configuration: Path | None = None) -> list[Target]:
    """The named netlists, each with every signal path for it in ``configuration``.

    Left out, that is the ``tauledger.toml`` found for each. What is wrong with a configuration
    is a problem of every netlist that it is for, so that a list may be split at will. A
    ``tauledger.toml`` among the names stands for every netlist that it is for, and so does a
    file of models below it.
    """
    known: dict[Path, Configuration | ProblemError] = {}
    targets: list[Target] = []
    for netlist in netlists:
        try:
            if netlist.name == FILE_NAME:
                targets += configured_targets(netlist.parent, netlist)
                continue
            found = configuration or find_configuration(netlist, default_roots(netlist))
            paths = _paths_for(netlist, _read_once(found, known)) if found else []
        except ProblemError as error:
            targets.append(Target(str(netlist), problems=error.problems))
            continue
        targets += [Target(str(netlist), path) for path in paths or (None,)]
        if found and not paths and netlist.suffix.lower() in _MODEL_SUFFIXES:
            targets += configured_targets(found.parent, found)
    return _each_once(targets)


def _each_once(targets: Sequence[Target]) -> list[Target]:
    """Without what was named twice, itself and by its configuration."""
    once: dict[tuple[str, str], Target] = {}
    for target in targets:
        name = target.settings.name if target.settings else ""
        once.setdefault((os.path.realpath(target.netlist), name), target)
    return list(once.values())


def configured_targets(folder: Path, configuration: Path | None = None) -> list[Target]:
    """Every netlist that a signal path of ``configuration`` is for.

    Left out, that is the ``tauledger.toml`` found for ``folder``. Raises ProblemError when there
    is none, or when something is wrong in it.
    """
    found = configuration or find_configuration(folder / FILE_NAME, default_roots(folder / "x"))
    if found is None:
        missing = f"no netlist was named, and no {FILE_NAME} was found for {folder}"
        advice = "Name the netlists to check, or write a tauledger.toml."
        raise ProblemError(Problem("config-path-unmatched", Severity.ERROR, missing, None, advice))
    # Imported late: the parser of TOML stays off the way of netlists that have none.
    from tauledger.configuration.reading import read_configuration

    content = read_configuration(found)
    if not content.paths:
        message = f"{found} has no signal path, so there is nothing to check"
        advice = 'Add a table [path.NAME] with netlist = "FILE", or name the netlists.'
        raise ProblemError(problem("config-path-unmatched", message, None, advice))
    return [target for path in content.paths for target in _targets_of(path, found.parent)]


def _targets_of(path: PathSettings, folder: Path) -> list[Target]:
    netlists = sorted(_matching(path.netlist, folder))
    if netlists:
        return [Target(from_here(netlist), path) for netlist in netlists]
    message = f"no file matches the netlist {path.netlist!r} of path {path.name!r}"
    advice = "Correct the name; it is relative to the folder of tauledger.toml."
    unmatched = problem("config-path-unmatched", message, path.span, advice)
    return [Target(from_here(folder / path.netlist), path, (unmatched,))]


def _matching(pattern: str, folder: Path) -> Iterator[Path]:
    if not any(character in pattern for character in "*?["):
        if is_match(folder / pattern, pattern, folder) and (folder / pattern).is_file():
            yield folder / pattern
        return
    walked = 0
    for place, folders, files in os.walk(folder):
        folders[:] = sorted(name for name in folders if not name.startswith("."))
        walked += len(files)
        if walked > _FILES_WALKED:
            message = f"more than {_FILES_WALKED} files lie under {folder}"
            advice = "Put tauledger.toml nearer to its netlists."
            raise ProblemError(problem("config-value", message, None, advice))
        for name in files:
            if is_match(Path(place, name), pattern, folder):
                yield Path(place, name)


def _paths_for(netlist: Path, configuration: Configuration) -> list[PathSettings]:
    folder = configuration.path.parent
    return [path for path in configuration.paths if is_match(netlist, path.netlist, folder)]


def _read_once(path: Path, known: dict[Path, Configuration | ProblemError]) -> Configuration:
    if path not in known:
        from tauledger.configuration.reading import read_configuration

        try:
            known[path] = read_configuration(path)
        except ProblemError as error:
            known[path] = error
    found = known[path]
    if isinstance(found, ProblemError):
        raise found
    return found


# Checking -----------------------------------------------------------------------------------------


@contextmanager
def worker_processes(count: int, preload: str) -> Iterator[Executor]:
    """So many workers with the module ``preload`` at hand, and one numeric thread each.

    On matrices of a few dozen rows more threads double the processor time and save nothing
    (measured). What is not done is dropped when the context is left by an exception.
    """
    import multiprocessing
    from concurrent.futures import ProcessPoolExecutor

    # Not "fork", which copies whatever threads the numeric library has started.
    method = "forkserver" if "forkserver" in multiprocessing.get_all_start_methods() else "spawn"
    context = multiprocessing.get_context(method)
    if method == "forkserver":
        # Loaded once, before the workers split off.
        context.set_forkserver_preload([preload])
    if sys.platform == "win32":
        count = min(count, _MOST_ON_WINDOWS)
    with one_thread_each(), ProcessPoolExecutor(count, mp_context=context) as executor:
        try:
            yield executor
        except BaseException:
            executor.shutdown(wait=False, cancel_futures=True)
            raise


@contextmanager
def one_thread_each() -> Iterator[None]:
    """Keep the numeric library from threads of its own where it is not loaded yet."""
    names = [name for name in _THREADS if name not in os.environ]
    os.environ.update(dict.fromkeys(names, "1"))
    try:
        yield
    finally:
        for name in names:
            del os.environ[name]


def usable_cores() -> int:
    """Those this process may use, which a container may have fewer of than the machine."""
    if sys.platform == "linux":
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def check_targets(
    targets: Sequence[Target],
    executor: Executor | None = None,
    progress: Callable[[int], None] | None = None,
) -> list[NetlistCheck]:
    """Check every target, in order; one bad netlist does not stop the others.

    Parameters
    ----------
    targets
        What :func:`named_targets` or :func:`configured_targets` gave.
    executor
        Any executor of :mod:`concurrent.futures`, or one with its interface, such as a cluster's;
        left out, the work is done here.
    progress
        Called with the number of targets done so far.
    """
    results: Iterator[NetlistCheck] = map(check_target, targets)
    if executor is not None:
        # A few chunks a worker: small enough to keep all of them busy to the end.
        chunk = max(1, min(16, len(targets) // (4 * (os.cpu_count() or 1))))
        results = executor.map(check_target, targets, chunksize=chunk)
    checks: list[NetlistCheck] = []
    for result in results:
        checks.append(result)
        if progress is not None:
            progress(len(checks))
    return checks


def check_target(target: Target) -> NetlistCheck:
    """Read, analyse and judge one netlist; never raises, so that workers can return it."""
    name = target.settings.name if target.settings else ""
    if target.problems:
        return _unfinished(target, name, target.problems, "unusable")
    try:
        return _check(target, name)
    except Exception as error:
        # The last resort, as in command.py: the other netlists are checked all the same.
        message = f"{target.netlist}: internal error ({type(error).__name__}: {error})"
        advice = "Leave this netlist out, and report the fault with it."
        fault = note("internal-error", message, None, advice)
        return _unfinished(target, name, (fault,), "internal error", traceback.format_exc())


def _check(target: Target, name: str) -> NetlistCheck:
    from tauledger.netlist import read

    try:
        netlist = read(Path(target.netlist))
    except ProblemError as error:
        return _unfinished(target, name, error.problems, "unusable")
    try:
        return _judge(target, name, netlist)
    except ProblemError as error:
        if [found.code for found in error.problems] == ["circuit-empty"] and _defines(netlist):
            message = f"{target.netlist} holds models and subcircuits, and no circuit to check"
            advice = "Check the netlist that includes it."
            return _unfinished(target, name, (note("definitions-only", message, None, advice),))
        return _unfinished(target, name, tuple(dict.fromkeys((*error.problems, *netlist.problems))))


def _judge(target: Target, name: str, netlist: Netlist) -> NetlistCheck:
    from tauledger.analysis import analyze

    try:
        analysis = analyze(netlist, settings=target.settings)
        circuit, review = analysis.circuit, analysis.review
    except ProblemError as error:
        is_open = all(found.code in PATH_CODES for found in error.problems)
        if target.settings is not None or not is_open:
            raise
        from tauledger.bias import solve_bias
        from tauledger.circuit import flatten
        from tauledger.review.assemble import review_of

        circuit = flatten(netlist)
        review = review_of(circuit, solve_bias(circuit).point, None, (), VERSION)
    limits, findings = check(circuit, review, target.settings)
    return NetlistCheck(target.netlist, name, review, limits, findings)


def _unfinished(
    target: Target,
    name: str,
    problems: tuple[Problem, ...],
    outcome: str = "checked",
    details: str = "",
) -> NetlistCheck:
    findings = tuple(Finding(target.netlist, found) for found in problems)
    return NetlistCheck(target.netlist, name, None, (), findings, outcome, details)


def _defines(netlist: Netlist) -> bool:
    return bool(netlist.subcircuits) or any(s.keyword == ".model" for s in netlist.statements)
