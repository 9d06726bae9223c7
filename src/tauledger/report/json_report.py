"""The report as JSON: the fields of :mod:`tauledger.review.rows`, with their units in the keys.

Keys are sorted. A complex number is ``{"re": …, "im": …}``, a figure that does not exist or is
not finite is ``null``. Figures carry ten significant digits, so that two machines whose linear
algebra differs in the last bits write the same file.
"""

from __future__ import annotations

import dataclasses
import enum
import json
import math
from typing import TYPE_CHECKING

from tauledger.review.changes import Comparison
from tauledger.review.rows import Review

if TYPE_CHECKING:
    from _typeshed import DataclassInstance

FORMAT = 1
"""Raised when a key changes its meaning or goes; a new key does not raise it."""
_DIGITS = 10

Json = dict[str, "Json"] | list["Json"] | str | float | int | bool | None


def json_report(review: Review | Comparison) -> str:
    """The review, or a comparison alone, as indented ASCII JSON, ended by a line feed."""
    document: dict[str, Json] = {"format": FORMAT, **json_fields(review)}
    return json.dumps(document, indent=2, sort_keys=True, allow_nan=False) + "\n"


def json_fields(value: DataclassInstance) -> dict[str, Json]:
    """A row's fields in JSON's terms; raises TypeError for what a row must not hold."""
    return {field.name: _plain(getattr(value, field.name)) for field in dataclasses.fields(value)}


def _plain(value: object) -> Json:
    match value:
        case None | bool():
            return value
        case enum.Enum():
            return str(value.value)
        case str():
            # Undecodable bytes of a file arrive as lone surrogates, which JSON does not allow.
            return value.encode("utf-8", "backslashreplace").decode("utf-8")
        case int():
            return value
        case float():
            return _rounded(value)
        case complex():
            return {"re": _rounded(value.real), "im": _rounded(value.imag)}
        case tuple() | list():
            return [_plain(item) for item in value]
        case _ if dataclasses.is_dataclass(value) and not isinstance(value, type):
            return json_fields(value)
    raise TypeError(f"a report row holds a {type(value).__name__}")


def _rounded(value: float) -> float | None:
    if not math.isfinite(value):
        return None
    rounded = float(f"{value:.{_DIGITS}g}")
    # The largest floats round to infinity; adding zero makes -0.0 plain 0.0.
    return rounded + 0.0 if math.isfinite(rounded) else float(value)
