"""ngspice as the referee of the tests: one bounded run, and the readings taken from it.

A run is one ``ngspice -b`` in a folder of its own, without anyone's ``.spiceinit``, with memory and
time bounded, on the netlist's own text followed by tight tolerances and a control block. ngspice
returns 0 even when an analysis fails, so a run is judged by the vectors it wrote, and each analysis
starts without the results of the one before. Vectors come in binary: every bit of them.

Names of vectors are those ngspice writes, in lower case: ``v(out)``, ``i(vin)`` (into the source's
first node), ``@q1[gm]``.
"""

from __future__ import annotations

import os
import resource
import shutil
import subprocess
import tempfile
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

# Three digits tighter than ngspice's own defaults, so that a disagreement is ours. gmin stays
# at what the netlist says: it is part of the circuit both sides solve.
OPTIONS = ".options reltol=1e-6 abstol=1e-15 vntol=1e-9 itl1=500"
SINGLE_DEVICE = ".options reltol=1e-10 abstol=1e-18 vntol=1e-12 itl1=1000 itl2=1000"
"""For a device held by sources, which converges to the last digits."""
RESET = "reset"
"""Without it ngspice 39 multiplies a diode's area by its m once more at every further analysis;
it also takes back every ``alter``."""
TIMEOUT_S = 60.0
MEMORY_BYTES = 2 << 30
"""ngspice 39 fills the memory of the machine on some decks that it cannot solve."""
WIDE_HZ = (1e-3, 1e11)
POINTS_PER_DECADE = 40
NARROW_POINTS = 401
HALF_POWER = np.sqrt(0.5)

Vectors = dict[str, NDArray[Any]]


class RefereeError(Exception):
    """ngspice did not deliver; the message holds what it printed."""


@dataclass(frozen=True, slots=True)
class Point:
    """Operating point as ngspice sees it; every name in lower case."""

    voltages: Mapping[str, float]
    """Outer node to V."""
    figures: Mapping[str, float]
    """``@q1[gm]`` to its value, SI units."""


@dataclass(frozen=True, slots=True)
class Sweep:
    """Frequency response: both of shape (points,), in Hz and V (or A) per unit of the source."""

    frequency_hz: NDArray[np.float64]
    response: NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class Band:
    """Gain at midband and the nearest −3 dB frequency on either side; None when there is none."""

    gain: complex
    low_hz: float | None
    high_hz: float | None


def operating_point(netlist: Path, figures: Iterable[str] = ()) -> Point:
    """Node voltages, and the device figures asked for, such as ``@q1[gm]``."""
    wanted = tuple(figure.lower() for figure in figures)
    [vectors] = run(netlist.read_text(), [("op", " ".join(("all", *wanted)))])
    return Point(
        voltages={
            name[2:-1]: float(value[0])
            for name, value in vectors.items()
            if name.startswith("v(") and "#" not in name
        },
        figures={name: float(vectors[name][0]) for name in wanted},
    )


def bias_points(
    elements: str,
    points: Sequence[Mapping[str, float]],
    vectors: Sequence[str],
    temperature_c: float = 27.0,
) -> list[dict[str, float]]:
    """The vectors at every point, which maps names of independent sources to their DC values.

    ``elements`` holds elements and models only, without a title.
    """
    names = " ".join(vectors)
    asked = []
    for point in points:
        lines = [f"alter {name} dc = {value!r}" for name, value in point.items()]
        asked.append(("\n".join([RESET, *lines, "op"]), names))
    found = run(f"bias points\n{elements}", asked, single_device(temperature_c))
    return [{name: float(row[name.lower()][0]) for name in vectors} for row in found]


def phasors(
    elements: str, frequency_hz: float, vectors: Sequence[str], temperature_c: float = 27.0
) -> dict[str, complex]:
    """The vectors at one frequency, with the sources as the elements state them."""
    analysis = f"ac lin 1 {frequency_hz!r} {frequency_hz!r}"
    text = f"phasors\n{elements}"
    [found] = run(text, [(analysis, " ".join(vectors))], single_device(temperature_c))
    return {name: complex(found[name.lower()][0]) for name in vectors}


def values(lines: Sequence[str], parameters: str = "") -> list[float]:
    """The voltage of node ``n0``, ``n1``, … for each element line; ``{n}`` is its number."""
    elements = [line.replace("{n}", str(number)) for number, line in enumerate(lines)]
    text = "\n".join(["values", parameters, *elements])
    names = [f"v(n{number})" for number in range(len(lines))]
    [vectors] = run(text, [("op", " ".join(names))])
    return [float(vectors[name][0]) for name in names]


def sweep(netlist: Path, output: str, analysis: str) -> Sweep:
    """Response at a node, or between two as in ``a,b``, by one analysis: ``ac dec 40 1 1e9``."""
    return sweeps(netlist, output, [analysis])[0]


def sweeps(netlist: Path, output: str, analyses: Sequence[str]) -> list[Sweep]:
    """Several AC analyses in one run, each perhaps behind lines with ``alter``."""
    names = [f"v({node.lower()})" for node in output.split(",") if node != "0"]
    results = []
    asked = [(analysis, " ".join(names)) for analysis in analyses]
    for vectors in run(netlist.read_text(), asked):
        response = vectors[names[0]] - (vectors[names[1]] if len(names) > 1 else 0.0)
        results.append(Sweep(vectors["frequency"].real, np.asarray(response, dtype=complex)))
    return results


