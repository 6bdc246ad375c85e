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


def step_means(column, time, values, grid: TimeGrid, columns: int):
    """Means (steps, columns) of records' values, NaN where a step has none.

    column : (n,) int, the station or site of each record
    time : (n,) datetime64[s]; records outside the grid are left out
    values : (n,) float, NaN where missing
    """
    cell = grid.index(time) * columns + column
    size = len(grid.stamps) * columns
    used = (cell >= 0) & (cell < size) & np.isfinite(values)
    count = np.bincount(cell[used], minlength=size)
    total = np.bincount(cell[used], weights=values[used], minlength=size)
    mean = np.full(size, np.nan)
    np.divide(total, count, out=mean, where=count > 0)
    return mean.reshape(len(grid.stamps), columns)


def spikes(column, time, values, step: np.timedelta64, limit: float):
    """Records (n,) bool that lie further than `limit` from the median of their own step.

    Steps of one or two records have no majority and mark nothing.
    """
    marked = np.zeros(len(values), bool)
    usable = np.flatnonzero(np.isfinite(values))
    if not len(usable):
        return marked
    number = _step_number(time[usable], step)
    order = usable[np.lexsort((values[usable], number, column[usable]))]
    number = _step_number(time[order], step)
    new_group = (np.diff(number, prepend=number[0] - 1) != 0) | (
        np.diff(column[order], prepend=-1) != 0
    )
    first = np.flatnonzero(new_group)
    size = np.diff(first, append=len(order))
    low, high = values[order[first + (size - 1) // 2]], values[order[first + size // 2]]
    median, size = np.repeat((low + high) / 2.0, size), np.repeat(size, size)
    marked[order] = (size > 2) & (np.abs(values[order] - median) > limit)
    return marked
