"""With a base to compare with, the tables of the pull request say how each figure moved."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from tauledger.analysis import analyze
from tauledger.checking import markdown_of
from tauledger.netlist import parse
from tauledger.revisions import compare

SAMPLE = Path(__file__).parents[2] / "samples" / "common-emitter" / "common-emitter.cir"


def test_figures_carry_their_change_since_the_base() -> None:
    text = SAMPLE.read_text(encoding="utf-8")
    smaller = text.replace("100u", "47u", 1)
    assert smaller != text
    old, new = (analyze(parse(netlist)) for netlist in (text, smaller))
    plain = markdown_of(new.circuit, new.review, None)
    assert "since base" not in plain
    page = markdown_of(new.circuit, replace(new.review, comparison=compare(old, new)), None)
    (row,) = (line for line in page.splitlines() if "`VIN` → `out`" in line and "V/V" in line)
    _, _, _, gain, low, high, _, _ = row.split("|")
    assert "(unchanged)" in gain
    assert "(unchanged)" in high
    before, after = old.review.paths[0].low, new.review.paths[0].low
    assert before
    assert after
    assert f"(+{100 * (after.exact_hz / before.exact_hz - 1):.1f} % since base)" in low
