"""The outcome of a check as JSON: every netlist with its limits, findings and whole review."""

from __future__ import annotations

import json
from collections.abc import Sequence

from tauledger.report.json_report import FORMAT, json_fields
from tauledger.review.check import NetlistCheck


def check_json(checks: Sequence[NetlistCheck]) -> str:
    """Indented ASCII JSON with sorted keys, ended by a line feed."""
    document = {"format": FORMAT, "checks": [json_fields(one) for one in checks]}
    return json.dumps(document, indent=2, sort_keys=True, allow_nan=False) + "\n"
