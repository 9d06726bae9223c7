"""Device physics: one file each, looked up by model type and level."""

from __future__ import annotations

from tauledger.devices.bipolar import BIPOLAR
from tauledger.devices.diode import DIODE
from tauledger.devices.interface import AnyDevice
from tauledger.devices.jfet import JFET
from tauledger.devices.mosfet import MOSFET1
from tauledger.devices.mosfet2 import MOSFET2
from tauledger.devices.mosfet3 import MOSFET3
from tauledger.devices.vdmos import VDMOS

__all__ = ["device_for"]

_BY_KIND: dict[tuple[str, int], AnyDevice] = {
    ("d", 1): DIODE,
    ("npn", 1): BIPOLAR,
    ("pnp", 1): BIPOLAR,
    ("lpnp", 1): BIPOLAR,
    ("njf", 1): JFET,
    ("pjf", 1): JFET,
    ("nmos", 1): MOSFET1,
    ("pmos", 1): MOSFET1,
    ("nmos", 2): MOSFET2,
    ("pmos", 2): MOSFET2,
    ("nmos", 3): MOSFET3,
    ("pmos", 3): MOSFET3,
    ("vdmosn", 1): VDMOS,
    ("vdmosp", 1): VDMOS,
}


def device_for(kind: str, level: int) -> AnyDevice | None:
    """The device that implements a ``.model`` type and level, or None when there is none."""
    return _BY_KIND.get((kind, level))
