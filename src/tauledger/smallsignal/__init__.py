"""Operating point → linear network, its exact response and natural frequencies."""

from tauledger.smallsignal.linearise import linear_network
from tauledger.smallsignal.modes import natural_frequencies
from tauledger.smallsignal.network import LinearNetwork, ReactivePart
from tauledger.smallsignal.response import (
    Response,
    condensed,
    decomposed,
    drive_vector,
    edge_sensitivity,
    gain_sensitivity,
    response,
    sense_vector,
)
from tauledger.smallsignal.terminals import DeviceAdmittance, device_admittances

__all__ = [
    "DeviceAdmittance",
    "LinearNetwork",
    "ReactivePart",
    "Response",
    "condensed",
    "decomposed",
    "device_admittances",
    "drive_vector",
    "edge_sensitivity",
    "gain_sensitivity",
    "linear_network",
    "natural_frequencies",
    "response",
    "sense_vector",
]
