"""Spread, choice, stress and temperature as JSON: the fields of their rows."""

from __future__ import annotations

import json

from tauledger.report.json_report import FORMAT, json_fields
from tauledger.review.decisions import Choice, Spread, Stress, TemperatureSweep


def decision_json(decision: Spread | Choice | Stress | TemperatureSweep) -> str:
    """Indented ASCII JSON with sorted keys, ended by a line feed."""
    document = {"format": FORMAT, **json_fields(decision)}
    return json.dumps(document, indent=2, sort_keys=True, allow_nan=False) + "\n"
