"""The child process: what it is given, what stops it, what is said when it cannot run."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import pytest

from simulate.circuits import BAND_PASS
from tauledger.circuit import flatten
from tauledger.command import main
from tauledger.netlist import parse
from tauledger.problems import Problem, ProblemError
from tauledger.simulate import Limits, library, process, simulate
from tauledger.topology import choose_path

SAMPLE = Path(__file__).parents[2] / "samples" / "common-emitter" / "common-emitter.cir"
PROBE = """
import json, os, sys
task = json.load(sys.stdin)
files = {name: open(name).read() for name in os.listdir(".")}
found = {"environment": dict(os.environ), "folder": os.getcwd(), "files": files,
         "isolated": sys.flags.isolated, "limits": sys.argv[1:], "task": task}
json.dump(found, open("outcome.json", "w"))
"""


def run_probe(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, script: str) -> dict[str, Any]:
    """What a child that runs the script instead of ngspice leaves behind."""
    file = tmp_path / "probe.py"
    file.write_text(script)
    stand_in = SimpleNamespace(__file__=str(file), OUTCOME="outcome.json")
    monkeypatch.setattr(process, "child", stand_in)
    limits = Limits(time_s=20, memory_bytes=1 << 30, file_bytes=1 << 20)
    return process.run_child({"deck": ["x"]}, limits, {"n1": "out"})


@pytest.mark.skipif(sys.platform == "win32", reason="Windows needs two variables more")
def test_child_gets_an_empty_environment_and_a_fresh_folder(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    for name in ("SECRET", "PYTHONPATH", "SPICE_LIB_DIR", "SPICE_SCRIPTS", "NGSPICE_INPUT_DIR"):
        monkeypatch.setenv(name, str(tmp_path))
    monkeypatch.setattr(sys, "path", ["", os.getcwd(), "relative", *sys.path])
    found = run_probe(tmp_path, monkeypatch, PROBE)
    folder = found["folder"]
    # Python itself adds LC_CTYPE where the locale is C.
    assert found["environment"].keys() - {"LC_CTYPE", "__CF_USER_TEXT_ENCODING"} == {
        *("HOME", "OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"),
    }
    assert os.path.realpath(found["environment"]["HOME"]) == os.path.realpath(folder)
    assert found["isolated"] == 1
    assert found["limits"] == ["20", str(1 << 30), str(1 << 20)]
    assert {name for name in found["files"] if name != "outcome.json"} == {".spiceinit"}
    lines = found["files"][".spiceinit"].splitlines()
    assert [line[0] for line in lines] == ["*"]
    assert found["task"]["deck"] == ["x"]
    assert all(os.path.isabs(entry) for entry in found["task"]["import_from"])
    assert os.getcwd() not in found["task"]["import_from"]
    assert not Path(folder).exists()


@pytest.mark.parametrize(
    ("script", "said"),
    [
        ("import os; os._exit(7)", "broke off without a result (code 7)"),
        ("import os, signal; os.kill(os.getpid(), signal.SIGSEGV)", "1024 MiB"),
        ("open('outcome.json', 'w').write('[]')", "broke off"),
        (
            """open('outcome.json', 'w').write('{"failure": "bias", "messages":'
            '["Using SPARSE", "Warning: singular matrix: check node n1"]}')""",
            "no operating point: singular matrix: check node out",
        ),
        ("open('outcome.json', 'w').write('{\"failure\": \"memory\"}')", "more than the 1024 MiB"),
    ],
)
def test_a_failing_child_is_one_message(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, script: str, said: str
) -> None:
    with pytest.raises(ProblemError) as caught:
        run_probe(tmp_path, monkeypatch, script)
    [problem] = caught.value.problems
    assert said in problem.message
    assert "SPARSE" not in problem.message
    assert "--simulate" in problem.advice


def failure(limits: Limits) -> Problem:
    circuit = flatten(parse(BAND_PASS, "band.cir"))
    with pytest.raises(ProblemError) as caught:
        simulate(circuit, choose_path(circuit, "V1", "out"), 5e3, limits)
    [problem] = caught.value.problems
    return problem


@pytest.mark.referee
def test_timeout_kills_the_child() -> None:
    begin = time.monotonic()
    problem = failure(Limits(time_s=0.05))
    assert time.monotonic() - begin < 5
    assert problem.code == "simulate-timeout"
    assert "stopped after 0.05 s" in problem.message


@pytest.mark.referee
@pytest.mark.skipif(sys.platform != "linux", reason="the address space is limited on Linux alone")
def test_memory_is_limited() -> None:
    problem = failure(Limits(memory_bytes=60 << 20))
    # Where memory runs out inside a library, that may break off before it can say so.
    assert problem.code in ("simulate-memory", "simulate-failed")
    assert "60 MiB" in problem.message


@pytest.mark.referee
def test_file_size_is_limited() -> None:
    assert "File too large" in failure(Limits(file_bytes=1000)).message


@pytest.mark.parametrize("lacking", ["PySpice", "libngspice"])
def test_what_is_missing_is_said_with_how_to_install_it(
    lacking: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    if lacking == "PySpice":
        monkeypatch.setattr(library.importlib.util, "find_spec", lambda _: None)
    else:
        monkeypatch.setattr(library.importlib.util, "find_spec", lambda _: object())
        monkeypatch.setattr(library, "_libraries", lambda: iter(()))
    assert main(["report", str(SAMPLE), "--simulate"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert "error[ngspice-missing]" in err
    assert lacking in err
    for line in ("Debian: sudo apt-get", "macOS: brew", "Windows: pip"):
        assert line in err


def test_a_plain_report_loads_nothing_of_it() -> None:
    script = (
        "import sys; from tauledger.command import main\n"
        f"assert main(['report', {str(SAMPLE)!r}]) == 0\n"
        "loaded = [m for m in sys.modules if m.startswith(('tauledger.simulate', 'PySpice', "
        "'subprocess'))]\n"
        "sys.exit(str(loaded) if loaded else 0)"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
