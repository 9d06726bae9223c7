"""The hooks under the real pre-commit, in repositories thrown away afterwards."""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
from collections.abc import Sequence
from importlib.resources import files
from pathlib import Path

import jsonschema
import pytest
import yaml

from report.amplifier import CE_LINE, LIMITS, NETLIST, SMALL_BYPASS, write
from tauledger.command import main

_TOP = Path(__file__).parents[2]
_MANIFEST = _TOP / ".pre-commit-hooks.yaml"
_IN_CI = os.environ.get("CI", "").lower() == "true"


def _run(command: Sequence[str], folder: Path, home: Path) -> subprocess.CompletedProcess[str]:
    identity = [
        f"GIT_{who}_{what}" for who in ("AUTHOR", "COMMITTER") for what in ("NAME", "EMAIL")
    ]
    environment = {
        **{key: value for key, value in os.environ.items() if not key.startswith("GIT_")},
        **dict.fromkeys(identity, "tests@localhost"),
        "PRE_COMMIT_HOME": str(home),
        "PRE_COMMIT_COLOR": "never",
    }
    return subprocess.run(
        command, cwd=folder, env=environment, capture_output=True, text=True, check=False
    )


def _pre_commit(*words: str) -> list[str]:
    return [sys.executable, "-m", "pre_commit", *words]


def _commit_all(folder: Path, home: Path) -> None:
    for words in (["init", "--quiet"], ["add", "--all"], ["commit", "--quiet", "-m", "x"]):
        done = _run(["git", *words], folder, home)
        assert done.returncode == 0, done.stderr


def test_the_manifest_is_valid(tmp_path: Path) -> None:
    done = _run(_pre_commit("validate-manifest", str(_MANIFEST)), tmp_path, tmp_path)
    assert done.returncode == 0, done.stdout + done.stderr


@pytest.mark.parametrize(
    ("name", "matches"),
    [
        ("boards/amp.cir", True),
        ("AMP.CIR", True),
        ("amp.net", True),
        ("amp.spice", True),
        ("models/npn.lib", True),
        ("tauledger.toml", True),
        ("boards/tauledger.toml", True),
        ("boards/other.toml", False),
        ("amp.circus", False),
        ("notes.txt", False),
        ("amp.cir.bak", False),
    ],
)
def test_which_files_the_check_is_for(name: str, matches: bool) -> None:
    (check,) = (h for h in yaml.safe_load(_MANIFEST.read_text()) if h["id"] == "netlist-limits")
    assert (re.search(check["files"], name) is not None) is matches
    # The library of file types has none for netlists, so "text" is all that can be asked.
    assert check["types"] == ["text"]


