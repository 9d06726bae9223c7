"""Values in, values out: SPICE and IEC readings, their traps, SI quantities, and printing."""

from __future__ import annotations

import math

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

import ngspice
from tauledger.quantity import (
    TRAPS,
    format_quantity,
    format_spice,
    parse_number,
    parse_si,
    rejected_number,
)

# Suffixes: references C8 (read, and measured on ngspice-39).
AS_SPICE = {
    "1": 1.0, "+5": 5.0, ".5": 0.5, "5.": 5.0, "-1.5e-3k": -1.5, "1e3": 1e3, "1E3": 1e3, "1d3": 1e3,
    "1T": 1e12, "1G": 1e9, "1g": 1e9, "1Meg": 1e6, "1MEG": 1e6, "1megohm": 1e6, "1k": 1e3,
    "1K": 1e3, "1m": 1e-3, "1M": 1e-3, "1MOhm": 1e-3, "1mil": 25.4e-6, "1milli": 25.4e-6,
    "1u": 1e-6, "1µ": 1e-6, "1n": 1e-9, "1p": 1e-12, "1f": 1e-15, "1F": 1e-15, "1a": 1.0, "1A": 1.0,
    "1x": 1.0, "1X": 1.0, "10V": 10.0, "100uF": 1e-4, "10kOhm": 1e4, "1Ω": 1.0, "1e3Hz": 1e3,
    "0.1e-6uF": 1e-13, "5%": 5.0, "470R": 470.0, "1e3meg": 1e9,
}  # fmt: skip

# Where ngspice is not followed, because it drops what follows the letter.
LETTER_AND_DIGIT = {
    # read on the page: references C2
    "R47": 0.47, "4R7": 4.7, "4K7": 4700.0, "47K3": 47300.0, "4M7": 4.7e6,
    "4k7": 4700.0, "2u2": 2.2e-6, "4µ7": 4.7e-6, "4μ7": 4.7e-6, "2n2": 2.2e-9, "1p5": 1.5e-12,
    "1m5": 1.5e-3, "n47": 0.47e-9, "4F7": 4.7, "2u2F": 2.2e-6, "-4k7": -4700.0,
    # common practice, no source
    "3V3": 3.3,
}  # fmt: skip


@pytest.mark.parametrize(("text", "value"), AS_SPICE.items())
def test_suffixes_read_as_spice_reads_them(text: str, value: float) -> None:
    number = parse_number(text)
    assert number is not None
    assert number.value == pytest.approx(value, rel=1e-15)


@pytest.mark.referee
def test_ngspice_reads_the_same_values() -> None:
    found = ngspice.values([f"V{{n}} n{{n}} 0 {text}" for text in AS_SPICE])
    assert found == pytest.approx(list(AS_SPICE.values()), rel=1e-14)


@pytest.mark.parametrize(("text", "value"), LETTER_AND_DIGIT.items())
def test_letter_and_digit_codes_read_as_the_standard_says(text: str, value: float) -> None:
    number = parse_number(text)
    assert number is not None
    assert number.value == pytest.approx(value, rel=1e-15)
    assert number.trap == "value-letter-digit"


@pytest.mark.referee
def test_ngspice_drops_the_digits_of_a_letter_code() -> None:
    assert ngspice.values(["V{n} n{n} 0 4k7", "V{n} n{n} 0 2u2"]) == pytest.approx([4000, 2e-6])


def test_a_leading_letter_is_a_name_where_a_name_may_stand() -> None:
    assert parse_number("R47", leading_letter=False) is None
    assert parse_number("4k7", leading_letter=False) is not None


@pytest.mark.parametrize(
    ("text", "trap"),
    [
        ("1M", "value-milli"), ("1MOhm", "value-milli"), ("20MHz", "value-milli"),
        ("20mhz", "value-milli"), ("1F", "value-femto"), ("1Farad", "value-femto"),
        ("1x", "value-x-suffix"), ("1a", "value-atto"), ("5aF", "value-atto"),
        ("1μF", "value-micro-sign"), ("1milli", "value-mil"),
        ("1m", ""), ("10mV", ""), ("10MV", ""), ("1pF", ""), ("2A", ""), ("1f", ""), ("1µF", ""),
    ],
)  # fmt: skip
def test_a_doubtful_value_is_read_and_says_so(text: str, trap: str) -> None:
    number = parse_number(text)
    assert number is not None
    assert number.trap == trap
    assert not trap or trap in TRAPS


def test_an_attofarad_is_not_a_farad() -> None:
    number = parse_number("5aF")
    assert number is not None
    assert (number.value, number.unit) == (5e-18, "F")


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("1-3k", "value-range"), ("1k-3k", "value-range"), ("1k..3k", "value-range"),
        ("1,5", "value-decimal-comma"), ("1,000k", "value-decimal-comma"),
        ("1e400", "value-overflow"), ("1e99999999k", "value-overflow"),
        ("1e", ""), ("1_000", ""), ("0x10", ""), ("1.5.2", ""), ("4.7k7", ""), ("abc", ""),
        ("", ""), ("-", ""), ("1" * 5000, ""), ("٣", ""), ("1 k", ""), ("nan", ""), ("inf", ""),
    ],
)  # fmt: skip
def test_what_is_no_number_is_refused_with_a_reason_where_known(text: str, reason: str) -> None:
    assert parse_number(text) is None
    assert rejected_number(text) == reason
    assert not reason or reason in TRAPS


