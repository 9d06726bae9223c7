"""Writes the JSON Schema of the JSON reports from the rows themselves.

    python tests/report/report_schema.py

A test holds the shipped file to what this prints, so a new field cannot be forgotten.
"""

from __future__ import annotations

import ast
import dataclasses
import enum
import inspect
import json
import textwrap
import types
import typing
from pathlib import Path
from typing import Any

from tauledger.report import json_report
from tauledger.review.changes import Comparison
from tauledger.review.check import NetlistCheck
from tauledger.review.rows import Review

SHIPPED = Path(json_report.__file__).with_name("schema.json")
_COMPLEX = {
    "type": "object",
    "required": ["re", "im"],
    "properties": {"re": {"type": ["number", "null"]}, "im": {"type": ["number", "null"]}},
}


def schema_text() -> str:
    """The whole schema, indented."""
    definitions: dict[str, Any] = {}
    roots: list[Any] = [Review, Comparison]
    documents = [_document(_reference(root, definitions)) for root in roots]
    checks = {"type": "array", "items": _reference(NetlistCheck, definitions)}
    documents.append(
        _document({"type": "object", "required": ["checks"], "properties": {"checks": checks}})
    )
    schema = {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "JSON reports of tauledger",
        "description": "A report, a comparison or a check. Keys may be added without a new format.",
        "anyOf": documents,
        "$defs": dict(sorted(definitions.items())),
    }
    return json.dumps(schema, indent=2, ensure_ascii=False) + "\n"


def _document(content: dict[str, Any]) -> dict[str, Any]:
    form = {"const": json_report.FORMAT}
    head = {"type": "object", "required": ["format"], "properties": {"format": form}}
    return {"allOf": [head, content]}


def _reference(row: type, definitions: dict[str, Any]) -> dict[str, Any]:
    if row.__name__ not in definitions:
        definitions[row.__name__] = {}
        definitions[row.__name__] = _row(row, definitions)
    return {"$ref": f"#/$defs/{row.__name__}"}


def _row(row: Any, definitions: dict[str, Any]) -> dict[str, Any]:
    # The rows name Comparison for type checkers only.
    names_at_hand = {**vars(inspect.getmodule(row)), "Comparison": Comparison}
    hints = typing.get_type_hints(row, names_at_hand)
    notes = _descriptions(row)
    names = [field.name for field in dataclasses.fields(row)]
    properties = {name: _value(hints[name], definitions) for name in names}
    for name, text in notes.items():
        if name in properties:
            properties[name] = {"description": text, **properties[name]}
    head = {"description": inspect.cleandoc(row.__doc__)} if row.__doc__ else {}
    return {**head, "type": "object", "required": names, "properties": properties}


def _value(hint: Any, definitions: dict[str, Any]) -> dict[str, Any]:
    arguments = typing.get_args(hint)
    if typing.get_origin(hint) in (typing.Union, types.UnionType):
        options = [_value(argument, definitions) for argument in arguments]
        return {"anyOf": options}
    if typing.get_origin(hint) is tuple:
        if arguments[-1] is Ellipsis:
            return {"type": "array", "items": _value(arguments[0], definitions)}
        items = [_value(argument, definitions) for argument in arguments]
        count = len(items)
        return {"type": "array", "prefixItems": items, "minItems": count, "maxItems": count}
    if isinstance(hint, type) and issubclass(hint, enum.Enum):
        return {"enum": [str(member.value) for member in hint]}
    if dataclasses.is_dataclass(hint):
        return _reference(typing.cast(type, hint), definitions)
    simple: dict[Any, dict[str, Any]] = {
        str: {"type": "string"},
        bool: {"type": "boolean"},
        int: {"type": "integer"},
        # What is not finite is null.
        float: {"type": ["number", "null"]},
        complex: _COMPLEX,
        type(None): {"type": "null"},
    }
    return simple[hint]


def _descriptions(row: type) -> dict[str, str]:
    """The string under each field."""
    body = ast.parse(textwrap.dedent(inspect.getsource(row))).body[0]
    assert isinstance(body, ast.ClassDef)
    found = {}
    for field, after in zip(body.body, body.body[1:], strict=False):
        if isinstance(field, ast.AnnAssign) and isinstance(after, ast.Expr):
            text = ast.literal_eval(after.value)
            assert isinstance(field.target, ast.Name)
            found[field.target.id] = " ".join(text.split())
    return found


if __name__ == "__main__":
    SHIPPED.write_text(schema_text(), encoding="utf-8")
