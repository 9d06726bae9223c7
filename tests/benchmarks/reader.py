"""How long reading and flattening take, and how the time grows with size.

    python tests/benchmarks/reader.py

Prints processor time for netlists of 5,000 to 50,000 elements and the exponent of a power law
fitted to the two ends (1 is linear), for plain parts and for parts inside subcircuits with
parameters; then what lark alone takes for the same lines, and what building its tables takes.
"""

from __future__ import annotations

import math
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

from tauledger.circuit import flatten
from tauledger.netlist import read, statements

SIZES = (5_000, 10_000, 25_000, 50_000)


def plain(count: int) -> str:
    """Common-emitter stages of five parts, beside each other."""
    lines = ["benchmark", "V1 vcc 0 12", ".model QN npn(is=1e-14 bf=200)"]
    for n in range(count // 5):
        lines += [
            f"R{n}a vcc b{n} 100k",
            f"R{n}b vcc c{n} 4.7k",
            f"R{n}c e{n} 0 1k",
            f"C{n} b{n} c{n} 10p",
            f"Q{n} c{n} b{n} e{n} QN",
        ]
    return "\n".join(lines)


def nested(count: int) -> str:
    """The same stages as calls of a subcircuit with a parameter."""
    stage = (
        ".subckt stage in vcc params: rl=4.7k\nRa vcc in 100k\nRb vcc c {rl}\nRc e 0 {rl/4}\n"
        "C1 in c 10p\nQ1 c in e QN\n.ends"
    )
    lines = ["benchmark", "V1 vcc 0 12", ".model QN npn(is=1e-14 bf=200)", stage]
    lines += [f"X{n} b{n} vcc stage rl={n % 9 + 1}k" for n in range(count // 5)]
    return "\n".join(lines)


def processor_seconds(action: Callable[[], object]) -> float:
    begin = time.process_time()
    action()
    return time.process_time() - begin


def measure(title: str, make: Callable[[int], str], folder: Path) -> None:
    print(title)
    totals = []
    for size in SIZES:
        path = folder / f"{size}.cir"
        path.write_text(make(size))
        begin = time.process_time()
        netlist = read(path, [folder])
        reading = time.process_time() - begin
        count = len(flatten(netlist).elements)
        total = time.process_time() - begin
        totals.append(total)
        print(f"  {count:6} elements  read {reading:6.3f} s  flatten {total - reading:6.3f} s")
    exponent = math.log(totals[-1] / totals[0]) / math.log(SIZES[-1] / SIZES[0])
    print(f"  time grows with size to the power {exponent:.2f}")


def main() -> None:
    import lark  # noqa: F401  - so that only the tables are timed

    construction = processor_seconds(statements._parser)
    with tempfile.TemporaryDirectory() as name:
        measure("plain parts", plain, Path(name))
        measure("in subcircuits", nested, Path(name))
    lines = plain(SIZES[-1]).split("\n")[1:]
    parser = statements._parser()
    alone = processor_seconds(lambda: [parser.parse(line, start="items") for line in lines])
    print(f"lark alone, on every line of the plain netlist: {alone:.3f} s (not taken: such lines")
    print("hold words only and are split without it)")
    print(f"building the tables of netlist.lark: {1e3 * construction:.1f} ms")


if __name__ == "__main__":
    main()
