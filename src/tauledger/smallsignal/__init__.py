"""Operating point → linear network, its exact response and natural frequencies."""

from tauledger.smallsignal.linearise import linear_network
from tauledger.smallsignal.network import LinearNetwork, ReactivePart
from tauledger.smallsignal.response import (
    Response,
    condensed,
    drive_vector,
    edge_sensitivity,
    gain_sensitivity,
    natural_frequencies,
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
    "device_admittances",
    "drive_vector",
    "edge_sensitivity",
    "gain_sensitivity",
    "linear_network",
    "natural_frequencies",
    "response",
    "sense_vector",
]
