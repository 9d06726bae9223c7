"""Every sample against ngspice: operating point, device figures, midband gain and corners.

Our corner and ngspice's are the same thing: the frequency nearest to midband at which the gain
has fallen by 3.01 dB (to 1/√2) from its value at ``midband_hz``, which the report states.
"""

from __future__ import annotations

import functools
import math
from pathlib import Path

import pytest

import ngspice
from tauledger.analysis import Analysis, analyze, read
from tauledger.bias.point import DevicePoint
from tauledger.review.rows import CornerRow, PathRow

pytestmark = pytest.mark.referee

SAMPLES = Path(__file__).parents[2] / "samples"
NETLISTS = sorted(SAMPLES.glob("*/*.cir"))
STEP = 1.03
"""Factor on a part's value to see what it moves."""

FIGURES: dict[str, dict[str, tuple[str, int]]] = {
    "bjt": {
        "gm": ("gm", 1),
        "r_pi": ("gpi", -1),
        "r_o": ("go", -1),
        "c_pi": ("cpi", 1),
        "c_mu": ("cmu", 1),
    },
    # ngspice 39 keeps the two junction capacitances of a JFET under the names of their charges.
    "jfet": {"gm": ("gm", 1), "r_o": ("gds", -1), "c_gs": ("qgs", 1), "c_gd": ("qgd", 1)},
    "mosfet1": {
        "gm": ("gm", 1),
        "gmb": ("gmb", 1),
        "r_o": ("gds", -1),
        "c_gs": ("cgs", 1),
        "c_gd": ("cgd", 1),
    },
    "diode": {"gd": ("gd", 1), "cd": ("cd", 1)},
}
"""Device kind to our figure, ngspice's name for it, and the power that makes them equal."""


@functools.cache
def analysis_of(netlist: Path) -> Analysis:
    return analyze(read(netlist))


def output_of(analysis: Analysis) -> str:
    """The output as two nodes, the second of them ground as a rule."""
    path = analysis.topology.path
    return f"{path.output_node},{path.output_reference}"


def expected_figures(device: DevicePoint, point: ngspice.Point) -> dict[str, float]:
    return {
        ours: point.figures[f"@{ngspice.flat_name(device.name)}[{theirs}]"] ** power
        for ours, (theirs, power) in FIGURES[device.kind].items()
    }


@functools.cache
def referee_point(netlist: Path) -> ngspice.Point:
    return ngspice.operating_point(
        netlist,
        [
            f"@{ngspice.flat_name(device.name)}[{theirs}]"
            for device in analysis_of(netlist).point.devices.values()
            for theirs, _ in FIGURES[device.kind].values()
        ],
    )


every_sample = pytest.mark.parametrize("netlist", NETLISTS, ids=lambda path: path.stem)


@every_sample
def test_node_voltages(netlist: Path) -> None:
    ours = analysis_of(netlist).point
    theirs = referee_point(netlist).voltages
    named = {node.lower(): ours.voltage(node) for node in ours.nodes}
    assert set(theirs) <= set(named)
    assert {node: named[node] for node in theirs} == pytest.approx(theirs, rel=1e-3, abs=1e-3)


@every_sample
def test_device_figures(netlist: Path) -> None:
    devices = analysis_of(netlist).point.devices.values()
    point = referee_point(netlist)
    assert len(devices) > 0
    for device in devices:
        expected = expected_figures(device, point)
        ours = {name: float(device.values[name][0]) for name in expected}
        assert ours == pytest.approx(expected, rel=5e-3), device.name


@every_sample
def test_exact_gain_and_corners(netlist: Path) -> None:
    analysis = analysis_of(netlist)
    [path] = analysis.review.paths
    assert path.midband_hz is not None
    assert path.gain is not None
    band = ngspice.band(netlist, output_of(analysis), path.midband_hz)
    assert path.gain_db == pytest.approx(20 * math.log10(abs(band.gain)), abs=0.05)
    assert math.copysign(1, path.gain) == math.copysign(1, band.gain.real)
    assert exact(path.low) == pytest.approx(band.low_hz, rel=5e-3)
    assert exact(path.high) == pytest.approx(band.high_hz, rel=5e-3)


def exact(corner: CornerRow | None) -> float | None:
    return None if corner is None else corner.exact_hz


@every_sample
def test_gain_by_inspection(netlist: Path) -> None:
    """The gain with both ends out of the way, sign included.

    ngspice gets there with 10,000 times the capacitance (and inductance) at the low end and a
    10,000th of it at the high end. Capacitances inside devices stay: at midband they are still
    too small to matter.
    """
    analysis = analysis_of(netlist)
    parts = {part.name for part in analysis.network.parts if not part.device}
    factor = {"low": 1e4, "high": 1e-4}
    [path] = analysis.review.paths
    assert path.midband_hz is not None
    assert path.gain_by_inspection is not None
    values = {
        ngspice.flat_name(row.name): row.value * factor[row.end]
        for row in path.time_constants
        if row.name in parts and row.end in factor
    }
    change = ngspice.altered(values)
    point = f"ac lin 1 {path.midband_hz!r} {path.midband_hz!r}"
    gain = ngspice.sweep(netlist, output_of(analysis), change + point).response[0]
    signed = math.copysign(abs(gain), gain.real)
    assert 20 * math.log10(path.gain_by_inspection / signed) == pytest.approx(0, abs=0.05)


@every_sample
@pytest.mark.parametrize("end", ["low", "high"])
def test_parts_named_move_the_corner(netlist: Path, end: str) -> None:
    """The part said to set a corner is one whose change moves it in ngspice.

    Measure: d ln f / d ln C, at a step of 3 %. A named part must have at least 0.4 of the largest
    figure of all parts: the sum of time constants ranks parts and does not weigh them finely. Where
    only capacitances inside devices are named, no part may move the corner as 1/√C would.
    """
    analysis = analysis_of(netlist)
    [path] = analysis.review.paths
    corner = path.low if end == "low" else path.high
    assert corner is not None
    moves = corner_moves(netlist, analysis, path, corner)
    named = [moves[name] for name in corner.set_by if name in moves]
    if named:
        assert min(named) >= 0.4 * max(moves.values())
    else:
        assert max(moves.values()) < 0.5


def corner_moves(
    netlist: Path, analysis: Analysis, path: PathRow, corner: CornerRow
) -> dict[str, float]:
    """|d ln f / d ln C| of one corner for every capacitor and inductor of the netlist."""
    assert path.midband_hz is not None
    assert corner.exact_hz is not None
    middle = f"ac lin 1 {path.midband_hz!r} {path.midband_hz!r}"
    edge = f"ac lin 401 {0.9 * corner.exact_hz!r} {1.1 * corner.exact_hz!r}"
    values = {p.name: float(p.value[0]) for p in analysis.network.parts if not p.device}
    analyses = [middle, edge]
    back = ""
    for name, value in values.items():
        own = ngspice.flat_name(name)
        analyses += [back + ngspice.altered({own: STEP * value}) + middle, edge]
        back = ngspice.altered({own: value})
    found = ngspice.sweeps(netlist, output_of(analysis), analyses)
    before, *after = (
        ngspice.interpolate(around, abs(at.response[0]) * ngspice.HALF_POWER)
        for at, around in zip(found[::2], found[1::2], strict=True)
    )
    return {
        name: abs(math.log(corner_hz / before) / math.log(STEP))
        for name, corner_hz in zip(values, after, strict=True)
    }
