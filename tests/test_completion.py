"""The scripts of ``tauledger completion`` in the shells they are for.

bash is on every machine that runs these tests; where zsh or fish is missing, its tests say so.
"""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from tauledger.commands.parsers import COMMANDS, command_parser

NETLISTS = ["My amp.CIR", "amp.cir", "boards/"]


@pytest.fixture(scope="module")
def scripts(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    folder = tmp_path_factory.mktemp("scripts")
    written = {}
    for shell in ("bash", "zsh", "fish"):
        command = [str(Path(sys.executable).with_name("tauledger")), "completion", shell]
        done = subprocess.run(command, capture_output=True, timeout=60)
        assert (done.returncode, done.stderr) == (0, b"")
        written[shell] = folder / f"tauledger.{shell}"
        written[shell].write_bytes(done.stdout)
    return written


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "boards").mkdir()
    for name in ("amp.cir", "My amp.CIR", "notes.txt", "sheet.svg"):
        (tmp_path / name).touch()
    return tmp_path


def _output(command: list[str], folder: Path) -> str:
    done = subprocess.run(
        command,
        cwd=folder,
        env={"PATH": os.environ["PATH"], "HOME": str(folder), "LC_ALL": "C.UTF-8", "TERM": "dumb"},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        encoding="utf-8",
        timeout=60,
    )
    assert done.returncode == 0, done.stderr
    return done.stdout


def _in_bash(script: Path, folder: Path, *words: str) -> list[str]:
    """What bash offers for the last of the words."""
    drive = (
        'source "$1"; shift; COMP_WORDS=("$@"); COMP_CWORD=$(($# - 1)); '
        "function=$(complete -p tauledger | sed 's/.*-F //; s/ .*//'); $function; "
        'printf "%s\\n" "${COMPREPLY[@]}"'
    )
    command = ["bash", "--norc", "-c", drive, "bash", str(script), "tauledger", *words]
    return _output(command, folder).split("\n")[:-1]


def _in_fish(script: Path, folder: Path, *words: str) -> list[str]:
    """What fish offers, without its descriptions."""
    typed = " ".join(("tauledger", *words))
    offered = _output(
        ["fish", "--no-config", "-c", f"source {script}; complete -C '{typed}'"], folder
    )
    return [line.partition("\t")[0] for line in offered.splitlines()]


OFFERED = [
    (("",), list(COMMANDS)),
    (("te",), ["temperature"]),
    (("report", "--format", "s"), ["svg"]),
    (("check", "amp.cir", "--fail-on", ""), ["error", "warning"]),
    (("completion", ""), ["bash", "fish", "zsh"]),
    (("report", ""), NETLISTS),
    (("report", "--input", "VIN", "a"), ["amp.cir"]),
    (("annotate", "amp.cir", "--drawing", ""), ["boards/", "sheet.svg"]),
    (("check", "--config", "n"), ["notes.txt"]),
    (("compare", "amp.cir", "bo"), ["boards/"]),
]


@pytest.mark.parametrize(("words", "offered"), OFFERED)
@pytest.mark.parametrize("shell", ["bash", "fish"])
def test_what_is_offered(
    shell: str, words: tuple[str, ...], offered: list[str], scripts: dict[str, Path], folder: Path
) -> None:
    if shutil.which(shell) is None:
        pytest.skip(f"no {shell} on this machine")
    if shell == "bash":
        found = _in_bash(scripts[shell], folder, *words)
        # bash itself adds the stroke to folders.
        found = [f"{name}/" if (folder / name).is_dir() else name for name in found if name]
    else:
        found = [name.replace("\\ ", " ") for name in _in_fish(scripts[shell], folder, *words)]
    assert sorted(found) == sorted(offered)


# The folder of functions as the README sets it up; tabs come faster here than anyone types them.
IN_ZSH = """
zmodload zsh/zpty
zpty typed "zsh -f -i"
zpty -w typed "PS1= PS2= fpath=(\\$PWD/.functions \\$fpath); autoload -U compinit; compinit -u -D"
zpty -w typed "zstyle ':completion:*' insert-tab false"
zpty -w typed 'tauledger() { print -r -- "got[${(j:|:)@}]"; exit }'
zpty -w -n typed "$1"$'\\n'
while zpty -r typed line; do print -r -- $line; done
"""


@pytest.mark.skipif(shutil.which("zsh") is None, reason="no zsh on this machine")
@pytest.mark.parametrize(
    ("typed", "received"),
    [
        ("tauledger rep\tam\t", "report|amp.cir"),
        ("tauledger report --form\tmark\tam\t", "report|--format|markdown|amp.cir"),
        ("tauledger annotate am\t--dra\ts\t", "annotate|amp.cir|--drawing|sheet.svg"),
        ("tauledger check --conf\tno\t", "check|--config|notes.txt"),
        ("tauledger completion f\t", "completion|fish"),
    ],
)
def test_what_zsh_fills_in(
    typed: str, received: str, scripts: dict[str, Path], folder: Path
) -> None:
    (folder / ".functions").mkdir()
    shutil.copy(scripts["zsh"], folder / ".functions" / "_tauledger")
    assert f"got[{received}]" in _output(["zsh", "-f", "-c", IN_ZSH, "zsh", typed], folder)


@pytest.mark.parametrize("name", COMMANDS)
def test_no_option_is_forgotten(name: str, scripts: dict[str, Path], folder: Path) -> None:
    shown = set(re.findall(r"(?<![\w-])--[a-z-]+", command_parser(name).format_usage()))
    shown |= set(re.findall(r"^ +(--[a-z-]+)", command_parser(name).format_help(), re.MULTILINE))
    assert shown | {"--help"} == set(_in_bash(scripts["bash"], folder, name, "--"))


def test_an_unknown_shell_is_refused(capfd: pytest.CaptureFixture[str]) -> None:
    from tauledger.command import main

    assert main(["completion", "tcsh"]) == 2
    assert "invalid choice: 'tcsh'" in capfd.readouterr().err