@pytest.mark.parametrize("text", ["6e-5", "1e-3k", "4k7", "-2"])
def test_a_number_has_no_reason_to_be_refused(text: str) -> None:
    assert parse_number(text) is not None
    assert rejected_number(text) == ""


FINITE = st.floats(allow_nan=False, allow_infinity=False)
USUAL = st.floats(1e-18, 1e15) | st.builds(
    lambda digits, power: digits * 10.0**power, st.integers(1, 99_999), st.integers(-18, 12)
)


@given(FINITE | USUAL)
@example(3.3)
@example(5e-324)
@example(1.7976931348623157e308)
@example(-0.0)
def test_a_printed_value_reads_back_exactly(value: float) -> None:
    number = parse_number(format_spice(value))
    assert number is not None
    assert (number.value, number.trap, number.unit) == (value, "", "")


@pytest.mark.parametrize(
    ("value", "text"),
    [(4700.0, "4700"), (1e6, "1e6"), (2.2e-12, "2.2p"), (1e-6, "1u"), (12e3, "12k"), (0.0, "0"),
     (-1e-3, "-1m"), (1e-18, "1e-18"), (2.2e6, "22e5")],
)  # fmt: skip
def test_the_printed_value_is_short(value: float, text: str) -> None:
    assert format_spice(value) == text


@pytest.mark.parametrize("value", [math.inf, -math.inf, math.nan])
def test_no_circuit_value_is_infinite(value: float) -> None:
    with pytest.raises(ValueError, match="cannot be written"):
        format_spice(value)


@pytest.mark.referee
def test_ngspice_reads_a_printed_value_exactly() -> None:
    # Component values have few digits; all of these must be exact to the last bit.
    series = [1.0, 1.1, 1.5, 2.2, 3.3, 4.7, 5.6, 6.8, 8.2, 9.53, 1.0123, 3.14159265]
    values = [digits * 10.0**power for digits in series for power in range(-15, 10)]
    assert ngspice.values([f"V{{n}} n{{n}} 0 {format_spice(value)}" for value in values]) == values


@pytest.mark.parametrize(
    ("text", "value", "unit"),
    [
        ("20Hz", 20.0, "Hz"), ("1.5 MHz", 1.5e6, "Hz"), ("-40 dB", -40.0, "dB"),
        ("−3dB", -3.0, "dB"), ("10kΩ", 1e4, "Ω"), ("10kOhm", 1e4, "Ω"), ("1MΩ", 1e6, "Ω"),
        ("1M", 1e6, ""), ("1m", 1e-3, ""), ("1F", 1.0, "F"), ("47 µF", 47e-6, "F"),
        ("0.1uF", 1e-7, "F"), ("4k7", 4700.0, ""), ("4R7", 4.7, "Ω"), ("5 %", 5.0, "%"),
        ("27°C", 27.0, "°C"), ("3", 3.0, ""), ("10 k", 1e4, ""), ("1Meg", 1e6, ""),
    ],
)  # fmt: skip
def test_si_quantities_mind_the_case(text: str, value: float, unit: str) -> None:
    assert parse_si(text) == (pytest.approx(value, rel=1e-15), unit)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("1.5mhz", "did you mean MHz or mHz"), ("100pf", "did you mean pF"), ("x", "expected"),
        ("1 foo", "unknown unit 'foo'"), ("1e999", "too large"), ("", "expected a number"),
        ("5 kdB", "unknown unit"), ("1" * 5000, "expected a number"), ("nan", "expected a number"),
    ],
)  # fmt: skip
def test_an_unreadable_quantity_says_what_was_expected(text: str, message: str) -> None:
    with pytest.raises(ValueError, match=message) as caught:
        parse_si(text)
    assert len(str(caught.value)) < 250


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (4700, "Ω", "4.70 kΩ"), (-1.234e-3, "A", "-1.23 mA"), (22.7, "Hz", "22.7 Hz"),
        (15.9e6, "Hz", "15.9 MHz"), (0, "V", "0 V"), (-0.0, "V", "0 V"), (999.96, "V", "1.00 kV"),
        (99.96, "Hz", "100 Hz"), (math.inf, "Hz", "∞ Hz"), (-math.inf, "Hz", "-∞ Hz"),
        (math.nan, "Hz", "—"), (1e-18, "F", "1.00e-18 F"), (-40, "dB", "-40.0 dB"),
        (0.05, "%", "0.0500 %"), (123.4, "", "123"), (0.5, "", "0.500"), (1e9, "", "1.00e9"),
        (4.7e-6, "F", "4.70 µF"),
    ],
)  # fmt: skip
def test_quantities_print_in_engineering_notation(value: float, unit: str, text: str) -> None:
    assert format_quantity(value, unit) == text


@given(USUAL.filter(lambda value: 1e-15 <= value < 9e14), st.integers(2, 9))
def test_a_printed_quantity_is_within_its_digits(value: float, digits: int) -> None:
    read, unit = parse_si(format_quantity(value, "Hz", digits))
    assert unit == "Hz"
    assert read == pytest.approx(value, rel=0.5000001 * 10.0 ** (1 - digits))
