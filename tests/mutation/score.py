"""Do the tests notice faults? Small faults put into a random sample of places, one at a time.

    .venv/bin/python tests/mutation/score.py netlist corners --sample 200 --json /tmp/score.json
    .venv/bin/python tests/mutation/score.py --again /tmp/score.json

The second asks once more about the faults not noticed. Run by hand on Unix: a package takes ten
minutes and more. One process imports what the tests need and forks for each fault; the child
compiles the changed module from memory (no file is written) and runs the tests that pass through
the changed statement, the quickest first, up to the first failure.

Faults without effect are among those not noticed, so the score cannot reach 100 %.
"""

from __future__ import annotations

import argparse
import ast
import contextlib
import functools
import importlib
import importlib.abc
import importlib.machinery
import importlib.util
import json
import math
import os
import pickle
import random
import resource
import signal
import sys
import time
import warnings
from collections.abc import Callable, Iterator
from dataclasses import asdict, dataclass
from pathlib import Path
from types import CodeType, FrameType
from typing import Any

# Before numpy is imported: its threads do not survive a fork.
os.environ.update(OPENBLAS_NUM_THREADS="1", OMP_NUM_THREADS="1")

import hypothesis
import pytest
from faults import Fault, faults

TESTS = Path(__file__).resolve().parents[1]
WATCHED_BY = {
    "netlist": ("netlist", "circuit", "hostile/test_bounds.py", "hostile/test_fuzz.py"),
    "smallsignal": ("smallsignal", "corners", "published", "topology"),
    "corners": ("corners", "published", "topology", "review"),
}
"""Package → tests that may notice a fault in it; golden files, which notice anything, left out."""
UNSTEADY = ("topology/test_robustness.py", "review/test_cluster.py")
"""They need time or a port, and on a loaded machine fail without a fault."""
ADDRESS_SPACE = 3 << 30
EXAMPLES = 20
"""Of each property, unless --again asks for all."""


class _Changed(importlib.abc.MetaPathFinder, importlib.abc.Loader):
    """Gives one module its changed code; every other is imported as ever."""

    def __init__(self, module: str, code: CodeType) -> None:
        self.module, self.code = module, code

    def find_spec(self, name: str, path: Any, target: Any = None) -> Any:
        if name != self.module:
            return None
        spec = importlib.machinery.PathFinder.find_spec(name, path)
        assert spec is not None
        return importlib.util.spec_from_file_location(name, spec.origin, loader=self)

    def exec_module(self, module: Any) -> None:
        exec(self.code, module.__dict__)


class _Order:
    """Runs only the tests named, in that order."""

    def __init__(self, names: list[str]) -> None:
        self.rank = {name: k for k, name in enumerate(names)}

    def pytest_collection_modifyitems(self, items: list[pytest.Item]) -> None:
        items[:] = sorted(
            (item for item in items if item.nodeid in self.rank),
            key=lambda item: self.rank[item.nodeid],
        )


class _Few:
    """Tries few examples of each property."""

    def pytest_collection_modifyitems(self, items: list[pytest.Item]) -> None:
        for item in items:
            function = getattr(item, "function", None)
            own = getattr(function, "_hypothesis_internal_use_settings", None)
            if own is not None and own.max_examples > EXAMPLES:
                few = hypothesis.settings(own, max_examples=EXAMPLES)
                function._hypothesis_internal_use_settings = few  # type: ignore[union-attr]


