"""The process in which ngspice runs; started by path, so it imports nothing of tauledger.

Arguments: limits of processor time (s), address space and file size (bytes). The task is JSON on
standard input, the outcome JSON in the file ``outcome.json`` of the working folder. What ngspice
prints goes through a callback of ours: its notes on standard error ("Using SPARSE", "Trying gmin")
are no failures, so an analysis is judged by the vectors it leaves.
"""

from __future__ import annotations

import itertools
import json
import math
import os
import sys
from typing import Any, NoReturn

OUTCOME = "outcome.json"
POINTS_PER_DECADE = 50
NARROW_POINTS = 401
MESSAGES_KEPT = 40
_MEMORY_WORDS = ("allocate", "memory", "failed to map segment")


class AnalysisError(Exception):
    """An analysis left no result; the argument is which."""


def main() -> None:
    limit_resources(*map(int, sys.argv[1:4]))
    try:
        task = json.load(sys.stdin)
        sys.path[:] = task["import_from"]
        os.environ["NGSPICE_LIBRARY_PATH"] = task["library"]
        finish(run(task))
    except MemoryError:
        finish({"failure": "memory"})
    except Exception as error:
        finish({"failure": cause(str(error)), "messages": [f"{type(error).__name__}: {error}"]})


def limit_resources(cpu_s: int, memory_bytes: int, file_bytes: int) -> None:
    """Set what the platform knows; on Windows only the parent's clock remains."""
    if sys.platform == "win32":
        return
    import resource

    for name, value in (
        ("RLIMIT_CPU", cpu_s),
        ("RLIMIT_AS", memory_bytes),
        ("RLIMIT_FSIZE", file_bytes),
        ("RLIMIT_CORE", 0),
    ):
        try:
            resource.setrlimit(getattr(resource, name), (value, value))
        except (AttributeError, ValueError, OSError):
            continue  # macOS has no working limit of address space


def finish(outcome: dict[str, Any]) -> NoReturn:
    """Leave the outcome and end at once: ngspice may not be in a state to be unloaded."""
    with open(OUTCOME, "w", encoding="ascii") as file:
        json.dump(outcome, file)
    os._exit(0)


def cause(text: str) -> str:
    return "memory" if any(word in text for word in _MEMORY_WORDS) else "start"


def run(task: dict[str, Any]) -> dict[str, Any]:
    """Operating point, wide sweep, and a narrow one at each corner."""
    ngspice, messages = start()
    try:
        ngspice.load_circuit("\n".join(task["deck"]))
        point = operating_point(ngspice, task["transistors"])
        response = frequency_response(ngspice, task)
    except (AnalysisError, NameError) as error:
        which = str(error) if isinstance(error, AnalysisError) else "deck"
        return {"failure": which, "messages": messages}
    return {"version": str(ngspice.ngspice_version), **point, **response}


def start() -> tuple[Any, list[str]]:
    """ngspice through PySpice, and the list that gathers the last lines it prints."""
    import logging

    logging.disable(logging.CRITICAL)
    from PySpice.Spice.NgSpice import Shared  # type: ignore[import-untyped]

    messages: list[str] = []

    class Referee(Shared.NgSpiceShared):  # type: ignore[misc]
        @staticmethod
        def _send_char(message: Any, _number: int, data: Any) -> int:
            text = Shared.ffi.string(message).decode("ascii", "replace").partition(" ")[2]
            # PySpice reads the version from what the last command printed.
            Shared.ffi.from_handle(data)._stdout.append(text)
            messages.append(text[:200])
            del messages[:-MESSAGES_KEPT]
            return 0

        @staticmethod
        def _exit(*_: Any) -> int:
            failure = "memory" if cause(" ".join(messages)) == "memory" else "exit"
            finish({"failure": failure, "messages": messages})

    return Referee(), messages


