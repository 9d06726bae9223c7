"""JSON: nothing lost, nothing invented, always valid."""

from __future__ import annotations

import dataclasses
import json
import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from report.fixtures import ONE_STAGE, TWO_STAGES
from tauledger.report.json_report import json_report
from tauledger.review.rows import Review


def _strict(text: str) -> dict[str, object]:
    """Parsed as RFC 8259 has it: no NaN, no lone surrogate."""

    def refuse(constant: str) -> None:
        raise AssertionError(constant)

    document = json.loads(text, parse_constant=refuse)
    json.dumps(document, ensure_ascii=False).encode("utf-8")
    assert isinstance(document, dict)
    return document


def _same(shown: object, meant: object) -> bool:
    match meant:
        case dict():
            assert isinstance(shown, dict)
            return shown.keys() == meant.keys() and all(_same(shown[k], meant[k]) for k in meant)
        case tuple():
            assert isinstance(shown, list)
            return len(shown) == len(meant) and all(map(_same, shown, meant))
        case complex():
            assert isinstance(shown, dict)
            return set(shown) == {"re", "im"} and complex(shown["re"], shown["im"]) == meant
        case _:
            return shown == meant


@pytest.mark.parametrize("review", [ONE_STAGE, TWO_STAGES])
def test_every_field_comes_back(review: Review) -> None:
    document = _strict(json_report(review))
    assert document.pop("format") == 1
    assert _same(document, dataclasses.asdict(review))


def test_keys_are_sorted_and_the_text_is_stable() -> None:
    text = json_report(TWO_STAGES)
    assert text == json.dumps(json.loads(text), indent=2, sort_keys=True) + "\n"
    assert text.isascii()


@given(value=st.floats())
def test_figures_keep_ten_digits_or_become_null(value: float) -> None:
    document = _strict(json_report(replace(ONE_STAGE, temperature_c=value)))
    shown = document["temperature_c"]
    if math.isfinite(value):
        assert isinstance(shown, float)
        assert math.isclose(shown, value, rel_tol=1e-9)
    else:
        assert shown is None


def test_negative_zero_is_zero() -> None:
    assert '"temperature_c": 0.0,' in json_report(replace(ONE_STAGE, temperature_c=-0.0))


@given(title=st.text(alphabet=st.characters(codec=None), max_size=30))
def test_any_title_makes_valid_json(title: str) -> None:
    shown = _strict(json_report(replace(ONE_STAGE, title=title)))["title"]
    if not any("\ud800" <= character <= "\udfff" for character in title):
        assert shown == title


def test_undecodable_bytes_of_a_title_are_shown_as_escapes() -> None:
    title = b"caf\xe9".decode("utf-8", "surrogateescape")
    assert _strict(json_report(replace(ONE_STAGE, title=title)))["title"] == "caf\\udce9"


def test_a_row_that_holds_something_else_is_a_fault() -> None:
    broken = replace(ONE_STAGE, supply_power_w=object())  # type: ignore[arg-type]
    with pytest.raises(TypeError, match="holds a object"):
        json_report(broken)
