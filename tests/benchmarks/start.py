"""What a report costs from a cold start, in a running process, and for a hundred netlists.

    python tests/benchmarks/start.py [--repeat 9] [--json FILE]

A cold start is compared with what no such program can do without: starting Python and importing
numpy, networkx and lark. Both are run in turn, and each counts by its fastest run, which a busy
machine disturbs least.
"""

from __future__ import annotations

import argparse
import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from pathlib import Path

SAMPLES = Path(__file__).parents[2] / "samples"
ONE_STAGE = SAMPLES / "common-emitter/common-emitter.cir"
FLEET = 100

BARE = [sys.executable, "-c", "import numpy, networkx, lark"]
COMMAND = [sys.executable, "-c", "import sys; from tauledger.command import main; sys.exit(main())"]


def fastest(repeat: int, *works: Callable[[], object]) -> list[float]:
    """Seconds of the fastest run of each, run in turn."""
    best = [float("inf")] * len(works)
    for _ in range(repeat):
        for n, work in enumerate(works):
            begin = time.perf_counter()
            work()
            best[n] = min(best[n], time.perf_counter() - begin)
    return best


def process(command: Sequence[str], folder: Path = SAMPLES) -> Callable[[], object]:
    # The program asks for one thread of the linear algebra; the bare import must not pay for more.
    # pip compiles what it installs, numpy as well as tauledger: a run from a checkout may do so.
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "PYTHONDONTWRITEBYTECODE": ""}
    return lambda: subprocess.run(
        command, cwd=folder, env=environment, stdout=subprocess.DEVNULL, check=True
    )


def warm() -> Callable[[], object]:
    """Analysis of three transistors, in a process that has done it before."""
    from tauledger import analyze, read

    netlist = read(SAMPLES / "phono-stage/phono-stage.cir")
    return lambda: analyze(netlist)


def figures(repeat: int) -> dict[str, float]:
    report = process([*COMMAND, "report", str(ONE_STAGE)])
    check = process([*COMMAND, "check", str(ONE_STAGE)])
    bare_s, report_s, check_s = fastest(repeat, process(BARE), report, check)
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        for n in range(FLEET):
            (folder / f"n{n}.cir").write_text(ONE_STAGE.read_text().replace("2.2u", f"2.{n:02}u"))
        names = [f"n{n}.cir" for n in range(FLEET)]
        (fleet_s,) = fastest(min(repeat, 3), process([*COMMAND, "check", *names], folder))
    (warm_s,) = fastest(max(repeat, 20), warm())
    return {
        "bare_import_s": bare_s,
        "cold_report_s": report_s,
        "cold_check_s": check_s,
        "cold_report_ratio": report_s / bare_s,
        "cold_check_ratio": check_s / bare_s,
        "fleet_of_100_s": fleet_s,
        "warm_analysis_s": warm_s,
    }


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--repeat", type=int, default=9)
    parser.add_argument("--json", type=Path)
    arguments = parser.parse_args()
    found = figures(arguments.repeat)
    for name, value in found.items():
        print(f"{name:20} {value:8.3f}")
    if arguments.json:
        arguments.json.write_text(json.dumps(found, indent=2) + "\n")


if __name__ == "__main__":
    main()
