"""Workers for many boards, and how far they have got."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, TextIO

if TYPE_CHECKING:
    from concurrent.futures import Executor

FEW = 5000
"""So many boards are done in this process before workers would have started (measured)."""
_THREADS = ("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "OMP_NUM_THREADS")


@contextmanager
def workers(boards: int) -> Iterator[Executor | None]:
    """One process a core when there are many boards; none otherwise."""
    cores = len(os.sched_getaffinity(0)) if sys.platform == "linux" else os.cpu_count() or 1
    if boards <= FEW or cores == 1:
        yield None
        return
    import multiprocessing
    from concurrent.futures import ProcessPoolExecutor

    # Not "fork", which copies whatever threads the numeric library has started.
    methods = multiprocessing.get_all_start_methods()
    context = multiprocessing.get_context("forkserver" if "forkserver" in methods else "spawn")
    context.set_forkserver_preload(["tauledger.decide.spread"])
    # Workers on all cores gain nothing from threads of the numeric library, and lose some.
    names = [name for name in _THREADS if name not in os.environ]
    os.environ.update(dict.fromkeys(names, "1"))
    try:
        with ProcessPoolExecutor(cores, mp_context=context) as executor:
            try:
                yield executor
            except BaseException:
                executor.shutdown(wait=False, cancel_futures=True)
                raise
    finally:
        for name in names:
            del os.environ[name]


def progress(stream: TextIO) -> Callable[[int, int], None] | None:
    """On a terminal only."""
    if not stream.isatty():
        return None

    def show(done: int, boards: int) -> None:
        stream.write(f"\r{done} of {boards} boards" if done < boards else "\r\x1b[K")
        stream.flush()

    return show
