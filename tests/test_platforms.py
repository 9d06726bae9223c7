"""What Windows and macOS do otherwise, as far as it can be put on here.

``mypy --platform win32`` in ``tests/run`` finds calls that Windows does not have; these tests put
on what such a machine would answer.
"""

from __future__ import annotations

import errno
import io
import json
import os
import subprocess
import sys
from pathlib import Path, PureWindowsPath
from typing import Any

import pytest

from tauledger.command import main
from tauledger.commands.output import deliver
from tauledger.commands.parsers import COMMANDS, command_parser, top_parser
from tauledger.fleet import worker_processes
from tauledger.netlist import read
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.report.sarif import sarif_log
from tauledger.review.check import Finding, NetlistCheck
from tauledger.revision import opened

DIVIDER = "Divider\nV1 in 0 1\nR1 in out 1k\nR2 out 0 1k\n.end\n"
AMPLIFIER = Path(__file__).parents[1] / "samples/common-emitter/common-emitter.cir"


@pytest.fixture
def windows(monkeypatch: pytest.MonkeyPatch) -> None:
    # The standard library chooses its modules by the platform when it is imported.
    import concurrent.futures.process  # noqa: F401

    monkeypatch.setattr(sys, "platform", "win32")


@pytest.fixture
def boards(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "boards").mkdir()
    for name in ("one.cir", "two.cir"):
        (tmp_path / "boards" / name).write_text(DIVIDER)
    return tmp_path


# The command line ---------------------------------------------------------------------------------


