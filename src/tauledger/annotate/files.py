"""Reading a drawing and replacing a file in one step, so that no half of one is ever left."""

from __future__ import annotations

import os
import stat
import sys
import tempfile
from collections.abc import Sequence
from pathlib import Path

from tauledger.annotate.comments import remove_comments
from tauledger.annotate.drawing import Drawing, remove_marks
from tauledger.netlist.source import read_bytes
from tauledger.problems import Problem, ProblemError, Severity

MAXIMUM_DRAWING_BYTES = 16 * 1024 * 1024


def read_drawings(paths: Sequence[str]) -> list[Drawing]:
    """Drawings with their bytes; raises ProblemError when one is missing, too large or no file."""
    return [Drawing(path, _read_drawing(path)) for path in paths]


def removed(paths: Sequence[str], drawings: bool) -> list[bytes]:
    """Every file without its annotations, whether drawings or netlists."""
    if drawings:
        return [remove_marks(drawing.content, drawing.path) for drawing in read_drawings(paths)]
    return [remove_comments(read_bytes(Path(path))) for path in paths]


def check_files(paths: Sequence[str], contents: Sequence[bytes]) -> list[Problem]:
    """A problem for every file that does not hold what it should; nothing is written."""
    return [
        Problem(
            "annotation-stale",
            Severity.WARNING,
            f"{path}: the annotations are stale or missing",
            advice="Run the same tauledger annotate without --check.",
        )
        for path, content in zip(paths, contents, strict=True)
        if not Path(path).is_file() or Path(path).read_bytes() != content
    ]


def write_files(paths: Sequence[str], contents: Sequence[bytes]) -> None:
    """:func:`replace_file` for each, once all are ready."""
    for path, content in zip(paths, contents, strict=True):
        replace_file(Path(path), content)


def _read_drawing(path: str) -> bytes:
    try:
        return read_bytes(Path(path), MAXIMUM_DRAWING_BYTES)
    except ProblemError as error:
        (cause,) = error.problems
        if cause.code == "file-too-large":
            message = f"{path}: larger than the {MAXIMUM_DRAWING_BYTES} bytes allowed for a drawing"
            advice = "Export the sheet without embedded pictures."
        else:
            message, advice = cause.message, cause.advice.replace("netlist", "drawing")
        raise ProblemError(Problem(cause.code, cause.severity, message, advice=advice)) from None


def replace_file(path: Path, content: bytes) -> None:
    """Put ``content`` at ``path``, all or nothing; nothing is written when it is there already.

    An existing file keeps its permissions, and its owner where the system allows that. A symbolic
    link stays, and the file it points to is replaced. Raises ProblemError when the target is a
    folder, a device or a pipe, or cannot be written.
    """
    try:
        target = path.resolve()
        if target.is_symlink():  # a loop of links, which Python 3.13 and later resolve to itself
            raise _unwritable(path, "it is a loop of links")
        present = target.stat() if target.exists() else None
        if present is not None and not stat.S_ISREG(present.st_mode):
            raise _unwritable(path, "it is a folder, device or pipe")
        if present is not None and target.read_bytes() == content:
            return
        if present is not None and not os.access(target, os.W_OK):
            raise _unwritable(path, "it is read-only")
        _replace(target, content, present)
    except (OSError, RuntimeError) as error:  # RuntimeError: a loop of links, before Python 3.13
        raise _unwritable(path, getattr(error, "strerror", None) or "not a usable path") from None


def _replace(target: Path, content: bytes, present: os.stat_result | None) -> None:
    # A name beside the target: replacing is one step only inside one file system.
    handle, name = tempfile.mkstemp(prefix=f".{target.name}.", dir=target.parent)
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(content)
            stream.flush()
            os.fsync(stream.fileno())
        _take_over(name, present)
        os.replace(name, target)
    except BaseException:
        os.unlink(name)
        raise


def _take_over(name: str, present: os.stat_result | None) -> None:
    """Permissions as before, or what the user's mask gives a new file."""
    if present is None:
        mask = os.umask(0)
        os.umask(mask)
        os.chmod(name, 0o666 & ~mask)
        return
    if sys.platform != "win32" and os.geteuid() == 0:
        os.chown(name, present.st_uid, present.st_gid)
    os.chmod(name, stat.S_IMODE(present.st_mode))


def _unwritable(path: Path, reason: str) -> ProblemError:
    return ProblemError(
        Problem(
            "file-unwritable",
            Severity.ERROR,
            f"{path}: cannot be written ({reason})",
            advice="Check the path and the folder's permissions, or give another --output.",
        )
    )
