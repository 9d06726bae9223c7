"""A netlist as it was in a revision of its git repository: ``HEAD~1:boards/amp.cir``.

Nothing is checked out and the working tree is not touched. The netlist, the files that its
``.include`` and ``.lib`` lines and the configuration may name, and the ``tauledger.toml`` files
above it are copied from the object store into a fresh folder, where they are read under the same
rules as a working tree. Symbolic links and submodules are left out, so nothing leads outside.

The revision is text of the user: it never reaches git as anything but one argument that does not
begin with a dash, and only the commit id that git makes of it is used afterwards. Objects are
read with ``git cat-file``, which, unlike commands that show files, runs no filter or driver.
"""

from __future__ import annotations

import fnmatch
import os
import re
import subprocess
import sys
import tempfile
import tomllib
import unicodedata
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path, PurePosixPath

from tauledger.problems import Problem, ProblemError, Severity
from tauledger.records import dataclass

MAXIMUM_FILE_BYTES = 8 * 1024 * 1024
MAXIMUM_BYTES = 64 * 1024 * 1024
"""Copied from one revision."""
MAXIMUM_FILES = 2000
_LONGEST_REVISION = 200
_SECONDS = 60
_CONFIGURATION = "tauledger.toml"
_INCLUDES = re.compile(r"^[ \t]*\.(?:inc|lib)[^\r\n]*(?:\r?\n?\+[^\r\n]*)*", re.I | re.M)
# A hook runs with these set; they would send git to another repository than the netlist's.
_HOOK_VARIABLES = ("GIT_DIR", "GIT_WORK_TREE", "GIT_INDEX_FILE", "GIT_PREFIX", "GIT_COMMON_DIR")
_ENVIRONMENT = {"LC_ALL": "C", "GIT_TERMINAL_PROMPT": "0", "GIT_NO_LAZY_FETCH": "1"}


@dataclass(frozen=True, slots=True)
class Place:
    """Where a netlist can be read, and what the user calls it."""

    path: Path
    roots: tuple[Path, ...] | None
    """Folders inside which includes may lie; None for those of a working tree."""
    name: str
    folder: str = ""
    """Of the copy, which no message should show."""

    def named(self, problem: Problem) -> Problem:
        """The problem with the user's names in place of the copy's."""
        span = problem.span and replace(problem.span, path=self.shown(problem.span.path))
        return replace(problem, message=self.shown(problem.message), span=span)

    def shown(self, text: str) -> str:
        """A text with the user's name in place of the copy's folder."""
        if not self.folder:
            return text
        prefix = self.name.partition(":")[0] + ":"
        for folder in {self.folder, os.path.realpath(self.folder)}:
            text = text.replace(folder + os.sep, prefix).replace(folder, prefix)
        return text


@contextmanager
def opened(name: str, where: Path | None = None) -> Iterator[Place]:
    """The netlist that ``name`` stands for: a file, else ``REV:path`` in git.

    ``where`` is a folder in the repository, the current one by default. The copy of a revision
    lives as long as the context. Raises ProblemError, with the user's names in it.
    """
    revision, colon, path = name.partition(":")
    if not colon or not revision or _is_drive(revision, path) or os.path.lexists(name):
        yield Place(Path(name), None, name)
        return
    repository = _Repository(where or Path())
    commit = repository.commit(revision)
    inside = repository.inside(path, name)
    with tempfile.TemporaryDirectory(prefix="tauledger-") as folder:
        inside = repository.copy(commit, inside, Path(folder), name)
        place = Place(Path(folder, inside), (Path(folder).resolve(),), name, folder)
        try:
            yield place
        except ProblemError as error:
            raise ProblemError(*map(place.named, error.problems)) from None


def _is_drive(revision: str, path: str) -> bool:
    """Whether ``C:\\amp.cir`` is a file that is not there, not a path in a revision named C."""
    on_drive = path.startswith(("\\", "/")) or sys.platform == "win32"
    # Git allows no backslash in a name; Windows begins the longest of its paths with \\?\.
    return "\\" in revision or (len(revision) == 1 and on_drive)


def name_in(revision: str, netlist: Path) -> str:
    """``REV:path`` for a file of a working tree, counted from the top of its repository."""
    if ":" in revision:
        raise _refused(revision)
    top = _Repository(netlist.parent).top
    resolved = netlist.resolve()
    if not resolved.is_relative_to(top):
        raise _fault(
            "revision-file", f"{netlist} leads out of its repository", "Name the file itself."
        )
    return f"{revision}:{resolved.relative_to(top).as_posix()}"


