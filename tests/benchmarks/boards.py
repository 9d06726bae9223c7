"""Tolerance spread of a two-transistor amplifier: time per board here and in ngspice, in one run.

Every resistor, capacitor and β of every board is varied; bias, midband gain and both exact corners
are solved again. ngspice does the same boards in ONE process: for each board ``alter`` of every
part, ``altermod`` of both β, ``op``, ``ac dec 20`` over nine decades, and ``destroy all`` (without
it the plots pile up and slow it down). Its loop is written out with the numbers in place, so that
it spends no time on an interpreted loop; finding the corners in its sweeps is not counted.

Run: ``python tests/benchmarks/boards.py [--boards 10000] [--ngspice-boards 1000] [--json FILE]``.
"""

from __future__ import annotations

import argparse
import json
import sys
import tempfile
import time
from collections.abc import Mapping
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

import ngspice
from tauledger.analysis import analyze
from tauledger.circuit import flatten
from tauledger.circuit.elements import Capacitor, Circuit, Resistor
from tauledger.decide.bench import Figures, bench_of, measure
from tauledger.netlist import Netlist, parse

AMPLIFIER = """Doorbell pickup: two-transistor amplifier
VCC vcc 0 12
VIN in 0 DC 0 AC 1
RS in src 600
C1 src b1 2.2u
R1 vcc b1 68k
R2 b1 0 15k
RC1 vcc c1 4.7k
RE1 e1 0 1.2k
CE1 e1 0 100u
Q1 c1 b1 e1 QA
C2 c1 b2 1u
R3 vcc b2 47k
R4 b2 0 18k
RC2 vcc c2 2.2k
RE2 e2 0 1k
CE2 e2 0 220u
Q2 c2 b2 e2 QB
C3 c2 out 4.7u
RL out 0 10k
.model QA npn is=8f bf=250 vaf=80 rb=120 rc=1 re=0.3 cje=12p cjc=4p tf=0.4n ikf=0.15 ise=10f ne=1.6
.model QB npn is=8f bf=250 vaf=80 rb=120 rc=1 re=0.3 cje=12p cjc=4p tf=0.4n ikf=0.15 ise=10f ne=1.6
"""
MODELS = {"q1.bf": "QA", "q2.bf": "QB"}
SPREAD = {"resistor": 0.05, "capacitor": 0.20, "beta": 0.50}
"""Half width of the uniform distributions, relative."""
SWEEP = "ac dec 20 1 1g"
Boards = Mapping[str, np.ndarray]


def boards_of(circuit: Circuit, count: int) -> Boards:
    rng = np.random.default_rng(20)
    varied = {}
    for element in circuit.elements:
        if isinstance(element, Resistor):
            nominal, kind = element.resistance_ohm, "resistor"
        elif isinstance(element, Capacitor):
            nominal, kind = element.capacitance_f, "capacitor"
        else:
            continue
        spread = SPREAD[kind]
        varied[element.name.lower()] = nominal * rng.uniform(1 - spread, 1 + spread, count)
    for name in MODELS:
        varied[name] = 250.0 * rng.uniform(1 - SPREAD["beta"], 1 + SPREAD["beta"], count)
    return varied


def solve_boards(netlist: Netlist, varied: Boards) -> Figures:
    """Everything from the netlist to the corners of every board, the nominal one included."""
    return measure(bench_of(analyze(netlist, "VIN", "out")), varied)


def ngspice_deck(varied: Boards, count: int) -> str:
    lines = [AMPLIFIER.rstrip(), ".control"]
    for board in range(count):
        for name, values in varied.items():
            value = float(values[board])
            if name in MODELS:
                lines.append(f"altermod {MODELS[name]} bf = {value!r}")
            else:
                lines.append(f"alter {name} = {value!r}")
        lines += ["op", SWEEP, "destroy all"]
    return "\n".join([*lines, "quit", ".endc", ".end", ""])


def ngspice_seconds(varied: Boards, count: int) -> float:
    with tempfile.TemporaryDirectory() as folder:
        begin = time.perf_counter()
        try:
            done = ngspice.execute(ngspice_deck(varied, count), Path(folder), timeout_s=300.0)
        except ngspice.RefereeError as error:
            sys.exit(str(error))
        elapsed = time.perf_counter() - begin
    sweeps = done.stdout.count("No. of Data Rows : 181")
    if sweeps != count:
        sys.exit(
            f"ngspice ran {sweeps} of {count} sweeps:\n{done.stdout[-500:]}{done.stderr[-500:]}"
        )
    return elapsed


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--boards", type=int, default=10_000)
    parser.add_argument("--ngspice-boards", type=int, default=1000)
    parser.add_argument("--repeat", type=int, default=3, help="runs of each, the fastest counts")
    parser.add_argument("--json", type=Path)
    options = parser.parse_args()
    netlist = parse(AMPLIFIER + ".end\n")
    varied = boards_of(flatten(netlist), options.boards)
    few = min(options.ngspice_boards, options.boards)
    ours, theirs = [], []
    for _ in range(options.repeat):
        begin = time.perf_counter()
        found = solve_boards(netlist, varied)
        ours.append(time.perf_counter() - begin)
        theirs.append(ngspice_seconds(varied, few))
    per_board = min(ours) / options.boards
    per_board_ngspice = min(theirs) / few
    rows = {
        "boards": options.boards,
        "boards_ngspice": few,
        "parts_varied": len(varied),
        "seconds_per_board": per_board,
        "seconds_per_board_ngspice": per_board_ngspice,
        "times_faster": per_board_ngspice / per_board,
        "runs_s": ours,
        "runs_ngspice_s": theirs,
        "boards_failed": int(np.isnan(found.low_hz).sum()),
        "low_hz_5_50_95_percent": np.nanpercentile(found.low_hz, [5, 50, 95]).tolist(),
        "high_hz_5_50_95_percent": np.nanpercentile(found.high_hz, [5, 50, 95]).tolist(),
    }
    print(f"{'':12}{'boards':>8}{'µs a board':>12}")
    print(f"{'tauledger':12}{options.boards:8d}{per_board * 1e6:12.0f}")
    print(f"{'ngspice':12}{few:8d}{per_board_ngspice * 1e6:12.0f}")
    print(f"tauledger is {rows['times_faster']:.1f} times faster a board")
    if options.json:
        options.json.write_text(json.dumps(rows, indent=2) + "\n")


if __name__ == "__main__":
    main()