def band(netlist: Path, output: str, midband_hz: float) -> Band:
    """Gain at ``midband_hz`` and the −3 dB frequencies nearest to it.

    A wide sweep brackets each corner, a narrow one inside the bracket gives it to better than
    1e-5: the bracket is 6 % wide, and the straight line between two of its 401 points errs by
    far less than their 1.5e-4 distance.
    """
    low_hz, high_hz = WIDE_HZ
    down, up, middle = sweeps(
        netlist,
        output,
        [
            f"ac dec {POINTS_PER_DECADE} {low_hz!r} {midband_hz!r}",
            f"ac dec {POINTS_PER_DECADE} {midband_hz!r} {high_hz!r}",
            f"ac lin 1 {midband_hz!r} {midband_hz!r}",
        ],
    )
    gain = complex(middle.response[0])
    level = abs(gain) * HALF_POWER
    # Rounding may end the lower sweep just short of midband: the bracket needs that point.
    falling = Sweep(
        np.append(midband_hz, down.frequency_hz[::-1]), np.append(gain, down.response[::-1])
    )
    brackets = [crossing(falling, level), crossing(up, level)]
    narrow = [
        f"ac lin {NARROW_POINTS} {low!r} {high!r}"
        for low, high in (sorted(bracket) for bracket in brackets if bracket)
    ]
    fine = iter(sweeps(netlist, output, narrow) if narrow else ())
    low, high = (interpolate(next(fine), level) if bracket else None for bracket in brackets)
    return Band(gain, low, high)


def crossing(response: Sweep, level: float) -> tuple[float, float] | None:
    """First two neighbouring frequencies between which the magnitude falls through ``level``."""
    below = np.abs(response.response) < level
    if not below.any():
        return None
    first = int(np.argmax(below))
    return float(response.frequency_hz[first - 1]), float(response.frequency_hz[first])


def interpolate(response: Sweep, level: float) -> float:
    """Frequency at which the magnitude passes ``level``, on the line between two points."""
    above = np.abs(response.response) - level
    step = int(np.flatnonzero(np.diff(np.signbit(above)))[0])
    fraction = above[step] / (above[step] - above[step + 1])
    low, high = response.frequency_hz[step : step + 2]
    return float(low + fraction * (high - low))


def flat_name(name: str) -> str:
    """``X1.Q2`` as ngspice names it once subcircuits are expanded: ``q.x1.q2``."""
    *path, own = name.lower().split(".")
    return ".".join([own[0], *path, own]) if path else own


def altered(values: Mapping[str, float]) -> str:
    """Command lines that give elements (by ngspice's names) other values from here on."""
    return "".join(f"alter {name} = {value!r}\n" for name, value in values.items())


def single_device(temperature_c: float) -> str:
    """Options for a device held by sources at this temperature."""
    return f"{SINGLE_DEVICE}\n.options temp={temperature_c!r}"


def run(text: str, asked: Sequence[tuple[str, str]], options: str = OPTIONS) -> list[Vectors]:
    """Run analyses on a netlist with its title and return the vectors of each.

    Each is a command line, or several of which the last computes something, and the vectors asked
    for with blanks between. Raises RefereeError where one of them is missing.
    """
    with tempfile.TemporaryDirectory(prefix="referee-") as folder:
        done = execute(deck(text, asked, options), Path(folder))
        try:
            return [read_raw(Path(folder, f"{number}.raw")) for number in range(len(asked))]
        except (OSError, ValueError) as error:
            raise RefereeError(f"{error}\n{done.stdout}\n{done.stderr}") from error


def deck(text: str, asked: Sequence[tuple[str, str]], options: str) -> str:
    """The netlist up to its ``.end``, with options and control block behind it."""
    lines = []
    for line in text.splitlines():
        if line.strip().lower() == ".end":
            break
        lines.append(line)
    lines += [options, ".control", "set filetype=binary"]
    for number, (analysis, vectors) in enumerate(asked):
        # Else a failed analysis would write the vectors of the one before.
        lines += ["destroy all", analysis, f"write {number}.raw {vectors}"]
    return "\n".join([*lines, "quit", ".endc", ".end", ""])


def execute(
    deck: str, folder: Path, timeout_s: float = TIMEOUT_S
) -> subprocess.CompletedProcess[str]:
    """Run a deck in an empty folder, which is its home too; nothing is judged."""
    program = shutil.which("ngspice")
    if program is None:
        raise RefereeError("ngspice is not installed")
    (folder / "deck.cir").write_text(deck, encoding="utf-8")
    return subprocess.run(
        [program, "-n", "-b", "deck.cir"],
        cwd=folder,
        env={"PATH": os.environ.get("PATH", ""), "HOME": str(folder)},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        errors="replace",
        timeout=timeout_s,
        check=False,
        preexec_fn=_bound_memory,
    )


def _bound_memory() -> None:
    resource.setrlimit(resource.RLIMIT_AS, (MEMORY_BYTES, MEMORY_BYTES))


def read_raw(path: Path) -> Vectors:
    """Vectors of a binary raw file with one plot, each (points,), float or complex."""
    header, _, data = path.read_bytes().partition(b"Binary:\n")
    lines = header.decode().splitlines()
    fields = dict(line.split(":", 1) for line in lines if ":" in line)
    names = [line.split()[1].lower() for line in lines[lines.index("Variables:") + 1 :]]
    points = int(fields["No. Points"])
    kind = np.complex128 if "complex" in fields["Flags"] else np.float64
    table = np.frombuffer(data, dtype=kind).reshape(points, len(names))
    return {name: table[:, column] for column, name in enumerate(names)}
