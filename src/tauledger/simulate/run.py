"""From a flat circuit and a signal path to what ngspice makes of them."""

from __future__ import annotations

import numpy as np

from tauledger.circuit.elements import BipolarTransistor, Circuit, JunctionFet, MosFet
from tauledger.simulate.deck import print_deck
from tauledger.simulate.library import require_ngspice
from tauledger.simulate.process import Limits, run_child
from tauledger.simulate.simulation import Simulation
from tauledger.topology.model import SignalPath

_WIDE_HZ = (1e-3, 1e11)
_ASIDE = 1e6
"""The sweep reaches at least this factor to either side of midband."""


def simulate(
    circuit: Circuit, path: SignalPath, midband_hz: float, limits: Limits | None = None
) -> Simulation:
    """Operating point and frequency response of one path in ngspice, in a child process.

    Parameters
    ----------
    circuit
        The flat circuit; a deck is printed afresh from its elements.
    path
        Source and output of the response.
    midband_hz
        Where the gain is taken from which the corners are 3 dB down.
    limits
        What the child may use.

    Raises
    ------
    ProblemError
        When PySpice or ngspice is missing, an element cannot be printed, ngspice finds no result,
        or the child had to be stopped.
    """
    library = require_ngspice()
    deck = print_deck(circuit, path.source)
    own = {node: name for name, node in deck.nodes.items()} | {"0": "0"}
    amplifying = {
        element.name
        for element in circuit.elements
        if isinstance(element, BipolarTransistor | JunctionFet | MosFet)
    }
    task = {
        "library": library,
        "deck": deck.lines,
        "transistors": [name for name, full in deck.elements.items() if full in amplifying],
        "output": [own[path.output_node], own[path.output_reference]],
        "midband_hz": midband_hz,
        "lowest_hz": min(_WIDE_HZ[0], midband_hz / _ASIDE),
        "highest_hz": max(_WIDE_HZ[1], midband_hz * _ASIDE),
    }
    found = run_child(task, limits or Limits(), {**deck.nodes, **deck.elements})
    return Simulation(
        version=found["version"],
        nodes={deck.nodes[name]: v for name, v in found["nodes"].items() if name in deck.nodes},
        transconductance_s={
            deck.elements[name]: gm for name, gm in found["transconductance_s"].items()
        },
        frequency_hz=np.array(found["frequency_hz"]),
        transfer=np.array(found["real"]) + 1j * np.array(found["imaginary"]),
        midband_hz=midband_hz,
        gain=complex(*found["gain"]),
        low_hz=found["low_hz"],
        high_hz=found["high_hz"],
    )
