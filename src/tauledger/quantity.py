"""Numbers as engineers write them: SPICE values, letter-and-digit codes, SI quantities, printing.

Two readings live here, because the same letter means different things in different places.
:func:`parse_number` reads a *netlist value*: suffixes ignore case, so ``M`` is milli and ``F`` is
femto. :func:`parse_si` reads what a person types in configuration or on the command line: SI
prefixes, where case counts, ``M`` is mega and ``F`` is the farad.

Sources: SPICE suffixes and what ngspice-39 makes of the doubtful ones, references C8 (read and
measured); letter-and-digit codes, IEC 60062, references C2 (read); SI prefixes, references C6
(from memory). ``3V3`` for 3.3 V is common practice, no source.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator

from tauledger.records import dataclass

TRAPS: dict[str, tuple[str, str]] = {
    "value-milli": (
        "M is milli in SPICE, whatever its case; this value was read as thousandths",
        "Write Meg for a million, or a lower-case m if milli is meant.",
    ),
    "value-femto": (
        "F is femto (1e-15) in SPICE, not farad; this value was read as femto",
        "Leave the unit out (1, 100u) or write a lower-case f if femto is meant.",
    ),
    "value-atto": (
        "readers disagree on the suffix a: some take atto (1e-18), ngspice ignores it",
        "Write the power of ten, such as 5e-18, or A for ampere.",
    ),
    "value-letter-digit": (
        "this letter-and-digit code was read as IEC 60062 says (4k7 is 4700); "
        "ngspice drops the digits after the letter or refuses the value",
        "Write a decimal point, such as 4.7k.",
    ),
    "value-x-suffix": (
        "X is not a suffix in ngspice, though some readers take it as a million; "
        "it was ignored here",
        "Write Meg for a million, or leave the letter out.",
    ),
    "value-micro-sign": (
        "ngspice ignores this micro sign (the Greek letter); the value was read as millionths",
        "Write u for micro.",
    ),
    "value-mil": (
        "mil is 25.4e-6 (a thousandth of an inch) in SPICE, and so it was read",
        "Write m for a thousandth.",
    ),
    "value-range": (
        "this is a range of values, not one value",
        "Write one number, such as 2k.",
    ),
    "value-decimal-comma": (
        "this number has a comma in it",
        "Write a decimal point, and no separator between thousands.",
    ),
    "value-overflow": (
        "this number is too large for any circuit value",
        "Check the exponent and the suffix.",
    ),
}
"""Code → (what was found, what to do). The last three are never read as a number."""

OHM_SIGNS = "Ω\u2126"
"""Greek capital omega and the ohm sign."""

_SPICE_EXPONENT = {
    "t": 12, "g": 9, "k": 3, "m": -3, "u": -6, "µ": -6, "μ": -6, "n": -9, "p": -12, "f": -15,
}  # fmt: skip
_METRES_PER_MIL = 25.4e-6

_UNIT = r"[A-Za-zµμΩ\u2126°%]*"
_DECIMAL = re.compile(rf"([+-]?)([0-9]+\.?[0-9]*|\.[0-9]+)(?:[eEdD]([+-]?[0-9]{{1,9}}))?({_UNIT})")
_CODE_LETTERS = "RrΩ\u2126kKMmGgTtuUµμnNpPFVv"
_INFIX_CODE = re.compile(rf"([+-]?[0-9]+)([{_CODE_LETTERS}])([0-9]+)({_UNIT})")
_PREFIX_CODE = re.compile(rf"([+-]?)([RrkKMmuUµμnNpP])([0-9]+)({_UNIT})")
_CODE_EXPONENT = {"M": 6, "m": -3, "k": 3, "g": 9, "t": 12, "u": -6, "µ": -6, "μ": -6}
_CODE_EXPONENT |= {"n": -9, "p": -12}
_CODE_UNIT = {"R": "Ohm", "Ω": "Ohm", "\u2126": "Ohm", "F": "F", "V": "V"}

_RANGE = re.compile(r"[0-9.]+[A-Za-zµμΩ\u2126]*(?:-|–|\.\.+|~)[0-9.]+[A-Za-zµμΩ\u2126]*")
_COMMA = re.compile(r"[+-]?[0-9][0-9.]*(?:,[0-9]+)+[A-Za-zµμΩ\u2126]*")
_LONGEST = 200


@dataclass(frozen=True, slots=True)
class ParsedNumber:
    """A netlist value in SI base units, the unit glued on, and a trap code of :data:`TRAPS`."""

    value: float
    unit: str = ""
    trap: str = ""


def parse_number(text: str, *, leading_letter: bool = True) -> ParsedNumber | None:
    """Read a netlist value such as ``4.7k``, ``100uF``, ``1Meg``, ``4k7`` or ``R47``.

    Returns None when ``text`` is not a number; :func:`rejected_number` may then know why. A
    value with a known trap is read all the same, and says so in ``trap``. Pass
    ``leading_letter=False`` where a name may stand, since ``R47`` and ``n1`` are names as well.
    """
    if not text or len(text) > _LONGEST:
        return None
    if match := _DECIMAL.fullmatch(text):
        return _decimal(*match.groups())
    if match := _INFIX_CODE.fullmatch(text):
        whole, letter, fraction, unit = match.groups()
        return _letter_code(whole, letter, fraction, unit)
    if leading_letter and (match := _PREFIX_CODE.fullmatch(text)):
        sign, letter, fraction, unit = match.groups()
        return _letter_code(sign + "0", letter, fraction, unit)
    return None


def rejected_number(text: str) -> str:
    """The code in :data:`TRAPS` that says why ``text`` is no number, or an empty string."""
    if len(text) > _LONGEST or parse_number(text) is not None:
        return ""
    if match := _DECIMAL.fullmatch(text):
        return "" if match[4][:1] in ("e", "E") else "value-overflow"
    if _RANGE.fullmatch(text):
        return "value-range"
    return "value-decimal-comma" if _COMMA.fullmatch(text) else ""


def _decimal(sign: str, digits: str, exponent: str | None, tail: str) -> ParsedNumber | None:
    if exponent is None and tail in ("e", "E"):
        return None  # an exponent cut short, more likely than a unit
    power, unit, trap = _suffix(tail)
    value = float(f"{sign}{digits}e{int(exponent or 0) + power}")
    if trap == "mil":
        value *= _METRES_PER_MIL
        trap = "value-mil" if unit else ""
    return ParsedNumber(value, unit, trap) if math.isfinite(value) else None


def _suffix(tail: str) -> tuple[int, str, str]:
    """Split what follows the digits into power of ten, unit and trap (``mil``: times 25.4e-6)."""
    lower = tail.lower()
    if lower.startswith("meg"):
        return 6, tail[3:], ""
    if lower.startswith("mil"):
        return 0, tail[3:], "mil"
    power = _SPICE_EXPONENT.get(lower[:1])
    if power is not None:
        unit = tail[1:]
        return power, unit, _suffix_trap(tail[0], unit)
    if lower.startswith("a") and lower[1:] in ("f", "h", "s", "c"):
        return -18, tail[1:], "value-atto"
    if tail == "a":
        return 0, tail, "value-atto"
    if lower.startswith("x") and (len(lower) == 1 or _is_resistance_or_frequency(tail[1:])):
        return 0, tail, "value-x-suffix"
    return 0, tail, ""


def _suffix_trap(letter: str, unit: str) -> str:
    if letter == "μ":
        return "value-micro-sign"
    # An upper-case M with no unit, or one with a unit few would divide by a thousand. Old decks
    # are all upper case, so 10MV and 5MA pass.
    if letter == "M" and (not unit or _is_resistance_or_frequency(unit)):
        return "value-milli"
    if letter == "m" and unit.lower() == "hz":
        return "value-milli"
    if (letter == "F" and not unit) or (letter in "fF" and unit.lower() in ("arad", "arads")):
        return "value-femto"
    return ""


def _is_resistance_or_frequency(unit: str) -> bool:
    return unit.lower() in ("ohm", "ohms", "hz", "ω") or unit in OHM_SIGNS


def _letter_code(whole: str, letter: str, fraction: str, unit: str) -> ParsedNumber:
    """IEC 60062: the letter is the multiplier and stands where the decimal point belongs."""
    key = letter if letter in "Mm" else letter.lower()
    value = float(f"{whole}.{fraction}e{_CODE_EXPONENT.get(key, 0)}")
    return ParsedNumber(value, unit or _CODE_UNIT.get(letter.upper(), ""), "value-letter-digit")


# SI quantities, as typed by people ----------------------------------------------------------------

_SI_EXPONENT = {
    "f": -15, "p": -12, "n": -9, "u": -6, "µ": -6, "μ": -6, "m": -3,
    "k": 3, "K": 3, "Meg": 6, "meg": 6, "MEG": 6, "M": 6, "G": 9, "T": 12,
}  # fmt: skip
_SI_UNITS = {
    "Hz": "Hz", "hz": "Hz", "HZ": "Hz", "V": "V", "A": "A", "W": "W", "F": "F", "H": "H", "S": "S",
    "s": "s", "Ω": "Ω", "\u2126": "Ω", "Ohm": "Ω", "ohm": "Ω", "OHM": "Ω", "ohms": "Ω", "Ohms": "Ω",
    "dB": "dB", "db": "dB", "DB": "dB", "%": "%", "°C": "°C", "degC": "°C", "°": "°", "deg": "°",
}  # fmt: skip
_UNSCALED_UNITS = frozenset(("dB", "%", "°C", "°"))
_SI = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,9})?)\s*(\S*)")


def parse_si(text: str) -> tuple[float, str]:
    """Read a quantity in SI notation: ``20Hz``, ``1.5 MHz``, ``-40 dB``, ``10kΩ``, ``4k7``.

    Unlike in a netlist, case counts: ``M`` is mega, ``m`` milli, ``F`` farad. Returns the value in
    the base unit and the unit (``Hz V A W F H S s Ω dB % °C °``, or empty when none is written).
    Raises ValueError with a message fit for the user.
    """
    stripped = text.strip().replace("−", "-")  # the typographic minus people paste
    match = _SI.fullmatch(stripped) if len(stripped) <= _LONGEST else None
    if match:
        digits, tail = match.groups()
        if (split := _si_tail(tail)) is not None:
            power, unit = split
            value = float(digits) * 10.0**power if power >= 0 else float(digits) / 10.0**-power
            if math.isfinite(value):
                return value, unit
            raise ValueError(f"{_shown(text)} is too large a number")
    if code := _INFIX_CODE.fullmatch(stripped):
        whole, letter, fraction, unit = code.groups()
        number = _letter_code(whole, letter, fraction, unit)
        if not number.unit or number.unit in _SI_UNITS:
            return number.value, _SI_UNITS.get(number.unit, "")
    raise ValueError(_si_complaint(text, match[2] if match else ""))


def _si_tail(tail: str) -> tuple[int, str] | None:
    if not tail:
        return 0, ""
    if tail in _SI_UNITS:
        return 0, _SI_UNITS[tail]
    for length in (3, 1):
        power = _SI_EXPONENT.get(tail[:length])
        rest = tail[length:]
        # mhz could be meant as MHz by someone who does not mind case: better asked than guessed.
        if power is None or (rest == "hz" and tail[0] == "m" and length == 1):
            continue
        unit = _SI_UNITS.get(rest)
        if not rest or (unit is not None and unit not in _UNSCALED_UNITS):
            return power, unit or ""
    return None


def _si_complaint(text: str, tail: str) -> str:
    shown = _shown(text)
    if not tail:
        return f"{shown} is not a quantity; expected a number with a unit, such as 20 Hz or 4.7 kΩ"
    for candidate in (tail[:1].lower() + tail[1:].capitalize(), tail.upper(), tail.capitalize()):
        if candidate != tail and _si_tail(candidate) is not None:
            hint = "MHz or mHz" if tail == "mhz" else candidate
            return f"{shown} has the unknown unit {_shown(tail)}; did you mean {hint}?"
    return (
        f"{shown} has the unknown unit {_shown(tail)}; "
        "expected Hz, V, A, W, F, H, S, s, Ω, dB, % or °C, with a prefix such as k, M, m, u, n or p"
    )


def _shown(text: str) -> str:
    cut = text if len(text) <= 40 else text[:37] + "..."
    return repr(cut)


# Printing -----------------------------------------------------------------------------------------

_PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T"}


_LEAST_DB = 1e-4


def format_quantity(value: float, unit: str, digits: int = 3) -> str:
    """Print with ``digits`` significant figures and an engineering prefix: ``4.70 kΩ``, ``0 V``.

    Without a unit, and for ``dB``, ``%``, ``°`` and ``°C``, there is no prefix. Infinity prints as
    ``∞``, not-a-number as ``—``; a value outside femto to tera has a power of ten. Fewer decibels
    than a ten-thousandth are 0 dB: they are the noise of a ratio of one.
    """
    if math.isnan(value):
        return "—"
    space = " " if unit else ""
    if math.isinf(value):
        return f"{'-' if value < 0 else ''}∞{space}{unit}"
    if value == 0.0 or (unit == "dB" and abs(value) < _LEAST_DB):
        return f"0{space}{unit}"
    mantissa, _, power_text = f"{value:.{digits - 1}e}".partition("e")
    power = int(power_text)
    if not unit or unit in _UNSCALED_UNITS:
        if -4 <= power < 7:
            return f"{float(f'{mantissa}e{power}'):.{max(digits - 1 - power, 0)}f}{space}{unit}"
        return f"{mantissa}e{power}{space}{unit}"
    scale = 3 * (power // 3)
    prefix = _PREFIXES.get(scale)
    if prefix is None:
        return f"{mantissa}e{power} {unit}"
    within = power - scale
    return f"{float(f'{mantissa}e{within}'):.{max(digits - 1 - within, 0)}f} {prefix}{unit}"


_SPICE_SUFFIX = {12: "T", 9: "G", 6: "Meg", 3: "k", -3: "m", -6: "u", -9: "n", -12: "p", -15: "f"}
_MOST_DIGITS = 30
_STEPS = tuple(step for size in range(9) for step in ((size, -size) if size else (0,)))


def format_spice(value: float) -> str:
    """The shortest text that both ngspice and :func:`parse_number` read back as ``value`` exactly.

    ngspice gathers the digits in a double and multiplies by a power of ten, so its reading of the
    usual shortest text can be one unit in the last place off; then a few more digits are printed.
    Where no text of up to 30 digits does it (about one full-length value in a thousand, and the
    outermost powers of ten), the text is exact for :func:`parse_number` alone. Raises ValueError
    for infinity and not-a-number.
    """
    if not math.isfinite(value):
        raise ValueError(f"{value} cannot be written as a circuit value")
    if value == 0.0:
        return "0"
    sign = "-" if value < 0 else ""
    size = abs(value)
    digits, power = _shortest_decimal(size)
    for candidate, exponent in _decimals_near(size, digits, power):
        if _as_ngspice(candidate, exponent) == size:
            return sign + _shortest_text(candidate, exponent)
    return sign + _shortest_text(digits, power)


def _shortest_decimal(size: float) -> tuple[int, int]:
    """``size`` as integer × 10^power with the fewest digits, as Python's repr finds them."""
    mantissa, _, power_text = f"{size!r}".partition("e")
    whole, _, fraction = mantissa.partition(".")
    digits = int(whole + fraction)
    power = int(power_text or 0) - len(fraction)
    while digits % 10 == 0:
        digits //= 10
        power += 1
    return digits, power


