"""Work on days shared by several processes."""

from __future__ import annotations

import multiprocessing
import multiprocessing.connection
import os
import threading
from collections.abc import Callable, Iterator
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool

from fieldgen.errors import ProcessError

_work: Callable | None = None
"""What a process of the pool does, handed over once instead of with every day."""


def map_days(work: Callable, *arguments: list, jobs: int) -> Iterator:
    """Results of `work` for each of the arguments, in their order, from up to `jobs` processes."""
    workers = min(jobs, len(arguments[0]))
    if workers <= 1:
        yield from map(work, *arguments)
        return
    try:
        with ProcessPoolExecutor(workers, initializer=_take, initargs=(work,)) as pool:
            yield from pool.map(_do, *arguments)
    except BrokenProcessPool:
        raise ProcessError(
            f"one of {workers} processes was killed, as the system does when memory is short. "
            "Run again with fewer --jobs."
        ) from None


def _take(work: Callable) -> None:
    global _work
    _work = work
    threading.Thread(target=_end_with_parent, daemon=True).start()


def _end_with_parent() -> None:
    """End this process when the one that began it is gone, however it went: nobody would read what
    it does, and it would hold the output folder against the next run."""
    multiprocessing.connection.wait([multiprocessing.parent_process().sentinel])
    os._exit(1)


def _do(*arguments):
    return _work(*arguments)
