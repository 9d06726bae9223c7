"""Published worked examples: what each capacitor sees, and where both corners lie.

The figures, their sources and the reasons for every tolerance stand beside the netlists in the
``examples_*`` modules. A test tells every figure of its example that is missed, not just the first.
"""

from __future__ import annotations

import functools
import itertools
import math
import re
from collections.abc import Iterable, Iterator, Sequence

import pytest

from published import (
    examples_both_ends,
    examples_high_bipolar,
    examples_high_cascode,
    examples_high_fet,
    examples_low,
    examples_one_pole,
)
from published.example import HIGH, LOW, Corner, Example, Figure, Root, Seen, printed
from tauledger.analysis import analyze
from tauledger.netlist import parse
from tauledger.review.rows import CornerRow, PathRow, TimeConstantRow

EXAMPLES: tuple[Example, ...] = (
    *examples_low.EXAMPLES,
    *examples_high_bipolar.EXAMPLES,
    *examples_high_fet.EXAMPLES,
    *examples_high_cascode.EXAMPLES,
    *examples_both_ends.EXAMPLES,
    *examples_one_pole.EXAMPLES,
)
ONE_POLE = [e for e in EXAMPLES if e.high and e.high.one_pole]
DIAGNOSED = [e for e in EXAMPLES if e.diagnosis]


def by_id(examples: Iterable[Example]) -> list[object]:
    return [pytest.param(example, id=example.id) for example in examples]


@functools.cache
def review_path(example: Example) -> PathRow:
    """The one signal path of an example, as every report reads it."""
    return analyze(parse(example.text), input="Vs", output="out").review.paths[0]


def misses(label: str, figure: Figure | None, computed: float | None) -> list[str]:
    return [] if figure is None else [f"{label}: {line}" for line in figure.misses(computed)]


@pytest.mark.parametrize("example", by_id(EXAMPLES))
def test_example(example: Example) -> None:
    path = review_path(example)
    rows = {row.name: row for row in path.time_constants}
    found = [
        *ends(example.seen, rows),
        *itertools.chain.from_iterable(
            seen_figures(s, rows[s.name]) for s in example.seen if s.name in rows
        ),
        *corner_figures(LOW, example.low, path.low, rows.values()),
        *corner_figures(HIGH, example.high, path.high, rows.values()),
        *misses("gain", example.gain, path.gain_by_inspection),
        *misses("gain in dB", example.gain_db, path.gain_db),
        *itertools.chain.from_iterable(root_figures(root, path) for root in example.roots),
        *itertools.chain.from_iterable(
            misses(f"{name} share", figure, percent(rows[name].share))
            for name, figure in example.shares
        ),
    ]
    assert not found, "\n".join([f"{example.source}:", *found])


@pytest.mark.parametrize("example", by_id(EXAMPLES))
def test_gain_by_inspection_is_the_exact_gain_at_midband(example: Example) -> None:
    """Books take the midband by inspection; here every passband is wide enough for that."""
    path = review_path(example)
    assert path.gain == pytest.approx(path.gain_by_inspection, rel=2e-3)


@pytest.mark.parametrize("example", by_id(ONE_POLE))
def test_one_pole_alone_is_optimistic(example: Example) -> None:
    """It leaves the other poles out: 0.5 to 21.5 % above exact, and exact above the sum."""
    assert example.high is not None
    assert example.high.one_pole is not None
    published, _ = printed(example.high.one_pole.published)
    high = review_path(example).high
    assert high is not None
    assert high.exact_hz is not None
    assert high.estimate_hz is not None
    assert high.estimate_hz < high.exact_hz
    assert 1.005 < published / high.exact_hz < 1.215


@pytest.mark.parametrize("example", by_id(DIAGNOSED))
def test_diagnosis_says_why_the_sum_is_off(example: Example) -> None:
    path = review_path(example)
    notes = {LOW: notes_of(path.low), HIGH: notes_of(path.high)}
    missing = [(end, word) for end, word in example.diagnosis if word not in notes[end].lower()]
    assert not missing, f"notes: {notes}"


