"""The command line as a shell sees it: streams and exit codes.

The analysis is replaced by a stand-in, so that these tests speak of the command alone.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from tauledger.commands.parsers import COMMANDS

TESTS = Path(__file__).parent

STAND_IN = """
import os, signal, sys, types, warnings
from report.fixtures import ONE_STAGE
from tauledger.problems import Problem, ProblemError, Severity
stand_in = types.ModuleType("tauledger.analysis")
def analyze(netlist, input=None, output=None, settings=None, midband_hz=None, square_wave_hz=None):
    if netlist == "broken":
        raise ProblemError(Problem("file-empty", Severity.ERROR, "the file is empty", advice="."))
    if netlist == "crash":
        raise ValueError("forged\\x1b[2J\\nline")
    if netlist == "interrupt":
        # A shell has what it starts in the background ignore the signal, these tests included.
        signal.signal(signal.SIGINT, signal.default_int_handler)
        os.kill(os.getpid(), signal.SIGINT)
    if netlist == "warn":
        warnings.warn("overflow", RuntimeWarning)
    print(netlist, input, output, file=sys.stderr)
    return types.SimpleNamespace(review=ONE_STAGE)
stand_in.read = lambda path: path
stand_in.analyze = analyze
sys.modules["tauledger.analysis"] = stand_in
from tauledger.command import main
raise SystemExit(main())
"""


def _environment(**more: str) -> dict[str, str]:
    """Streams buffered and encoded as on a user's machine, whatever the test machine sets."""
    return {**os.environ, "PYTHONUNBUFFERED": "", "PYTHONIOENCODING": "utf-8", **more}


def _tauledger(
    *arguments: str, shell: str = "", **environment: str
) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-c", STAND_IN, *arguments]
    if shell:
        command = ["bash", "-c", f'set -o pipefail; "$@" {shell}', "bash", *command]
    return subprocess.run(
        command,
        cwd=TESTS,
        env=_environment(**environment),
        capture_output=True,
        encoding="utf-8",
        timeout=60,
    )


def test_report_goes_to_stdout_and_problems_to_stderr() -> None:
    done = _tauledger("report", "a.cir", "--input", "V1", "--output=out")
    assert done.returncode == 0
    assert done.stdout.startswith("Ribbon microphone booster")
    assert "a.cir V1 out\n" in done.stderr
    assert "samples/ribbon.cir:9:12: warning[value-letter-digit]" in done.stderr


def test_json_on_stdout_is_nothing_but_json() -> None:
    done = _tauledger("report", "a.cir", "--format", "json")
    assert done.returncode == 0
    assert json.loads(done.stdout)["title"].startswith("Ribbon")


def test_installed_command_prints_its_version() -> None:
    script = Path(sys.executable).parent / "tauledger"
    done = subprocess.run([script, "--version"], capture_output=True, text=True)
    assert done.returncode == 0
    assert done.stdout.startswith("tauledger 0.")


@pytest.mark.parametrize("name", ["", *COMMANDS])
def test_help_fits_a_screen_and_shows_an_example(name: str) -> None:
    done = _tauledger(*name.split(), "--help", COLUMNS="80")
    assert done.returncode == 0
    lines = done.stdout.splitlines()
    assert len(lines) <= 24
    assert max(map(len, lines)) <= 80
    assert COMMANDS[name or "report"].example in done.stdout


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        ((), "no command given"),
        (("reprot", "a.cir"), "Did you mean report?"),
        (("zzz",), "tauledger --help lists the commands"),
        (("report",), "required: NETLIST"),
        (("report", "--fromat", "json", "a.cir"), "Did you mean --format?"),
        (("report", "--outptu=x", "a.cir"), "Did you mean --output?"),
        (("report", "--form", "json", "a.cir"), "has no option --form"),
        (("report", "a.cir", "--format", "xml"), "invalid choice: 'xml'"),
        (("report", "a.cir", "--midband", "1e99"), "from 1mHz to 1THz such as 1kHz, found '1e99'"),
        (("report", "a.cir", "--midband", "-5"), "from 1mHz to 1THz such as 1kHz, found '-5'"),
        (("report", "a.cir", "--midband", "x"), "'x' is not a quantity"),
        (("report", "-5"), "has no option -5"),
        (("report", "a.cir", "b.cir"), "unrecognized arguments: b.cir"),
        (("report", "a.cir", "\x1b[2J"), "unrecognized arguments: \\x1b[2J"),
        (("--verson",), "Did you mean --version?"),
        (("report", "broken"), "error[file-empty]: the file is empty"),
    ],
)
def test_unusable_input_is_one_message_and_code_2(arguments: tuple[str, ...], said: str) -> None:
    done = _tauledger(*arguments)
    assert done.returncode == 2
    assert done.stdout == ""
    assert said in done.stderr
    assert "\x1b" not in done.stderr
    assert len(done.stderr.splitlines()) == 2


@pytest.mark.parametrize("wish", ["", "once", "default"])
def test_python_warns_only_who_asks(wish: str) -> None:
    done = _tauledger("report", "warn", PYTHONWARNINGS=wish)
    assert done.returncode == 0
    assert ("RuntimeWarning: overflow" in done.stderr) == bool(wish)


def test_internal_error_names_a_file_with_the_traceback(tmp_path: Path) -> None:
    done = _tauledger("report", "crash", TMPDIR=str(tmp_path))
    assert done.returncode == 3
    assert done.stdout == ""
    (line,) = done.stderr.splitlines()
    assert "internal error (ValueError: forged\\x1b[2J\\nline); details in " in line
    details = Path(line.rpartition(" ")[2])
    assert details.parent == tmp_path
    assert "Traceback" in details.read_text(encoding="utf-8")


def test_interrupt_is_quiet() -> None:
    done = _tauledger("report", "interrupt")
    assert (done.returncode, done.stdout, done.stderr) == (130, "", "tauledger: interrupted\n")


@pytest.mark.parametrize("arguments", [("report", "a.cir"), ("--help",)])
def test_closed_pipe_is_silent(arguments: tuple[str, ...]) -> None:
    reader, writer = os.pipe()
    os.close(reader)
    command = [sys.executable, "-c", STAND_IN, *arguments]
    done = subprocess.run(
        command,
        cwd=TESTS,
        env=_environment(),
        stdout=writer,
        stderr=subprocess.PIPE,
        text=True,
    )
    os.close(writer)
    assert done.returncode == 141
    assert "Exception" not in done.stderr
    assert "ipe" not in done.stderr


def test_full_disk_is_said() -> None:
    done = _tauledger("report", "a.cir", "--format", "json", shell="> /dev/full")
    assert done.returncode == 2
    assert "error[output-unwritable]: the result could not be written: No space left" in done.stderr
    assert "Exception ignored" not in done.stderr


@pytest.mark.parametrize("encoding", ["ascii", "cp1252", "utf-8"])
def test_any_encoding_of_stdout_will_do(encoding: str) -> None:
    done = _tauledger("report", "a.cir", shell="| iconv -f " + encoding, PYTHONIOENCODING=encoding)
    assert done.returncode == 0
    assert ("3.21 kΩ" if encoding == "utf-8" else "3.21 kOhm") in done.stdout