def _decimals_near(size: float, digits: int, power: int) -> Iterator[tuple[int, int]]:
    """Decimals that round to ``size``, from the shortest to the longest."""
    yield digits, power
    numerator, denominator = size.as_integer_ratio()
    for count in range(len(str(digits)), _MOST_DIGITS + 1):
        exponent = power + len(str(digits)) - count
        above, below = numerator * 10 ** max(-exponent, 0), denominator * 10 ** max(exponent, 0)
        nearest = (2 * above + below) // (2 * below)
        # Quarter steps of the double that will hold the digits, or whole ones below 2**53.
        stride = max(1, int(math.ulp(float(nearest))) // 4)
        for step in _STEPS:
            candidate = nearest + step * stride
            if candidate > 0 and float(f"{candidate}e{exponent}") == size:
                yield candidate, exponent


def _as_ngspice(digits: int, power: int) -> float:
    """What ngspice-39 makes of these digits: measured, and held to it by a test."""
    mantissa = 0.0
    for digit in str(digits):
        mantissa = 10 * mantissa + ord(digit) - ord("0")
    try:
        return mantissa * math.pow(10.0, power)
    except OverflowError:
        return math.inf


def _shortest_text(digits: int, power: int) -> str:
    text = str(digits)
    forms = [text + "0" * power] if 0 <= power <= 3 else []
    if -len(text) - 3 < power < 0:
        forms.append(_point(text, -power))
    for exponent, suffix in _SPICE_SUFFIX.items():
        places = exponent - power
        if places == 0:
            forms.append(text + suffix)
        elif 0 < places < len(text):
            forms.append(_point(text, places) + suffix)
    if power:
        forms.append(f"{text}e{power}")
    # On equal length the more readable form, which stands first, is kept.
    return min(forms, key=len)


def _point(text: str, places: int) -> str:
    padded = text.rjust(places + 1, "0")
    return f"{padded[:-places]}.{padded[-places:]}"