def test_sum_fails_on_the_follower_whose_zero_lies_between_its_poles() -> None:
    """A37: the sum lies 66 % low, and the program's own error column says so."""
    follower = next(e for e in EXAMPLES if e.id == "A37")
    high = review_path(follower).high
    assert high is not None
    assert high.estimate_error == pytest.approx(-0.66, abs=0.01)


def test_peak_of_the_feedback_pair_is_told_in_db() -> None:
    """U2: 9.6 dB above midband near 2.6 Hz, which a sum of time constants cannot show."""
    pair = next(e for e in EXAMPLES if e.id == "U2")
    assert re.search(r"peak.*9\.6 dB|9\.6 dB.*peak", notes_of(review_path(pair).low))


def test_no_zero_is_a_rounding_error() -> None:
    """No zero of these circuits lies more than four decades above the fastest pole."""
    found = []
    for example in EXAMPLES:
        high = review_path(example).high
        if high is not None and high.poles_hz:
            limit = 1e4 * max(map(abs, high.poles_hz))
            found += [f"{example.id}: {z:.3g} Hz" for z in high.zeros_hz if abs(z) > limit]
    assert not found, "\n".join(found)


def test_every_capacitor_of_every_example_is_expected() -> None:
    """A capacitor that the table forgets would go unchecked."""
    for example in EXAMPLES:
        drawn = re.findall(r"^(C\w+)", example.netlist, flags=re.MULTILINE)
        assert sorted(drawn) == sorted(s.name for s in example.seen), example.id


def percent(share: float | None) -> float | None:
    return None if share is None else 100 * share


def notes_of(corner: CornerRow | None) -> str:
    return "" if corner is None else "\n".join(corner.notes)


def ends(seen: Sequence[Seen], rows: dict[str, TimeConstantRow]) -> list[str]:
    """Capacitors whose end is not the expected one, or that are missing from the table."""
    return [
        f"{s.name}: end {rows[s.name].end!r} instead of {s.end!r} ({rows[s.name].reason})"
        if s.name in rows
        else f"{s.name}: no row"
        for s in seen
        if s.name not in rows or rows[s.name].end != s.end
    ]


def seen_figures(seen: Seen, row: TimeConstantRow) -> Iterator[str]:
    yield from misses(f"{seen.name} resistance", seen.resistance, row.resistance_ohm)
    yield from misses(f"{seen.name} time constant", seen.tau, row.tau_s)
    yield from misses(f"{seen.name} corner", seen.corner, row.corner_hz)


def corner_figures(
    end: str, expected: Corner | None, found: CornerRow | None, rows: Iterable[TimeConstantRow]
) -> Iterator[str]:
    if expected is None:
        if found is not None and found.exact_hz is not None:
            yield f"{end} corner: there is none, but {found.exact_hz:.6g} Hz was found"
        return
    if found is None:
        yield f"{end} corner: not found"
        return
    yield from misses(f"{end} estimate", expected.estimate, found.estimate_hz)
    yield from misses(f"{end} exact", expected.exact, found.exact_hz)
    if end == HIGH:
        first = sum(row.tau_s for row in rows if row.end == HIGH and row.tau_s is not None)
        second = second_coefficient(found.poles_hz)
        yield from misses("b1", expected.tau_sum, first)
        yield from misses("b2", expected.second_coefficient, second)
        if expected.next_pole:
            yield from misses("b1/b2", expected.next_pole, first / second / (2 * math.pi))


def second_coefficient(poles_hz: Sequence[complex]) -> float:
    """b2 in s²: the sum over all pairs of 1/(p·q), poles in rad/s."""
    taus = [-1 / (2 * math.pi * pole) for pole in poles_hz]
    return sum((p * q).real for p, q in itertools.combinations(taus, 2))


def root_figures(root: Root, path: PathRow) -> Iterator[str]:
    """Nothing when one pole or zero of that end meets every figure of ``root``."""
    corner = path.low if root.end == LOW else path.high
    if corner is None:
        yield f"{root.kind}: no {root.end} corner"
        return
    found = corner.poles_hz if root.kind == "pole" else corner.zeros_hz
    if any(not root.misses(candidate) for candidate in found):
        return
    nearest = [line for candidate in found for line in root.misses(candidate)]
    yield f"no such {root.end} {root.kind} among {found}: {nearest}"