class _Trace:
    """Which test passes through which line, and how long it takes."""

    def __init__(self, files: set[str]) -> None:
        self.files = files
        self.shared: set[tuple[str, int]] = set()
        """Lines run while tests are collected or for fixtures that several tests share."""
        self.lines = self.shared
        self.tests: dict[str, tuple[float, set[tuple[str, int]]]] = {}

    def on_call(self, frame: FrameType, event: str, argument: Any) -> Any:
        if frame.f_code.co_filename not in self.files:
            return None
        return self.on_line(frame, event, argument)

    def on_line(self, frame: FrameType, event: str, argument: Any) -> Any:
        self.lines.add((frame.f_code.co_filename, frame.f_lineno))
        return self.on_line

    @pytest.hookimpl(wrapper=True)
    def pytest_collection(self) -> Iterator[None]:
        sys.settrace(self.on_call)
        try:
            return (yield)
        finally:
            sys.settrace(None)

    @pytest.hookimpl(wrapper=True)
    def pytest_runtest_protocol(self, item: pytest.Item) -> Iterator[None]:
        _clear_caches()
        self.lines = set()
        begun = time.perf_counter()
        sys.settrace(self.on_call)
        try:
            return (yield)
        finally:
            sys.settrace(None)
            self.tests[item.nodeid] = (time.perf_counter() - begun, self.lines)

    @pytest.hookimpl(wrapper=True)
    def pytest_fixture_setup(self, fixturedef: Any) -> Iterator[None]:
        own = self.lines
        if fixturedef.scope != "function":
            self.lines = self.shared
        try:
            return (yield)
        finally:
            self.lines = own


def _clear_caches() -> None:
    """What one test leaves in a cache would hide from the next the lines it depends on."""
    for module in list(sys.modules.values()):
        for value in list(getattr(module, "__dict__", {}).values()):
            if isinstance(value, functools._lru_cache_wrapper) and _is_ours(value.__module__):
                value.cache_clear()


def _is_ours(name: str) -> bool:
    file = getattr(sys.modules.get(name), "__file__", None) or ""
    return name.partition(".")[0] == "tauledger" or file.startswith(str(TESTS))


def run_tests(files: list[str], *plugins: object) -> int:
    # Shrinking a failure is of no use here, and every run must draw the same examples.
    phases = (hypothesis.Phase.explicit, hypothesis.Phase.generate)
    hypothesis.settings.register_profile(
        "faults", phases=phases, derandomize=True, database=None, deadline=None
    )
    options = ["-x", "-q", "-p", "no:xdist", "-W", "ignore::pytest.PytestAssertRewriteWarning"]
    options += ["--hypothesis-profile", "faults", "--rootdir", str(TESTS.parent)]
    options += [f"--ignore={TESTS / name}" for name in UNSTEADY]
    return int(pytest.main([*options, *files], plugins=list(plugins)))


def in_child(work: Callable[[], int], seconds: float) -> int:
    """Exit status of ``work`` in a process of its own, silent and bounded."""
    child = os.fork()
    if child == 0:
        os.setpgid(0, 0)
        nothing = os.open(os.devnull, os.O_RDWR)
        for stream in (0, 1, 2):
            os.dup2(nothing, stream)
        resource.setrlimit(resource.RLIMIT_AS, (ADDRESS_SPACE, ADDRESS_SPACE))
        signal.setitimer(signal.ITIMER_REAL, seconds)
        status = 99
        with contextlib.suppress(BaseException):
            status = work()
        os._exit(status)
    status = os.waitpid(child, 0)[1]
    with contextlib.suppress(ProcessLookupError):
        os.killpg(child, signal.SIGKILL)
    return os.waitstatus_to_exitcode(status)


def watch(files: list[str], modules: dict[str, str]) -> _Trace:
    """Run the tests once as they are, and import here what they imported."""
    reading, writing = os.pipe()

    def work() -> int:
        trace = _Trace(set(modules.values()))
        status = run_tests(files, trace, _Few())
        loaded = [name for name in sys.modules if not _is_ours(name)]
        with os.fdopen(writing, "wb") as stream:
            pickle.dump((status, trace.shared, trace.tests, loaded), stream)
        return status

    child = os.fork()
    if child == 0:
        os._exit(work())
    os.close(writing)
    with os.fdopen(reading, "rb") as stream:
        status, shared, tests, loaded = pickle.load(stream)
    os.waitpid(child, 0)
    if status:
        raise SystemExit("the tests fail without any fault")
    for name in loaded:
        with contextlib.suppress(Exception):
            importlib.import_module(name)
    trace = _Trace(set(modules.values()))
    trace.shared, trace.tests = shared, tests
    return trace


