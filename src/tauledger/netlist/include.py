"""Where an included file is, and whether it may be read: only inside the allowed roots."""

from __future__ import annotations

import os
import re
import sys
from collections.abc import Sequence
from pathlib import Path

from tauledger.netlist.codes import fault, problem
from tauledger.problems import Problem, SourceSpan
from tauledger.records import dataclass

_DRIVE = re.compile(r"[A-Za-z]:[\\/]")


@dataclass(frozen=True, slots=True)
class Found:
    """The file to read, and a warning when it lies elsewhere than the line says."""

    path: Path
    problem: Problem | None = None


def default_roots(netlist: Path) -> tuple[Path, ...]:
    """The top of the git working tree that holds the netlist, else the netlist's own folder."""
    # Path.resolve, before Python 3.13, raises for a loop of links.
    folder = Path(os.path.realpath(netlist)).parent
    for candidate in (folder, *folder.parents):
        if (candidate / ".git").exists():
            return (candidate,)
    return (folder,)


def find_include(
    name: str, including: Path, top: Path, roots: Sequence[Path], span: SourceSpan
) -> Found:
    """Resolve the file named in an .include or .lib line.

    Backslashes are read as slashes and letter case is forgiven. A file asked for elsewhere (an
    absolute path of another machine, say) is taken from beside the netlist when it lies there,
    with a warning. Raises ProblemError for a missing file or one outside ``roots``.
    """
    spelled = name.replace("\\", "/")
    # Windows would ask the server in //server/file for it, with the user's name, before the path
    # could be held against the roots.
    foreign = spelled.startswith(("~", "//"))
    if sys.platform != "win32":
        foreign = foreign or bool(_DRIVE.match(name))
    refused = foreign
    if not foreign:
        asked = including.parent / spelled
        resolved = _existing(asked, roots)
        if resolved is not None:
            return Found(resolved)
        refused = not _inside(_resolve(asked), roots)
    base = spelled.rsplit("/", 1)[-1]
    if base != spelled and base not in ("", ".", ".."):
        for folder in (including.parent, top.parent):
            beside = _existing(folder / base, roots)
            if beside is not None:
                return Found(beside, _relocated(name, beside, span))
    if refused:
        raise fault(
            "include-refused",
            f"{name!r} lies outside the folders that may be read "
            f"({', '.join(str(root) for root in roots)})",
            span,
            "Copy the file beside the netlist and include it by its name.",
        )
    raise fault(
        "include-missing",
        f"included file {name!r} does not exist",
        span,
        "Put the file beside the netlist, or correct the name.",
    )


def _relocated(name: str, beside: Path, span: SourceSpan) -> Problem:
    return problem(
        "include-relocated",
        f"{name!r} was not there; {beside.name!r} beside the netlist is read instead",
        span,
        "Include the file by its name alone, so that the netlist reads on every machine.",
    )


def _inside(path: Path | None, roots: Sequence[Path]) -> bool:
    return path is not None and any(path.is_relative_to(root) for root in roots)


def _resolve(path: Path) -> Path | None:
    try:
        return path.resolve()
    except (OSError, ValueError, RuntimeError):
        return None


def _existing(path: Path, roots: Sequence[Path]) -> Path | None:
    """The real path if it exists inside the roots, forgiving letter case.

    Nothing outside the roots is even looked at, so that a netlist cannot probe for files.
    """
    resolved = _resolve(path)
    if resolved is None or not _inside(resolved, roots):
        return None
    try:
        if resolved.exists():
            return resolved
        return _ignoring_case(resolved, roots)
    except OSError:
        return None


def _ignoring_case(path: Path, roots: Sequence[Path]) -> Path | None:
    root = next(root for root in roots if path.is_relative_to(root))
    current = root
    for part in path.relative_to(root).parts:
        exact = current / part
        if exact.exists():
            current = exact
            continue
        if not current.is_dir():
            return None
        matches = sorted(entry for entry in current.iterdir() if entry.name.lower() == part.lower())
        if not matches:
            return None
        current = matches[0]
    resolved = _resolve(current)
    return resolved if _inside(resolved, roots) else None
