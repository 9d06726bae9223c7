"""Choice of values: published designs, the sizing law, and targets that cannot be met."""

from __future__ import annotations

import itertools
import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from decide.circuits import A3, A11, STAGE, run
from tauledger.analysis import analyze, read
from tauledger.configuration.reading import read_configuration
from tauledger.decide.asked import parse_asked
from tauledger.decide.bench import bench_of, measure_values
from tauledger.decide.choose import choose
from tauledger.decide.search import Wish
from tauledger.decide.series import mantissas
from tauledger.decide.sizing import least_total
from tauledger.problems import ProblemError
from tauledger.review.decisions import Choice

SAMPLES = Path(__file__).parents[2] / "samples"


def new_values(choice: Choice, number: int = 0) -> dict[str, float]:
    return {row.part: row.new_f for row in choice.alternatives[number].parts}


def test_published_split_of_a_bypassed_stage() -> None:
    """References A3 [T]: fL 100 Hz split 80/10/10 % takes CE 27.6, CC1 2.1, CC2 1.2 µF.

    By gm and rπ, which the circuit has, CE sees 71.9 Ω where the book takes 72.1 Ω.
    """
    shares = {"CE": 0.8, "CC1": 0.1, "CC2": 0.1}
    choice = choose(run(A3), Wish("low", 100.0, shares=shares, series="E24"))
    (way,) = choice.alternatives
    ideal = {row.part: row.ideal_f for row in way.parts}
    assert ideal["CE"] == pytest.approx(27.6e-6, rel=0.005)
    assert ideal["CC1"] == pytest.approx(2.1e-6, rel=0.03)
    assert ideal["CC2"] == pytest.approx(1.2e-6, rel=0.03)
    assert 0.85 * 100.0 < way.corner_hz <= 100.0


def test_published_corner_with_the_published_values() -> None:
    """References A3, same source: with the rounded values the exact corner is 90.9 Hz (mine)."""
    analysis = run(A3)
    values = {"CE": 27.6e-6, "CC1": 2.1e-6, "CC2": 1.2e-6}
    varied = {name: np.array([value]) for name, value in values.items()}
    found = measure_values(bench_of(analysis), analysis.network, varied)
    assert found.low_hz[0] == pytest.approx(90.9, rel=2e-3)


def test_published_even_split() -> None:
    """References A11 [T]: 25 Hz each takes CB 3.98 µF and CE 406.1 µF; exact 49.86 Hz (mine)."""
    analysis = run(A11)
    choice = choose(analysis, Wish("low", 50.0, shares={"CB": 0.5, "CE": 0.5}, series="E96"))
    (way,) = choice.alternatives
    ideal = {row.part: row.ideal_f for row in way.parts}
    assert ideal["CB"] == pytest.approx(3.98e-6, rel=1e-3)
    assert ideal["CE"] == pytest.approx(406.1e-6, rel=1e-3)
    varied = {"CB": np.array([3.98e-6]), "CE": np.array([406.1e-6])}
    found = measure_values(bench_of(analysis), analysis.network, varied)
    assert found.low_hz[0] == pytest.approx(49.86, rel=1e-3)


@settings(deadline=None)
@given(st.lists(st.floats(1.0, 1e6), min_size=1, max_size=5), st.floats(0.1, 1e4))
def test_the_sizing_law_is_a_minimum(resistances: list[float], corner: float) -> None:
    """It keeps Σ 1/(RC) = ω, and any exchange that keeps it too costs more."""
    omega = 2 * math.pi * corner
    sizes = least_total(resistances, corner)
    terms = [1 / (r * c) for r, c in zip(resistances, sizes, strict=True)]
    assert sum(terms) == pytest.approx(omega, rel=1e-12)
    for i, j in itertools.permutations(range(len(sizes)), 2):
        step = 0.01 * min(terms[i], terms[j])
        moved = list(terms)
        moved[i], moved[j] = terms[i] + step, terms[j] - step
        total = sum(1 / (r * t) for r, t in zip(resistances, moved, strict=True))
        assert total > sum(sizes) * (1 - 1e-12)


