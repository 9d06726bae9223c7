"""The README holds: every command in it runs, and prints what is shown beneath it.

A block of shell lines stands under one of these comments:

- ``<!-- run -->``, ``<!-- run, exit 1 -->``: run here, in the order of the README, in a copy of the
  samples that is a git repository of its own; a ``text`` block right under it is what it prints on
  standard output, or on both streams with ``<!-- run, with messages -->``. ``needs ngspice`` leaves
  a block out where the machine has none.
- ``<!-- not run: why -->``: installs something, needs the network, or takes too long.

``<!-- copy of FILE -->`` stands over a block that is a file of the repository, ``<!-- pytest -->``
over one that pytest is to run, ``<!-- keys -->`` over the reference made from the schema of the
configuration.

After a change, ``python tests/test_readme.py --refill`` writes the output, the copies and the
reference anew, with the tauledger beside that Python; read the difference before you commit it.
"""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import pytest

TOP = Path(__file__).parents[1]
README = TOP / "README.md"
_SCHEMA = TOP / "src/tauledger/configuration/schema.json"

_RUN = re.compile(
    r"<!-- run(?P<options>[^\n]*?) -->\n```sh\n(?P<script>.*?)```\n"
    r"(?:\n```text\n(?P<shown>.*?)```\n)?",
    re.DOTALL,
)
_COPY = re.compile(r"<!-- copy of (?P<file>\S+) -->\n```\w+\n(?P<text>.*?)```\n", re.DOTALL)
_PYTEST = re.compile(r"<!-- pytest -->\n```python\n(?P<text>.*?)```\n", re.DOTALL)
_KEYS = re.compile(r"<!-- keys -->\n(?P<text>.*?)<!-- end of keys -->\n", re.DOTALL)
_SHELL = re.compile(r"(?P<above>[^\n]*)\n```(?:sh|console|bash)\n")


# The commands -------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Block:
    """A block of commands, as the README has it."""

    script: str
    shown: str | None
    code: int
    with_messages: bool
    needs_ngspice: bool


@dataclass(frozen=True, slots=True)
class Outcome:
    code: int
    stdout: str
    stderr: str


def blocks(text: str) -> list[Block]:
    return [_block(match) for match in _RUN.finditer(text)]


def _block(match: re.Match[str]) -> Block:
    options = match["options"]
    code = re.search(r"exit (\d+)", options)
    return Block(
        match["script"],
        match["shown"],
        int(code[1]) if code else 0,
        "with messages" in options,
        "needs ngspice" in options,
    )


def can_run(block: Block) -> bool:
    return not block.needs_ngspice or shutil.which("ngspice") is not None


