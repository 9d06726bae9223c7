"""What only MOSFETs of one level do: a forward biased bulk, narrow channels, power by hand.

Source of every reference figure: ngspice 39.3 run by the test itself [P: its output].
"""

from __future__ import annotations

import pytest

from devices.fet_referee import CONDUCTANCE, Bench, assert_agreement, close
from devices.fets import LEVEL_1, LEVEL_2
from tauledger.devices.mosfet import MOSFET1
from tauledger.devices.mosfet2 import MOSFET2

NARROW = {"level": 2, "vto": 1.0, "tox": 40e-9, "nsub": 5e15, "delta": 1.2}
BODY = {"level": 1, "vto": 1.0, "kp": 2e-5, "gamma": 0.5, "phi": 0.65, "lambda": 0.02}


@pytest.mark.referee
def test_forward_biased_bulk_has_the_slope_of_ngspices_current() -> None:
    device = Bench(MOSFET1, "m", "nmos", BODY, LEVEL_1.instances[0])
    biases = [(3.0, 2.0, 0.3), (0.2, 2.0, 0.25), (1.0, 1.1, 0.35)]
    assert_agreement(device, biases, {})
    for bias, (_, _, to_bulk) in zip(biases, device.slopes(biases), strict=True):
        values = device.ours([bias])[1]
        # The drain junction's own conductance stands beside GMB.
        assert close(float(values.values["gmb"][0, 0]), to_bulk, CONDUCTANCE, 1e-10)


@pytest.mark.referee
def test_narrow_channel_agrees_for_a_single_device() -> None:
    """In ngspice DELTA acts 1/m times: two devices in parallel are not ``m=2``. Here they are."""
    single = Bench(MOSFET2, "m", "nmos", NARROW, {**LEVEL_2.instances[0], "m": 1})
    assert_agreement(single, LEVEL_2.biases, LEVEL_2.figures)


def test_two_devices_in_parallel_carry_twice_the_current() -> None:
    one, two = (
        Bench(MOSFET2, "m", "nmos", NARROW, {**LEVEL_2.instances[0], "m": m}) for m in (1, 2)
    )
    single, double = (bench.ours([(5.0, 3.0, -1.0)])[0]["d"][0] for bench in (one, two))
    assert double == pytest.approx(2.0 * single, rel=1e-6)


def test_dissipation_is_current_times_voltage_with_the_drain_in_place() -> None:
    """Hand calculation: KP/2·W/L·m·(VGS − VTO)²·VDS."""
    by_hand = 0.5 * 2e-5 * 4.0 * 2 * (3.0 - 1.0) ** 2 * 5.0
    for polarity, sign in (("n", 1.0), ("p", -1.0)):
        values = LEVEL_1.bench("threshold and slope", polarity).ours([(5.0, 3.0, 0.0)])[1].values
        assert float(values["power"][0, 0]) == pytest.approx(by_hand, rel=1e-6)
        assert sign * float(values["id"][0, 0]) > 0
