"""Times that a user gives, and the days that a period falls into."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

import numpy as np

from fieldgen.errors import InputError


@dataclass(frozen=True)
class Piece:
    """The steps first <= index < last of the input, all of one UTC day; `name` is YYYYMMDD."""

    name: str
    first: int
    last: int


def parse_time(text: str) -> np.datetime64:
    """UTC time from ISO 8601 text, such as 2026-09-08 or 2026-09-08T06:00Z.

    Raises InputError for anything else, and for another offset than UTC.
    """
    try:
        time = datetime.fromisoformat(text)
    except ValueError:
        raise InputError(
            f"time {text!r}: expected ISO 8601 in UTC, such as 2026-09-08T06:00Z."
        ) from None
    if time.utcoffset():
        raise InputError(f"time {text!r}: has an offset of {time.strftime('%z')}, expected UTC.")
    return np.datetime64(time.replace(tzinfo=None), "s")


def pieces(time, step: np.timedelta64, start: str | None, end: str | None) -> list[Piece]:
    """The days of a period: steps that lie between `start` and `end`, by default all.

    time (t,) datetime64, the ends of the steps. A step belongs to the day it covers, so the hour
    stamped 00:00 closes the day before. Raises InputError if the period is reversed or holds no
    step of the input.
    """
    low = parse_time(start) if start else time[0] - step
    high = parse_time(end) if end else time[-1]
    if low >= high:
        raise InputError(f"period: start {_text(low)} is not before end {_text(high)}.")
    chosen = np.flatnonzero((time - step >= low) & (time <= high))
    if not len(chosen):
        raise InputError(
            f"period: no step of the input lies between {_text(low)} and {_text(high)}; "
            f"the input runs from {_text(time[0] - step)} to {_text(time[-1])}."
        )
    days = (time[chosen] - step).astype("datetime64[D]")
    return [
        Piece(str(day).replace("-", ""), *(chosen[days == day][[0, -1]] + [0, 1]))
        for day in np.unique(days)
    ]


def _text(time) -> str:
    return np.datetime_as_string(time, unit="m")
