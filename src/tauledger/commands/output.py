"""Where results go: standard output to the last byte, or a file, all or nothing; refusals."""

from __future__ import annotations

import errno
import os
import sys
from collections.abc import Callable, Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

from tauledger.problems import Problem, ProblemError, Severity

if TYPE_CHECKING:
    from tauledger.report.layout import Line
    from tauledger.report.page import Page

FINE = 0
FINDING = 1
UNUSABLE = 2
INTERNAL = 3
INTERRUPTED = 130
PIPE_CLOSED = 141


def refuse(code: str, message: str, advice: str) -> NoReturn:
    raise ProblemError(Problem(code, Severity.ERROR, message, advice=advice))


def explain(problems: Iterable[Problem]) -> None:
    from tauledger.report.alphabet import alphabet
    from tauledger.report.problems import format_problems

    sys.stderr.write(alphabet(sys.stderr.encoding)(format_problems(problems)))
    sys.stderr.flush()


def deliver(write: Callable[[], object]) -> None:
    """Write the result to stdout to the last byte, or say why that failed."""
    try:
        write()
        sys.stdout.flush()
    except BrokenPipeError:
        raise
    except OSError as error:
        if sys.platform == "win32" and error.errno == errno.EINVAL:
            # So Windows says it of a pipe whose reader has gone (from memory).
            raise BrokenPipeError from None
        silence_stdout()
        message = f"the result could not be written: {error.strerror or error}"
        refuse("output-unwritable", message, "Check the disk or send the output elsewhere.")


def show_page(lay_out: Callable[[Page], list[Line]]) -> None:
    """Print a page of text."""
    from tauledger.report.terminal import write_page

    deliver(lambda: write_page(lay_out, sys.stdout))


def hand_over(content: bytes, path: str | None) -> None:
    """Put a report into a file, all or nothing, or write its bytes to stdout."""
    if path:
        from tauledger.annotate.files import replace_file

        replace_file(Path(path), content)
        return
    if content.startswith(b"\x89PNG") and sys.stdout.isatty():
        refuse("usage", "a PNG is nothing for a terminal", "Give --save FILE.")
    deliver(lambda: write_raw(content))


def write_utf8(text: str) -> None:
    """For formats that are UTF-8 wherever they are read, whatever the stream's own encoding."""
    write_raw(text.encode())


def write_raw(content: bytes) -> None:
    sys.stdout.flush()
    sys.stdout.buffer.write(content)
    sys.stdout.buffer.flush()


def write_bytes(content: bytes) -> None:
    """A patch as it is, which may hold any bytes of the netlist; harmless on a terminal."""
    if sys.stdout.isatty() or not hasattr(sys.stdout, "buffer"):
        from tauledger.report.alphabet import alphabet
        from tauledger.report.inert import inert

        spell = alphabet(sys.stdout.encoding)
        for line in content.decode("utf-8", "replace").splitlines():
            sys.stdout.write(spell(inert(line)) + "\n")
    else:
        sys.stdout.buffer.write(content)


def silence_stdout() -> None:
    """Keep Python from flushing to the dead stream, and complaining, on its way out."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def save_details(traceback: str, given: Sequence[str]) -> str:
    """Keep a traceback in a fresh file; where, in words."""
    try:
        return f"details in {_save(f'arguments: {list(given)!r}', traceback)}"
    except OSError as failure:
        return f"details could not be saved: {failure.strerror}"


def _save(head: str, traceback: str) -> str:
    import tempfile

    with tempfile.NamedTemporaryFile(
        "w",
        prefix="tauledger-",
        suffix=".txt",
        delete=False,
        encoding="utf-8",
        errors="backslashreplace",
    ) as file:
        file.write(f"{head}\nPython {sys.version}\n\n{traceback}")
    return file.name
