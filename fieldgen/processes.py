"""Work on days shared by several processes."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import ProcessPoolExecutor

_work: Callable | None = None
"""What a process of the pool does, handed over once instead of with every day."""


def map_days(work: Callable, *arguments: list, jobs: int) -> Iterator:
    """Results of `work` for each of the arguments, in their order, from up to `jobs` processes."""
    workers = min(jobs, len(arguments[0]))
    if workers == 1:
        yield from map(work, *arguments)
        return
    with ProcessPoolExecutor(workers, initializer=_take, initargs=(work,)) as pool:
        yield from pool.map(_do, *arguments)


def _take(work: Callable) -> None:
    global _work
    _work = work


def _do(*arguments):
    return _work(*arguments)
