"""Coverage-guided fuzzing of the reader: no input may end in anything but a circuit or a problem.

Needs ``pip install atheris``. Run for a bounded time, in seconds (60 by default):

    python tests/hostile/fuzz_reader.py --seconds 60

With ``--without-coverage`` the same inputs are mutated at random and atheris is not needed.
"""

from __future__ import annotations

import argparse
import math
import random
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

SLOWEST = 10.0
"""Seconds of processor time one input of a few kilobytes may take."""

SEEDS = [
    """t
Q_Q1 Net-(Q1-C) /IN e BC547 area=2
.model BC547 npn(is=1f bf=200 va=100
+vaf=3)
.end""",
    """t
V1 in 0 DC 1 AC 1 90 SIN(0 {a*2} 1k)
R1 in out 4k7 tc=1m,2u m=2
C1 out 0 1F ic=3
.param a=2""",
    """t
.subckt s a b params: r=1k
R1 a b {r}
X1 a b q r={r/2}
.ends
X1 x 0 s r=2
.ic v(x)=1""",
    """t
E1 a 0 POLY(2) b 0 c 0 1 2 3
G1 a 0 VALUE={V(a)*limit(I(V1),0,1)}
V1 b 0 1
.probe v(a,b)""",
    """t
E2 a 0 TABLE {v(b)} = (0,1) (2,3)
B1 q 0 V=v(a)>1 ? 2 : sin(v(b))
H1 c 0 V1 5
.tf v(a) V1""",
    """t
.if (x==1)
R1 a 0 1
.elseif (x>2)
R2 a 0 1
.else
R3 a 0 2
.endif
.param x={y+1} y=1""",
    """t
.func f(x,y) {x**y}
L1 a 0 1m
L2 b 0 {f(2,3)}
K1 L1 L2 0.9
.ac dec 10 1 1Meg
.temp 50""",
    """t
M1 d g s b nm w=1u l=2u
M2 d g s vm
J1 d g s jm
D1 a k dm 2
.model nm nmos level=3 vto=1
.model vm vdmos(pchan)""",
    """t
.include x.lib
.lib y.lib tt
.control
plot v(a)
.endc
.model a ako:b npn (bf=2 dev=5%)""",
    """t
.title x
* c
R1 a 0 1 ; c
$ c
R2 a 0 1-3k // c
.global vdd
.options temp=2 gmin=1p
.end""",
]


def check(content: bytes) -> None:
    """Read and flatten; the only exception that may come out is a ProblemError."""
    from tauledger.circuit import flatten
    from tauledger.circuit.graph import find_floating_nodes
    from tauledger.netlist import parse
    from tauledger.netlist.source import decode
    from tauledger.problems import ProblemError

    begin = time.process_time()
    try:
        file = decode(content, "fuzz")
        netlist = parse("\n".join(file.lines), "fuzz")
        for entry in netlist.problems:
            _check_span(entry)
        circuit = flatten(netlist)
        _check_values(circuit)
        problems = circuit.problems + find_floating_nodes(circuit)
    except ProblemError as error:
        problems = error.problems
    for entry in problems:
        _check_span(entry)
    assert time.process_time() - begin < SLOWEST, "slow input"


def _check_values(circuit: object) -> None:
    for element in circuit.elements:  # type: ignore[attr-defined]
        for name in ("resistance_ohm", "capacitance_f", "inductance_h", "dc", "gain"):
            assert math.isfinite(getattr(element, name, 0.0)), element


def _check_span(entry: object) -> None:
    message, span = entry.message, entry.span  # type: ignore[attr-defined]
    assert message
    assert "\n" not in message
    if span is not None:
        assert span.line >= 1
        assert 1 <= span.column <= len(span.text) + 1
        assert span.length >= 1


def random_inputs(seed: int = 0) -> Iterator[bytes]:
    """The seeds, mutated at random: the same ones for the same number."""
    generator = random.Random(seed)
    pieces = sorted({word for text in SEEDS for word in text.replace("\n", " \n ").split(" ")})
    while True:
        text = generator.choice(SEEDS)
        for _ in range(generator.randint(1, 12)):
            text = _mutated(text, pieces, generator)
        yield text.encode("utf-8", "surrogatepass")


def fuzz_at_random(seconds: float) -> int:
    """Returns how many inputs were tried."""
    end, count = time.monotonic() + seconds, 0
    for content in random_inputs(seed=time.time_ns()):
        if time.monotonic() > end:
            break
        guarded(check)(content)
        count += 1
    return count


def _mutated(text: str, pieces: list[str], generator: random.Random) -> str:
    at = generator.randint(0, len(text))
    until = min(len(text), at + generator.randint(0, 8))
    choice = generator.randint(0, 5)
    if choice == 0:
        return text[:at] + text[until:]
    if choice == 1:
        return text[:at] + generator.choice(pieces) + text[until:]
    if choice == 2:
        return text[:at] + generator.choice("(){}'\"=,.+-*/\n\t ;$&|<>!?:0aVµ\x00") + text[at:]
    if choice == 3:
        return text[:at] + "\n" + generator.choice(SEEDS)[2:] + text[at:]
    if choice == 4:
        return text[:at] + " " + generator.choice(pieces) + " " + text[at:]
    return text[:at] + text[at:until] * generator.randint(2, 5) + text[until:]


def guarded(target: Callable[[bytes], None]) -> Callable[[bytes], None]:
    """Keep the input that broke the reader beside the message."""

    def run(content: bytes) -> None:
        try:
            target(content)
        except Exception:
            print("input:", repr(content), file=sys.stderr)
            raise

    return run


def main() -> None:
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--seconds", type=int, default=60)
    options.add_argument("--without-coverage", action="store_true")
    chosen = options.parse_args()
    if chosen.without_coverage:
        print(fuzz_at_random(chosen.seconds), "inputs")
        return
    import tempfile

    import atheris

    with atheris.instrument_imports(include=["tauledger", "lark"]):
        import tauledger.circuit.flatten
        import tauledger.circuit.graph
        import tauledger.netlist.reader  # noqa: F401
    folder = Path(tempfile.mkdtemp(prefix="fuzz-reader-"))
    for number, text in enumerate(SEEDS):
        (folder / f"seed{number}").write_text(text)
    arguments = [f"-max_total_time={chosen.seconds}", "-max_len=2000", "-timeout=30"]
    atheris.Setup([sys.argv[0], *arguments, f"-artifact_prefix={folder}/", str(folder)], check)
    atheris.Fuzz()


if __name__ == "__main__":
    main()
