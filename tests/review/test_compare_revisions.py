"""Netlists out of git: the right revision of every file, nothing outside, no option injected."""

from __future__ import annotations

import json
import os
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest
from markdown_it import MarkdownIt

from tauledger.command import main
from tauledger.problems import ProblemError
from tauledger.revision import name_in, opened
from tauledger.revisions import Aim, compare_netlists

AMPLIFIER = """Gate post: one stage with its models apart
VCC vcc 0 12
VIN in 0 AC 1
RS in src 600
C1 src base 2.2u
R1 vcc base 68k
R2 base 0 15k
RC vcc coll 3.9k
RE emit 0 1k
CE emit 0 100u
Q1 coll base emit NSMALL
C2 coll out 1u
RL out 0 10k
.include "../Lib/Small.inc"
.print ac v(out)
.end
"""
MODEL = ".model NSMALL NPN (IS=15f BF={} VAF=85 CJE=14p CJC=4.2p TF=0.42n)\n"

Git = Callable[..., str]


@pytest.fixture
def repository(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Two commits: boards/post.cir with its models, then both edited; and edited again."""
    monkeypatch.setenv("GIT_CONFIG_GLOBAL", os.devnull)
    monkeypatch.setenv("GIT_CONFIG_NOSYSTEM", "1")
    for role in ("AUTHOR", "COMMITTER"):
        monkeypatch.setenv(f"GIT_{role}_NAME", "bench")
        monkeypatch.setenv(f"GIT_{role}_EMAIL", "bench@example.org")
    top = tmp_path / "work"
    (top / "boards").mkdir(parents=True)
    (top / "lib").mkdir()
    _git(top, "init", "-q", "-b", "main")
    _write(top, "100u", 260)
    _commit(top, "first")
    _write(top, "22u", 260)
    _commit(top, "second")
    monkeypatch.chdir(top)
    return top


def _write(top: Path, bypass: str, gain: int) -> None:
    (top / "boards/post.cir").write_text(AMPLIFIER.replace("100u", bypass))
    (top / "lib/small.inc").write_text(MODEL.format(gain))


def _git(folder: Path, *arguments: str) -> str:
    done = subprocess.run(["git", *arguments], cwd=folder, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return done.stdout


def _commit(top: Path, message: str) -> None:
    _git(top, "add", "-A")
    _git(top, "commit", "-q", "-m", message)


def test_two_revisions_are_compared_and_the_tree_is_left_alone(
    repository: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    _write(repository, "47u", 300)
    before = _git(repository, "status", "--porcelain")
    old, new = "HEAD~1:boards/post.cir", "main:boards/post.cir"
    assert main(["compare", old, new, "--format", "json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert (document["old"], document["new"]) == (old, new)
    (part,) = document["parts"]
    assert (part["old_name"], part["details"][0]["new"]) == ("CE", pytest.approx(22e-6))
    assert part["old_span"]["path"] == "HEAD~1:boards/post.cir"
    assert part["new_span"]["line"] == 10
    assert document["attributions"][0]["effects"][0]["share"] == pytest.approx(1.0)
    assert _git(repository, "status", "--porcelain") == before
    assert (repository / "boards/post.cir").read_text() == AMPLIFIER.replace("100u", "47u")


def test_includes_come_from_the_same_revision(repository: Path) -> None:
    """Only the model card is edited; the name in the include is of another letter case."""
    _write(repository, "22u", 400)
    comparison = compare_netlists("HEAD:boards/post.cir", "boards/post.cir", Aim())
    (part,) = comparison.parts
    assert part.new_name == "Q1"
    (detail,) = part.details
    assert (detail.what, detail.old, detail.new) == ("model BF", 260.0, 400.0)


def test_report_against_a_revision(
    repository: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(repository / "boards")
    # As in a hook, where git has set its own folder for the command.
    monkeypatch.setenv("GIT_DIR", ".git")
    assert main(["report", "post.cir", "--against", "HEAD~1"]) == 0
    text = capsys.readouterr().out
    assert "Changes since HEAD~1:boards/post.cir" in text
    assert "CE 100 % of the move" in text
    assert main(["report", "post.cir", "--against", "HEAD"]) == 0
    assert "no electrical change" in capsys.readouterr().out


def test_the_configuration_of_the_revision_counts(repository: Path) -> None:
    (repository / "tauledger.toml").write_text(
        '[path.post]\nnetlist = "boards/*.cir"\nmodels = "lib/*.inc"\n'
    )
    bare = AMPLIFIER.replace('.include "../Lib/Small.inc"\n', "")
    (repository / "boards/post.cir").write_text(bare)
    _commit(repository, "configured")
    (repository / "lib/small.inc").write_text("* emptied\n.param none=1\n")
    old = "HEAD:boards/post.cir"
    assert main(["compare", old, old]) == 0


def test_a_path_may_count_from_the_current_folder(
    repository: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(repository / "boards")
    assert not compare_netlists("HEAD:./post.cir", "HEAD:boards/post.cir", Aim()).electrical


def test_markdown_is_a_section_in_which_no_name_acts(
    repository: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Rendered by markdown-it, a CommonMark parser that rich brings along."""
    name = "C@team|`<img/src>"
    edited = AMPLIFIER.replace("100u", "10u").replace("CE ", name + " ")
    (repository / "boards/post.cir").write_text(edited)
    given = ["compare", "HEAD:boards/post.cir", "boards/post.cir", "--format", "markdown"]
    assert main(given) == 0
    text = capsys.readouterr().out
    rendered = MarkdownIt("commonmark", {"html": True}).enable("table").render(text)
    assert rendered.startswith("<h3>Changes: <code>HEAD:boards/post.cir</code> → <code>boards")
    assert rendered.count("<table>") == text.count("\n| ---") >= 3
    assert "<img" not in rendered
    assert "<code>CE → C@team¦`&lt;img/src&gt;</code></td>" in rendered
    assert '<td style="text-align:right">100.0 %</td>' in rendered


@pytest.mark.parametrize(
    "revision",
    [
        "--output=/tmp/x",
        "-h",
        "--exec=sh",
        "HEAD --all",
        "HEAD\n",
        "HEAD;touch injected",
        "$(touch injected)",
        "`touch injected`",
        "HEAD^{tree}",
        "HEAD..HEAD~1",
        "@{",
        "\x1b[2J",
        "x" * 5000,
        "nowhere",
    ],
)
def test_hostile_revisions_are_refused(repository: Path, revision: str) -> None:
    with pytest.raises(ProblemError) as caught:
        compare_netlists(f"{revision}:boards/post.cir", "boards/post.cir", Aim())
    assert caught.value.problems[0].code in ("revision-refused", "revision-unknown")
    with pytest.raises(ProblemError):
        compare_netlists(name_in(revision, Path("boards/post.cir")), "boards/post.cir", Aim())
    assert sorted(p.name for p in repository.iterdir()) == [".git", "boards", "lib"]


@pytest.mark.parametrize(
    "path", ["", "/etc/passwd", "../x/../../y", "./../../x", "boards", "boards/none.cir"]
)
def test_only_files_of_the_tree_are_read(repository: Path, path: str) -> None:
    with pytest.raises(ProblemError) as caught:
        compare_netlists(f"HEAD:{path}", "boards/post.cir", Aim())
    assert caught.value.problems[0].code == "revision-file"


def test_links_in_a_revision_are_not_followed(repository: Path, tmp_path: Path) -> None:
    (tmp_path / "secret.inc").write_text(MODEL.format(999))
    (repository / "lib/small.inc").unlink()
    (repository / "lib/small.inc").symlink_to(tmp_path / "secret.inc")
    (repository / "boards/link.cir").symlink_to("post.cir")
    _commit(repository, "links")
    with pytest.raises(ProblemError) as caught:
        compare_netlists("HEAD:boards/link.cir", "boards/post.cir", Aim())
    assert caught.value.problems[0].code == "revision-file"
    with pytest.raises(ProblemError) as caught:
        compare_netlists("HEAD:boards/post.cir", "HEAD:boards/post.cir", Aim())
    missing = {p.code: p.span for p in caught.value.problems}["include-missing"]
    assert missing is not None
    assert missing.path == "HEAD:boards/post.cir"


def test_includes_that_lead_outside_are_refused_without_naming_the_copy(repository: Path) -> None:
    netlist = AMPLIFIER.replace("../Lib/Small.inc", "../../../../../../etc/passwd")
    (repository / "boards/post.cir").write_text(netlist)
    _commit(repository, "escape")
    with pytest.raises(ProblemError) as caught:
        compare_netlists("HEAD:boards/post.cir", "HEAD:boards/post.cir", Aim())
    assert "include-refused" in {problem.code for problem in caught.value.problems}
    assert not any("tauledger-" in problem.message for problem in caught.value.problems)


def test_a_folder_that_is_no_repository_is_said(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("GIT_CEILING_DIRECTORIES", str(tmp_path.parent))
    monkeypatch.chdir(tmp_path)
    with pytest.raises(ProblemError) as caught, opened("HEAD:a.cir"):
        pass
    assert caught.value.problems[0].code == "revision-no-repository"


def test_a_file_with_a_colon_in_its_name_is_a_file(repository: Path) -> None:
    odd = repository / "HEAD:post.cir"
    odd.write_text(MODEL.format(1))
    with opened("HEAD:post.cir") as place:
        assert (place.path, place.roots) == (Path("HEAD:post.cir"), None)
