"""Netlist → flat :class:`Circuit`: parameters, subcircuits and models resolved; its graph."""

from tauledger.circuit.flatten import flatten

__all__ = ["flatten"]
