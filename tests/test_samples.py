"""Every sample keeps its limits and prints the report that stands beside it.

After a change of the report, ``python tests/test_samples.py --refill`` writes the reports anew;
read their difference before you commit it.
"""

from __future__ import annotations

import contextlib
import io
import math
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

import tauledger
from tauledger.analysis import Analysis
from tauledger.command import main
from tauledger.configuration.choice import find_settings

TOP = Path(__file__).parents[1]
SAMPLES = TOP / "samples"
NETLISTS = sorted((*SAMPLES.glob("*/*.cir"), *SAMPLES.glob("*/*.net")))
REPORT = "report.txt"


def printed(*arguments: str) -> tuple[int, str]:
    """Exit code and standard output of one command in the top folder, into a pipe."""
    stdout = io.TextIOWrapper(io.BytesIO(), encoding="utf-8", write_through=True)
    before = Path.cwd()
    os.chdir(TOP)
    try:
        with contextlib.redirect_stdout(stdout), contextlib.redirect_stderr(io.StringIO()):
            code = main(arguments)
    finally:
        os.chdir(before)
    stdout.seek(0)
    return code, stdout.read()


def report_of(netlist: Path) -> str:
    code, text = printed("report", netlist.relative_to(TOP).as_posix())
    assert code == 0
    return text


def analysis_of(netlist: Path) -> Analysis:
    settings = find_settings(netlist, (SAMPLES.resolve(),))
    assert settings is not None
    return tauledger.analyze(tauledger.read(netlist), settings=settings)


every_sample = pytest.mark.parametrize("netlist", NETLISTS, ids=lambda path: path.stem)


def test_each_folder_is_one_sample() -> None:
    assert len(NETLISTS) == 11
    for netlist in NETLISTS:
        assert netlist.stem == netlist.parent.name


@every_sample
def test_the_report_is_the_one_beside_it(netlist: Path) -> None:
    expected = (netlist.parent / REPORT).read_text(encoding="utf-8")
    assert report_of(netlist) == expected
    assert max(map(len, expected.splitlines())) <= 100


def test_all_samples_keep_their_limits() -> None:
    names = [netlist.relative_to(TOP).as_posix() for netlist in NETLISTS]
    code, text = printed("check", *names, "--format", "markdown")
    assert code == 0, text
    for netlist in NETLISTS:
        settings = find_settings(netlist, (SAMPLES.resolve(),))
        assert settings is not None
        assert len(settings.limits) + len(settings.dominance) >= 3, netlist


Edit = Callable[[str], str]
SPOILED: dict[str, tuple[Edit, str]] = {
    "common-emitter": (lambda text: text.replace("emit 0    100u", "emit 0    47u"), "low corner"),
    "phono-stage": (lambda text: text.replace("CB  g2  0   16n", "CB  g2  0   22n"), "high corner"),
    "strain-gauge": (lambda text: text.replace("150\n", "330\n"), "midband gain"),
}
"""Sample → a change of one value, and the limit it breaks."""


@pytest.mark.parametrize("name", SPOILED)
def test_a_limit_is_missed_when_a_part_is_changed(name: str, tmp_path: Path) -> None:
    edit, figure = SPOILED[name]
    (netlist,) = [path for path in NETLISTS if path.stem == name]
    for source in netlist.parent.rglob("*"):
        if source.suffix in (".toml", ".lib", ".cir", ".net"):
            target = tmp_path / source.relative_to(netlist.parent)
            target.parent.mkdir(exist_ok=True)
            target.write_bytes(source.read_bytes())
    text = netlist.read_text()
    assert edit(text) != text
    (tmp_path / netlist.name).write_text(edit(text))
    code, findings = printed("check", str(tmp_path / netlist.name))
    assert code == 1
    assert f"{figure} " in findings


def test_an_equaliser_is_judged_where_its_configuration_says() -> None:
    """CA, 318 µs and 3180 µs in the netlist's own words, works inside the band."""
    analysis = analysis_of(SAMPLES / "phono-stage/phono-stage.cir")
    (path,) = analysis.review.paths
    assert path.midband_hz == 1e3
    assert {row.name: row.end for row in path.time_constants}["CA"] == "in-band"
    assert analysis.asked_midband_hz == 1e3


@pytest.mark.referee
def test_a_netlist_completed_by_its_configuration_against_ngspice() -> None:
    """The others are netlists that ngspice can read as they are: tests/referee."""
    from tauledger.simulate import simulate

    analysis = analysis_of(SAMPLES / "strain-gauge/strain-gauge.net")
    (path,) = analysis.review.paths
    assert path.midband_hz is not None
    found = simulate(analysis.circuit, analysis.topology.path, path.midband_hz)
    assert path.low is not None
    assert path.high is not None
    assert path.gain is not None
    assert 20 * math.log10(abs(path.gain / found.gain)) == pytest.approx(0, abs=0.05)
    assert path.low.exact_hz == pytest.approx(found.low_hz, rel=5e-3)
    assert path.high.exact_hz == pytest.approx(found.high_hz, rel=5e-3)


def test_nothing_depends_on_the_order_of_sets() -> None:
    """Python scrambles it anew in every process, workers included."""
    names = ("feedback-pair", "headphone-driver", "phono-stage")
    program = (
        "import sys; from tauledger.command import main\n"
        "for name in sys.argv[1:]: main(['report', name, '--format', 'json'])"
    )
    command = [sys.executable, "-c", program, *(f"{name}/{name}.cir" for name in names)]
    outputs = [
        subprocess.run(
            command,
            cwd=SAMPLES,
            env={**os.environ, "PYTHONHASHSEED": seed},
            capture_output=True,
            check=True,
            timeout=60,
        ).stdout
        for seed in ("1", "2", "3")
    ]
    assert len(set(outputs)) == 1
    assert outputs[0].count(b'"title"') >= len(names)


if __name__ == "__main__":
    if sys.argv[1:] != ["--refill"]:
        sys.exit("usage: python tests/test_samples.py --refill")
    for one in NETLISTS:
        (one.parent / REPORT).write_text(report_of(one), encoding="utf-8")
