"""What only a junction transistor does: its square law by hand, its limited gate junctions."""

from __future__ import annotations

import numpy as np
import pytest

from devices.fets import JUNCTION
from tauledger.devices.jfet import JFET


def test_drain_current_by_hand() -> None:
    """BETA·(VGS − VTO)² with the sign of the polarity, and gm = 2·BETA·(VGS − VTO)."""
    for polarity, sign in (("n", 1.0), ("p", -1.0)):
        found = JUNCTION.bench("square law", polarity).ours([(5.0, -1.0)])[1]
        assert float(found.values["id"][0, 0]) == pytest.approx(sign * 1e-3, rel=1e-6)
        assert float(found.values["gm"][0, 0]) == pytest.approx(2e-3)
        assert float(found.values["r_o"][0, 0]) == np.inf


def test_no_step_takes_a_gate_junction_far() -> None:
    wild = np.array(JUNCTION.wild)[:, None]
    parameters = JUNCTION.bench("every parameter").prepared()
    near = JFET.limit(parameters, wild, np.zeros_like(wild))
    assert np.abs(near[..., :2]).max() < 20.0
