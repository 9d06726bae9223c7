"""The test bench: gain and exact corners of many boards of one amplifier at once.

Every board's bias is solved anew, its linear network follows from it, and its corners are the
−3 dB frequencies of that whole network, found by search: no sum of time constants enters. The
gain is taken at the midband frequency of the nominal board, as a specification fixes its test
frequency.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import field, replace

import numpy as np
from numpy.typing import NDArray

from tauledger.analysis import Analysis
from tauledger.bias import BiasSolution, solve_bias
from tauledger.bias.stamps import Variations
from tauledger.circuit.elements import Circuit, IndependentSource
from tauledger.corners.band import HALF_POWER, find_passband, sweep_response
from tauledger.decide.edges import find_edges
from tauledger.decide.judged import RESISTANCES, Wanted, bias_figures, hold_of
from tauledger.decide.networks import Networks
from tauledger.decide.ports import port_resistances
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass
from tauledger.smallsignal import drive_vector, linear_network, response, sense_vector
from tauledger.smallsignal.modes import natural_frequencies
from tauledger.smallsignal.network import LinearNetwork

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.intp]


MOST_TOGETHER = 1000
"""Few enough for the cache, many enough for the array operations (measured)."""
MATRIX_BYTES = 64_000_000
"""Of one matrix of each board measured together."""


@dataclass(frozen=True, slots=True)
class Bench:
    """One amplifier with its signal path and what the nominal board does."""

    circuit: Circuit
    source: str
    output: str
    reference: str
    midband_hz: float
    gain: float
    """|H| of the nominal board at ``midband_hz``."""
    low_hz: float | None
    high_hz: float | None
    size: int
    """Unknowns of its equations."""
    wanted: Wanted = field(default_factory=Wanted)
    """What else is measured on every board."""
    responds: bool = True
    """Whether gain and corners are measured; without them only what else is wanted is."""

    @property
    def most_boards(self) -> int:
        """How many are measured together, so that their matrices fit in memory."""
        return max(1, min(MOST_TOGETHER, MATRIX_BYTES // (8 * (self.size + 1) ** 2)))


@dataclass(frozen=True, slots=True)
class Figures:
    """What was measured, one entry a board; NaN where a figure does not exist."""

    gain: FloatArray
    """|H| at midband, V/V (or Ω when the input is a current)."""
    low_hz: FloatArray
    high_hz: FloatArray
    low_leader: IntArray
    """Index in ``parts`` of the one that moves the corner most; −1 for none."""
    high_leader: IntArray
    parts: tuple[str, ...]
    """Capacitors and inductors, those inside devices included."""
    low_peak: FloatArray
    """Highest |H| between midband and the corner over |H| at midband, at least 1."""
    high_peak: FloatArray
    others: Mapping[str, FloatArray] = field(default_factory=dict)
    """What else the bench wanted, by name; for a part that must set a corner, how strongly it
    holds it, the strongest being 1."""

    @property
    def measured(self) -> NDArray[np.bool_]:
        """Boards whose bias was found."""
        return ~np.isnan(self.gain)

    def figure(self, name: str) -> FloatArray:
        """By name: ``gain``, ``low corner``, ``high corner`` or one of ``others``."""
        columns = {"gain": self.gain, "low corner": self.low_hz, "high corner": self.high_hz}
        return columns[name] if name in columns else self.others[name]


def bench_of(analysis: Analysis) -> Bench:
    """The bench for the path of an analysis.

    Raises ProblemError when the response has no flat passband, so that its edges mean nothing.
    """
    corners, path = analysis.corners, analysis.topology.path
    if corners.exact_gain == 0.0 or not (corners.flat or _has_passband(analysis)):
        raise ProblemError(
            Problem(
                "passband-missing",
                Severity.ERROR,
                f"the path from {path.source} to {path.output_node} has no flat passband, so its "
                "corners have no meaning",
                None,
                "Name another input or output, or remove what tunes the response.",
            )
        )
    return Bench(
        analysis.circuit,
        path.source,
        path.output_node,
        path.output_reference,
        corners.midband_hz,
        corners.exact_gain,
        corners.low.exact_hz,
        corners.high.exact_hz,
        analysis.solution.equations.size,
    )


def _has_passband(analysis: Analysis) -> bool:
    """Whether there is a flat stretch, though sums of time constants do not apply to it."""
    path, network = analysis.topology.path, analysis.network
    source = _source(analysis.circuit, path.source)
    sense = sense_vector(network, path.output_node, path.output_reference)
    whole = response(network, drive_vector(network, source), sense)
    natural = natural_frequencies(whole.conductance, whole.reactance)
    return find_passband(sweep_response(whole, natural)).flat


def _source(circuit: Circuit, name: str) -> IndependentSource:
    source = next(e for e in circuit.elements if e.name == name)
    assert isinstance(source, IndependentSource)
    return source


def measure(
    bench: Bench,
    variations: Variations | None = None,
    temperature_c: float | FloatArray | None = None,
    leaders: bool = False,
) -> Figures:
    """Figures of every board; ``leaders`` also finds which part sets each corner.

    Boards are measured a few at a time, always the same ones together.
    """
    varied = dict(variations or {})
    warmth = None if temperature_c is None else np.atleast_1d(np.asarray(temperature_c, float))
    boards = max([1 if warmth is None else warmth.size, *(v.size for v in varied.values())])
    found = []
    for start in range(0, boards, bench.most_boards):
        some = slice(start, start + bench.most_boards)
        part = {name: value[some] if value.size > 1 else value for name, value in varied.items()}
        at = warmth[some] if warmth is not None and warmth.size > 1 else temperature_c
        try:
            solution = solve(bench, part, at)
        except ProblemError:
            # Not one of them has an operating point; the nominal board has.
            found.append(_nothing(bench, min(bench.most_boards, boards - start)))
            continue
        found.append(measure_solution(bench, solution, leaders, part))
    return found[0] if len(found) == 1 else _joined(found)


def _nothing(bench: Bench, boards: int) -> Figures:
    """Of boards none of which has an operating point."""
    missing, nobody = np.full(boards, np.nan), np.full(boards, -1, dtype=np.intp)
    others = dict.fromkeys(bench.wanted.names, missing)
    return Figures(missing, missing, missing, nobody, nobody, (), missing, missing, others)


def _joined(found: Sequence[Figures]) -> Figures:
    """One after the other; a device capacitance that is zero on some is no part of these."""
    parts = tuple(dict.fromkeys(name for figures in found for name in figures.parts))
    index = {name: i for i, name in enumerate(parts)}

    def leaders(pick: Callable[[Figures], IntArray]) -> IntArray:
        tables = [np.array([*(index[name] for name in f.parts), -1], dtype=np.intp) for f in found]
        return np.concatenate([t[pick(f)] for t, f in zip(tables, found, strict=True)])

    def join(pick: Callable[[Figures], FloatArray]) -> FloatArray:
        return np.concatenate([pick(figures) for figures in found])

    return Figures(
        join(lambda f: f.gain),
        join(lambda f: f.low_hz),
        join(lambda f: f.high_hz),
        leaders(lambda f: f.low_leader),
        leaders(lambda f: f.high_leader),
        parts,
        join(lambda f: f.low_peak),
        join(lambda f: f.high_peak),
        {name: np.concatenate([f.others[name] for f in found]) for name in found[0].others},
    )


def solve(
    bench: Bench,
    variations: Variations | None = None,
    temperature_c: float | FloatArray | None = None,
) -> BiasSolution:
    """The operating point of every board; boards that have none are marked.

    Raises ProblemError when no board has one.
    """
    with np.errstate(all="ignore"):
        return solve_bias(bench.circuit, variations, temperature_c)


def measure_solution(
    bench: Bench,
    solution: BiasSolution,
    leaders: bool = False,
    variations: Variations | None = None,
) -> Figures:
    """Figures of every board of a bias solution, which was found with ``variations``."""
    with np.errstate(all="ignore"):
        network = linear_network(solution)
    alive = np.flatnonzero(
        solution.state.converged & np.isfinite(network.conductance).all(axis=(1, 2))
    )
    found = _responses(bench, network, alive, leaders)
    others = bias_figures(bench.wanted.figures, solution, alive)
    others |= _resistances(bench, network, alive, variations or {})
    others |= dict(zip(_holders(bench), found[_FIXED:], strict=True))
    boards = solution.equations.boards
    return replace(
        _figures([_spread_out(values, alive, boards) for values in found[:_FIXED]], network),
        others={name: _spread_out(values, alive, boards) for name, values in others.items()},
    )


def _responses(
    bench: Bench, network: LinearNetwork, alive: IntArray, leaders: bool
) -> list[FloatArray]:
    """Gain, corners and leaders of the boards alive, with a pivoting solver where it takes one."""
    if not bench.responds:
        return [np.full(alive.size, np.nan) for _ in range(_FIXED + len(_holders(bench)))]
    networks = Networks.of(network, alive, *_ends(bench, network))
    found, unsure = _measure(bench, networks, network, leaders)
    if unsure.any():
        # Boards on which the common order of elimination lost digits.
        redo = np.flatnonzero(unsure)
        dense = Networks.of(network, alive[redo], *_ends(bench, network), dense=True)
        again, _ = _measure(bench, dense, network, leaders)
        for whole, part in zip(found, again, strict=True):
            whole[redo] = part
    return found


def _resistances(
    bench: Bench, network: LinearNetwork, alive: IntArray, variations: Variations
) -> dict[str, FloatArray]:
    ports = bench.wanted.ports
    asked = [f.name for f in bench.wanted.figures if f.kind in RESISTANCES]
    if ports is None or not asked:
        return {}
    ends = _ends(bench, network)
    found = port_resistances(ports, network, alive, *ends, variations)
    return {name: value for name, value in zip(RESISTANCES, found, strict=True) if name in asked}


def _holders(bench: Bench) -> list[str]:
    """Names of what :func:`_measure` gives after its figures, in its order."""
    return [h.name for end in ("low", "high") for h in bench.wanted.holders if h.end == end]


def measure_values(
    bench: Bench, network: LinearNetwork, varied: Mapping[str, FloatArray]
) -> Figures:
    """Figures of boards that differ from ``network`` only in the named capacitors, (boards,) each.

    The bias does not depend on them, so it is not solved again.
    """
    boards = max(len(values) for values in varied.values())
    networks = Networks.with_values(network, *_ends(bench, network), varied, boards)
    found, unsure = _measure(bench, networks, network, leaders=False)
    if unsure.any():
        dense = replace(networks, plan=None)
        found, _ = _measure(bench, dense, network, leaders=False)
    return _figures(found[:_FIXED], network)


_FIXED = 7
"""Figures of :func:`_measure` that are there whatever is wanted."""


def _figures(found: Sequence[FloatArray], network: LinearNetwork) -> Figures:
    gain, low, high, low_peak, high_peak, first, second = found
    leaders = [np.nan_to_num(values, nan=-1.0).astype(np.intp) for values in (first, second)]
    names = tuple(part.name for part in network.parts)
    return Figures(gain, low, high, leaders[0], leaders[1], names, low_peak, high_peak)


def _ends(bench: Bench, network: LinearNetwork) -> tuple[FloatArray, FloatArray]:
    source = _source(bench.circuit, bench.source)
    return drive_vector(network, source), sense_vector(network, bench.output, bench.reference)


@np.errstate(all="ignore")
def _measure(
    bench: Bench, networks: Networks, network: LinearNetwork, leaders: bool
) -> tuple[list[FloatArray], NDArray[np.bool_]]:
    """Gain, corners, leaders and holds of the boards alive, and which of them to solve again."""
    gain, middle_moves, doubt = networks.probe(bench.midband_hz, network.parts, leaders)
    target = np.log(gain * HALF_POWER)
    edges, peaks, winners, holds = [], [], [], []
    names = [part.name for part in network.parts]
    for nominal, upward in ((bench.low_hz, False), (bench.high_hz, True)):
        wanted = [h.part for h in bench.wanted.holders if h.end == ("high" if upward else "low")]
        held = [np.full(networks.boards, np.nan) for _ in wanted]
        edge = np.full(networks.boards, np.nan)
        peak = np.full(networks.boards, -np.inf)
        winner = np.full(networks.boards, np.nan)
        if nominal is not None and networks.boards:
            edge, peak = find_edges(networks.level, target, bench.midband_hz, nominal, upward)
            at = np.where(np.isnan(edge), nominal, edge)
            _, moves, worse = networks.probe(at, network.parts, leaders)
            doubt = np.maximum(doubt, worse)
            if leaders and len(moves):
                winner = np.argmax(np.abs(moves - middle_moves), axis=0).astype(float)
                winner[np.isnan(edge)] = np.nan
                held = [hold_of(part, names, moves - middle_moves, upward) for part in wanted]
                for hold in held:
                    hold[np.isnan(edge)] = np.nan
        edges.append(edge)
        peaks.append(np.maximum(np.exp(peak) / gain, 1.0))
        winners.append(winner)
        holds += held
    return [gain, *edges, *peaks, *winners, *holds], ~(doubt <= 1e-8)


def _spread_out(values: FloatArray, alive: IntArray, boards: int) -> FloatArray:
    whole = np.full(boards, np.nan)
    whole[alive] = values
    return whole