def test_every_way_meets_the_target_exactly_and_from_the_series() -> None:
    analysis = run(STAGE)
    choice = choose(analysis, Wish("low", 20.0))
    assert len(choice.alternatives) >= 2
    for number, way in enumerate(choice.alternatives):
        values = new_values(choice, number)
        varied = {name: np.array([value]) for name, value in values.items()}
        exact = way.corner_hz
        at_old_midband = measure_values(bench_of(analysis), analysis.network, varied).low_hz[0]
        assert exact == pytest.approx(at_old_midband, rel=1e-3)
        assert exact <= 20.0
        assert way.margin == pytest.approx(1 - exact / 20.0)
        for row in way.parts:
            if row.series.startswith("E"):
                mantissa = row.new_f / 10 ** math.floor(math.log10(row.new_f) + 1e-9)
                assert any(abs(mantissa - m) < 1e-9 for m in mantissas(row.series))


def test_least_total_is_the_least_of_all_combinations_nearby() -> None:
    """Against every combination of E6 values over two decades each, tried one by one."""
    analysis = run(STAGE)
    choice = choose(analysis, Wish("low", 30.0, series="E6"))
    best = choice.alternatives[0]
    assert "least total capacitance" in best.rule
    scale = [float(f"{m}e{p}") for p in range(-7, -2) for m in mantissas("E6")]
    near = [
        [v for v in scale if row.new_f / 11 < v < row.new_f * 11 and v < best.total_f]
        for row in best.parts
    ]
    table = np.array(list(itertools.product(*near))).T
    varied = {row.part: table[i] for i, row in enumerate(best.parts)}
    low = measure_values(bench_of(analysis), analysis.network, varied).low_hz
    assert table[:, low <= 30.0].sum(axis=0).min() == pytest.approx(best.total_f, rel=1e-9)


def test_fewest_changes_leaves_the_rest_and_fewest_values_is_one() -> None:
    choice = choose(run(STAGE), Wish("low", 35.0))
    by_rule = {way.rule: way for way in choice.alternatives}
    changes = next(way for rule, way in by_rule.items() if "fewest changes" in rule)
    assert [row.part for row in changes.parts if row.series != "unchanged"] == ["CE"]
    values = next(way for rule, way in by_rule.items() if "fewest different" in rule)
    assert values.values == 1


def test_only_the_named_parts_change() -> None:
    choice = choose(run(STAGE), Wish("low", 35.0, only=("ce",)))
    assert set(new_values(choice)) == {"CE"}


def test_a_part_that_may_not_change_binds_the_target() -> None:
    choice = choose(run(STAGE), Wish("low", 20.0, only=("C1",)))
    assert choice.alternatives == ()
    assert "however large C1 is" in choice.infeasible
    assert "CE" in choice.infeasible


def test_the_list_of_values_binds_the_target(tmp_path: Path) -> None:
    text = '[path.x]\nnetlist = "x.cir"\n[capacitors.all]\nmatch = "C*"\nvalues = ["1 µF", "22 µF"]'
    (tmp_path / "tauledger.toml").write_text(text)
    settings = read_configuration(tmp_path / "tauledger.toml").paths[0]
    choice = choose(run(STAGE), Wish("low", 10.0), settings)
    assert "list of values binds" in choice.infeasible
    feasible = choose(run(STAGE), Wish("low", 500.0), settings)
    assert {row.series for row in feasible.alternatives[0].parts} <= {"available", "unchanged"}
    assert set(new_values(feasible).values()) <= {1e-6, 22e-6}


def test_the_worst_case_meets_the_target_when_asked() -> None:
    tolerances = [parse_asked(text) for text in ("C*=-20..+80%", "R*=5%", "Q*.current_gain=40%")]
    plain = choose(run(STAGE), Wish("low", 40.0))
    safe = choose(run(STAGE), Wish("low", 40.0, with_tolerance=True, margin=0.05), None, tolerances)
    assert plain.alternatives[0].worst_hz is None
    for way in safe.alternatives:
        assert way.worst_hz is not None
        assert way.worst_hz <= 0.95 * 40.0 * (1 + 1e-9)
        assert way.corner_hz < way.worst_hz
    assert safe.alternatives[0].total_f > plain.alternatives[0].total_f


