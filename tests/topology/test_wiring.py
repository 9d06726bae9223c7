"""The graph that recognition walks: which nodes are one for the signal, and what leads where."""

from __future__ import annotations

from tauledger.topology.wiring import wire
from topology.bench import circuit_of


def test_sources_join_nodes_and_every_two_terminal_part_is_an_edge() -> None:
    circuit = circuit_of(
        "VCC vcc 0 9\nVIN in 0 AC 1\nVB out low 2\nVM s t 0\nF1 out 0 VM 5\nR1 in out 1k\n"
        "R2 vcc low 2k\nC1 out low 1u\nL1 in s 1m\nD1 t 0 DS\nR0 t u 0\nQ1 vcc in u N\n"
    )
    wiring = wire(circuit, "VIN", ("out",))
    edges = {name: {one, other} for one, other, name in wiring.graph.edges(keys=True)}
    assert edges == {
        "R1": {"in", "out"},
        "R2": {"0", "out"},
        "C1": {"out"},
        "L1": {"in", "s"},
        "D1": {"t", "0"},
        "R0": {"t", "u"},
    }
    assert wiring.held == {"0", "vcc"}
    assert [b.element.name for b in wiring.between("out", "in")] == ["R1"]
    assert not list(wiring.between("out", "u"))
    assert sorted(b.element.name for b in wiring.at("out")) == ["C1", "R1", "R2"]
    assert [t.name for t in wiring.transistors_at("u", "emitter")] == ["Q1"]
    assert [t.name for t in wiring.transistors_at("0", "collector")] == ["Q1"]


def test_of_joined_nodes_ground_names_all_then_a_preferred_one_then_the_first() -> None:
    circuit = circuit_of("V1 a b 1\nV2 c b 1\nV3 d 0 1\nV4 e d 1\nR1 a e 1k\nV5 f g 1\n")
    joined = wire(circuit, "", ("c",)).joined
    assert joined == {
        "0": "0", "a": "c", "b": "c", "c": "c", "d": "0", "e": "0", "f": "f", "g": "f",
    }  # fmt: skip
