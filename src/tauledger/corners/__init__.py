"""The time-constant engine."""

from tauledger.corners.engine import find_corners
from tauledger.corners.handwork import HandExpression, hand_expressions, workbench
from tauledger.corners.model import Corner, Corners, PartAccount
from tauledger.corners.stages import StageFormula, stage_formulas

__all__ = [
    "Corner",
    "Corners",
    "HandExpression",
    "PartAccount",
    "StageFormula",
    "find_corners",
    "hand_expressions",
    "stage_formulas",
    "workbench",
]
