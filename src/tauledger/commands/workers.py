"""Workers for many boards, and how far they have got."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, TextIO

if TYPE_CHECKING:
    from concurrent.futures import Executor

FEW = 5000
"""So many boards are done in this process before workers would have started (measured)."""


@contextmanager
def workers(boards: int) -> Iterator[Executor | None]:
    """One process a core when there are many boards; none otherwise."""
    from tauledger.fleet import usable_cores, worker_processes

    cores = usable_cores()
    if boards <= FEW or cores == 1:
        yield None
        return
    with worker_processes(cores, "tauledger.decide.spread") as executor:
        yield executor


def progress(stream: TextIO) -> Callable[[int, int], None] | None:
    """On a terminal only."""
    if not stream.isatty():
        return None

    def show(done: int, boards: int) -> None:
        # Blanks, since not every console of Windows knows the code that clears a line.
        stream.write(f"\r{done} of {boards} boards" if done < boards else f"\r{'':<40}\r")
        stream.flush()

    return show