def watching(fault: Fault, file: str, trace: _Trace) -> list[str]:
    """The tests that pass through a fault, the quickest first."""
    by_time = sorted(trace.tests, key=lambda name: trace.tests[name][0])
    if fault.lines is None:
        return by_time
    lines = {(file, line) for line in range(fault.lines[0], fault.lines[1] + 1)}
    if lines & trace.shared:
        return by_time
    return [name for name in by_time if lines & trace.tests[name][1]]


def is_noticed(fault: Fault, tree: ast.Module, file: str, trace: _Trace, *, every: bool) -> bool:
    tests = watching(fault, file, trace)
    if not tests:
        return False
    fault.put()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            code = compile(tree, file, "exec")
    finally:
        fault.undo()

    def work() -> int:
        sys.meta_path.insert(0, _Changed(fault.module, code))
        files = sorted({name.partition("::")[0] for name in tests})
        return run_tests(files, _Order(tests), *([] if every else [_Few()]))

    seconds = 30.0 + (30.0 if every else 3.0) * sum(trace.tests[name][0] for name in tests)
    return in_child(work, seconds) != 0


def interval(share: float, count: int) -> tuple[float, float]:
    """95 % interval of a share found in a sample (Wilson 1927 [M])."""
    z = 1.96
    middle = (share + z * z / (2 * count)) / (1 + z * z / count)
    half = z / (1 + z * z / count) * math.sqrt(share * (1 - share) / count + (z / count / 2) ** 2)
    return middle - half, middle + half


@dataclass
class Score:
    package: str
    faults: int
    sample: int
    noticed: int
    missed: list[str]

    def __str__(self) -> str:
        share = self.noticed / self.sample
        low, high = interval(share, self.sample)
        return (
            f"{self.package}: {self.noticed} of {self.sample} faults noticed, {share:.1%} "
            f"(95 % interval {low:.1%} to {high:.1%}; {self.faults} faults possible)"
        )


def examine(package: str, sample: int, seed: int, again: Score | None) -> Score:
    spec = importlib.util.find_spec("tauledger")
    assert spec is not None
    assert spec.submodule_search_locations
    folder = Path(spec.submodule_search_locations[0], package)
    modules = {
        f"tauledger.{package}.{path.stem}": str(path)
        for path in sorted(folder.glob("*.py"))
        if path.stem != "__init__"
    }
    places = [
        (fault, tree, file)
        for module, file in modules.items()
        for tree, found in [faults(module, Path(file).read_text(encoding="utf-8"))]
        for fault in found
    ]
    if again is None:
        drawn = random.Random(seed).sample(places, min(sample, len(places)))
    else:
        drawn = [place for place in places if place[0].key in set(again.missed)]
    files = [str(TESTS / name) for name in WATCHED_BY[package]]
    trace = watch(files, modules)
    missed = []
    for k, (fault, tree, file) in enumerate(drawn):
        if not is_noticed(fault, tree, file, trace, every=again is not None):
            missed.append(fault.key)
            reached = "" if watching(fault, file, trace) else "  [no test gets there]"
            print(f"{k + 1}/{len(drawn)} not noticed: {fault.key}{reached}", flush=True)
    if again is None:
        return Score(package, len(places), len(drawn), len(drawn) - len(missed), missed)
    # Faults noticed earlier stay noticed: tests are only added.
    return Score(package, len(places), again.sample, again.sample - len(missed), missed)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.partition("\n")[0])
    parser.add_argument("packages", nargs="*", help=f"of {', '.join(WATCHED_BY)}")
    parser.add_argument("--sample", type=int, default=200, help="faults for each package")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--json", type=Path, help="write the result here")
    parser.add_argument("--again", type=Path, help="only what that result says was missed")
    options = parser.parse_args()
    rows = json.loads(options.again.read_text(encoding="utf-8")) if options.again else []
    again = {row["package"]: Score(**row) for row in rows}
    scores = []
    for package in options.packages or list(again or WATCHED_BY):
        scores.append(examine(package, options.sample, options.seed, again.get(package)))
        print(scores[-1], flush=True)
    if options.json:
        rows = [asdict(score) for score in scores]
        text = json.dumps(rows, indent=1, ensure_ascii=False)
        options.json.write_text(text, encoding="utf-8")


if __name__ == "__main__":
    main()
