"""Epochs as the formats write them -> seconds since 1970-01-01 UTC.

GPS time runs 18 s ahead of UTC. Files in either are read as UTC: the difference is far below the
time step of the maps.
"""

from __future__ import annotations

import re
from datetime import UTC, date, datetime, timedelta
from functools import lru_cache

DAY = 86_400
YEARS = range(1980, 2100)
LAST_TWO_DIGIT_YEAR = 50
"""Two-digit years up to this one are 20YY, later ones 19YY."""

EPOCHS_KEPT = 10_000
"""Texts whose epochs are remembered, because the stations of a file repeat them."""

SINEX_EPOCH = re.compile(r"(\d{2}|\d{4}):(\d{1,3}):(\d{1,5})")
_UNIX_DAY_ZERO = date(1970, 1, 1).toordinal()


def full_year(text: str) -> int:
    """A year of two or four digits, checked to lie in YEARS."""
    year = int(text)
    if len(text) <= 2:
        year += 2000 if year <= LAST_TWO_DIGIT_YEAR else 1900
    if year not in YEARS:
        raise ValueError(f"year is {text}, expected {YEARS[0]} to {YEARS[-1]}")
    return year


@lru_cache(maxsize=EPOCHS_KEPT)
def sinex_epoch(text: str) -> int:
    """Seconds of `YYYY:DDD:SSSSS` or `YY:DDD:SSSSS`; second 86400 is the next midnight.

    Raises ValueError for anything else.
    """
    match = SINEX_EPOCH.fullmatch(text)
    if not match:
        raise ValueError(f"epoch is {text!r}, expected YYYY:DDD:SSSSS")
    year, day, second = full_year(match[1]), int(match[2]), int(match[3])
    new_year = date(year, 1, 1).toordinal()
    if not 1 <= day <= date(year, 12, 31).toordinal() - new_year + 1:
        raise ValueError(f"day of year is {day}, expected one of {year}")
    if second > DAY:
        raise ValueError(f"second of day is {second}, expected 0 to {DAY}")
    return (new_year + day - 1 - _UNIX_DAY_ZERO) * DAY + second


def calendar_epoch(year: str, *rest: str) -> int:
    """Seconds of year, month, day, hour, minute, second given as digits; 24:00:00 and second 60
    are the next midnight and minute. Raises ValueError where there is no such time."""
    month, day, hour, minute, second = (int(part) for part in rest)
    if hour > 24 or minute > 59 or second > 60:
        raise ValueError(f"time of day is {hour:02}:{minute:02}:{second:02}")
    days = date(full_year(year), month, day).toordinal() - _UNIX_DAY_ZERO
    return days * DAY + hour * 3600 + minute * 60 + second


@lru_cache(maxsize=EPOCHS_KEPT)
def iso_epoch(text: str) -> int:
    """Seconds of an ISO 8601 time in UTC, with a trailing Z or nothing; fractions are cut.

    Raises ValueError for another offset or anything else.
    """
    try:
        time = datetime.fromisoformat(text)
    except ValueError:
        raise ValueError(f"time is {text!r}, expected ISO 8601") from None
    if time.utcoffset():
        raise ValueError(f"time is {text!r}, expected UTC (Z or no offset)")
    full_year(f"{time.year:04}")
    return (time.replace(tzinfo=UTC) - _UNIX_ZERO) // timedelta(seconds=1)


_UNIX_ZERO = datetime(1970, 1, 1, tzinfo=UTC)