@dataclass(frozen=True, slots=True)
class _Blob:
    identity: str
    size: int


class _Repository:
    """The git repository that holds a folder."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        found = self._git("rev-parse", "--show-toplevel")
        if found is None or not found.strip():
            raise _fault(
                "revision-no-repository",
                f"{folder.resolve()} is not in the working tree of a git repository",
                "Run tauledger inside the repository that holds the netlist.",
            )
        self.top = Path(os.fsdecode(found).rstrip("\n")).resolve()

    def commit(self, revision: str) -> str:
        """The commit id of a revision."""
        if (
            not revision
            or revision.startswith("-")
            or len(revision) > _LONGEST_REVISION
            or not revision.isprintable()
            or " " in revision
        ):
            raise _refused(revision)
        found = self._git("rev-parse", "--verify", "--quiet", revision + "^{commit}")
        identity = (found or b"").decode("ascii", "replace").strip()
        if not re.fullmatch(r"[0-9a-f]{40,64}", identity):
            raise _fault(
                "revision-unknown",
                f"git knows no revision {revision!r} here",
                "Name a branch, tag or commit that the repository holds; fetch it if need be.",
            )
        return identity

    def inside(self, path: str, name: str) -> str:
        """The path from the top of the tree; as in git, ``./`` counts from the current folder.

        Backslashes are read as slashes, as in an .include.
        """
        path = path.replace("\\", "/")
        pure = PurePosixPath(path)
        if path.startswith(("./", "../")):
            joined = os.path.normpath(self.folder.resolve() / path)
            if Path(joined).is_relative_to(self.top):
                return Path(joined).relative_to(self.top).as_posix()
        elif path and not pure.is_absolute() and ".." not in pure.parts:
            return pure.as_posix()
        raise _fault(
            "revision-file",
            f"{name!r}: expected a path inside the repository after the colon",
            "Write it as REV:folder/netlist.cir, counted from the top of the repository.",
        )

    def copy(self, commit: str, netlist: str, target: Path, name: str) -> str:
        """Copy the netlist of a commit and the files it may ask for; its path, as git spells it."""
        tree = self._tree(commit)
        netlist = _spelt(netlist, tree)
        if netlist not in tree:
            raise _fault(
                "revision-file",
                f"{name!r}: the revision has no file {netlist!r}",
                "Correct the path, counted from the top of the repository (REV:./name counts from "
                "here); --against needs a netlist that the revision already has.",
            )
        above = [(parent / _CONFIGURATION).as_posix() for parent in PurePosixPath(netlist).parents]
        waiting = [netlist, *(path for path in above if path in tree)]
        copied: set[str] = set()
        total = 0
        while waiting:
            batch = list(dict.fromkeys(waiting))
            copied.update(batch)
            total += sum(tree[path].size for path in batch)
            if total > MAXIMUM_BYTES or len(copied) > MAXIMUM_FILES:
                raise _fault(
                    "revision-too-large",
                    f"{name!r}: what the netlist may include exceeds {MAXIMUM_FILES} files or "
                    f"{MAXIMUM_BYTES // 1024**2} MB",
                    "Include files by names that are not those of many others.",
                )
            waiting = []
            for path, content in self._contents(tree, batch):
                _write(target, path, content)
                waiting += (found for found in _asked(path, content, tree) if found not in copied)
        return netlist

    def _tree(self, commit: str) -> Mapping[str, _Blob]:
        """Every regular file of a commit that may be a netlist, by its path."""
        listing = self._git("ls-tree", "-r", "-l", "-z", "--full-tree", commit)
        found = {}
        for entry in (listing or b"").split(b"\0"):
            head, _, path = entry.partition(b"\t")
            fields = head.split()
            if len(fields) == 4 and fields[0] in (b"100644", b"100755") and fields[3].isdigit():
                blob = _Blob(fields[2].decode("ascii"), int(fields[3]))
                if blob.size <= MAXIMUM_FILE_BYTES:
                    found[os.fsdecode(path)] = blob
        return found

    def _contents(
        self, tree: Mapping[str, _Blob], paths: Sequence[str]
    ) -> Iterator[tuple[str, bytes]]:
        wanted = "".join(f"{tree[path].identity}\n" for path in paths).encode("ascii")
        stream = self._git("cat-file", "--batch", given=wanted) or b""
        place = 0
        for path in paths:
            head, _, _ = stream[place : place + 200].partition(b"\n")
            start, size = place + len(head) + 1, tree[path].size
            if not head.endswith(f" blob {size}".encode("ascii")):
                raise _fault(
                    "revision-object",
                    f"git does not hold the content of {path!r} in this revision",
                    "Fetch it: the clone has no history so deep, or leaves file contents out.",
                )
            yield path, stream[start : start + size]
            place = start + size + 1

    def _git(self, *arguments: str, given: bytes = b"") -> bytes | None:
        """What git prints, or None when it fails."""
        environment = {k: v for k, v in os.environ.items() if k not in _HOOK_VARIABLES}
        if sys.platform == "win32":
            # Else a git.exe in the folder of the netlist is started rather than git (from memory).
            os.environ.setdefault("NoDefaultCurrentDirectoryInExePath", "1")
        try:
            done = subprocess.run(
                ["git", *arguments],
                cwd=self.folder,
                env=environment | _ENVIRONMENT,
                input=given,
                capture_output=True,
                timeout=_SECONDS,
                check=False,
            )
        except (OSError, ValueError, subprocess.TimeoutExpired) as error:
            if not self.folder.is_dir():
                return None
            reason = "took too long" if isinstance(error, subprocess.TimeoutExpired) else "failed"
            raise _fault(
                "revision-git",
                f"git {reason} ({type(error).__name__})",
                "Check that git is installed and on the PATH.",
            ) from None
        return done.stdout if done.returncode == 0 else None


def _spelt(path: str, tree: Iterable[str]) -> str:
    """The path as the tree has it, where only letter case or the form of accents differs.

    On the file systems of macOS and Windows both spellings open the same file.
    """
    alike = [found for found in tree if _folded(found) == _folded(path)]
    return alike[0] if len(alike) == 1 else path


def _folded(path: str) -> str:
    return unicodedata.normalize("NFC", path).casefold()


def _asked(path: str, content: bytes, tree: Mapping[str, _Blob]) -> Iterable[str]:
    """Files of the tree that a file may ask for: rather one too many than one too few.

    Which of them is the one is the reader's affair, so every file of the right name counts.
    """
    if PurePosixPath(path).name == _CONFIGURATION:
        folder = PurePosixPath(path).parent
        patterns = list(_model_patterns(content))
        return [
            found
            for found in tree
            if any(
                fnmatch.fnmatchcase(found, (folder / pattern).as_posix()) for pattern in patterns
            )
        ]
    # Names are sought in the bytes as they are: zero bytes are those of UTF-16.
    text = content.replace(b"\0", b"").decode("utf-8", "surrogateescape")
    lines = "\n".join(match[0] for match in _INCLUDES.finditer(text)).casefold()
    if not lines:
        return []
    return [found for found in tree if PurePosixPath(found).name.casefold() in lines]


def _model_patterns(content: bytes) -> Iterator[str]:
    """Everything under a key ``models`` of a configuration, a broken one aside."""
    try:
        waiting: list[object] = [tomllib.loads(content.decode("utf-8-sig"))]
    except (UnicodeDecodeError, tomllib.TOMLDecodeError, RecursionError):
        return
    while waiting:
        table = waiting.pop()
        if not isinstance(table, dict):
            continue
        models = table.get("models")
        for pattern in models if isinstance(models, list) else [models]:
            if isinstance(pattern, str):
                yield pattern
        waiting.extend(table.values())


def _write(target: Path, path: str, content: bytes) -> None:
    # A tree made by hand may hold names that git itself would not check out.
    place = Path(os.path.normpath(target / path))
    if not place.is_relative_to(target) or "\0" in path:
        return
    try:
        place.parent.mkdir(parents=True, exist_ok=True)
        place.write_bytes(content)
    except OSError as error:
        raise _fault(
            "revision-object",
            f"the copy of {path!r} could not be written: {error.strerror or error}",
            "Check the room in the folder for temporary files.",
        ) from None


def _refused(revision: str) -> ProblemError:
    return _fault(
        "revision-refused",
        f"{revision[:60]!r} is no revision; expected a branch, tag or commit, without blanks and "
        "not beginning with a dash",
        "Name it as git does, such as HEAD~1, main or a commit id.",
    )


def _fault(code: str, message: str, advice: str) -> ProblemError:
    return ProblemError(Problem(code, Severity.ERROR, message, advice=advice))
