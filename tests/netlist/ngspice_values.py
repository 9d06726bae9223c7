"""What ngspice itself makes of a value: the referee for numbers and expressions."""

from __future__ import annotations

import re
import subprocess
import tempfile
from collections.abc import Sequence
from pathlib import Path

_PRINTED = re.compile(r"^v\(n(\d+)\) = (\S+)", re.MULTILINE)


def ngspice_values(lines: Sequence[str], parameters: str = "") -> list[float]:
    """The voltage of node ``n0``, ``n1``, … for each element line; ``{n}`` is its number.

    16 digits after the point are printed, which is every bit of a positive double.
    """
    deck = ["values", *parameters.splitlines()]
    deck += [line.replace("{n}", str(index)) for index, line in enumerate(lines)]
    deck += [".control", "set numdgt=16", "op"]
    deck += [f"print v(n{index})" for index in range(len(lines))]
    deck += [".endc", ".end", ""]
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "values.cir"
        path.write_text("\n".join(deck), encoding="utf-8")
        run = subprocess.run(
            ["ngspice", "-b", "-n", path.name],
            cwd=folder,
            capture_output=True,
            text=True,
            timeout=60,
        )
    found = {int(index): float(value) for index, value in _PRINTED.findall(run.stdout)}
    assert len(found) == len(lines), run.stderr + run.stdout
    return [found[index] for index in range(len(lines))]
