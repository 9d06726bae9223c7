"""A circuit rebuilt for ngspice is the same circuit, and the response is read off right."""

from __future__ import annotations

import json
import math
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import ngspice
from simulate.circuits import BAND_PASS, EVERY_KIND, LEVEL_ONE, band_pass
from tauledger.analysis import analyze, read
from tauledger.circuit import flatten
from tauledger.netlist import parse
from tauledger.problems import ProblemError
from tauledger.simulate import beside, simulate
from tauledger.topology import choose_path

pytestmark = pytest.mark.referee

NETLISTS = sorted((Path(__file__).parents[2] / "samples").glob("*/*.cir"))


@pytest.mark.parametrize("netlist", NETLISTS, ids=lambda path: path.stem)
def test_samples_agree(netlist: Path) -> None:
    agree(netlist)


def test_every_kind_of_element_agrees(tmp_path: Path) -> None:
    file = tmp_path / "kinds.cir"
    file.write_text(LEVEL_ONE)
    agree(file)


def agree(netlist: Path) -> None:
    """Goals of the design: gm and corners within 0.5 %, midband within 0.05 dB, nodes 1 mV."""
    analysis = analyze(read(netlist))
    simulation = simulate(analysis.circuit, analysis.topology.path, analysis.corners.midband_hz)
    [path] = beside(analysis.review, simulation).paths
    assert path.simulated is not None
    figures = path.simulated.figures
    devices = sum(figure.figure == "gm" for figure in figures)
    assert devices == len(analysis.review.transistors) > 0
    for figure in figures:
        allowed = 10 ** (0.05 / 20) - 1 if figure.figure == "midband gain" else 5e-3
        assert figure.simulated == pytest.approx(figure.exact, rel=allowed), figure
        assert figure.difference is None or abs(figure.difference) <= allowed
    ours = {row.node: row.voltage_v for row in analysis.review.nodes}
    assert simulation.nodes == pytest.approx(ours, rel=1e-3, abs=1e-3)


def test_rebuilt_deck_is_the_netlist_itself(tmp_path: Path) -> None:
    """Every kind of element: ngspice on our deck against ngspice on the netlist's own text."""
    every_kind = tmp_path / "kinds.cir"
    every_kind.write_text(EVERY_KIND)
    circuit = flatten(read(every_kind))
    assert not circuit.problems
    simulation = simulate(circuit, choose_path(circuit, None, None), 1e5)
    names = [name.lower() for name in simulation.transconductance_s]
    assert len(names) == 9
    point = ngspice.operating_point(every_kind, [f"@{name}[gm]" for name in names])
    nodes = {node.lower(): value for node, value in simulation.nodes.items()}
    assert nodes == pytest.approx(point.voltages, rel=1e-9, abs=1e-12)
    own = {f"@{name.lower()}[gm]": gm for name, gm in simulation.transconductance_s.items()}
    assert own == pytest.approx(point.figures, rel=1e-9)
    sweep = ngspice.sweep(every_kind, "out", "ac dec 7 10 10meg")
    ours = np.interp(
        np.log(sweep.frequency_hz),
        np.log(simulation.frequency_hz),
        np.log(np.abs(simulation.transfer)),
    )
    # Straight lines between 50 points a decade.
    assert np.exp(ours) == pytest.approx(np.abs(sweep.response), rel=2e-3)


def test_corners_are_good_to_1e_4() -> None:
    circuit = flatten(parse(BAND_PASS, "band.cir"))
    simulation = simulate(circuit, choose_path(circuit, "V1", "out"), 5e3)
    level = abs(band_pass(5e3)) * math.sqrt(0.5)
    assert simulation.gain == pytest.approx(band_pass(5e3), rel=1e-9)
    for corner, about in ((simulation.low_hz, 159), (simulation.high_hz, 159e3)):
        assert corner == pytest.approx(about, rel=0.01)
        assert corner is not None
        slope = abs(band_pass(corner * 1.0001)) / abs(band_pass(corner)) - 1
        assert abs(band_pass(corner)) == pytest.approx(level, rel=abs(slope))
    assert (np.diff(simulation.frequency_hz) > 0).all()
    assert 5e3 in simulation.frequency_hz
    expected = [band_pass(frequency) for frequency in simulation.frequency_hz]
    np.testing.assert_allclose(simulation.transfer, expected, rtol=1e-6)


def test_no_corner_where_the_gain_does_not_fall() -> None:
    circuit = flatten(parse("d\nI1 0 in AC 1\nR1 in a 1k\nR2 a 0 1k\n.end\n", "d.cir"))
    path = replace(choose_path(circuit, "I1", "in"), output_reference="a")
    simulation = simulate(circuit, path, 1e3)
    assert simulation.gain == pytest.approx(1e3)
    assert (simulation.low_hz, simulation.high_hz) == (None, None)


def test_no_operating_point_is_said_in_the_names_of_the_netlist() -> None:
    text = "loop\nVfirst in 0 AC 1\nVsecond in 0 1\nR1 in out 1k\nC1 out 0 1n\n.end\n"
    circuit = flatten(parse(text, "loop.cir"))
    with pytest.raises(ProblemError) as caught:
        simulate(circuit, choose_path(circuit, "Vfirst", "out"), 1e3)
    [problem] = caught.value.problems
    assert problem.code == "simulate-failed"
    assert "no operating point: singular matrix" in problem.message
    assert "Vfirst#branch" in problem.message or "Vsecond#branch" in problem.message


@pytest.mark.parametrize("form", ["text", "json"])
def test_command_shows_the_third_column(form: str) -> None:
    netlist = next(path for path in NETLISTS if path.stem == "common-emitter")
    script = "import sys; from tauledger.command import main; sys.exit(main())"
    done = subprocess.run(
        [sys.executable, "-c", script, "report", str(netlist), "--simulate", "--format", form],
        capture_output=True,
        encoding="utf-8",
        timeout=120,
    )
    assert (done.returncode, done.stderr) == (0, "")
    if form == "text":
        assert "Beside ngspice" in done.stdout
        assert "midband gain  -122 V/V  -122 V/V    -122 V/V" in done.stdout
        return
    [path] = json.loads(done.stdout)["paths"]
    assert path["simulated"]["simulator"].startswith("ngspice ")
    figures = {row["figure"]: row for row in path["simulated"]["figures"]}
    assert set(figures) == {"midband gain", "low corner", "high corner", "gm"}
    assert figures["low corner"]["simulated"] == pytest.approx(path["low"]["exact_hz"], rel=5e-3)
    assert figures["gm"]["part"] == "Q1"
