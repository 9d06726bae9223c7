"""Text → :class:`Netlist`: files, encodings, includes, logical lines, statements with positions."""

from tauledger.netlist.blocks import Netlist, Subcircuit
from tauledger.netlist.reader import parse, read

__all__ = ["Netlist", "Subcircuit", "parse", "read"]
