"""Problems as people read them on stderr."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.report.inert import clip, display_width, inert
from tauledger.report.problems import format_problems

ANY_TEXT = st.text(alphabet=st.characters(codec=None), max_size=200)


def _problem(text: str, column: int, length: int, message: str = "found, expected") -> Problem:
    span = SourceSpan("amp.cir", 4, column, length, text)
    return Problem("model-missing", Severity.ERROR, message, span, "Do this.")


def test_place_line_mark_and_advice() -> None:
    shown = format_problems(
        [_problem("  Q1 out b e BC547X", 14, 6), Problem("x", Severity.NOTE, "y")]
    )
    assert shown == (
        "amp.cir:4:14: error[model-missing]: found, expected\n"
        "    Q1 out b e BC547X\n"
        "               ~~~~~~\n"
        "    Do this.\n"
        "note[x]: y\n"
    )


def test_terminal_and_bidirectional_controls_are_shown() -> None:
    shown = format_problems([_problem("R1 \x1b[2Ja \u202eb 1k", 12, 1, "bad\x07 \u2066name\r\nx")])
    assert shown.splitlines() == [
        "amp.cir:4:12: error[model-missing]: bad\\x07 \\u2066name\\r\\nx",
        "    R1 \\x1b[2Ja \\u202eb 1k",
        "                       ~",
        "    Do this.",
    ]


def test_long_line_is_cut_round_the_mark() -> None:
    shown = format_problems([_problem("a" * 500 + "BAD" + "z" * 500, 501, 3)]).splitlines()
    start = shown[2].index("~")
    assert shown[1][start : start + 3] == "BAD"
    assert shown[2].strip() == "~~~"
    assert shown[1].strip().startswith("...a")
    assert shown[1].endswith("z...")
    assert max(map(len, shown[1:3])) <= 100


@given(text=ANY_TEXT, column=st.integers(-3, 300), length=st.integers(-3, 300), message=ANY_TEXT)
def test_no_span_and_no_text_breaks_the_message(
    text: str, column: int, length: int, message: str
) -> None:
    lines = format_problems([_problem(text, column, length, message)]).split("\n")
    assert lines.pop() == ""
    assert all(line.isprintable() for line in lines)
    assert len(lines) == (4 if text.strip() else 2)
    assert all(display_width(line) <= 100 for line in lines[1:])


@given(before=ANY_TEXT, marked=st.text("名é", min_size=1, max_size=9), after=ANY_TEXT)
def test_the_mark_stands_under_the_marked_text(before: str, marked: str, after: str) -> None:
    text = before + marked + after
    problem = _problem(text, len(before) + 1, len(marked))
    _, line, mark, _ = format_problems([problem]).rstrip("\n").split("\n")
    if marked not in before:
        assert display_width(line[: line.index(marked)]) == mark.index("~")
    assert mark.count("~") == display_width(marked)


@given(text=ANY_TEXT)
def test_inert_text_is_printable_and_clips_to_any_width(text: str) -> None:
    shown = inert(text)
    assert shown.isprintable()
    assert inert(shown) == shown
    for columns in (1, 2, 7, 24):
        assert display_width(clip(shown, columns)) <= columns
