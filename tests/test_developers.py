"""DEVELOPERS.md is true: it names every package, and lists every problem code that can be given."""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

from tauledger.configuration.codes import CODES as CONFIGURATION
from tauledger.netlist.codes import CODES as NETLIST
from tauledger.quantity import TRAPS
from tauledger.review.check import RULES
from tauledger.review.limits import CODES as LIMITS
from tauledger.review.rows import REGION_CODE

TOP = Path(__file__).parents[1]
_CODE = re.compile(r"[a-z]+(?:-[a-z]+)+|usage")
_MAKERS = frozenset(
    (
        *("Problem", "Rule", "drawing_fault", "fault", "note", "problem", "refuse", "report"),
        *("warn", "_fault", "_finding", "_raise", "_refuse"),
    )
)
"""What makes a problem; the code comes first."""


@pytest.fixture(scope="module")
def listed() -> dict[str, tuple[str, str]]:
    text = (TOP / "DEVELOPERS.md").read_text(encoding="utf-8")
    rows = re.findall(r"^\| `([a-z-]+)` \| (\w+) \| (.+) \|$", text, re.MULTILINE)
    assert len({code for code, _, _ in rows}) == len(rows)
    return {code: (severity, meaning) for code, severity, meaning in rows}


def test_every_package_and_module_has_its_place() -> None:
    text = (TOP / "DEVELOPERS.md").read_text(encoding="utf-8")
    for path in (TOP / "src/tauledger").iterdir():
        if path.is_dir() and (path / "__init__.py").exists():
            assert f"`{path.name}/`" in text
        elif path.suffix == ".py" and path.stem != "__init__":
            assert f"`{path.name}`" in text


def test_registries_are_listed_as_they_are(listed: dict[str, tuple[str, str]]) -> None:
    for code, meaning in CONFIGURATION.items():
        assert listed[code] == ("error", meaning)
    for code, (severity, meaning) in LIMITS.items():
        assert listed[code] == (severity.value, meaning)
    for rule in RULES:
        assert listed[rule.id][0] == rule.severity.value


def test_every_code_in_the_source_is_listed_and_no_other(
    listed: dict[str, tuple[str, str]],
) -> None:
    made = {code for path in (TOP / "src").rglob("*.py") for code in _made_in(path)}
    assert len(made) > 100
    assert set(listed) == made | {*NETLIST, *TRAPS, *CONFIGURATION, *LIMITS, REGION_CODE}


def _made_in(path: Path) -> Iterator[str]:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if not isinstance(node, ast.Call) or not node.args:
            continue
        function = node.func
        name = function.id if isinstance(function, ast.Name) else getattr(function, "attr", "")
        if name in _MAKERS:
            for part in ast.walk(node.args[0]):
                if isinstance(part, ast.Constant) and _CODE.fullmatch(str(part.value)):
                    yield str(part.value)
