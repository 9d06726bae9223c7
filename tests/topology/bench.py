"""Build a circuit from netlist text as users do, and check what recognition says of it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from tauledger.bias import solve_bias
from tauledger.circuit import flatten
from tauledger.circuit.elements import Circuit
from tauledger.netlist import parse
from tauledger.topology import Topology, choose_path, recognise

MODELS = """
.model N NPN (is=10f bf=200 vaf=80 cje=10p cjc=4p tf=0.4n)
.model P PNP (is=10f bf=150 vaf=60 cje=10p cjc=5p tf=0.6n)
.model JN NJF (vto=-2 beta=1m lambda=5m cgs=4p cgd=2p)
.model MN NMOS (level=1 vto=1 kp=2m lambda=10m cgso=0.3n cgdo=0.2n)
.model MP PMOS (level=1 vto=-1 kp=2m lambda=10m cgso=0.3n cgdo=0.2n)
.model DS D (is=5n n=1.8)
"""
"""Invented model cards, one for each kind."""

Stage = tuple[str, str, str, str]
"""Transistors with spaces between, configuration, input node, output node."""


def circuit_of(netlist: str) -> Circuit:
    return flatten(parse(f"bench\n{netlist}{MODELS}.end\n", "bench.cir"))


def look(netlist: str, input_name: str | None = None, output: str | None = None) -> Topology:
    """Recognise a circuit given as statements without title, models and ``.end``."""
    circuit = circuit_of(netlist)
    return recognise(circuit, solve_bias(circuit).point, choose_path(circuit, input_name, output))


def check(
    netlist: str,
    transistors: Mapping[str, str],
    capacitors: Mapping[str, str],
    stages: Sequence[Stage],
) -> Topology:
    """Assert the configuration of every transistor, the role of every capacitor, every stage."""
    found = look(netlist)
    assert {n: r.configuration for n, r in found.transistors.items()} == dict(transistors)
    assert {n: r.role for n, r in found.capacitors.items()} == dict(capacitors)
    assert [
        (" ".join(s.transistors), s.configuration, s.input_node, s.output_node)
        for s in found.stages
    ] == list(stages)
    for name, role in found.capacitors.items():
        assert name in role.reason
    return found
