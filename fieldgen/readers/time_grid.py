"""Records at their own epochs -> means on one time grid.

The value of a step is the mean over the step that *ends* at its stamp: a record at 13:00:00
belongs to the hour stamped 13:00, one at 13:00:01 to the hour stamped 14:00.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class TimeGrid:
    """Stamps `start` < stamp <= `end`, `step` apart; datetime64[s] and timedelta64[s]."""

    start: np.datetime64
    end: np.datetime64
    step: np.timedelta64

    @classmethod
    def around(cls, times, step: np.timedelta64) -> TimeGrid:
        """The grid, aligned with the day, that holds all `times` (n,) datetime64[s].

        Where records lie within the steps, one that stands alone on the first edge does not make a
        step of its own: a day's file that begins at 00:00 does not make the last hour of the day
        before. Records once a step, on its edges, each make their step.
        """
        seconds = step.astype("timedelta64[s]").astype(np.int64)
        times = np.asarray(times).astype("datetime64[s]").astype(np.int64)
        first, last = times.min() // seconds, -(-times.max() // seconds)
        on_edges = (times % seconds == 0).all()
        if times.min() % seconds == 0 and on_edges:
            first -= 1
        epoch = np.datetime64(0, "s")
        return cls(epoch + first * step, epoch + max(last, first + 1) * step, step)

    @property
    def stamps(self):
        """The ends of the steps, datetime64[s]."""
        return np.arange(self.start, self.end, self.step) + self.step

    def index(self, times):
        """Index of the step each time belongs to; outside 0 to size - 1 where it is not covered."""
        return _step_number(times, self.step) - _step_number(self.start, self.step) - 1


def _step_number(times, step):
    """Number of the step, counted from 1970, that ends at or after each time."""
    seconds = np.asarray(times).astype("datetime64[s]").astype(np.int64)
    return -(-seconds // step.astype("timedelta64[s]").astype(np.int64))


def step_means(time, values, grid: TimeGrid):
    """Means (steps,) of records' values, NaN where a step has none.

    time (n,) datetime64[s]; records outside the grid are left out; values (n,), NaN where missing
    """
    step, size = grid.index(time), len(grid.stamps)
    used = (step >= 0) & (step < size) & np.isfinite(values)
    count = np.bincount(step[used], minlength=size)
    total = np.bincount(step[used], weights=values[used], minlength=size)
    return np.divide(total, count, out=np.full(size, np.nan), where=count > 0)


def spikes(time, values, step: np.timedelta64, limit: float):
    """Records (n,) bool of one station that lie further than `limit` from their step's median.

    Steps of one or two records have no majority and mark nothing.
    """
    marked = np.zeros(len(values), bool)
    usable = np.flatnonzero(np.isfinite(values))
    if not len(usable):
        return marked
    number = _step_number(time[usable], step)
    order = np.lexsort((values[usable], number))
    usable, number = usable[order], number[order]
    first = np.flatnonzero(np.diff(number, prepend=number[0] - 1))
    size = np.diff(first, append=len(number))
    low, high = values[usable[first + (size - 1) // 2]], values[usable[first + size // 2]]
    median, size = np.repeat((low + high) / 2.0, size), np.repeat(size, size)
    marked[usable] = (size > 2) & (np.abs(values[usable] - median) > limit)
    return marked
