"""Where PySpice and ngspice's shared library are on this machine."""

from __future__ import annotations

import importlib.util
import os
import sys
from collections.abc import Iterator
from pathlib import Path

from tauledger.problems import Problem, ProblemError, Severity

_FOLDERS = {
    "linux": ("/usr/lib/*", "/usr/lib", "/usr/lib64", "/usr/local/lib", "/usr/local/lib64"),
    "darwin": ("/opt/homebrew/lib", "/usr/local/lib", "/opt/local/lib"),
}
_FILES = {"linux": ("libngspice.so.0", "libngspice.so"), "darwin": ("libngspice.dylib",)}
_INSTALL = (
    "Debian: sudo apt-get install libngspice0 && pip install 'PySpice>=1.5'; "
    "macOS: brew install libngspice && pip install 'PySpice>=1.5'; "
    "Windows: pip install PySpice && pyspice-post-installation --install-ngspice-dll"
)


def require_ngspice() -> str:
    """The path of ngspice's library.

    Raises
    ------
    ProblemError
        When PySpice or the library is missing, with how to install both.
    """
    if importlib.util.find_spec("PySpice") is None:
        raise _missing("the Python package PySpice")
    found = next(_libraries(), None)
    if found is None:
        raise _missing("ngspice's shared library (libngspice)")
    return found


def _libraries() -> Iterator[str]:
    """Where the library may be, best first: as the user says, in the usual folders, as the
    dynamic linker knows."""
    chosen = os.environ.get("NGSPICE_LIBRARY_PATH")
    if chosen and Path(chosen).is_file():
        yield str(Path(chosen).resolve())
    if sys.platform == "win32":
        yield from _beside_pyspice()
        return
    for pattern in _FOLDERS.get(sys.platform, _FOLDERS["linux"]):
        for name in _FILES.get(sys.platform, _FILES["linux"]):
            yield from map(str, sorted(Path("/").glob(f"{pattern[1:]}/{name}")))
    from ctypes.util import find_library

    if found := find_library("ngspice"):
        yield found


def _beside_pyspice() -> Iterator[str]:
    """Where PySpice's own installer puts the library on Windows."""
    spec = importlib.util.find_spec("PySpice")
    if spec is not None and spec.origin is not None:
        folder = Path(spec.origin).parent / "Spice" / "NgSpice" / "Spice64_dll" / "dll-vs"
        yield from map(str, sorted(folder.glob("ngspice*.dll")))


def _missing(what: str) -> ProblemError:
    return ProblemError(
        Problem(
            "ngspice-missing",
            Severity.ERROR,
            f"--simulate needs {what}, which is not installed here",
            advice=_INSTALL,
        )
    )