def run_all(listed: list[Block]) -> list[Outcome | None]:
    """Run the blocks one after another in one folder, where each finds what the last one left."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name, "work")
        shutil.copytree(TOP / "samples", folder / "samples")
        environment = _environment(Path(name))
        for command in ("init --quiet", "add --all", "commit --quiet --message start"):
            subprocess.run(["git", *command.split()], cwd=folder, env=environment, check=True)
        return [_run(block, folder, environment) if can_run(block) else None for block in listed]


def _environment(home: Path) -> dict[str, str]:
    # The commands of the README are those beside this Python; nobody's git settings count.
    path = os.pathsep.join([str(Path(sys.executable).parent), os.environ["PATH"]])
    who = {
        f"GIT_{role}_{key}": "reader"
        for role in ("AUTHOR", "COMMITTER")
        for key in ("NAME", "EMAIL")
    }
    clean = {"GIT_CONFIG_NOSYSTEM": "1", "GIT_CONFIG_GLOBAL": os.devnull, "LC_ALL": "C.UTF-8"}
    return {"HOME": str(home), "PATH": path, **clean, **who}


def _run(block: Block, folder: Path, environment: dict[str, str]) -> Outcome:
    done = subprocess.run(
        ["sh", "-ec", block.script],
        cwd=folder,
        env=environment,
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT if block.with_messages else subprocess.PIPE,
        encoding="utf-8",
        timeout=120,
    )
    # An excerpt may end in the blank line that closed it.
    stdout = done.stdout.rstrip() + "\n" if done.stdout.strip() else ""
    return Outcome(done.returncode, stdout, done.stderr or "")


@cache
def _outcomes() -> list[Outcome | None]:
    return run_all(_BLOCKS)


_BLOCKS = blocks(README.read_text(encoding="utf-8"))


@pytest.mark.parametrize(
    "number", range(len(_BLOCKS)), ids=lambda n: _BLOCKS[n].script.split("\n")[0]
)
def test_a_command_prints_what_is_shown(number: int) -> None:
    block, outcome = _BLOCKS[number], _outcomes()[number]
    if outcome is None:
        pytest.skip("no ngspice on this machine")
    assert outcome.code == block.code, outcome.stderr
    if block.shown is not None:
        assert outcome.stdout == block.shown


def test_every_command_is_run_or_says_why_not() -> None:
    text = README.read_text(encoding="utf-8")
    above = [match["above"] for match in _SHELL.finditer(text)]
    for line in above:
        assert re.fullmatch(r"<!-- (run.*|not run: .{10,}) -->", line), line
    assert sum(line.startswith("<!-- run") for line in above) == len(_BLOCKS) >= 15


# What is copied and generated ---------------------------------------------------------------------


def test_blocks_that_are_files_are_those_files() -> None:
    found = list(_COPY.finditer(README.read_text(encoding="utf-8")))
    assert {match["file"] for match in found} >= {"samples/workflow/netlists.yml"}
    for match in found:
        assert match["text"] == (TOP / match["file"]).read_text(encoding="utf-8")


def test_the_hooks_exist() -> None:
    shown = re.findall(r"^ +- id: (\S+)$", README.read_text(encoding="utf-8"), re.MULTILINE)
    offered = (TOP / ".pre-commit-hooks.yaml").read_text(encoding="utf-8")
    assert shown == re.findall(r"^- id: (\S+)$", offered, re.MULTILINE)


def test_the_python_passes(tmp_path: Path) -> None:
    (match,) = _PYTEST.finditer(README.read_text(encoding="utf-8"))
    shutil.copytree(TOP / "samples", tmp_path / "samples")
    (tmp_path / "test_boards.py").write_text(match["text"], encoding="utf-8")
    command = [sys.executable, "-m", "pytest", "-q", "-p", "no:cacheprovider", "test_boards.py"]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, encoding="utf-8", timeout=120)
    assert done.returncode == 0, done.stdout
    assert len(match["text"].splitlines()) <= 12


def test_the_reference_of_the_configuration_is_that_of_the_schema() -> None:
    (match,) = _KEYS.finditer(README.read_text(encoding="utf-8"))
    assert match["text"] == reference()


def reference() -> str:
    """The keys of ``tauledger.toml`` as a table, from the schema that ships in the package."""
    schema = json.loads(_SCHEMA.read_text(encoding="utf-8"))
    path = schema["$defs"]["path"]["properties"]
    own = {key: value for key, value in path.items() if key not in schema["properties"]}
    shared = {key: value for key, value in schema["properties"].items() if key != "path"}
    rows = [
        *_rows("path.NAME.", own, schema["$defs"]),
        *_rows("", shared, schema["$defs"]),
    ]
    lines = ["| key | value | meaning |", "|---|---|---|"]
    lines += [f"| `{key}` | {value} | {meaning} |" for key, value, meaning in rows]
    return "\n".join(lines) + "\n"


def _rows(
    prefix: str, properties: dict[str, Any], parts: dict[str, Any]
) -> Iterator[tuple[str, str, str]]:
    for key, entry in properties.items():
        value = _resolved(entry, parts)
        inner = value.get("properties")
        named = value.get("additionalProperties")
        ends = set(inner or ()) <= {"min", "max"}
        if inner is not None and not ends and not _is_leaf(entry):
            yield from _rows(f"{prefix}{key}.", inner, parts)
        elif isinstance(named, dict) and "properties" in named:
            yield from _rows(f"{prefix}{key}.CLASS.", named["properties"], parts)
        elif isinstance(named, dict):
            yield f"{prefix}{key}.NAME", _value(named, parts), value["description"]
        else:
            yield f"{prefix}{key}", _value(entry, parts), value["description"]


_LEAVES = {
    "window": "`{ min = …, max = … }`, one or both",
    "texts": "text, or a list of texts",
    "nets": "a net, or a list of two",
    "tolerance": '`"20 %"`, a letter of IEC 60062, or `{ min = "-20 %", max = "80 %" }`',
    "percents": '`"20 %"`, or `{ min = "-20 %", max = "80 %" }`',
    "volts": '`"20 mV"`, or `{ min = "-30 mV", max = "30 mV" }`',
    "input": 'a source by name, or `{ node = "IN", resistance = "600 Ω" }`',
    "output": 'a net or two, or `{ node = "OUT", load_resistance = "10 kΩ", '
    'load_capacitance = "220 pF" }`',
    "generic_models": '`true`, or `{ KT17 = "npn" }`',
}
"""Definitions of the schema that are one value to a reader."""


def _is_leaf(entry: dict[str, Any]) -> bool:
    return entry.get("$ref", "").rpartition("/")[2] in _LEAVES


def _resolved(entry: dict[str, Any], parts: dict[str, Any]) -> dict[str, Any]:
    """The entry with what it refers to; what it says itself counts first."""
    if "$ref" not in entry:
        return entry
    return {**_resolved(parts[entry["$ref"].rpartition("/")[2]], parts), **entry}


def _value(entry: dict[str, Any], parts: dict[str, Any]) -> str:
    name = entry.get("$ref", "").rpartition("/")[2]
    if name in _LEAVES:
        return _LEAVES[name]
    value = _resolved(entry, parts)
    if "enum" in value:
        return ", ".join(f"`{word}`" for word in value["enum"])
    if value.get("type") == "boolean":
        return "`true` or `false`"
    if value.get("type") == "array":
        return f"a list of {_table(value['items'], parts)}"
    if value.get("type") == "object":
        return _table(value, parts)
    if examples := value.get("examples"):
        return f'`"{examples[0]}"`'
    return "text"


def _table(value: dict[str, Any], parts: dict[str, Any]) -> str:
    ends = [
        f'{key} = "{_resolved(entry, parts)["examples"][0]}"'
        for key, entry in value["properties"].items()
    ]
    return f"`{{ {', '.join(ends)} }}`"


# Refilling ----------------------------------------------------------------------------------------


def refilled(text: str) -> str:
    """The README with the output of its commands, its copies and its reference as they are now."""
    outcomes = iter(run_all(blocks(text)))

    def output(match: re.Match[str]) -> str:
        outcome = next(outcomes)
        if outcome is None or match["shown"] is None:
            return match[0]
        return _with(match, "shown", outcome.stdout)

    def copy(match: re.Match[str]) -> str:
        return _with(match, "text", (TOP / match["file"]).read_text(encoding="utf-8"))

    text = _COPY.sub(copy, _RUN.sub(output, text))
    return _KEYS.sub(lambda _: f"<!-- keys -->\n{reference()}<!-- end of keys -->\n", text)


def _with(match: re.Match[str], group: str, text: str) -> str:
    """The whole match with other text in this group."""
    start, end = match.start(group) - match.start(), match.end(group) - match.start()
    return match[0][:start] + text + match[0][end:]


if __name__ == "__main__":
    if sys.argv[1:] != ["--refill"]:
        sys.exit("usage: python tests/test_readme.py --refill")
    README.write_text(refilled(README.read_text(encoding="utf-8")), encoding="utf-8")
