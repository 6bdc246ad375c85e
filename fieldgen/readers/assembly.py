"""Columns as a reader found them -> checked records: what cannot be is rejected, line by line."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np

from fieldgen.errors import InputError
from fieldgen.quantities import QUANTITIES
from fieldgen.readers.records import DelayRecords, Rejections, WeatherRecords

DELAY_VALUES = ("ztd", "ztd_sigma", "pwv", "pwv_sigma")
WEATHER_VALUES = ("pressure", "temperature", "relative_humidity")

PRESSURE_UNITS = {"hPa": 1.0, "0.1 hPa": 0.1, "Pa": 0.01}
"""hPa per unit that weather files may be in."""

ROWS_HELD = 20_000
"""Records held as Python numbers before they are packed."""


@dataclass
class Columns:
    """Records of one file, one element a record, before any check.

    line : (n,) int, from 1
    place : (n,) int, index into the identifiers of stations or sites
    time : (n,) int, seconds since 1970-01-01 UTC
    values : (n,) float by name, in fieldgen's units, NaN where missing
    """

    line: np.ndarray
    place: np.ndarray
    time: np.ndarray
    values: dict[str, np.ndarray]

    def __len__(self) -> int:
        return len(self.line)

    def keep(self, wanted) -> Columns:
        """The records that `wanted` (n,), bool or indices, picks."""
        values = {name: column[wanted] for name, column in self.values.items()}
        return Columns(self.line[wanted], self.place[wanted], self.time[wanted], values)


def columns_from_parts(parts: list[Columns], names: Iterable[str]) -> Columns:
    """Parts of a file joined, in the order of its lines."""
    empty = Columns(*(np.empty(0, int) for _ in range(3)), {name: np.empty(0) for name in names})
    parts = [empty, *parts]
    joined = Columns(
        *(np.concatenate([getattr(p, key) for p in parts]) for key in ("line", "place", "time")),
        {name: np.concatenate([p.values[name] for p in parts]) for name in empty.values},
    )
    return joined.keep(np.argsort(joined.line, kind="stable"))


@dataclass
class Rows:
    """Records gathered one by one; they are packed into arrays every now and then.

    names : names of the values of each record
    """

    names: tuple[str, ...]
    rows: list[tuple] = field(default_factory=list)
    parts: list[Columns] = field(default_factory=list)

    def add(self, line: int, place: int, time: int, *values: float) -> None:
        """Take in a record, with one value for each of `names`."""
        self.rows.append((line, place, time, *values))
        if len(self.rows) == ROWS_HELD:
            self._pack()

    def _pack(self) -> None:
        """Turn the rows into arrays."""
        line, place, time, *values = zip(*self.rows, strict=True)
        columns = {name: np.array(v, float) for name, v in zip(self.names, values, strict=True)}
        self.parts.append(Columns(np.array(line), np.array(place), np.array(time), columns))
        self.rows.clear()

    def columns(self) -> Columns:
        """All records, in the order of the file."""
        if self.rows:
            self._pack()
        return columns_from_parts(self.parts, self.names)


def delay_records(
    file: str, ids: list[str], columns: Columns, rejections: Rejections, **about
) -> DelayRecords:
    """Delays with a usable ztd or pwv, one for each station and epoch; `about` goes in as it is.

    Raises InputError if none is left.
    """
    check = _Check(file, ids, rejections, "station")
    columns.values = {name: check_sigma(v, name) for name, v in columns.values.items()}
    columns = check.has_any(columns, ("ztd", "pwv"), "no delay")
    columns = check.in_limits(columns, ("ztd", "pwv"))
    columns = check.last_of_each_epoch(columns)
    check.something_left(columns)
    time = columns.time.astype("datetime64[s]")
    return DelayRecords(
        file, ids, columns.place, time, **columns.values, rejections=rejections, **about
    )


def weather_records(
    file: str, ids: list[str], columns: Columns, rejections: Rejections, **about
) -> WeatherRecords:
    """Weather with a pressure or a temperature, one record for each site and epoch.

    An absurd pressure rejects the record; an absurd temperature or humidity is counted and becomes
    NaN. `about` goes in as it is. Raises InputError if no record is left.
    """
    check = _Check(file, ids, rejections, "site")
    columns = check.has_any(columns, ("pressure", "temperature"), "no pressure or temperature")
    columns = check.in_limits(columns, ("pressure",))
    for name in ("temperature", "relative_humidity"):
        check.blank_outside_limits(columns, name)
    empty = _all_missing(columns, ("pressure", "temperature"))
    columns = check.last_of_each_epoch(columns.keep(~empty))
    check.something_left(columns)
    time = columns.time.astype("datetime64[s]")
    return WeatherRecords(
        file, ids, columns.place, time, **columns.values, rejections=rejections, **about
    )


def convert_pressure(columns: Columns, unit: str) -> None:
    """Bring pressures in `unit`, one of PRESSURE_UNITS, to hPa."""
    columns.values["pressure"] = columns.values["pressure"] * PRESSURE_UNITS[unit]


def check_sigma(values, name: str):
    """Standard errors, NaN where they are not above zero or infinite; other columns as they are."""
    if not name.endswith("_sigma"):
        return values
    return np.where((values > 0.0) & np.isfinite(values), values, np.nan)


def describe_outside(name: str, value: float) -> str:
    """`pressure is 10132 hPa, expected 400 to 1100 hPa`."""
    limits = QUANTITIES[name]
    unit = limits.unit
    text = f"{name} is {value:.7g} {unit}, expected {limits.low:g} to {limits.high:g} {unit}"
    return text + _hint_at_unit(value) if name == "pressure" else text


def _hint_at_unit(pressure: float) -> str:
    """What to do about a pressure [hPa] that would be right in another unit."""
    for unit, factor in PRESSURE_UNITS.items():
        if not is_outside("pressure", pressure * factor):
            return f'. If the file is in {unit}, set stations.pressure_unit = "{unit}"'
    return ""


def is_outside(name: str, values):
    """Where `values` (n,) break the limits of the quantity; NaN breaks none."""
    return (values < QUANTITIES[name].low) | (values > QUANTITIES[name].high)


def check_anything_usable(file: str, count: int, rejections: Rejections) -> None:
    """Raise InputError, with the reasons counted, if `count` is 0."""
    if count:
        return
    reasons = ", ".join(f"{n} {reason}" for (_, reason), n in rejections.counts.most_common())
    example = f"; {rejections.examples[0]}" if rejections.examples else ""
    raise InputError(
        f"{file}: usable records are 0, expected at least 1"
        f" (rejected lines: {reasons or 'none'}{example})."
    )


@dataclass
class _Check:
    """The checks of one file, which count what they reject."""

    file: str
    ids: list[str]
    rejections: Rejections
    kind: str

    def label(self, columns: Columns, index: int) -> str:
        """`station ABCD, 2030-01-01T00:00:00`."""
        time = np.datetime64(int(columns.time[index]), "s")
        return f"{self.kind} {self.ids[columns.place[index]]}, {time}"

    def without(self, columns: Columns, bad, reason: str, describe=None) -> Columns:
        """`columns` without the `bad` (n,) bool, which are counted."""
        if not bad.any():
            return columns
        self.count(columns, bad, reason, describe)
        return columns.keep(~bad)

    def count(self, columns: Columns, bad, reason: str, describe=None) -> None:
        """Count the `bad` (n,) bool; describe(i) tells what is wrong with record i."""
        rows = np.flatnonzero(bad)

        def detail(index: int) -> str:
            what = f": {describe(rows[index])}" if describe else ""
            return self.label(columns, rows[index]) + what

        self.rejections.add_each(self.file, columns.line[rows], reason, detail)

    def has_any(self, columns: Columns, names: tuple[str, ...], reason: str) -> Columns:
        """Records in which at least one of `names` is given."""
        return self.without(columns, _all_missing(columns, names), reason)

    def in_limits(self, columns: Columns, names: tuple[str, ...]) -> Columns:
        """Records in which none of `names` is absurd."""
        for name in names:
            values = columns.values[name]
            bad = is_outside(name, values)
            columns = self.without(columns, bad, *_outside(name, values))
        return columns

    def blank_outside_limits(self, columns: Columns, name: str) -> None:
        """Set absurd values to NaN; the record stays."""
        values = columns.values[name]
        bad = is_outside(name, values)
        self.count(columns, bad, *_outside(name, values))
        columns.values[name] = np.where(bad, np.nan, values)

    def last_of_each_epoch(self, columns: Columns) -> Columns:
        """Of records with the same station and epoch, the one that comes last in the file."""
        order = np.lexsort((columns.line, columns.time, columns.place))
        same = (np.diff(columns.place[order]) == 0) & (np.diff(columns.time[order]) == 0)
        bad = np.zeros(len(columns), bool)
        bad[order[:-1][same]] = True
        return self.without(columns, bad, "duplicate epoch", lambda _: "a later line is used")

    def something_left(self, columns: Columns) -> None:
        """Refuse a file without any usable record."""
        check_anything_usable(self.file, len(columns), self.rejections)


def _all_missing(columns: Columns, names: tuple[str, ...]):
    """Where (n,) all of `names` are NaN."""
    return np.all([np.isnan(columns.values[name]) for name in names], axis=0)


def _outside(name: str, values) -> tuple:
    """Reason and describer for values outside the limits."""
    return f"{name} out of range", lambda row: describe_outside(name, values[row])
