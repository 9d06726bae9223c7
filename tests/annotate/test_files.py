"""Replacing a file: all or nothing, and no more of it than its bytes."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

from tauledger.annotate import replace_file
from tauledger.problems import ProblemError

SAMPLES = Path(__file__).parents[2] / "samples"
SAMPLE = SAMPLES / "common-emitter" / "common-emitter.cir"
DRAWING = SAMPLE.with_suffix(".svg")


def test_permissions_stay(tmp_path: Path) -> None:
    path = tmp_path / "a.cir"
    path.write_bytes(b"old")
    path.chmod(0o640)
    replace_file(path, b"new")
    assert path.read_bytes() == b"new"
    assert path.stat().st_mode & 0o777 == 0o640
    assert os.listdir(tmp_path) == ["a.cir"]


def test_a_new_file_follows_the_mask(tmp_path: Path) -> None:
    replace_file(tmp_path / "a.cir", b"new")
    (tmp_path / "b.cir").write_bytes(b"new")
    assert (tmp_path / "a.cir").stat().st_mode == (tmp_path / "b.cir").stat().st_mode


def test_a_link_stays_and_its_target_changes(tmp_path: Path) -> None:
    (tmp_path / "there").mkdir()
    target, link = tmp_path / "there" / "a.cir", tmp_path / "link.cir"
    target.write_bytes(b"old")
    link.symlink_to(Path("there") / "a.cir")
    replace_file(link, b"new")
    assert link.is_symlink()
    assert target.read_bytes() == b"new"


def test_equal_bytes_are_not_written(tmp_path: Path) -> None:
    path = tmp_path / "a.cir"
    path.write_bytes(b"same")
    before = path.stat()
    replace_file(path, b"same")
    assert path.stat().st_ino == before.st_ino


def test_a_failure_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    path = tmp_path / "a.cir"
    path.write_bytes(b"old")
    monkeypatch.setattr(os, "replace", full)
    with pytest.raises(ProblemError, match="No space left"):
        replace_file(path, b"new")
    assert path.read_bytes() == b"old"
    assert os.listdir(tmp_path) == ["a.cir"]


@pytest.mark.parametrize("kind", ["folder", "pipe", "device", "loop", "nowhere"])
def test_only_a_regular_file_is_replaced(tmp_path: Path, kind: str) -> None:
    path = tmp_path / "a"
    if kind == "folder":
        path.mkdir()
    elif kind == "pipe":
        os.mkfifo(path)
    elif kind == "device":
        path.symlink_to("/dev/null")
    elif kind == "loop":
        path.symlink_to(path)
    else:
        path = tmp_path / "missing" / "a"
    with pytest.raises(ProblemError, match="cannot be written"):
        replace_file(path, b"new")


# The command --------------------------------------------------------------------------------------


def _annotate(*arguments: object) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-c", "from tauledger.command import main; raise SystemExit(main())"]
    return subprocess.run(
        [*command, "annotate", *map(str, arguments)], capture_output=True, text=True, timeout=60
    )


def test_annotate_check_and_remove_a_netlist(tmp_path: Path) -> None:
    path = tmp_path / "a.cir"
    path.write_bytes(SAMPLE.read_bytes())
    stale = _annotate(path, "--check")
    assert (stale.returncode, stale.stdout) == (1, "")
    assert "warning[annotation-stale]" in stale.stderr
    assert path.read_bytes() == SAMPLE.read_bytes()
    assert _annotate(path).returncode == 0
    assert path.read_bytes() != SAMPLE.read_bytes()
    assert _annotate(path, "--check").returncode == 0
    assert _annotate(path, "--remove").returncode == 0
    assert path.read_bytes() == SAMPLE.read_bytes()


def test_output_leaves_the_sources_alone(tmp_path: Path) -> None:
    path, sheet, marked = tmp_path / "a.cir", tmp_path / "a.svg", tmp_path / "marked.svg"
    path.write_bytes(SAMPLE.read_bytes())
    sheet.write_bytes(DRAWING.read_bytes())
    done = _annotate(path, "--drawing", sheet, "--output", marked)
    assert (done.returncode, done.stderr) == (0, "")
    assert path.read_bytes() == SAMPLE.read_bytes()
    assert sheet.read_bytes() == DRAWING.read_bytes()
    assert _annotate(path, "--drawing", sheet, "--output", marked, "--check").returncode == 0
    assert _annotate(path, "--drawing", marked, "--remove").returncode == 0
    assert marked.read_bytes() == DRAWING.read_bytes()


def test_a_bad_drawing_among_good_ones_leaves_all_as_they_are(tmp_path: Path) -> None:
    good, bad = tmp_path / "good.svg", tmp_path / "bad.svg"
    good.write_bytes(DRAWING.read_bytes())
    bad.write_bytes(b"<svg><g></svg>")
    done = _annotate(SAMPLE, "--drawing", good, "--drawing", bad)
    assert done.returncode == 2
    assert "error[drawing-unreadable]" in done.stderr
    assert good.read_bytes() == DRAWING.read_bytes()


def test_a_missing_designator_is_named_not_guessed(tmp_path: Path) -> None:
    sheet = tmp_path / "a.svg"
    sheet.write_text(
        '<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 400 300">'
        '<text x="9" y="50">C10</text>'
        '<text x="90" y="50">Q1</text><text x="150" y="50">C2 1u</text></svg>'
    )
    done = _annotate(SAMPLE, "--drawing", sheet)
    assert done.returncode == 0
    assert f"warning[designator-missing]: not found on {sheet}: C1, CE\n" in done.stderr
    assert "not on the drawing: C1, CE<" in sheet.read_text()
