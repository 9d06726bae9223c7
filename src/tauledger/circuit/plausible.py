"""Values that can be read and still mean nothing: of temperatures and of model parameters."""

from __future__ import annotations

from collections.abc import Mapping

from tauledger.circuit.expansion import Expansion
from tauledger.netlist.codes import fault, problem
from tauledger.netlist.statements import Assignment, Call, Item, Statement
from tauledger.problems import ProblemError, Severity

ABSOLUTE_ZERO_C = -273.15
HOTTEST_C = 1000.0
"""Far beyond what any transistor or its model stands."""

_ABOVE_ZERO = {
    "npn": ("is", "bf", "br", "nf", "nr"),
    "pnp": ("is", "bf", "br", "nf", "nr"),
    "d": ("is", "n"),
}
_NOT_NEGATIVE = {"npn": ("vaf", "var"), "pnp": ("vaf", "var")}
"""Zero is a way of leaving them out."""


def check_temperature(
    run: Expansion, statement: Statement, item: Item | Call, temperature_c: float
) -> None:
    """Warn of one that no part stands; raises ProblemError at or below absolute zero."""
    if temperature_c <= ABSOLUTE_ZERO_C:
        raise fault(
            "value-unusable",
            f"{statement.name.text}: {temperature_c:g} °C is not above absolute zero, −273.15 °C",
            statement.span(item),
            "Give the temperature in degrees Celsius, such as 27.",
        )
    if temperature_c > HOTTEST_C:
        run.warn(
            "value-out-of-range",
            f"{statement.name.text}: {temperature_c:g} °C; expected at most {HOTTEST_C:g} °C",
            statement.span(item),
            "Give the temperature in degrees Celsius, such as 27.",
        )


def check_model(
    run: Expansion,
    statement: Statement,
    kind: str,
    given: Mapping[str, Assignment],
    numbers: Mapping[str, float],
) -> None:
    """Warn of every parameter on this card whose value no junction or transistor has.

    Raises ProblemError for a negative saturation current, with which there is no bias point.
    """
    expected = dict.fromkeys(_ABOVE_ZERO.get(kind, ()), "above zero")
    expected |= dict.fromkeys(_NOT_NEGATIVE.get(kind, ()), "zero or above")
    for name, limit in expected.items():
        value = numbers.get(name)
        if value is None or value > 0.0 or (value == 0.0 and limit != "above zero"):
            continue
        found = problem(
            "value-unusable" if name == "is" and value < 0.0 else "value-out-of-range",
            f"model {statement.text_of(statement.items[0])!r}: {name.upper()} is {value:g}; "
            f"expected {limit}",
            statement.span(given[name]),
            "Correct the model: bias and gain found with it mean nothing.",
        )
        if found.severity is Severity.ERROR:
            raise ProblemError(found)
        run.report([found])
