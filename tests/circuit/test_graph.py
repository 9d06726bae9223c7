"""The circuit as a graph: which edges an element makes, and what they carry."""

from __future__ import annotations

from tauledger.circuit import flatten
from tauledger.circuit.graph import element_graph
from tauledger.netlist import parse


def test_every_element_is_an_edge_and_a_device_one_for_each_pair_of_terminals() -> None:
    circuit = flatten(
        parse(
            "title\nV1 in 0 1\nR1 in b 1k\nR2 in b 2k\nQ1 c b e q\nQ2 d d 0 q\nM1 c g e 0 n\n"
            "E1 g 0 b e 10\nL1 c in 1m\nL2 e 0 1m\nK1 L1 L2 0.5\n.model q npn\n.model n nmos"
        )
    )
    graph = element_graph(circuit)
    assert set(graph.nodes) == {"0", "in", "b", "c", "e", "d", "g"}
    edges = {key: {one, other} for one, other, key in graph.edges(keys=True)}
    assert len(edges) == graph.number_of_edges()
    assert edges == {
        "V1": {"in", "0"},
        "R1": {"in", "b"},
        "R2": {"in", "b"},
        "Q1:collector-base": {"c", "b"},
        "Q1:collector-emitter": {"c", "e"},
        "Q1:base-emitter": {"b", "e"},
        "Q2:collector-base": {"d"},
        "Q2:collector-emitter": {"d", "0"},
        "Q2:base-emitter": {"d", "0"},
        "M1:drain-gate": {"c", "g"},
        "M1:drain-source": {"c", "e"},
        "M1:drain-bulk": {"c", "0"},
        "M1:gate-source": {"g", "e"},
        "M1:gate-bulk": {"g", "0"},
        "M1:source-bulk": {"e", "0"},
        "E1": {"g", "0"},
        "L1": {"c", "in"},
        "L2": {"e", "0"},
    }
    by_name = {entry.name: entry for entry in circuit.elements}
    for one, other, data in graph.edges(data=True):
        element = data["element"]
        assert element is by_name[data["name"]]
        assert set(data["nodes"]) == {one, other}
        if "terminals" in data:
            assert len(set(data["terminals"])) == 2
