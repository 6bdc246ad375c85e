"""What every reader hands on: records in fieldgen's units, and the lines it rejected."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import ClassVar, NamedTuple

import numpy as np

EXAMPLES_KEPT = 5
"""Rejected lines named one by one for each file and reason; the others are only counted."""


LONGEST_DETAIL = 200
"""Characters that a message repeats of a line."""

NO_TIME = np.datetime64("NaT", "s")


@dataclass(frozen=True)
class Rejection:
    """One rejected line: where it stands and why it was not used."""

    file: str
    line: int
    reason: str
    detail: str = ""

    def __str__(self) -> str:
        text = f"{self.file}, line {self.line}: {self.reason}"
        return f"{text} ({self.detail})" if self.detail else text


class LineError(ValueError):
    """Why one line cannot be used: a reason to count by, and what stands in the line."""

    def __init__(self, reason: str, detail: str = ""):
        super().__init__(reason)
        self.reason = reason
        self.detail = detail[:LONGEST_DETAIL]


@dataclass
class Rejections:
    """Counts of rejected lines by file and reason, with the first few of each kind kept."""

    counts: Counter = field(default_factory=Counter)
    examples: list[Rejection] = field(default_factory=list)

    def add(self, file: str, line: int, reason: str, detail: str = "", count: int = 1) -> None:
        """Count `count` rejected lines, of which `line` (from 1) is the first."""
        if self.counts[file, reason] < EXAMPLES_KEPT:
            self.examples.append(Rejection(file, line, reason, detail))
        self.counts[file, reason] += count

    def add_each(self, file: str, lines, reason: str, detail: Callable[[int], str]) -> None:
        """Count the rejected `lines` (n,), from 1; detail(i) describes the i-th of them."""
        for index, line in enumerate(lines[:EXAMPLES_KEPT]):
            self.add(file, int(line), reason, detail(index))
        if further := len(lines[EXAMPLES_KEPT:]):
            self.add(file, int(lines[EXAMPLES_KEPT]), reason, count=further)

    def merge(self, other: Rejections) -> None:
        """Take in the rejections of another file."""
        self.counts.update(other.counts)
        self.examples.extend(other.examples)

    @property
    def total(self) -> int:
        """All rejected lines."""
        return sum(self.counts.values())


@dataclass(frozen=True)
class Site:
    """A place as a file gives it; NaN where the file does not say.

    longitude, latitude [degrees], longitude in -180 to 180; ellipsoidal_height, msl_height [m].
    """

    longitude: float = np.nan
    latitude: float = np.nan
    ellipsoidal_height: float = np.nan
    msl_height: float = np.nan
    name: str = ""


class Stay(NamedTuple):
    """A place of a station that moved, and the first and last epoch there, seconds since 1970."""

    site: Site
    first: float
    last: float


class Records:
    """What delays and weather have in common: records of several places, one after the other."""

    places: ClassVar[tuple[str, str]]
    """Names of the attributes that hold the identifiers and each record's index among them."""

    values: ClassVar[tuple[str, ...]]
    """Names of the attributes that hold measured values."""

    @property
    def identifiers(self) -> list[str]:
        """Identifiers of the stations or sites."""
        return getattr(self, self.places[0])

    @property
    def place(self) -> np.ndarray:
        """Index (n,) of each record's station or site among the identifiers."""
        return getattr(self, self.places[1])

    def keep(self, wanted) -> None:
        """Drop the records that `wanted` (n,) bool does not pick."""
        for name in (self.places[1], "time", *self.values):
            setattr(self, name, getattr(self, name)[wanted])

    def compact(self) -> None:
        """Hold the values in single precision, a ten-millionth of a delay, and what is absent not
        at all: a year of records must fit in memory."""
        index = self.places[1]
        narrow = np.int16 if len(self.identifiers) <= np.iinfo(np.int16).max else np.int32
        setattr(self, index, getattr(self, index).astype(narrow))
        for name in self.values:
            values = getattr(self, name)
            absent = np.isnan(values).all()
            nothing = np.broadcast_to(np.float32(np.nan), values.shape)
            setattr(self, name, nothing if absent else values.astype(np.float32))


@dataclass
class DelayRecords(Records):
    """Delays of one file, one element a record, in the order of the file.

    station : (n,) int, index into `station_ids`
    time : (n,) datetime64[s], UTC
    ztd, ztd_sigma : (n,) [m], NaN where the file does not give it
    pwv, pwv_sigma : (n,) [kg m-2], NaN where the file does not give it
    created : datetime64[s] of the file's header, NaT if it does not say
    sites : where the file says its stations are, by identifier
    stays : places by identifier, in order of time, of stations that move within the file
    warnings : oddities of the file that cost no line, one sentence each
    """

    places: ClassVar = ("station_ids", "station")
    values: ClassVar = ("ztd", "ztd_sigma", "pwv", "pwv_sigma")

    file: str
    station_ids: list[str]
    station: np.ndarray
    time: np.ndarray
    ztd: np.ndarray
    ztd_sigma: np.ndarray
    pwv: np.ndarray
    pwv_sigma: np.ndarray
    sites: dict[str, Site] = field(default_factory=dict)
    stays: dict[str, list[Stay]] = field(default_factory=dict)
    created: np.datetime64 = NO_TIME
    rejections: Rejections = field(default_factory=Rejections)
    warnings: list[str] = field(default_factory=list)


@dataclass
class WeatherRecords(Records):
    """Surface weather of one file, one element a record, in the order of the file.

    site : (n,) int, index into `site_ids`
    time : (n,) datetime64[s], UTC
    pressure [hPa], temperature [K], relative_humidity [%] : (n,), NaN where not given
    sites : where the file says its barometers are, by identifier
    created, stays, warnings : as for delays
    """

    places: ClassVar = ("site_ids", "site")
    values: ClassVar = ("pressure", "temperature", "relative_humidity")

    file: str
    site_ids: list[str]
    site: np.ndarray
    time: np.ndarray
    pressure: np.ndarray
    temperature: np.ndarray
    relative_humidity: np.ndarray
    sites: dict[str, Site] = field(default_factory=dict)
    stays: dict[str, list[Stay]] = field(default_factory=dict)
    created: np.datetime64 = NO_TIME
    rejections: Rejections = field(default_factory=Rejections)
    warnings: list[str] = field(default_factory=list)


@dataclass
class ReadingReport:
    """What was read, what was rejected and what is odd about it."""

    files: dict[str, int] = field(default_factory=dict)
    """Records used, by file."""
    rejections: Rejections = field(default_factory=Rejections)
    unusable_files: dict[str, str] = field(default_factory=dict)
    """Why nothing of a file could be used, by file."""
    left_out: dict[str, str] = field(default_factory=dict)
    """Why a station or barometer is left out, by identifier."""
    warnings: list[str] = field(default_factory=list)
