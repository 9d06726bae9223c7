"""Region warnings, headroom, the divider by hand and ignored parameters."""

from __future__ import annotations

from pathlib import Path

import pytest

from tauledger.analysis import Analysis, analyze, read
from tauledger.problems import Problem, Severity

STAGE = """one stage
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 10u
R1 vcc b {r1}
R2 b 0 {r2}
RC vcc out {rc}
RE e 0 1k
{bypass}
Q1 out b e qx
.model qx {kind} bf={bf} is=10f
.print ac v(out)
.end
"""
DEFAULTS = {
    "r1": "82k", "r2": "18k", "rc": "4.7k", "bypass": "CE e 0 1m", "bf": "5000", "kind": "npn",
}  # fmt: skip


def analysed(folder: Path, text: str) -> Analysis:
    path = folder / "stage.cir"
    path.write_text(text)
    return analyze(read(path))


def stage(folder: Path, **changes: str) -> Analysis:
    return analysed(folder, STAGE.format(**(DEFAULTS | changes)))


def found(analysis: Analysis, code: str) -> list[Problem]:
    return [problem for problem in analysis.review.problems if problem.code == code]


def test_headroom_of_a_bypassed_stage(tmp_path: Path) -> None:
    """Up: the collector rises by IC·RC when the current stops. Down: VCE falls to 0.2 V."""
    analysis = stage(tmp_path)
    [path] = analysis.review.paths
    [transistor] = analysis.review.transistors
    assert path.headroom is not None
    assert path.headroom.up_limit == "Q1 cuts off"
    assert path.headroom.down_limit == "Q1 saturates"
    assert path.headroom.up_v == pytest.approx(transistor.current_a * 4.7e3, rel=1e-3)
    assert path.headroom.down_v == pytest.approx(transistor.voltage_v - 0.2, rel=1e-3)


def test_a_saturated_stage_on_the_way_leaves_no_headroom_to_tell(tmp_path: Path) -> None:
    [path] = stage(tmp_path, rc="33k").review.paths
    assert path.headroom is None


def test_headroom_shrinks_with_emitter_degeneration(tmp_path: Path) -> None:
    """Without bypass the emitter rises while the collector falls: 1 + RE/RC times as fast."""
    analysis = stage(tmp_path, bypass="")
    [path] = analysis.review.paths
    [transistor] = analysis.review.transistors
    assert path.headroom is not None
    expected = (transistor.voltage_v - 0.2) / (1 + 1e3 / 4.7e3)
    assert path.headroom.down_v == pytest.approx(expected, rel=2e-3)


def test_headroom_of_a_follower_with_an_alternating_load(tmp_path: Path) -> None:
    """Down, a follower's current is used up by the load: IC·(RE‖RL)."""
    text = STAGE.format(**(DEFAULTS | {"rc": "1m", "bypass": "C2 e y 1m\nRL y 0 500"}))
    analysis = analysed(tmp_path, text.replace("v(out)", "v(y)"))
    [path] = analysis.review.paths
    [transistor] = analysis.review.transistors
    assert path.headroom is not None
    assert path.headroom.down_limit == "Q1 cuts off"
    expected = transistor.current_a * (1e3 * 500 / 1500)
    assert path.headroom.down_v == pytest.approx(expected, rel=5e-3)


@pytest.mark.parametrize(
    ("changes", "word"), [({"rc": "47k"}, "saturated"), ({"r2": "1k"}, "cut off")]
)
def test_a_transistor_out_of_its_region_is_warned_of(
    tmp_path: Path, changes: dict[str, str], word: str
) -> None:
    analysis = stage(tmp_path, **changes)
    problems = found(analysis, "region-unsuited") + found(analysis, "transistor-off")
    [problem] = problems
    assert f"Q1 (common emitter) is {word}" in problem.message or f"Q1 is {word}" in problem.message
    assert problem.span is not None
    assert problem.span.text.startswith("Q1")
    assert problem.advice


def test_an_active_transistor_is_not_warned_of(tmp_path: Path) -> None:
    assert stage(tmp_path).review.problems == ()


def test_the_divider_by_hand_agrees_when_the_base_current_is_small(tmp_path: Path) -> None:
    [row] = stage(tmp_path).review.dividers
    assert row.source_v == pytest.approx(12 * 18 / 100)
    assert row.source_ohm == pytest.approx(82e3 * 18 / 100)
    assert row.hand_a == pytest.approx((2.16 - 0.65) / 1e3)
    assert abs(row.difference) < 0.1
    assert row.reason == ""


def test_a_loaded_divider_is_explained_by_the_base_current(tmp_path: Path) -> None:
    [row] = stage(tmp_path, r1="820k", r2="180k", bf="60").review.dividers
    assert row.difference > 0.5
    assert "base current" in row.reason
    base_v = row.source_v - row.solved_a / 61 * row.source_ohm
    assert row.solved_a == pytest.approx((base_v - 0.6) / 1e3, rel=0.2)


def test_a_low_bias_is_explained_by_vbe(tmp_path: Path) -> None:
    [row] = stage(tmp_path, r1="100k", r2="6.8k").review.dividers
    assert abs(row.difference) > 0.1
    assert row.reason.startswith("VBE is")


def test_the_divider_of_a_pnp_counts_from_its_rail(tmp_path: Path) -> None:
    text = """pnp
VCC vcc 0 12
VIN in 0 AC 1
C1 in b 10u
R1 vcc b 18k
R2 b 0 82k
RE1 vcc m 330
RE2 m e 670
CE m 0 1m
Q1 out b e qx
RC out 0 4.7k
.model qx pnp bf=5000 is=10f
.print ac v(out)
.end
"""
    [row] = analysed(tmp_path, text).review.dividers
    assert row.emitter_ohm == pytest.approx(1e3)
    assert row.hand_a == pytest.approx((2.16 - 0.65) / 1e3)
    assert abs(row.difference) < 0.1


def test_dissipation_and_beta(tmp_path: Path) -> None:
    [row] = stage(tmp_path, bf="100").review.transistors
    assert row.beta_dc == pytest.approx(100, rel=1e-3)
    assert row.power_w is not None
    assert row.power_w == pytest.approx(row.current_a * row.voltage_v, rel=0.05)


@pytest.mark.parametrize(
    ("extra", "names"),
    [
        ("rco=10 vo=5 gamma=1n", ["RCO", "VO", "GAMMA"]),
        ("ptf=30", ["PTF"]),
        ("tlev=1", ["TLEV"]),
        ("rco=0 vo=5", []),
        ("tlev=0 kf=1e-15", []),
    ],
)
def test_parameters_without_effect_are_named_once(
    tmp_path: Path, extra: str, names: list[str]
) -> None:
    text = STAGE.format(**DEFAULTS).replace("is=10f", f"is=10f {extra}")
    text = text.replace("RE e 0 1k", "RE e 0 1k\nQ2 vcc vcc x qx\nRX x 0 10k")
    notes = found(analysed(tmp_path, text), "model-parameter-ignored")
    assert len(notes) == bool(names)
    for note in notes:
        assert note.severity is Severity.NOTE
        assert ", ".join(names) in note.message
        assert note.span is not None
        assert note.span.text.startswith(".model qx")
