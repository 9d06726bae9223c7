"""What an attacker may write: every netlist here ends soon, in one clear message or a circuit."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path

import pytest

from tauledger.circuit import flatten
from tauledger.netlist import parse, read
from tauledger.problems import ProblemError

# Of processor time: more than twice what the slowest takes; the bound is that it ends at all.
SECONDS = 20.0


def outcome(text: str) -> set[str]:
    """Codes of the problems of a netlist; empty when it gives a clean circuit."""
    begin = time.process_time()
    try:
        found = {entry.code for entry in flatten(parse("title\n" + text)).problems}
    except ProblemError as error:
        found = {entry.code for entry in error.problems}
    assert time.process_time() - begin < SECONDS
    return found


def doubling(levels: int) -> str:
    lines = ["R1 a 0 1", f"X1 a s{levels}", ".subckt s0 a", "R1 a 0 1k", ".ends"]
    for level in range(levels):
        lines += [
            f".subckt s{level + 1} a",
            f"X1 a s{level}",
            f"X2 a s{level}",
            ".ends",
        ]
    return "\n".join(lines)


MEASURED = """
import re, sys, time
begin = time.process_time()
from pathlib import Path
from tauledger.circuit import flatten
from tauledger.netlist import read
from tauledger.problems import ProblemError
try:
    flatten(read(Path(sys.argv[1])))
except ProblemError as error:
    print(*(entry.code for entry in error.problems))
print(time.process_time() - begin)
# Not ru_maxrss, which a new process takes over from the one that started it.
peak = re.search(r"VmHWM:\\s+(\\d+)", Path("/proc/self/status").read_text())
print(int(peak[1]) * 1024)
"""


def measured(path: Path) -> tuple[str, float, float]:
    """Codes, seconds and bytes of a run in a process of its own."""
    result = subprocess.run(
        [sys.executable, "-c", MEASURED, str(path)], capture_output=True, text=True, check=True
    )
    codes, seconds, size = result.stdout.splitlines()
    return codes, float(seconds), float(size)


@pytest.mark.parametrize("conditional", [False, True])
def test_a_billion_elements(tmp_path: Path, conditional: bool) -> None:
    text = doubling(30)
    if conditional:  # what stands inside a conditional cannot be counted beforehand
        text = text.replace("X2 a", ".if (1)\nX2 a").replace("\n.ends", "\n.endif\n.ends")
        text = text.replace("R1 a 0 1k\n.endif", "R1 a 0 1k")
    path = tmp_path / "deck.cir"
    path.write_text("title\n" + text)
    codes, seconds, size = measured(path)
    assert codes == "circuit-too-large"
    assert seconds < (SECONDS if conditional else 2.0)
    assert size < 200e6


def test_recursive_subcircuits() -> None:
    assert outcome("X1 a s\n.subckt s a\nR1 a 0 1\nX1 a s\n.ends") == {"circuit-too-large"}
    assert (
        outcome("X1 a s n=5\n.subckt s a n=0\nR1 a 0 1\n.if (n>0)\nX1 a s n={n-1}\n.endif\n.ends")
        == set()
    )


@pytest.mark.parametrize(
    ("text", "codes"),
    [
        # nesting
        ("R1 a 0 " + "(" * 40_000, {"nesting-too-deep"}),
        ("R1 a 0 {" + "(" * 40_000, {"nesting-too-deep"}),
        ("R1 a 0 {" + "(" * 30 + "1" + "+1)" * 30 + "}", set()),
        ("R1 a 0 {" + "1+" * 9_000 + "1}", {"expression-invalid"}),
        (".if (1)\n" * 20_000 + "R1 a 0 1\n" + ".endif\n" * 20_000, set()),
        (".subckt s a\n" * 10_000, {"nesting-too-deep"}),
        # long lines and names
        ("R1 a 0 1 " + "x" * 90_000, {"words-ignored"}),
        ("R1 a 0 " + "x" * 90_000, {"value-unreadable"}),
        ("R1 a 0 " + "9" * 90_000, {"value-unreadable"}),
        ("R1 a 0 1e999999999", {"value-overflow"}),
        ("R1 a 0 1\n+" * 40_000, {"line-too-long"}),
        ("V1 a 0 PWL(" + "1 2 " * 20_000 + ")", set()),
        (".print " + "v(" * 45_000 + "\nR1 a 0 1", {"node-missing"}),
        (".ic " + "v(a)=" * 15_000 + "\nR1 a 0 1", {"value-unreadable"}),
        ("E1 a 0 POLY(50) " + "x " * 40_000, {"value-unreadable"}),
        ("E1 a 0 POLY(1e9) x 0 1", {"polynomial-dimension"}),
        # regular expressions must not go back and forth
        (".func f(x)" + " " * 90_000 + "\nR1 a 0 1", {"line-unreadable"}),
        (".param a" + " " * 90_000 + "\nR1 a 0 1", {"line-unreadable"}),
        (
            ".param a=1" + " b" * 40_000 + "\nR1 a 0 1",
            {"expression-invalid", "expression-unbraced"},
        ),
        ("R1 a 0 1 " + "-(" * 45_000, {"nesting-too-deep"}),
        ("R1 a 0 1 " + '"' * 90_000, {"words-ignored"}),
        ("R1 a 0 1 " + "'" * 90_001, {"line-unreadable"}),
        ("R1 a 0 1 ;" + '"' * 90_000, set()),
        # many of everything
        ("R1 = 1\n" * 10_000, {"line-unreadable", "too-many-problems"}),
        ("+ x\n" * 100_000, {"continuation-orphan", "too-many-problems"}),
        (
            "".join(f"Q{n} a b 0 m{n}\n" for n in range(5_000)),
            {"model-missing", "too-many-problems"},
        ),
        (
            "".join(f".model m{n} npn\n" for n in range(5_000)) + "Q1 a b 0 n77\n",
            {"model-missing"},
        ),
        (
            "".join(f".param p{n}={{p{n + 1}+1}}\n" for n in range(20_000))
            + ".param p20000=1\nR1 a 0 p0",
            set(),
        ),
        ("a a a a a a a a a a a a\n" * 90_000, {"file-too-large"}),
        # functions that call themselves or each other twice
        (".func f(x) {f(x)+1}\nR1 a 0 {f(1)}", {"expression-invalid"}),
        (
            "".join(f".func f{n}(x) {{f{n + 1}(x)+f{n + 1}(x)}}\n" for n in range(40))
            + ".func f40(x) {x}\nR1 a 0 {f0(1)}",
            {"expression-invalid"},
        ),
        ("R1 a 0 {9**9**9**9}", {"expression-invalid"}),
        # models that inherit from each other
        (".model a ako:b npn\n.model b ako:a npn\nQ1 c b 0 a", {"model-missing"}),
    ],
)  # fmt: skip
def test_one_line_or_many(text: str, codes: set[str]) -> None:
    assert outcome(text) == codes


def test_many_parameters_in_many_calls() -> None:
    parameters = " ".join(f"p{n}={n}" for n in range(1000))
    calls = "".join(f"X{n} a s\n" for n in range(20_000))
    assert outcome(f"{calls}.subckt s a {parameters}\nR1 a 0 1\n.ends") == {"circuit-too-large"}


def test_many_empty_calls() -> None:
    assert outcome(doubling(16).replace("R1 a 0 1k\n", "* nothing\n")) == {"circuit-too-large"}


# files ------------------------------------------------------------------------------------------


def include(folder: Path, name: str, roots: list[Path] | None = None) -> set[str]:
    path = folder / "amp.cir"
    path.write_text(f"title\n.include {name}\nR1 a 0 1k\n")
    try:
        return {entry.code for entry in flatten(read(path, roots)).problems}
    except ProblemError as error:
        return {entry.code for entry in error.problems}


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A project folder with a secret file beside it."""
    (tmp_path / "secret.lib").write_text(".model stolen npn\n")
    project = tmp_path / "project"
    project.mkdir()
    (project / "ok.lib").write_text(".model m npn\n")
    return project


