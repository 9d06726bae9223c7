"""A high corner met by one capacitor or several together, and what is in the way of a target."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from decide.circuits import STAGE, run
from tauledger.analysis import Analysis, analyze
from tauledger.command import main
from tauledger.decide.bench import bench_of, measure_values
from tauledger.decide.choose import choose
from tauledger.decide.search import Wish
from tauledger.decide.series import within
from tauledger.decide.sizing import least_change
from tauledger.netlist import parse
from tauledger.problems import ProblemError
from tauledger.review.decisions import Alternative, Choice

# Two shunt capacitors: one over the load, one from collector to base, whose resistance is larger.
SHUNTED = STAGE.replace(".end", "CL out 0 220p\nCM c b 4.7p\n.end")

# Three poles apart from each other, all to ground behind ideal followers: Σ R C is b1 exactly.
LADDER = """three low-passes
VS in 0 AC 1
R1 in a 10k
CA a 0 {ca}
E1 b 0 a 0 1
R2 b c 3k
CB c 0 {cb}
E2 d 0 c 0 1
R3 d out 1k
CC out 0 {cc}
.end
"""


def by_rule(choice: Choice, rule: str) -> Alternative:
    return next(way for way in choice.alternatives if rule in way.rule)


def values(way: Alternative) -> dict[str, float]:
    return {row.part: row.new_f for row in way.parts}


def changed(way: Alternative) -> set[str]:
    return {row.part for row in way.parts if row.series != "unchanged"}


def exact(
    analysis: Analysis, target_hz: float, *columns: tuple[str, list[float]]
) -> tuple[np.ndarray, np.ndarray]:
    """Every combination of values, (parts, combinations), and the exact high corner of each,
    the gain judged in the middle of the band that is wanted."""
    table = np.array(list(itertools.product(*(column for _, column in columns)))).T
    varied = {name: table[i] for i, (name, _) in enumerate(columns)}
    bench = bench_of(analysis)
    assert bench.low_hz is not None
    assert bench.high_hz is not None
    bench = replace(
        bench,
        midband_hz=math.sqrt(bench.low_hz * target_hz),
        high_hz=max(bench.high_hz, target_hz),
    )
    return table, measure_values(bench, analysis.network, varied).high_hz


# The closed form ----------------------------------------------------------------------------------

RESISTANCES = st.lists(st.floats(10.0, 1e6), min_size=1, max_size=5)


@settings(deadline=None)
@given(RESISTANCES, st.floats(1e3, 1e8), st.floats(0.05, 20.0), st.randoms(use_true_random=False))
def test_the_least_change_is_exact_and_no_other_is_less(
    resistances: list[float], corner: float, factor: float, random: object
) -> None:
    """Σ R C meets 1/ω, and every other set of values that does so changes more capacitance."""
    omega = 2.0 * math.pi * corner
    now = [1.0 / (omega * r * len(resistances) * factor) for r in resistances]
    sizes = least_change(resistances, now, 0.0, corner)
    assert sizes is not None
    assert sum(r * c for r, c in zip(resistances, sizes, strict=True)) == pytest.approx(1 / omega)
    cost = sum(abs(c - was) for c, was in zip(sizes, now, strict=True))
    missing = 1.0 / omega - sum(r * c for r, c in zip(resistances, now, strict=True))
    shares = [random.random() + 1e-3 for _ in now]  # type: ignore[attr-defined]
    total = sum(share * r * c for share, r, c in zip(shares, resistances, now, strict=True))
    # Any other way to make up the sum: spread over all by arbitrary shares of their time constants.
    others = [
        missing * share * r * c / total / r
        for share, r, c in zip(shares, resistances, now, strict=True)
    ]
    if all(was + step >= 0.0 for was, step in zip(now, others, strict=True)):
        assert cost <= sum(map(abs, others)) * (1 + 1e-9)


def test_the_closed_form_cannot_undo_what_stays() -> None:
    assert least_change([1e3], [1e-9], 1e-3, 1e3) is None


def test_the_closed_form_of_one_pole_is_its_corner() -> None:
    """R 10 kΩ, 1 kHz: 15.915 nF, and the exact corner with it is 1 kHz."""
    text = LADDER.format(ca="1n", cb="1f", cc="1f")
    choice = choose(run(text), Wish("high", 1e3, only=("CA",), series="E192"))
    (row,) = choice.alternatives[0].parts
    assert row.ideal_f == pytest.approx(1.0 / (2e4 * math.pi * 1e3), rel=1e-4)
    assert 1e3 <= choice.alternatives[0].corner_hz <= 1.013e3


# Several together ---------------------------------------------------------------------------------


@pytest.mark.parametrize("target", [20e3, 31e3, 55e3, 80e3])
def test_coming_down_is_the_best_of_all_combinations(target: float) -> None:
    """Against every combination of E12 values from what there is now on, tried one by one."""
    analysis = run(SHUNTED)
    choice = choose(analysis, Wish("high", target, only=("CL", "CM")))
    assert choice.now_hz is not None
    assert choice.now_hz > target
    loads = [220e-12, *within(2.3e-10, 1e-6, "E12")]
    millers = [4.7e-12, *within(5e-12, 3e-9, "E12")]
    table, corner = exact(analysis, target, ("CL", loads), ("CM", millers))
    total = table.sum(axis=0)
    met = corner >= target
    assert by_rule(choice, "closest").corner_hz == pytest.approx(corner[met].min(), rel=2e-3)
    alone = met & ((table[0] == loads[0]) != (table[1] == millers[0]))
    few = by_rule(choice, "fewest changes")
    assert len(changed(few)) == 1
    near = met & (corner <= few.corner_hz * (1 + 2e-3)) & (total > loads[0] + millers[0])
    assert by_rule(choice, "least capacitance added").total_f == pytest.approx(total[near].min())
    # Neither capacitor alone gets by with less, at the largest value it may have.
    each = [alone & (table[i] != table[i, 0]) for i in (0, 1)]
    singles = [total[some][corner[some].argmin()] for some in each if some.any()]
    assert few.total_f == pytest.approx(min(singles))


@pytest.mark.parametrize("target", [150e3, 250e3, 330e3])
def test_coming_up_keeps_the_most_of_all_combinations(target: float) -> None:
    """Against every combination of E12 values up to what there is now, tried one by one."""
    text = SHUNTED.replace("CL out 0 220p", "CL out 0 1n").replace("CM c b 4.7p", "CM c b 22p")
    analysis = run(text)
    choice = choose(analysis, Wish("high", target, only=("CL", "CM")))
    assert choice.now_hz is not None
    assert choice.now_hz < target
    loads, millers = within(1e-12, 1e-9, "E12"), within(1e-12, 22e-12, "E12")
    table, corner = exact(analysis, target, ("CL", [*loads]), ("CM", [*millers]))
    kept = np.where(corner >= target, table.sum(axis=0), 0.0)
    best = by_rule(choice, "least capacitance taken away")
    assert best.total_f == pytest.approx(kept.max(), rel=1e-9)
    assert best.corner_hz >= target
    alone = kept[(table[0] == 1e-9) | (table[1] == 22e-12)]
    assert len(changed(by_rule(choice, "fewest changes"))) == (1 if alone.any() else 2)


def test_three_that_all_have_to_shrink_do() -> None:
    """Each alone holds the corner below the target, so one or two are not enough."""
    text = LADDER.format(ca="1n", cb="3.3n", cc="10n")
    choice = choose(run(text), Wish("high", 40e3))
    assert choice.alternatives
    for way in choice.alternatives:
        assert way.corner_hz >= 40e3
        assert changed(way) == {"CA", "CB", "CC"}
    best = values(by_rule(choice, "taken away"))
    assert all(best[name] > 1e-10 for name in best)


def test_none_goes_the_other_way() -> None:
    down = choose(run(SHUNTED), Wish("high", 30e3))
    up = choose(run(SHUNTED), Wish("high", 600e3))
    assert all(row.new_f >= row.old_f for way in down.alternatives for row in way.parts)
    assert all(row.new_f <= row.old_f for way in up.alternatives for row in way.parts)


def test_a_capacitor_of_an_op_amp_model_is_left_alone() -> None:
    text = """op-amp from controlled sources