def vectors(ngspice: Any, failure: str) -> dict[str, Any]:
    """The vectors of the latest plot, name to array; raises AnalysisError when they are empty."""
    try:
        plot = ngspice.plot(None, ngspice.last_plot)
        found = {name.lower(): vector._data for name, vector in plot.items()}
    except (ValueError, NameError, IndexError):
        raise AnalysisError(failure) from None
    if ngspice.last_plot == "const" or not found or not all(map(len, found.values())):
        raise AnalysisError(failure)
    return found


def operating_point(ngspice: Any, transistors: list[str]) -> dict[str, Any]:
    ngspice.exec_command("op")
    vectors(ngspice, "bias")
    for name in transistors:
        ngspice.exec_command(f"let gm_{name} = @{name}[gm]")
    found = vectors(ngspice, "bias")
    values = {name: float(array[0]) for name, array in found.items()}
    if not all(map(math.isfinite, values.values())):
        raise AnalysisError("bias")
    return {
        "nodes": {name: value for name, value in values.items() if name[0] == "n"},
        "transconductance_s": {
            name: values[f"gm_{name}"] for name in transistors if f"gm_{name}" in values
        },
    }


def frequency_response(ngspice: Any, task: dict[str, Any]) -> dict[str, Any]:
    """Both halves of the sweep begin or end at midband, which is computed on its own as well.

    The narrow sweep of 401 points lies between two points of the wide one, 5 % apart, so a straight
    line between two of its points is good to better than 1e-5.
    """
    midband, output = task["midband_hz"], task["output"]
    ngspice.exec_command("save " + " ".join(f"v({name})" for name in output if name != "0"))

    def sweep(kind: str, points: int, low: float, high: float) -> tuple[Any, Any]:
        ngspice.exec_command(f"ac {kind} {points} {low!r} {high!r}")
        found = vectors(ngspice, "response")
        response = found["frequency"] * 0.0
        for name, sign in zip(output, (1.0, -1.0), strict=True):
            if name != "0":
                response = response + sign * found[name]
        ngspice.exec_command("destroy all")
        if not all(math.isfinite(abs(value)) for value in response):
            raise AnalysisError("response")
        return found["frequency"].real.tolist(), response.tolist()

    _, (gain,) = sweep("lin", 1, midband, midband)
    below = sweep("dec", POINTS_PER_DECADE, task["lowest_hz"], midband)
    above = sweep("dec", POINTS_PER_DECADE, midband, task["highest_hz"])
    # Rounding may end the lower sweep just short of midband or the upper begin just beyond it.
    low_side = [(f, h) for f, h in zip(*below, strict=True) if f < midband]
    high_side = [(f, h) for f, h in zip(*above, strict=True) if f > midband]
    level = abs(gain) / math.sqrt(2.0)
    corners = []
    for side in (low_side[::-1], high_side):
        bracket = crossing([(midband, gain), *side], level)
        corners.append(bracket and interpolate(*sweep("lin", NARROW_POINTS, *bracket), level))
    whole = [*low_side, (midband, gain), *high_side]
    return {
        "gain": [gain.real, gain.imag],
        "frequency_hz": [f for f, _ in whole],
        "real": [h.real for _, h in whole],
        "imaginary": [h.imag for _, h in whole],
        "low_hz": corners[0],
        "high_hz": corners[1],
    }


def crossing(side: list[tuple[float, complex]], level: float) -> tuple[float, float] | None:
    """The first two neighbours, going outward, between which the gain falls through ``level``."""
    for (inner, _), (outer, value) in itertools.pairwise(side):
        if abs(value) < level:
            return min(inner, outer), max(inner, outer)
    return None


def interpolate(frequency: list[float], response: list[complex], level: float) -> float | None:
    """Frequency at which the magnitude passes ``level``."""
    above = [abs(value) - level for value in response]
    for k in range(len(above) - 1):
        if (above[k] < 0) != (above[k + 1] < 0):
            share = above[k] / (above[k] - above[k + 1])
            return frequency[k] + share * (frequency[k + 1] - frequency[k])
    return None


if __name__ == "__main__":
    main()