def test_a_shunt_capacitor_sets_the_high_corner() -> None:
    text = STAGE.replace(".end", "CL out 0 1p\n.end")
    choice = choose(run(text), Wish("high", 50e3, only=("CL",)))
    (way,) = choice.alternatives
    value = new_values(choice)["CL"]
    assert 50e3 <= way.corner_hz < 65e3
    larger = choose(
        run(text.replace("CL out 0 1p", f"CL out 0 {value * 1.25}")), Wish("high", 50e3)
    )
    assert larger.now_hz is not None
    assert larger.now_hz < 50e3
    out_of_reach = choose(run(text), Wish("high", 50e6, only=("CL",)))
    assert "however small CL is" in out_of_reach.infeasible


def test_two_stages_settle_as_slowly_as_their_slowest_pole() -> None:
    """One pole of an otherwise empty circuit: 1 % after 4.605 time constants (references B13)."""
    text = "rc\nVS in 0 AC 1\nRS in a 1k\nC1 a out 1u\nRL out 0 9k\n.end\n"
    choice = choose(run(text), Wish("low", 1.0))
    value = new_values(choice)["C1"]
    assert choice.alternatives[0].settling_s == pytest.approx(4.60517 * 10e3 * value, rel=1e-4)


def test_a_peak_is_not_taken_for_a_low_corner() -> None:
    """References U2: a capacitor in the feedback path trades a lower corner for a peak.

    With the peak let go, 2.2 µF for CF would do here with less capacitance.
    """
    choice = choose(analyze(read(SAMPLES / "feedback-pair/feedback-pair.cir")), Wish("low", 1.0))
    assert choice.alternatives
    for way in choice.alternatives:
        assert way.peak_db <= 0.5


def test_a_margin_is_kept_and_no_more() -> None:
    choice = choose(run(STAGE), Wish("low", 50.0, only=("CE",), series="E96", margin=0.2))
    way = choice.alternatives[0]
    assert 0.97 * 0.8 * 50.0 < way.corner_hz <= 0.8 * 50.0
    assert way.margin >= 0.2


def test_a_target_decades_away_is_met_by_search_and_not_by_looking_away() -> None:
    """The corner of a board is looked for down to the target, however far that is."""
    text = STAGE.replace("C1 a b 10u", "C1 a b 100n").replace("CE e 0 100u", "CE e 0 2.2u")
    choice = choose(run(text), Wish("low", 0.05))
    assert choice.now_hz is not None
    assert choice.now_hz > 2e3
    for way in choice.alternatives:
        assert 0.02 < way.corner_hz <= 0.05


def test_without_a_corner_there_is_nothing_to_choose() -> None:
    choice = choose(run("dc\nVS in 0 AC 1\nR1 in out 1k\nC1 out 0 1n\n.end\n"), Wish("low", 10.0))
    assert (choice.now_hz, choice.alternatives, choice.infeasible) == (None, (), "")
    assert any("no low corner" in note for note in choice.notes)


def test_an_electrolytic_is_told_which_way_round_to_go() -> None:
    choice = choose(run(STAGE), Wish("low", 20.0))
    (note,) = [note for note in choice.notes if "plus side" in note]
    assert "C1 at b" in note
    assert "CE at e" in note
    assert "Caution" in note
    unbiased = choose(run(A3), Wish("low", 100.0))
    assert any("without polarity" in note for note in unbiased.notes)


@pytest.mark.parametrize(
    ("wish", "code"),
    [
        (Wish("low", 20.0, only=("C9",)), "capacitor-unknown"),
        (Wish("low", 20.0, only=("R1",)), "capacitor-unknown"),
        (Wish("high", 1e5, only=("CE",)), "capacitor-other-end"),
    ],
)
def test_a_part_that_cannot_be_chosen_is_refused(wish: Wish, code: str) -> None:
    with pytest.raises(ProblemError) as raised:
        choose(run(STAGE), wish)
    assert raised.value.problems[0].code == code