VS in 0 AC 1
XU in n out amp
RF out n 100k
CF out n 10p
RG n 0 10k
RL out 0 10k
.subckt amp p m o
EA x 0 p m 1e5
RX x y 1k
CX y 0 16u
EO o 0 y 0 1
.ends
.end
"""
    choice = choose(run(text), Wish("high", 20e3))
    assert all(set(values(way)) == {"CF"} for way in choice.alternatives)
    assert any("XU.CX" in note and "--only" in note for note in choice.notes)
    named = choose(run(text), Wish("high", 20e3, only=("XU.CX",)))
    assert set(values(named.alternatives[0])) == {"XU.CX"}
    assert "XU.CX (in a model) holds it there" in choose(run(text), Wish("high", 20e6)).infeasible


def test_without_a_capacitor_the_netlist_may_still_meet_it() -> None:
    choice = choose(run(STAGE), Wish("high", 20e3))
    assert (choice.alternatives, choice.infeasible) == ((), "")
    assert any("as it stands" in note and "no capacitor" in note for note in choice.notes)
    assert "Q1" in choose(run(STAGE), Wish("high", 20e9)).infeasible


# Targets ------------------------------------------------------------------------------------------


def test_no_margin_is_kept_that_nobody_asked_for() -> None:
    """Asked for the corner it has, a stage stays as it is, with nothing to spare."""
    now = choose(run(STAGE), Wish("low", 100.0)).now_hz
    assert now is not None
    same = choose(run(STAGE), Wish("low", now, only=("CE",)))
    assert by_rule(same, "as it stands").margin == pytest.approx(0.0, abs=1e-9)
    kept = choose(run(STAGE), Wish("low", now, only=("CE",), margin=0.01))
    assert all("as it stands" not in way.rule for way in kept.alternatives)
    assert all(way.margin >= 0.01 for way in kept.alternatives)


def test_settling_is_compared_with_now() -> None:
    choice = choose(run(STAGE), Wish("low", 35.0))
    now = choice.now_settling_s
    assert now is not None
    for way in choice.alternatives:
        assert way.settling_s is not None
        assert way.settling_ratio == pytest.approx(way.settling_s / now)


@pytest.mark.parametrize(
    ("options", "told"),
    [
        (("--low-corner", "30Hz"), "times as long as now ("),
        (("--low-corner", "30Hz"), " % below the target"),
        (("--high-corner", "1kHz"), "as it stands, and no capacitor of it limits the high end"),
        (("--low-corner", "30Hz", "--series", "e24"), "E24"),
    ],
)
def test_the_page_says(
    options: tuple[str, ...],
    told: str,
    tmp_path: object,
    capsys: pytest.CaptureFixture[str],
) -> None:
    path = f"{tmp_path}/stage.cir"
    with open(path, "w", encoding="utf-8") as stream:
        stream.write(STAGE)
    assert main(["choose", path, "--output", "out", *options]) == 0
    assert told in " ".join(capsys.readouterr().out.split())


@pytest.mark.parametrize(
    ("wish", "told"),
    [
        (Wish("low", 1e12), "above the high corner"),
        (Wish("high", 1e-6), "below the low corner"),
        (Wish("low", 5e3, midband_hz=1e3), "above the midband asked for"),
    ],
)
def test_a_target_beyond_the_band_is_refused(wish: Wish, told: str) -> None:
    analysis = analyze(parse(STAGE), output="out", midband_hz=wish.midband_hz)
    with pytest.raises(ProblemError) as raised:
        choose(analysis, wish)
    (problem,) = raised.value.problems
    assert problem.code == "target-beyond-band"
    assert told in problem.message


def test_an_absurdly_low_target_is_beyond_any_value() -> None:
    assert "list of values binds" in choose(run(STAGE), Wish("low", 1e-6)).infeasible


def test_a_band_may_be_moved_past_the_present_midband() -> None:
    """The gain is judged in the middle of the band there will be."""
    analysis = run(STAGE)
    target = 3.0 * analysis.corners.midband_hz
    choice = choose(analysis, Wish("low", target))
    best = by_rule(choice, "least total")
    assert 0.8 * target < best.corner_hz <= target


def test_a_band_made_narrow_by_a_small_capacitor_may_be_widened() -> None:
    """With 2 nF the gain never gets to where it is meant to be; a larger one is no other band."""
    text = SHUNTED.replace("C1 a b 10u", "C1 a b 2n").replace("CL out 0 220p", "CL out 0 1n")
    choice = choose(run(text), Wish("low", 60.0))
    assert choice.now_hz is not None
    assert choice.now_hz > 5e3
    assert all(way.corner_hz <= 60.0 for way in choice.alternatives)
    assert choice.alternatives


def test_capacitors_inside_the_band_are_told_apart_from_none() -> None:
    text = SHUNTED.replace("C1 a b 10u", "C1 a b 1n").replace("CL out 0 220p", "CL out 0 2.2n")
    assert (
        "C1, CE, C2, CL, CM act inside the band" in choose(run(text), Wish("low", 60.0)).infeasible
    )
    with pytest.raises(ProblemError) as raised:
        choose(run(text), Wish("low", 60.0, only=("C1",)))
    assert "--midband" in raised.value.problems[0].advice


def test_a_tolerance_without_the_worst_case_is_refused(
    tmp_path: object, capsys: pytest.CaptureFixture[str]
) -> None:
    path = f"{tmp_path}/stage.cir"
    with open(path, "w", encoding="utf-8") as stream:
        stream.write(STAGE)
    command = ["choose", path, "--output", "out", "--low-corner", "30Hz", "--tolerance", "C*=20%"]
    assert main(command) == 2
    assert "--worst-case" in capsys.readouterr().err
