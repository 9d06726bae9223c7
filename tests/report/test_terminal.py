"""The text report. The files in expected/ were read by eye at 100 columns before they were kept."""

from __future__ import annotations

import io
import re
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from report.fixtures import ONE_STAGE, TWO_STAGES
from tauledger.problems import Problem, Severity
from tauledger.report.inert import display_width
from tauledger.report.terminal import text_report, write_text_report
from tauledger.review.rows import Review

EXPECTED = Path(__file__).parent / "expected"
HOSTILE = st.text(max_size=70) | st.sampled_from(
    ["\x1b]0;owned\x07", "::error::x", "\u202egnp.exe", "名前" * 30, "a\r\nb", "\udc80", "x" * 300]
)


@pytest.mark.parametrize(
    ("review", "encoding", "file"),
    [
        (ONE_STAGE, "utf-8", "one_stage.txt"),
        (TWO_STAGES, "utf-8", "two_stages.txt"),
        (ONE_STAGE, "ascii", "one_stage_ascii.txt"),
    ],
)
def test_report_reads_as_agreed(review: Review, encoding: str, file: str) -> None:
    assert text_report(review, 100, encoding) == (EXPECTED / file).read_text(encoding="utf-8")


def _renamed(review: Review, words: list[str]) -> Review:
    """The review with every text that comes from a netlist replaced."""
    a, b, c, d = words
    paths = tuple(
        replace(
            path,
            input=a,
            output=b,
            notes=(c,),
            stages=tuple(
                replace(s, transistors=(a, b), input_node=c, output_node=d) for s in path.stages
            ),
            time_constants=tuple(
                replace(t, name=n, nodes=(c, d), role=d, reason=a, expression=b)
                for t, n in zip(path.time_constants, words * 5, strict=False)
            ),
            high=replace(path.high, set_by=(a, b), notes=(d,)) if path.high else None,
        )
        for path in review.paths
    )
    return replace(
        review,
        title=a,
        netlist=b,
        nodes=tuple(replace(n, node=w) for n, w in zip(review.nodes, words * 9, strict=False)),
        transistors=tuple(replace(t, name=a, model=b, region=c) for t in review.transistors),
        paths=paths * 2,
        problems=(Problem(c, Severity.ERROR, d),),
    )


@settings(max_examples=60, deadline=None)
@given(
    words=st.lists(HOSTILE, min_size=4, max_size=4),
    review=st.sampled_from([ONE_STAGE, TWO_STAGES]),
    encoding=st.sampled_from(["utf-8", "ascii", "cp1252", "cp437"]),
    width=st.sampled_from([100, 90]),
)
def test_names_cannot_steer_the_terminal_nor_break_the_page(
    words: list[str], review: Review, encoding: str, width: int
) -> None:
    text = text_report(_renamed(review, words), width, encoding)
    text.encode(encoding)
    for line in text.split("\n"):
        assert line.isprintable(), line
        assert display_width(line) <= width, line


def test_missing_ends_and_paths_are_said() -> None:
    (path,) = ONE_STAGE.paths
    no_high = replace(path, high=None, time_constants=path.time_constants[:3])
    text = text_report(replace(ONE_STAGE, paths=(no_high,)))
    assert "-118 V/V   41.5 dB   from 60.3 Hz up" in text
    assert " no high corner" in text
    dead = replace(path, gain=None, gain_db=None, midband_hz=None, low=None, high=None)
    text = text_report(replace(ONE_STAGE, paths=(dead,)))
    assert "V1 → out   no midband gain   no corner" in text
    assert "  midband      no passband found, input" in text
    assert "no signal path: bias only" in text_report(replace(ONE_STAGE, paths=()))


@pytest.mark.parametrize(
    ("zero_hz", "shown"), [(0.59, False), (0.61, True), (-6020.0, True), (6040.0, False)]
)
def test_only_zeros_within_two_decades_of_the_corner_are_shown(zero_hz: float, shown: bool) -> None:
    (path,) = ONE_STAGE.paths
    rows = tuple(replace(row, zero_hz=zero_hz) for row in path.time_constants[:1])
    text = text_report(replace(ONE_STAGE, paths=(replace(path, time_constants=rows),)))
    assert ("; zero at" in text) is shown


def test_a_pole_in_the_right_half_plane_is_called_unstable() -> None:
    (path,) = TWO_STAGES.paths
    assert path.high is not None
    high = replace(path.high, poles_hz=(1e3 + 2e6j, 1e3 - 2e6j))
    text = text_report(replace(TWO_STAGES, paths=(replace(path, high=high),)))
    assert "the circuit is not stable" in text
    assert "not stable" not in text_report(TWO_STAGES)


def test_long_lists_say_what_is_left_out() -> None:
    nodes = tuple(replace(ONE_STAGE.nodes[0], node=f"n{n}") for n in range(75))
    text = text_report(replace(ONE_STAGE, nodes=nodes))
    assert "15 more nodes: --format json lists all" in text
    assert "n59 " in text
    assert "n60 " not in text


class _Terminal(io.StringIO):
    encoding = "utf-8"  # type: ignore[assignment]

    def isatty(self) -> bool:
        return True


@pytest.fixture
def terminal(monkeypatch: pytest.MonkeyPatch) -> _Terminal:
    monkeypatch.setenv("TERM", "xterm-256color")
    monkeypatch.setenv("COLUMNS", "140")
    monkeypatch.delenv("NO_COLOR", raising=False)
    return _Terminal()


def test_terminal_gets_the_same_text_in_colours(terminal: _Terminal) -> None:
    write_text_report(ONE_STAGE, terminal)
    assert "\x1b[1;34mLow end" in terminal.getvalue()
    assert re.sub(r"\x1b\[[0-9;]*m", "", terminal.getvalue()) == text_report(ONE_STAGE)


@pytest.mark.parametrize(("variable", "value"), [("NO_COLOR", "1"), ("TERM", "dumb")])
def test_colours_can_be_declined(
    terminal: _Terminal, monkeypatch: pytest.MonkeyPatch, variable: str, value: str
) -> None:
    monkeypatch.setenv(variable, value)
    write_text_report(ONE_STAGE, terminal)
    assert terminal.getvalue() == text_report(ONE_STAGE)


def test_narrow_terminal_is_filled_not_overrun(
    terminal: _Terminal, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("COLUMNS", "84")
    monkeypatch.setenv("NO_COLOR", "1")
    write_text_report(TWO_STAGES, terminal)
    assert max(map(display_width, terminal.getvalue().splitlines())) == 84


def test_piped_report_does_not_pay_for_rich() -> None:
    code = (
        "import sys; from report.fixtures import ONE_STAGE;"
        "from tauledger.report.terminal import write_text_report;"
        "write_text_report(ONE_STAGE, sys.stdout);"
        "sys.exit('rich' in sys.modules)"
    )
    tests = Path(__file__).parents[1]
    done = subprocess.run([sys.executable, "-c", code], cwd=tests, stdout=subprocess.PIPE)
    assert done.returncode == 0
    assert b"Ribbon" in done.stdout
