"""The table of problem codes in DEVELOPERS.md is that of the code."""

from __future__ import annotations

import re
from pathlib import Path

from tauledger.netlist.codes import CODES, problem
from tauledger.quantity import TRAPS

DEVELOPERS = Path(__file__).parents[2] / "DEVELOPERS.md"


def test_the_table_of_codes_is_that_of_the_code() -> None:
    rows = re.findall(r"^\| `([a-z-]+)` \| (\w+) \| (.+) \|$", DEVELOPERS.read_text(), re.MULTILINE)
    listed = {code: (severity, meaning) for code, severity, meaning in rows}
    for code, (severity, meaning) in CODES.items():
        assert listed.get(code) == (severity.value, meaning)
    for code in TRAPS:
        assert listed[code][0] == problem(code, "x", None, "").severity.value
