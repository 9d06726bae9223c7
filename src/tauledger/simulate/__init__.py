"""ngspice as an optional referee: the same circuit, solved by another program.

The circuit is printed afresh from its parsed elements (:mod:`tauledger.simulate.deck`) and run in
a child process with limits (:mod:`tauledger.simulate.process`). No text of the netlist gets there.
"""

from __future__ import annotations

from tauledger.simulate.compare import beside
from tauledger.simulate.library import require_ngspice
from tauledger.simulate.process import Limits
from tauledger.simulate.run import simulate
from tauledger.simulate.simulation import Simulation

__all__ = ["Limits", "Simulation", "beside", "require_ngspice", "simulate"]
