"""Runs the child process: a fresh folder, an empty environment, limits, and one outcome or error.

The child is a Python of its own, isolated from the user's environment and settings, in a folder
that holds nothing but a ``.spiceinit`` of one comment, so that ngspice reads none elsewhere.
"""

from __future__ import annotations

import json
import os
import re
import signal
import subprocess
import sys
import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any, NoReturn

from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass
from tauledger.simulate import child

_SPICE_INIT = "* nothing is set here\n"
_MESSAGES = 2
_TOLD = ("error", "singular", "convergence", "failed", "trouble", "too many")
_PLACED = ("singular", "trouble", "line")
_ADVICE = "Run the report without --simulate, which does not need ngspice."
_FAILURES = {
    "bias": "ngspice found no operating point",
    "response": "ngspice found no frequency response",
    "deck": "ngspice did not accept the circuit",
    "exit": "ngspice gave up",
    "start": "ngspice could not be started through PySpice",
}


@dataclass(frozen=True, slots=True)
class Limits:
    """What the child may use; where the platform has no such limit, time alone ends it."""

    time_s: float = 60.0
    """By the clock, and rounded up of the processor."""
    memory_bytes: int = 2 << 30
    """Address space."""
    file_bytes: int = 128 << 20
    """Of any file it writes."""


def run_child(task: Mapping[str, Any], limits: Limits, names: Mapping[str, str]) -> dict[str, Any]:
    """The outcome of a task for :mod:`tauledger.simulate.child`.

    ``names`` leads from names in the deck to the circuit's own, for messages. Raises ProblemError
    when the child fails, is stopped, or breaks off.
    """
    with tempfile.TemporaryDirectory(prefix="tauledger-ngspice-") as folder:
        (Path(folder) / ".spiceinit").write_text(_SPICE_INIT, encoding="ascii")
        try:
            done = subprocess.run(
                command(limits),
                cwd=folder,
                env=environment(folder),
                input=json.dumps({**task, "import_from": _import_folders()}),
                encoding="ascii",
                stdout=subprocess.DEVNULL,
                stderr=subprocess.DEVNULL,
                timeout=limits.time_s,
                check=False,
            )
        except subprocess.TimeoutExpired:
            _refuse_time(limits)
        outcome = _outcome(Path(folder) / child.OUTCOME)
    if "failure" not in outcome:
        return outcome
    _refuse(outcome, done.returncode, limits, names)


def command(limits: Limits) -> list[str]:
    """The child's command line: Python without the user's variables, site folder or cwd."""
    processor_s = max(1, -int(-limits.time_s // 1))
    sizes = (processor_s, limits.memory_bytes, limits.file_bytes)
    return [sys.executable, "-I", "-B", child.__file__, *map(str, sizes)]


def environment(folder: str) -> dict[str, str]:
    """All the child gets: a home that is its folder, one thread, no more."""
    needed = {"HOME": folder, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}
    if sys.platform == "win32":
        # Windows loads no library without SYSTEMROOT; PySpice looks for SPICE_LIB_DIR.
        needed |= {"SYSTEMROOT": os.environ.get("SYSTEMROOT", ""), "TEMP": folder}
        needed["SPICE_LIB_DIR"] = folder
    return needed


def _import_folders() -> list[str]:
    """Where this Python imports from, without the folder it was started in."""
    here = os.getcwd()
    return [entry for entry in sys.path if os.path.isabs(entry) and entry != here]


def _outcome(path: Path) -> dict[str, Any]:
    try:
        read = json.loads(path.read_text(encoding="ascii"))
    except (OSError, ValueError):
        return {"failure": "broken"}
    return read if isinstance(read, dict) else {"failure": "broken"}


def _refuse(
    outcome: Mapping[str, Any], returncode: int, limits: Limits, names: Mapping[str, str]
) -> NoReturn:
    failure = str(outcome["failure"])
    if failure == "broken" and -returncode == getattr(signal, "SIGXCPU", None):
        _refuse_time(limits)
    if failure == "memory":
        size = limits.memory_bytes / (1 << 20)
        _raise("simulate-memory", f"ngspice needed more than the {size:.0f} MiB it is allowed")
    if failure == "broken":
        size = limits.memory_bytes / (1 << 20)
        _raise(
            "simulate-failed",
            f"ngspice broke off without a result (code {returncode}), as it may when "
            f"the {size:.0f} MiB it is allowed do not suffice",
        )
    said = "; ".join(_said(outcome.get("messages", []), names))
    what = _FAILURES.get(failure, "ngspice failed")
    _raise("simulate-failed", f"{what}: {said}" if said else what)


def _refuse_time(limits: Limits) -> NoReturn:
    _raise("simulate-timeout", f"ngspice was stopped after {limits.time_s:g} s without a result")


def _said(messages: list[str], names: Mapping[str, str]) -> list[str]:
    """The lines that name a fault, those with a place first, in the circuit's own names."""
    telling = [line for line in messages if any(word in line.lower() for word in _TOLD)]
    telling.sort(key=lambda line: not any(word in line.lower() for word in _PLACED))
    bare = (re.sub(r"^.*?(?:Warning|Error): ", "", line) for line in telling)
    said = dict.fromkeys(" ".join(line.split()) for line in bare)
    return [_renamed(line, names) for line in said][:_MESSAGES]


def _renamed(line: str, names: Mapping[str, str]) -> str:
    return re.sub(r"\b[a-z]+[0-9]+\b", lambda match: names.get(match[0], match[0]), line)


def _raise(code: str, message: str) -> NoReturn:
    raise ProblemError(Problem(code, Severity.ERROR, message, advice=_ADVICE))
