"""Circuit → operating point."""

from tauledger.bias.point import DevicePoint, OperatingPoint
from tauledger.bias.solver import BiasSolution, solve_bias

__all__ = ["BiasSolution", "DevicePoint", "OperatingPoint", "solve_bias"]
