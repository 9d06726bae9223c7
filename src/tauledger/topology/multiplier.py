"""The VBE multiplier: a transistor that holds a voltage and passes the signal as it comes.

One resistor from collector to base and one from base to emitter, and nothing else that drives the
base, make it a voltage source of low resistance between collector and emitter (common practice,
no source).
"""

from __future__ import annotations

from tauledger.circuit.elements import GROUND, Capacitor, Resistor
from tauledger.topology.wiring import Branch, Transistor, Wiring


def is_multiplier(wiring: Wiring, transistor: Transistor) -> bool:
    """Whether the transistor stands off ground with a divider of its own at its base."""
    base, ends = transistor.base, (transistor.collector, transistor.emitter)
    if transistor.family != "bipolar" or len({GROUND, base, *ends}) != 4 or base in wiring.fed:
        return False
    if len(wiring.terminals[base]) != 1:
        return False
    there = wiring.at(base)
    dividing = {b.far(base) for b in there if isinstance(b.element, Resistor)}
    return dividing == set(ends) and all(
        isinstance(b.element, Resistor | Capacitor) and b.far(base) in ends for b in there
    )


def bridged_multiplier(wiring: Wiring, branch: Branch) -> Transistor | None:
    """The multiplier whose collector and emitter a part joins."""
    for transistor, terminal in wiring.terminals.get(branch.first, ()):
        far = {"collector": transistor.emitter, "emitter": transistor.collector}.get(terminal)
        if far == branch.second and is_multiplier(wiring, transistor):
            return transistor
    return None
