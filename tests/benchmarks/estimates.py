"""How near each kind of estimate comes to the exact corner, over published and sample circuits.

    python tests/benchmarks/estimates.py

Prints one line a corner and the share of corners within 5 %. The circuits are the worked
examples of tests/published and the netlists in samples/.
"""

from __future__ import annotations

import sys
from collections.abc import Iterator
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT / "tests"))

from published import (  # noqa: E402
    examples_both_ends,
    examples_high_bipolar,
    examples_high_cascode,
    examples_high_fet,
    examples_low,
)
from tauledger.analysis import analyze, read  # noqa: E402
from tauledger.netlist import parse  # noqa: E402
from tauledger.review.rows import CornerRow  # noqa: E402


def corners() -> Iterator[tuple[str, CornerRow]]:
    """Every corner with an estimate and an exact figure, with the circuit's name."""
    analyses = [(p.stem, analyze(read(p))) for p in sorted(ROOT.glob("samples/*/*.cir"))]
    for module in (
        examples_low,
        examples_high_bipolar,
        examples_high_fet,
        examples_high_cascode,
        examples_both_ends,
    ):
        analyses += [(e.id, analyze(parse(e.netlist))) for e in module.EXAMPLES]
    for name, analysis in analyses:
        path = analysis.review.paths[0]
        for corner in (path.low, path.high):
            if corner and corner.exact_hz and corner.improved_hz:
                yield name, corner


def main() -> None:
    rows = list(corners())
    print(f"{'circuit':20}{'end':5}{'exact Hz':>12}{'sum':>9}{'better':>9}  method")
    for name, corner in rows:
        assert corner.estimate_error is not None
        assert corner.improved_error is not None
        print(
            f"{name:20}{corner.end:5}{corner.exact_hz:12.5g}{corner.estimate_error:9.1%}"
            f"{corner.improved_error:9.2%}  {corner.improved_method}"
        )
    for label, errors in (
        ("sum of time constants", [c.estimate_error for _, c in rows]),
        ("better estimate", [c.improved_error for _, c in rows]),
    ):
        near = sum(error is not None and abs(error) <= 0.05 for error in errors)
        print(f"{label}: {near} of {len(rows)} corners within 5 % ({near / len(rows):.0%})")


if __name__ == "__main__":
    main()
