"""MOS field-effect transistor, SPICE level 1: the square law with body effect.

With ``VT = VBI + GAMMA·√(PHI − VBS)``, overdrive ``v = VGS − VT`` (zero when negative) and
``w = min(VDS, v)``::

    ID = KP·(W/L)·(1 + LAMBDA·VDS)·w·(v − w/2)

For VBS > 0 the square root continues along its tangent at zero, as in SPICE, down to zero. There
ngspice 39 reports ``gmbs = gm·GAMMA/(2·√(…))``, larger than the derivative of its own current;
here GMB is that derivative.

Source: H. Shichman and D. A. Hodges, IEEE J. Solid-State Circuits SC-3 (1968) 285 [M]; agrees
with ngspice 39 in tests/devices/test_mosfet.py [P: its output].
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tauledger.devices.interface import Card, FloatArray, stack
from tauledger.devices.mosfet_common import Channel, Mosfet
from tauledger.devices.mosfet_process import Process, Surroundings
from tauledger.records import dataclass


@dataclass(frozen=True, slots=True)
class SquareLaw:
    """Constants of the level-1 channel, arrays (boards or 1, n)."""

    beta: FloatArray
    modulation_per_v: FloatArray
    gamma: FloatArray
    phi_v: FloatArray
    builtin_v: FloatArray


class SquareLawMosfet(Mosfet[SquareLaw]):
    """The level-1 MOSFET, both polarities."""

    name = "mosfet1"
    side_grading = 0.5

    def law(self, cards: Sequence[Card], channel: Process, around: Surroundings) -> SquareLaw:
        return SquareLaw(
            beta=channel.beta,
            modulation_per_v=stack(cards, "lambda", 0.0),
            gamma=channel.gamma,
            phi_v=channel.phi_v,
            builtin_v=channel.builtin_v,
        )

    def channel(self, law: SquareLaw, vgs: FloatArray, vds: FloatArray, vbs: FloatArray) -> Channel:
        reverse = np.minimum(vbs, 0.0)
        root = np.sqrt(law.phi_v - reverse)
        slope = 0.5 / root
        root = root - (vbs - reverse) * slope
        slope = np.where(root > 0.0, slope, 0.0)
        threshold = law.builtin_v + law.gamma * np.maximum(root, 0.0)
        overdrive = np.maximum(vgs - threshold, 0.0)
        used = np.minimum(vds, overdrive)
        charge = used * (overdrive - 0.5 * used)
        longer = law.beta * (1.0 + law.modulation_per_v * vds)
        gm = longer * used
        return Channel(
            current=longer * charge,
            gm=gm,
            gds=longer * (overdrive - used) + law.beta * law.modulation_per_v * charge,
            gmb=gm * law.gamma * slope,
            threshold=threshold,
            saturation=overdrive,
        )


MOSFET1 = SquareLawMosfet()