@pytest.mark.parametrize(
    "name",
    [
        "../secret.lib",
        "sub/../../secret.lib",
        "..\\secret.lib",
        "/etc/passwd",
        "~/.ssh/id_rsa",
        "C:\\Windows\\win.ini",
        "/dev/stdin",
        "/proc/self/environ",
    ],
)
def test_paths_outside_the_project_are_refused(folder: Path, name: str) -> None:
    assert include(folder, name) == {"include-refused"}


def test_what_is_refused_does_not_depend_on_what_exists(folder: Path) -> None:
    assert include(folder, "../secret.lib") == include(folder, "../nosuch.lib")


def test_symbolic_links_out_of_the_project_are_refused(folder: Path) -> None:
    (folder / "link.lib").symlink_to(folder.parent / "secret.lib")
    (folder / "dir").symlink_to(folder.parent)
    assert include(folder, "link.lib") == {"include-refused"}
    assert include(folder, "dir/secret.lib") == {"include-refused"}
    assert include(folder, "DIR/secret.lib") in ({"include-refused"}, {"include-missing"})


def test_allowed_roots_can_be_widened(folder: Path) -> None:
    assert include(folder, "../secret.lib", [folder.parent]) == set()


def test_the_git_working_tree_is_the_root_by_default(folder: Path) -> None:
    (folder.parent / ".git").mkdir()
    assert include(folder, "../secret.lib") == set()


def test_pipes_devices_and_folders_are_not_read(folder: Path) -> None:
    os.mkfifo(folder / "pipe.lib")
    (folder / "folder.lib").mkdir()
    (folder / "zero.lib").symlink_to("/dev/zero")
    assert include(folder, "pipe.lib") == {"file-not-regular"}
    assert include(folder, "folder.lib") == {"file-not-regular"}
    assert include(folder, "zero.lib", [Path("/")]) == {"file-not-regular"}
    with pytest.raises(ProblemError, match="expected a file"):
        read(folder / "pipe.lib")
    with pytest.raises(ProblemError, match="expected a file"):
        read(Path("/dev/zero"))


def test_doubling_includes_end(folder: Path) -> None:
    for level in range(15):
        (folder / f"{level}.lib").write_text(f".include {level + 1}.lib\n" * 2)
    (folder / "15.lib").write_text("R2 a 0 1\n")
    assert include(folder, "0.lib") >= {"include-too-deep"}


@pytest.mark.parametrize(
    "name",
    ["OK.LIB", "./ok.lib", ".\\ok.lib", '"ok.lib"', "'ok.lib'", "sub/../ok.lib", "Sub/Ok.lib"],
)
def test_spellings_of_an_include_that_exist(folder: Path, name: str) -> None:
    (folder / "sub").mkdir()
    (folder / "sub" / "ok.lib").write_text(".model m npn\n")
    assert include(folder, name) == set()


def test_a_name_with_blanks(folder: Path) -> None:
    (folder / "my models.lib").write_text(".model m npn\n")
    assert include(folder, "my models.lib") == set()
    assert include(folder, '"my models.lib"') == set()


def test_text_cannot_include() -> None:
    assert outcome(".include ok.lib\nR1 a 0 1") == {"include-refused"}
