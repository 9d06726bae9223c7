"""The library's two verbs: read a netlist, analyse it."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TYPE_CHECKING, NamedTuple

from tauledger.bias import BiasSolution, OperatingPoint, solve_bias
from tauledger.circuit import flatten
from tauledger.circuit.elements import (
    BehaviouralSource,
    Circuit,
    ControlledSource,
    IndependentSource,
    VoltageSource,
)
from tauledger.circuit.graph import find_floating_nodes
from tauledger.circuit.islands import restrict
from tauledger.corners import Corners, find_corners, hand_expressions, stage_formulas, workbench
from tauledger.netlist import Netlist
from tauledger.netlist import read as read_netlist
from tauledger.problems import Problem, ProblemError
from tauledger.records import dataclass
from tauledger.review.assemble import path_row, review_of
from tauledger.review.rows import Review
from tauledger.smallsignal import (
    LinearNetwork,
    Response,
    decomposed,
    device_admittances,
    drive_vector,
    linear_network,
    response,
    sense_vector,
)
from tauledger.topology import SignalPath, Topology, choose_path, recognise
from tauledger.version import VERSION

if TYPE_CHECKING:
    from tauledger.configuration.settings import PathSettings


@dataclass(frozen=True, slots=True)
class Analysis:
    """One netlist, analysed for one signal path; every stage of the data flow is kept."""

    netlist: Netlist
    circuit: Circuit
    solution: BiasSolution
    network: LinearNetwork
    topology: Topology
    corners: Corners
    review: Review
    asked_midband_hz: float | None = None
    """Where the gain was asked to be judged; None when that was left to the response."""

    @property
    def point(self) -> OperatingPoint:
        """The operating point."""
        return self.solution.point

    def _repr_html_(self) -> str:
        """What a notebook shows of it."""
        from tauledger.report.notebook import notebook_html

        return notebook_html(self.review)


def read(path: str | os.PathLike[str]) -> Netlist:
    """Read a netlist file.

    Raises
    ------
    ProblemError
        When the file cannot be read as a netlist.
    """
    return read_netlist(Path(path))


def analyze(
    netlist: Netlist,
    input: str | None = None,
    output: str | None = None,
    settings: PathSettings | None = None,
    midband_hz: float | None = None,
    square_wave_hz: float | None = None,
) -> Analysis:
    """Bias point, stages and corners of the path from ``input`` to ``output``.

    Parameters
    ----------
    netlist
        What :func:`read` gave.
    input
        Name of the source that drives the path; left out, the source with an AC value.
    output
        Output node, or ``a,b`` for the voltage between two; left out, what the netlist prints,
        a node named as an output, or the one load behind a coupling capacitor.
    settings
        What the configuration adds to the netlist, as ``find_settings`` of
        :mod:`tauledger.configuration.choice` gives it; ``input`` and ``output`` count before it.
    midband_hz
        Where the gain is meant to be judged, for a path that is not flat by intent; left out,
        what ``settings`` say, or else the middle of the flat stretch.
    square_wave_hz
        Frequency of a square wave whose droop is told; left out, a hundred times the low corner.

    Raises
    ------
    ProblemError
        With every problem that stops the analysis, each with its place and what to do.
    """
    circuit, input, output = _completed(netlist, settings, input, output)
    if midband_hz is None and settings is not None and settings.midband is not None:
        midband_hz = settings.midband.value
    return analyze_circuit(netlist, circuit, input, output, midband_hz, square_wave_hz)


def analyze_circuit(
    netlist: Netlist,
    circuit: Circuit,
    input: str | None = None,
    output: str | None = None,
    midband_hz: float | None = None,
    square_wave_hz: float | None = None,
) -> Analysis:
    """Analyse a flat circuit, which may differ from what its netlist says (one part changed, say).

    Raises ProblemError as :func:`analyze` does.
    """
    found = _solve(circuit, input, output, midband_hz, square_wave_hz)
    path, solution, network, exact, held, corners = found
    topology = recognise(circuit, solution.point, path)
    admittances = device_admittances(solution)
    bench = workbench(circuit, network, solution.point, admittances, held)
    row = path_row(
        circuit,
        solution.point,
        network,
        admittances,
        topology,
        corners,
        exact,
        hand_expressions(bench, corners, exact),
        stage_formulas(bench, network, topology, corners),
    )
    review = review_of(circuit, solution.point, topology, (row,), VERSION)
    stages = netlist, circuit, solution, network, topology, corners, review
    return Analysis(*stages, asked_midband_hz=midband_hz)


def corners_of(
    circuit: Circuit,
    input: str | None = None,
    output: str | None = None,
    midband_hz: float | None = None,
) -> Corners:
    """The corners of a flat circuit alone, without the words of a report; otherwise as above."""
    return _solve(circuit, input, output, midband_hz).corners


class _Solved(NamedTuple):
    """Every figure of one path; the words are not found yet."""

    path: SignalPath
    solution: BiasSolution
    network: LinearNetwork
    response: Response
    held: list[tuple[int, int]]
    """Node pairs whose voltage a source dictates."""
    corners: Corners


def _solve(
    circuit: Circuit,
    input: str | None,
    output: str | None,
    midband_hz: float | None,
    square_wave_hz: float | None = None,
) -> _Solved:
    if floating := find_floating_nodes(circuit):
        # A connector that was left out is the usual cause.
        raise ProblemError(*floating, *_left_out(circuit))
    path = choose_path(circuit, input, output)
    solution = solve_bias(circuit)
    network = linear_network(solution)
    source = next(e for e in circuit.elements if e.name == path.source)
    assert isinstance(source, IndependentSource)
    drive = drive_vector(network, source)
    sense = sense_vector(network, path.output_node, path.output_reference)
    exact = decomposed(response(network, drive, sense))
    held = _held_pairs(circuit, network)
    supplies = _supply_pairs(circuit, network, path.source)
    corners = find_corners(exact, network.parts, held, supplies, midband_hz, square_wave_hz)
    return _Solved(path, solution, network, exact, held, corners)


def _left_out(circuit: Circuit) -> list[Problem]:
    return [found for found in circuit.problems if found.code == "element-left-out"]


def _completed(
    netlist: Netlist, settings: PathSettings | None, input: str | None, output: str | None
) -> tuple[Circuit, str | None, str | None]:
    """The one circuit with the path, whole, and what is known of the path's ends."""
    if settings is None:
        return restrict(flatten(netlist, keep_unread=True), input), input, output
    from tauledger.circuit.completion import add_models, complete
    from tauledger.circuit.generic import generic_models

    substitute = generic_models(settings.generic.kinds) if settings.generic else None
    flat = flatten(add_models(netlist, settings), substitute, keep_unread=True)
    circuit, source, sink = complete(flat, settings)
    return restrict(circuit, input or source), input or source, output or sink


def _held_pairs(circuit: Circuit, network: LinearNetwork) -> list[tuple[int, int]]:
    """Node pairs whose voltage a source dictates."""
    return [
        (network.index(e.nodes[0]), network.index(e.nodes[1]))
        for e in circuit.elements
        if isinstance(e, VoltageSource)
        or (isinstance(e, ControlledSource) and e.letter in "EH")
        or (isinstance(e, BehaviouralSource) and e.output == "voltage")
    ]


def _supply_pairs(circuit: Circuit, network: LinearNetwork, driven: str) -> list[tuple[int, int]]:
    """Node pairs that an independent voltage source other than the driven one holds together."""
    return [
        (network.index(e.nodes[0]), network.index(e.nodes[1]))
        for e in circuit.elements
        if isinstance(e, VoltageSource) and e.name != driven
    ]
