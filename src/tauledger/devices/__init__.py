"""Device physics: one file each, looked up by model type and level."""

from __future__ import annotations

from importlib import import_module

from tauledger.devices.interface import AnyDevice

__all__ = ["device_for"]

# Module and object of each device. A module is imported when a netlist first needs it: most need
# one, and all of them together would cost a tenth of a cold start.
_DIODE = ("diode", "DIODE")
_BIPOLAR = ("bipolar", "BIPOLAR")
_JFET = ("jfet", "JFET")
_VDMOS = ("vdmos", "VDMOS")
_BY_KIND = {
    ("d", 1): _DIODE,
    ("npn", 1): _BIPOLAR,
    ("pnp", 1): _BIPOLAR,
    ("lpnp", 1): _BIPOLAR,
    ("njf", 1): _JFET,
    ("pjf", 1): _JFET,
    ("nmos", 1): ("mosfet", "MOSFET1"),
    ("pmos", 1): ("mosfet", "MOSFET1"),
    ("nmos", 2): ("mosfet2", "MOSFET2"),
    ("pmos", 2): ("mosfet2", "MOSFET2"),
    ("nmos", 3): ("mosfet3", "MOSFET3"),
    ("pmos", 3): ("mosfet3", "MOSFET3"),
    ("vdmosn", 1): _VDMOS,
    ("vdmosp", 1): _VDMOS,
}


def device_for(kind: str, level: int) -> AnyDevice | None:
    """The device that implements a ``.model`` type and level, or None when there is none."""
    place = _BY_KIND.get((kind, level))
    if place is None:
        return None
    module, name = place
    device: AnyDevice = getattr(import_module(f"tauledger.devices.{module}"), name)
    return device
