"""What only the vertical power MOSFET does: all of it follows ``m``."""

from __future__ import annotations

import pytest

from devices.fet_referee import Bench
from devices.fets import POWER
from tauledger.devices.vdmos import VDMOS


def test_two_devices_in_parallel_have_twice_everything() -> None:
    single, double = (
        Bench(VDMOS, "m", "vdmosn", POWER.models["soft threshold"], {"m": m}).ours([(10.0, 3.0)])
        for m in (1, 2)
    )
    assert double[0]["d"][0] == pytest.approx(2.0 * single[0]["d"][0], rel=1e-9)
    for name in ("gm", "gds", "c_gs", "c_gd", "c_ds", "power"):
        expected = 2.0 * float(single[1].values[name][0, 0])
        assert float(double[1].values[name][0, 0]) == pytest.approx(expected, rel=1e-9), name
