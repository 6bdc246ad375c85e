"""Times that a user gives, and the days that a period falls into."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

import numpy as np

from fieldgen.errors import InputError


@dataclass(frozen=True)
class Piece:
    """One UTC day of the input, the steps first <= index < last; `name` is YYYYMMDD.

    asked : slice of the day's own steps that the period holds
    """

    name: str
    first: int
    last: int
    asked: slice


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


def check_period(start: str | None, end: str | None) -> None:
    """Raise InputError for times that cannot be, before anything is read."""
    times = [parse_time(text) if text else None for text in (start, end)]
    if None not in times:
        _check_order(*times)


def _check_order(start, end) -> None:
    if start >= end:
        raise InputError(f"period: start {_text(start)} is not before end {_text(end)}.")


def pieces(time, step: np.timedelta64, has_data, start: str | None, end: str | None) -> list[Piece]:
    """The days that a period touches: steps that lie between `start` and `end`, by default all.

    time (t,) datetime64, the ends of the steps; has_data (t,) bool, a day without any is left out.
    A step belongs to the day it covers, so the hour stamped 00:00 closes the day before. Raises
    InputError if the period is reversed or holds no step of the input.
    """
    low = parse_time(start) if start else time[0] - step
    high = parse_time(end) if end else time[-1]
    _check_order(low, high)
    asked = (time - step >= low) & (time <= high)
    days = (time - step).astype("datetime64[D]")
    found = [_piece(day, np.flatnonzero(days == day), asked) for day in np.unique(days[asked])]
    found = [piece for piece in found if has_data[piece.first : piece.last].any()]
    if not found:
        raise InputError(
            f"period: no step of the input lies between {_text(low)} and {_text(high)}; "
            f"the input runs from {_text(time[0] - step)} to {_text(time[-1])}."
        )
    return found


def _piece(day, steps, asked) -> Piece:
    """Piece of a day's steps (n,); asked (t,) bool."""
    of_day = np.flatnonzero(asked[steps])
    name = str(day).replace("-", "")
    return Piece(
        name, int(steps[0]), int(steps[-1]) + 1, slice(int(of_day[0]), int(of_day[-1]) + 1)
    )


def _text(time) -> str:
    return np.datetime_as_string(time, unit="m")
