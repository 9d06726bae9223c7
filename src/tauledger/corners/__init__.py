"""The time-constant engine."""

from tauledger.corners.engine import find_corners
from tauledger.corners.model import Corner, Corners, PartAccount

__all__ = ["Corner", "Corners", "PartAccount", "find_corners"]
