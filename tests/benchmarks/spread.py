"""Boards a second of the tolerance spread, beside ngspice looping over boards in one process.

    python tests/benchmarks/spread.py [NETLIST]

Every board has new values of all resistors and capacitors; both sides solve its bias anew. From
ngspice a board takes ``alter`` for each part, ``op``, and one ``ac`` sweep from which gain and
corners could be read; the reading is not counted.
"""

from __future__ import annotations

import os
import resource
import shutil
import sys
import tempfile
import time
from pathlib import Path

# The work is spread over processes, where threads of the numeric library only get in the way.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

sys.path.insert(0, str(Path(__file__).parents[1]))

from concurrent.futures import Executor, ProcessPoolExecutor

import ngspice
from tauledger.analysis import Analysis, analyze, read
from tauledger.circuit.elements import Capacitor, Resistor
from tauledger.decide.asked import parse_asked
from tauledger.decide.spread import spread
from tauledger.decide.varied import variety_of

SAMPLE = Path(__file__).parents[2] / "samples/feedback-pair/feedback-pair.cir"
BOARDS = (1_000, 10_000, 100_000)
NGSPICE_BOARDS = 200
REPEAT = 3
SWEEP = "ac dec 20 0.01 100meg"


def ours(analysis: Analysis, boards: int, executor: ProcessPoolExecutor | None) -> float:
    """Seconds for a whole spread, worst cases included."""
    asked = [parse_asked("R*=5%"), parse_asked("C*=20%")]
    start = time.perf_counter()
    spread(analysis, None, asked, boards, executor=executor)
    return time.perf_counter() - start


def theirs(netlist: Path, analysis: Analysis, boards: int) -> float:
    """Seconds for a loop of boards, start-up left out."""
    empty, full = (_their_boards(netlist, analysis, count) for count in (0, boards))
    return full - empty


def _their_boards(netlist: Path, analysis: Analysis, boards: int) -> float:
    parts = [e for e in analysis.circuit.elements if isinstance(e, Resistor | Capacitor)]
    text = netlist.read_text().lower().rpartition(".end")[0]
    lines = [".control"]
    for board in range(boards):
        factor = 1.0 + 0.05 * ((board * 0.618) % 1.0)
        for part in parts:
            value = part.resistance_ohm if isinstance(part, Resistor) else part.capacitance_f
            lines.append(f"alter {part.name.lower()} = {value * factor!r}")
        lines += ["op", SWEEP, "destroy all"]
    lines += ["quit", ".endc", ".end", ""]
    deck = text + "\n".join(lines)
    with tempfile.TemporaryDirectory() as folder:
        start = time.perf_counter()
        ngspice.execute(deck, Path(folder), timeout_s=300.0)
        return time.perf_counter() - start


def compare(
    netlist: Path, analysis: Analysis, boards: int, who: str, pool: Executor | None
) -> None:
    """Print one row: both in turn, each by its fastest run, which a busy machine disturbs least."""
    mine, reference = [], []
    for _ in range(REPEAT):
        mine.append(ours(analysis, boards, pool))
        if shutil.which("ngspice"):
            reference.append(theirs(netlist, analysis, NGSPICE_BOARDS))
    rate = boards / min(mine)
    row = f"  {boards:>7} boards, {who:<12} {rate:8.0f} boards/s"
    if reference:
        theirs_rate = NGSPICE_BOARDS / min(reference)
        row += f", {rate / theirs_rate:4.1f} times ngspice's {theirs_rate:.0f}"
    print(row, flush=True)


def main() -> None:
    netlist = Path(sys.argv[1]) if len(sys.argv) > 1 else SAMPLE
    analysis = analyze(read(netlist))
    count = len(variety_of(analysis.circuit, "", None, [parse_asked("R*=5%")]).draws)
    print(f"{netlist.name}: {analysis.solution.equations.size} unknowns, {count} resistors")
    cores = len(os.sched_getaffinity(0))
    with ProcessPoolExecutor(cores) as executor:
        list(executor.map(abs, range(cores)))
        for boards in BOARDS:
            for who, pool in (("one process", None), (f"{cores} processes", executor)):
                compare(netlist, analysis, boards, who, pool)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(f"  peak memory of this process {peak:.0f} MB")


if __name__ == "__main__":
    main()
