"""Netlist → flat :class:`Circuit`: parameters, subcircuits and models resolved; its graph.

Readings chosen where tools differ; ngspice-39, measured, decides unless said otherwise:

- The first line is the title, but an ``.include`` there is followed.
- ``$`` begins a comment behind a blank; ``$N_0001`` (``$G_``, ``$D_``) is a node all the same,
  since schematic exporters write such names.
- ``1M`` is milli and ``1F`` femto, with a warning. ``4k7`` is 4700 as IEC 60062 says (ngspice
  reads 4000), with a warning. ``1-3k`` is refused.
- Of two parameters of one name the last counts, of two models or subcircuits the first.
- A parameter unknown in a subcircuit is looked up where it is called; a model, function or
  subcircuit where it is defined.
- A source without a DC value has that of its transient function at time zero.
- ``POLY(1)`` with one coefficient is a constant (older simulators took it as the gain).
- A resistor of 0 Ω is one of 1 mΩ.
- ``.param a = 2 * b`` without braces is read whole (ngspice stops at the blank), with a warning.
- ``m=`` on a subcircuit's call is not used, with a warning (ngspice multiplies each device).
- Connectors, integrated circuits and other parts no analysis here knows are left out one by one,
  each with a warning.
"""

from tauledger.circuit.flatten import flatten

__all__ = ["flatten"]
