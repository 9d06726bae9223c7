"""Finding a configuration and the files it names, without leaving its folder."""

from __future__ import annotations

import fnmatch
import itertools
import os
import stat
from collections.abc import Iterator, Sequence
from pathlib import Path, PureWindowsPath

from tauledger.configuration.codes import problem
from tauledger.problems import Problem, ProblemError, SourceSpan

FILE_NAME = "tauledger.toml"
MAXIMUM_BYTES = 256 * 1024
MAXIMUM_MODEL_FILES = 200
_LONGEST_PATTERN = 300


def find_configuration(netlist: Path, roots: Sequence[Path]) -> Path | None:
    """The nearest ``tauledger.toml`` in the netlist's folder or above it, within ``roots``.

    ``roots`` are resolved folders. Raises ProblemError when the file found is a link that leads
    out of them.
    """
    folder = Path(os.path.realpath(netlist)).parent
    for candidate in (folder, *folder.parents):
        if not any(candidate.is_relative_to(root) for root in roots):
            return None
        found = candidate / FILE_NAME
        if os.path.lexists(found):
            target = Path(os.path.realpath(found))
            if not any(target.is_relative_to(root) for root in roots):
                raise ProblemError(_refused(f"{found} is a link that leads", roots[0], None))
            return found
    return None


def from_here(path: Path) -> str:
    """Relative to the working folder where it lies inside, as a person would have typed it."""
    here = Path.cwd()
    resolved = Path(os.path.realpath(path))
    return str(resolved.relative_to(here) if resolved.is_relative_to(here) else path)


def read_text(path: Path) -> str:
    """The text of a configuration; never blocks on a pipe or device."""
    try:
        handle = os.open(path, os.O_RDONLY | getattr(os, "O_NONBLOCK", 0))
        with os.fdopen(handle, "rb") as stream:
            regular = stat.S_ISREG(os.fstat(handle).st_mode)
            content = stream.read(MAXIMUM_BYTES + 1) if regular else b""
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "not a usable path"
        raise _unreadable(path, f"cannot be read ({reason})") from None
    if not regular:
        raise _unreadable(path, "expected a file, found a folder, device or pipe")
    if len(content) > MAXIMUM_BYTES:
        raise _unreadable(path, f"larger than the {MAXIMUM_BYTES} bytes allowed")
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise _unreadable(path, f"byte {error.start + 1} is not UTF-8, which TOML asks") from None


def _unreadable(path: Path, message: str) -> ProblemError:
    advice = "Check the path, and that it is a tauledger.toml in UTF-8."
    return ProblemError(problem("config-unreadable", f"{path}: {message}", None, advice))


def check_pattern(pattern: str, folder: Path, span: SourceSpan) -> Problem | None:
    """What is wrong with a path or pattern that must stay inside ``folder``, from its text."""
    windows = PureWindowsPath(pattern)
    parts = pattern.split("/")
    if pattern.startswith(("/", "~")) or windows.drive or windows.root or ".." in windows.parts:
        return _refused(f"{pattern!r} leads", folder, span)
    if len(pattern) > _LONGEST_PATTERN or "\0" in pattern or parts.count("**") > 1 or not pattern:
        return problem(
            "config-value",
            f"{pattern[:40]!r} is no path or pattern; expected one such as boards/*.cir, with at "
            "most one **",
            span,
            "Write a path relative to the folder of tauledger.toml.",
        )
    return None


def find_model_files(pattern: str, folder: Path, span: SourceSpan) -> list[Path]:
    """The files a checked pattern names, resolved.

    Raises ProblemError when there is none, when one is no file, or when a link leads outside the
    folder; nothing outside is opened.
    """
    top = folder.resolve()
    found = [folder / pattern]
    if any(character in pattern for character in "*?["):
        names = pattern.split("/")
        found = sorted(itertools.islice(_expand(folder, names, top), MAXIMUM_MODEL_FILES + 1))
    if len(found) > MAXIMUM_MODEL_FILES:
        limit = f"more than {MAXIMUM_MODEL_FILES} files match {pattern!r}"
        raise ProblemError(problem("config-value", limit, span, "Name the files that are needed."))
    resolved = [_resolve(path) for path in found]
    if any(path is None or not path.is_relative_to(top) for path in resolved):
        raise ProblemError(_refused(f"{pattern!r} leads", folder, span))
    files = [path for path in resolved if path is not None and path.is_file()]
    if not files or len(files) != len(found):
        raise ProblemError(
            problem(
                "config-file-missing",
                f"no model file {pattern!r} in {folder}",
                span,
                "Correct the name, or put the file there.",
            )
        )
    return files


def _expand(folder: Path, names: Sequence[str], top: Path) -> Iterator[Path]:
    """Files below ``folder`` whose path components match; ``**`` is read as ``*``."""
    resolved = _resolve(folder)
    if resolved is None or not resolved.is_relative_to(top) or not resolved.is_dir():
        return
    for entry in sorted(folder.iterdir()):
        if fnmatch.fnmatchcase(entry.name, names[0]):
            if len(names) == 1:
                yield entry
            else:
                yield from _expand(entry, names[1:], top)


def _resolve(path: Path) -> Path | None:
    try:
        return path.resolve()
    except (OSError, ValueError, RuntimeError):
        return None


def _refused(what: str, folder: Path, span: SourceSpan | None) -> Problem:
    return problem(
        "config-refused",
        f"{what} out of {folder}, the only folder that may be read",
        span,
        "Copy the file into that folder and name it from there.",
    )


def is_match(netlist: Path, pattern: str, folder: Path) -> bool:
    """Whether a netlist inside ``folder`` has the path that ``pattern`` describes."""
    path, top = Path(os.path.realpath(netlist)), folder.resolve()
    if not path.is_relative_to(top):
        return False
    parts = path.relative_to(top).parts
    names = [name for name in pattern.split("/") if name != "."]
    if "**" not in names:
        return _all_match(parts, names)
    place = names.index("**")
    head, tail = names[:place], names[place + 1 :]
    return (
        len(parts) >= len(head) + len(tail)
        and _all_match(parts[: len(head)], head)
        and _all_match(parts[len(parts) - len(tail) :], tail)
    )


def _all_match(parts: Sequence[str], names: Sequence[str]) -> bool:
    return len(parts) == len(names) and all(map(fnmatch.fnmatchcase, parts, names))
