"""Ask ngspice for device figures at a list of bias points, in one process."""

from __future__ import annotations

import re
import resource
import shutil
import subprocess
import tempfile
from collections.abc import Mapping, Sequence
from pathlib import Path

_VALUE = re.compile(r"^(\S+) = (\S+)\s*$")
_TIGHT = ".options reltol=1e-10 abstol=1e-18 vntol=1e-12 itl1=1000 itl2=1000 noacct"


def operating_points(
    deck: str,
    points: Sequence[Mapping[str, float]],
    vectors: Sequence[str],
    temperature_c: float = 27.0,
) -> list[dict[str, float]]:
    """Solve ``deck`` at every point and return the vectors asked for.

    ``deck`` holds elements and models only: the title, the tight tolerances and the control block
    are added here. A point maps names of independent sources to their DC values. Vectors are
    ngspice's, such as ``@q1[gm]`` or ``vc#branch``; a vector ngspice does not print raises
    AssertionError with its output.
    """
    control = ["set numdgt=15"]
    for number, point in enumerate(points):
        # Without reset ngspice 39 multiplies a diode's area by its m again at every analysis.
        control.append("reset")
        control += [f"alter {source} dc = {value!r}" for source, value in point.items()]
        control += ["op", f"echo point {number}", *(f"print {vector}" for vector in vectors)]
    output = _run(deck, control, temperature_c)
    return _parse(output, len(points), vectors)


def alternating_currents(
    deck: str, frequency_hz: float, vectors: Sequence[str], temperature_c: float = 27.0
) -> dict[str, complex]:
    """Phasors of the vectors at one frequency, with the sources as the deck states them."""
    control = ["set numdgt=15", f"ac lin 1 {frequency_hz!r} {frequency_hz!r}", "echo point 0"]
    parts = [f"{part}({vector})" for vector in vectors for part in ("real", "imag")]
    output = _run(deck, [*control, *(f"print {part}" for part in parts)], temperature_c)
    (result,) = _parse(output, 1, parts)
    return {v: complex(result[f"real({v})"], result[f"imag({v})"]) for v in vectors}


def _bound_memory() -> None:
    resource.setrlimit(resource.RLIMIT_AS, (2 << 30, 2 << 30))


def _run(deck: str, control: Sequence[str], temperature_c: float) -> str:
    program = shutil.which("ngspice")
    assert program, "these comparisons need ngspice (Debian package ngspice)"
    text = "\n".join(
        (
            "* operating points",
            _TIGHT,
            f".options temp={temperature_c}",
            deck.strip(),
            ".control",
            *control,
            "quit",
            ".endc",
            ".end",
            "",
        )
    )
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "deck.cir"
        path.write_text(text, encoding="utf-8")
        run = subprocess.run(
            [program, "-n", "-b", path.name],
            cwd=folder,
            stdin=subprocess.DEVNULL,
            capture_output=True,
            text=True,
            timeout=30,
            check=False,
            # ngspice 39 fills the memory of the machine on some decks that it cannot solve.
            preexec_fn=_bound_memory,
        )
    # Apart, or a progress line of ngspice (on stderr) can cut a value in two.
    return run.stdout + run.stderr


def _parse(output: str, count: int, vectors: Sequence[str]) -> list[dict[str, float]]:
    results: list[dict[str, float]] = [{} for _ in range(count)]
    current: dict[str, float] | None = None
    for line in output.splitlines():
        if line.startswith("point "):
            current = results[int(line.split()[1])]
        elif current is not None and (match := _VALUE.match(line)):
            current[match[1].lower()] = float(match[2])
    for result in results:
        missing = [vector for vector in vectors if vector.lower() not in result]
        assert not missing, f"ngspice did not print {missing}:\n{output}"
    return results