def test_the_example_workflow_is_valid_and_only_reads(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    text = (_TOP / "samples" / "workflow" / "netlists.yml").read_text()
    workflow = yaml.safe_load(text.replace("\non:\n", '\n"on":\n'))
    vendored = files("check_jsonschema") / "builtin_schemas" / "vendor" / "github-workflows.json"
    jsonschema.validate(workflow, json.loads(vendored.read_text()))
    assert workflow["permissions"] == {"contents": "read"}
    assert all("permissions" not in job for job in workflow["jobs"].values())
    assert "${{" not in text
    commands = re.findall(r"tauledger (check [^>|\n]*)", text)
    write(tmp_path, NETLIST, LIMITS)
    monkeypatch.chdir(tmp_path)
    assert [main(command.split()) for command in commands] == [0, 0]


def test_the_command_says_what_its_exit_code_means(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capfd: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    write(tmp_path, NETLIST, LIMITS)
    assert main(["check"]) == 0
    assert capfd.readouterr() == ("", "")
    write(tmp_path, SMALL_BYPASS)
    assert main(["check", "amp.cir"]) == 1
    out, err = capfd.readouterr()
    assert out.startswith(f"amp.cir:{CE_LINE}:1: error[limit-missed]")
    assert err == "1 error and 0 warnings in 1 netlist\n"
    for form in ("github", "gitlab", "sarif", "junit", "json", "markdown"):
        assert main(["check", "--format", form]) == 1
        out, err = capfd.readouterr()
        assert "limit-missed" in out or "Limit missed" in out or "**missed**" in out
        assert err == ""
    assert main(["check", "gone.cir"]) == 2
    (tmp_path / "tauledger.toml").write_text("[path]\nx = 1\n")
    assert main(["check"]) == 2


@pytest.mark.parametrize(
    "changed", [["tauledger.toml"], ["voice.lib"], ["amp.cir", "tauledger.toml"]]
)
def test_a_changed_limit_or_model_checks_the_netlists_it_is_for(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capfd: pytest.CaptureFixture[str],
    changed: list[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    write(tmp_path, SMALL_BYPASS, LIMITS)
    (tmp_path / "voice.lib").write_text("* models\n.model OTHER NPN\n")
    assert main(["check", *changed]) == 1
    out, _ = capfd.readouterr()
    assert out.count("error[limit-missed]") == 1
    assert f"amp.cir:{CE_LINE}:1" in out


def test_many_netlists_give_in_workers_what_they_give_alone(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capfd: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "tauledger.toml").write_text(LIMITS.replace("amp.cir", "*.cir"))
    for number in range(4):
        write(tmp_path, SMALL_BYPASS if number % 2 else NETLIST, name=f"{number}.cir")
    assert main(["check", "--format", "json"]) == 1
    alone = capfd.readouterr().out
    monkeypatch.setattr("tauledger.checking.FEW", 1)
    monkeypatch.setattr("tauledger.checking.usable_cores", lambda: 2)
    assert main(["check", "--format", "json"]) == 1
    assert capfd.readouterr().out == alone


def test_a_starter_is_valid_and_limits_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capfd: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    boards = tmp_path / "boards"
    boards.mkdir()
    write(boards, NETLIST, name="voice [2].cir")
    name = "boards/voice [2].cir"
    assert main(["start", name, "--output", "tauledger.toml"]) == 0
    text = (tmp_path / "tauledger.toml").read_text()
    assert capfd.readouterr().out == ""
    assert "CE" in text
    assert main(["start", name]) == 0
    assert capfd.readouterr().out == text
    assert main(["check", "--fail-on", "warning"]) == 0
    assert "no limits are set for this netlist" in capfd.readouterr().err
    # Once the engineer fills one in, it holds.
    filled = text.replace('# low_corner = { max = "" }', 'low_corner = { max = "20 Hz" }')
    assert filled != text
    (tmp_path / "tauledger.toml").write_text(filled)
    assert main(["check"]) == 1
    # An existing file is never overwritten.
    assert main(["start", name, "--output", "tauledger.toml"]) == 2
    assert (tmp_path / "tauledger.toml").read_text() == filled


def test_a_starter_for_a_board_without_sources_lists_its_nets(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capfd: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    board = "\n".join(line for line in NETLIST.splitlines() if not line.startswith(("V", ".print")))
    write(tmp_path, board + "\n")
    assert main(["start", "amp.cir", "--output", "tauledger.toml"]) == 0
    text = (tmp_path / "tauledger.toml").read_text()
    assert all(f'#   "{net}"\n' in text for net in ("vcc", "src", "out"))
    assert capfd.readouterr().err
    # Valid, though nothing is filled in yet.
    assert main(["check"]) == 1
    assert "config-" not in capfd.readouterr().out


@pytest.mark.skipif(not _IN_CI, reason="installs from PyPI for a minute; set CI=true to run it")
def test_under_the_real_pre_commit(tmp_path: Path) -> None:
    home, tool, board = (tmp_path / name for name in ("home", "tool", "board"))
    board.mkdir()
    shutil.copytree(
        _TOP,
        tool,
        ignore=shutil.ignore_patterns(
            ".*cache", ".git", ".venv", ".hypothesis", "*.egg-info", "tests"
        ),
    )
    _commit_all(tool, home)
    limits = LIMITS.replace('"amp.cir"', '"*.cir"')
    write(board, NETLIST, limits, "good.cir")
    write(board, SMALL_BYPASS, name="small bypass.cir")
    (board / "notes.txt").write_text("no netlist\n")
    _commit_all(board, home)

    tried = _run(_pre_commit("try-repo", str(tool), "netlist-limits", "--all-files"), board, home)
    assert tried.returncode == 1, tried.stdout + tried.stderr
    assert "exit code: 1" in tried.stdout
    assert f"small bypass.cir:{CE_LINE}:1: error[limit-missed]" in tried.stdout
    assert "good.cir:" not in tried.stdout

    revision = _run(["git", "rev-parse", "HEAD"], tool, home).stdout.strip()
    hooks = [{"id": "netlist-limits"}, {"id": "netlist-annotations"}]
    wanted = {"repos": [{"repo": str(tool), "rev": revision, "hooks": hooks}]}
    (board / ".pre-commit-config.yaml").write_text(yaml.safe_dump(wanted))

    def run(hook: str, *names: str) -> subprocess.CompletedProcess[str]:
        return _run(_pre_commit("run", hook, "--verbose", "--files", *names), board, home)

    green = run("netlist-limits", "good.cir", "notes.txt")
    assert green.returncode == 0, green.stdout + green.stderr
    # Quiet when green: nothing between the hook's own lines.
    assert re.search(r"duration: \S+\s*\Z", green.stdout), green.stdout
    skipped = run("netlist-limits", "notes.txt")
    assert (skipped.returncode, "no files to check" in skipped.stdout) == (0, True)
    stale = run("netlist-annotations", "good.cir", "small bypass.cir")
    assert stale.returncode == 1
    assert stale.stdout.count("annotation-stale") == 2
