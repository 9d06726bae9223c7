"""From circuit, operating point and signal path to what each part does."""

from __future__ import annotations

from tauledger.bias.point import OperatingPoint
from tauledger.circuit.elements import GROUND, Circuit
from tauledger.topology.feedback import feedback_notes, path_notes
from tauledger.topology.flow import Flow, follow
from tauledger.topology.layout import lay_out
from tauledger.topology.model import SignalPath, Topology
from tauledger.topology.roles import capacitor_roles
from tauledger.topology.stages import find_stages, outlines, transistor_roles
from tauledger.topology.transistors import find_groups, settle_pairs
from tauledger.topology.wiring import Wiring, wire


def recognise(circuit: Circuit, operating_point: OperatingPoint, path: SignalPath) -> Topology:
    """Find the way of the signal, the stages, and the part every transistor and capacitor plays.

    Nothing here needs the operating point but the region a device is in and, to weigh one route
    against another, its transconductance. Never raises for an odd circuit: where the signal finds
    no way, ``path_nodes`` and ``stages`` are empty and a note says so. The work grows with the
    number of elements times its logarithm.
    """
    preferred = (path.output_node, path.output_reference, path.input_node)
    wiring = wire(circuit, path.source, preferred, operating_point)
    start = wiring.joined.get(path.input_node, path.input_node)
    end = wiring.joined.get(path.output_node, path.output_node)
    flow = _follow(wiring, path, start, end)
    groups = settle_pairs(find_groups(wiring), flow.steps)
    stages = find_stages(wiring, groups, flow)
    transistors = transistor_roles(wiring, groups, flow, stages)
    layout = lay_out(wiring, flow, stages, transistors, path)
    capacitors, grounded = capacitor_roles(layout)
    return Topology(
        path,
        flow.nodes or ((start,) if start == end and start in wiring.joined else ()),
        transistors,
        outlines(stages, flow),
        capacitors,
        (*path.notes, *path_notes(layout, grounded), *feedback_notes(layout, grounded)),
    )


def _follow(wiring: Wiring, path: SignalPath, start: str, end: str) -> Flow:
    """The way to the output; else to its other node, or from the other node of the source."""
    flow = follow(wiring, start, end)
    if flow.steps or start == end:
        return flow
    other_start = [node for node in wiring.sources.get(path.source.casefold(), ()) if node != start]
    other_end = wiring.joined.get(path.output_reference, GROUND)
    for pair in ((start, other_end), *((node, end) for node in other_start)):
        if GROUND not in pair and (found := follow(wiring, *pair)).steps:
            return found
    return flow
