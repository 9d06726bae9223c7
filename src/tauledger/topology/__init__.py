"""What each part does: signal path, stages, transistor configurations, capacitor roles."""

from __future__ import annotations

from tauledger.topology.model import (
    CapacitorRole,
    SignalPath,
    StageOutline,
    Topology,
    TransistorRole,
)
from tauledger.topology.path import choose_path
from tauledger.topology.recognition import recognise

__all__ = [
    "CapacitorRole",
    "SignalPath",
    "StageOutline",
    "Topology",
    "TransistorRole",
    "choose_path",
    "recognise",
]