@pytest.mark.usefixtures("windows")
def test_wildcards_are_expanded_where_the_shell_leaves_them(
    boards: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    assert main(["check", "boards/*.cir", "--format", "json"]) == 0
    named = [one["netlist"] for one in json.loads(capfd.readouterr().out)["checks"]]
    assert named == ["boards/one.cir", "boards/two.cir"]
    assert main(["annotate", "--remove", "boards/*.cir"]) == 0
    assert main(["check", "boards/*.net"]) == 2
    assert "boards/*.net: no such file" in capfd.readouterr().out


@pytest.mark.usefixtures("windows")
def test_a_file_that_exists_stands_for_itself(
    boards: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    """Brackets are letters of a file name there; as a wildcard they would name another file."""
    for name in ("amp[2].cir", "amp2.cir"):
        (boards / name).write_text(DIVIDER)
    assert main(["check", "amp[2].cir", "amp[23].cir", "--format", "json"]) == 0
    named = [one["netlist"] for one in json.loads(capfd.readouterr().out)["checks"]]
    assert named == ["amp[2].cir", "amp2.cir"]


@pytest.mark.usefixtures("windows")
def test_a_reader_that_has_gone_is_silent_there_too() -> None:
    def write() -> None:
        raise OSError(errno.EINVAL, "Invalid argument")

    with pytest.raises(BrokenPipeError):
        deliver(write)


def test_help_suits_any_encoding(monkeypatch: pytest.MonkeyPatch) -> None:
    written = io.BytesIO()
    monkeypatch.setattr(sys, "stdout", io.TextIOWrapper(written, encoding="ascii"))
    for parser in (top_parser(), *map(command_parser, COMMANDS)):
        parser.print_help()
    sys.stdout.flush()
    assert b"in deg C, such as 0..60" in written.getvalue()


def test_messages_are_spelt_in_what_the_console_has(tmp_path: Path) -> None:
    (tmp_path / "amp.cir").write_text(AMPLIFIER.read_text().replace(".end\n", "R9 out x 0\n"))
    done = subprocess.run(
        [Path(sys.executable).with_name("tauledger"), "report", "amp.cir"],
        cwd=tmp_path,
        env={**os.environ, "PYTHONIOENCODING": "cp1252"},
        capture_output=True,
        timeout=60,
    )
    assert done.returncode == 0
    assert b"note[value-zero]" in done.stderr
    assert b"1 mOhm" in done.stderr


# Files --------------------------------------------------------------------------------------------


def test_a_folder_that_windows_will_not_open_is_called_a_folder(
    boards: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def deny(*_: object) -> int:
        raise PermissionError(errno.EACCES, "Permission denied")

    monkeypatch.setattr(os, "open", deny)
    with pytest.raises(ProblemError, match="expected a file, found a folder"):
        read(boards)
    with pytest.raises(ProblemError, match="cannot be read"):
        read(boards / "boards" / "one.cir")


def test_a_loop_of_links_is_a_file_that_cannot_be_read(
    boards: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    # Python raises something else for it before 3.13.
    (boards / "loop.cir").symlink_to("loop.cir")
    (boards / "tauledger.toml").write_text('[path.one]\nnetlist = "*.cir"\n')
    for words in (["check", "loop.cir"], ["check"], ["report", "loop.cir"]):
        assert main(words) == 2
        assert "internal" not in capfd.readouterr().err


def test_no_server_is_asked_for_an_include(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from tauledger.netlist import include

    asked = []
    resolve = include._resolve
    monkeypatch.setattr(include, "_resolve", lambda path: asked.append(str(path)) or resolve(path))
    (tmp_path / "amp.cir").write_text("title\n.include \\\\server\\share\\x.lib\nR1 a 0 1k\n")
    problems = read(tmp_path / "amp.cir").problems
    assert [problem.code for problem in problems] == ["include-refused"]
    assert asked
    assert not any("share" in path for path in asked)


@pytest.mark.usefixtures("windows")
def test_a_path_with_a_drive_is_followed_on_windows(tmp_path: Path) -> None:
    # Here the drive is a folder by that name.
    (tmp_path / "C:" / "models").mkdir(parents=True)
    (tmp_path / "C:" / "models" / "x.lib").write_text(".model m npn\n")
    (tmp_path / "amp.cir").write_text("title\n.include C:\\models\\x.lib\nR1 a 0 1k\n")
    assert read(tmp_path / "amp.cir").problems == ()


def test_a_log_names_a_file_on_a_drive(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("tauledger.report.sarif.PurePath", PureWindowsPath)
    finding = Finding("D:/boards/amp.cir", Problem("file-empty", Severity.ERROR, "empty"))
    checks = [NetlistCheck("D:/boards/amp.cir", "", None, (), (finding,))]
    (result,) = json.loads(sarif_log(checks, Path.cwd()))["runs"][0]["results"]
    place = result["locations"][0]["physicalLocation"]["artifactLocation"]
    assert place == {"uri": "file:///D%3A/boards/amp.cir"}


# Revisions ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["C:\\boards\\amp.cir", "C:/boards/amp.cir", "\\\\?\\C:\\amp.cir"])
def test_a_drive_is_no_revision(name: str) -> None:
    with opened(name) as place:
        assert (str(place.path), place.roots) == (name, None)


@pytest.mark.usefixtures("windows")
def test_a_drive_without_a_stroke_is_none_on_windows() -> None:
    with opened("C:amp.cir") as place:
        assert place.roots is None


@pytest.mark.parametrize(
    "path", ["boards\\one.cir", "Boards/ONE.cir", ".\\boards\\one.cir", "boards/E\u0301.cir"]
)
def test_spellings_that_open_a_file_there_find_it_in_a_revision(boards: Path, path: str) -> None:
    (boards / "boards" / "\u00c9.cir").write_text(DIVIDER)
    who = ["-c", "user.name=reader", "-c", "user.email=reader@localhost"]
    for words in (["init", "-q"], ["add", "--all"], [*who, "commit", "-qm", "start"]):
        subprocess.run(["git", *words], cwd=boards, check=True)
    with opened(f"HEAD:{path}", boards) as place:
        assert place.path.read_text() == DIVIDER
        assert place.name == f"HEAD:{path}"


# Workers ------------------------------------------------------------------------------------------


@pytest.mark.usefixtures("windows")
def test_windows_starts_no_more_workers_than_it_may(monkeypatch: pytest.MonkeyPatch) -> None:
    started: list[tuple[int, str]] = []

    class Pool:
        def __init__(self, count: int, mp_context: Any) -> None:
            started.append((count, mp_context.get_start_method()))

        def __enter__(self) -> Pool:
            return self

        def __exit__(self, *_: object) -> None:
            pass

    monkeypatch.setattr("multiprocessing.get_all_start_methods", lambda: ["spawn"])
    monkeypatch.setattr("concurrent.futures.ProcessPoolExecutor", Pool)
    with worker_processes(96, "no.such.module"):
        pass
    assert started == [(61, "spawn")]
