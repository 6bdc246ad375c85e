"""RINEX meteorological files, 2.11 and 3.0x -> surface weather."""

from __future__ import annotations

import re
from dataclasses import dataclass, field

import numpy as np

from fieldgen.errors import InputError
from fieldgen.plain_text import one_line
from fieldgen.readers.assembly import WEATHER_VALUES, Rows, convert_pressure, weather_records
from fieldgen.readers.epochs import calendar_epoch
from fieldgen.readers.positions import check_height, geodetic_position, is_on_the_ground
from fieldgen.readers.records import LONGEST_DETAIL, LineError, Rejections, Site, WeatherRecords
from fieldgen.readers.text import file_stem, read_lines

LABEL_COLUMN = 60
VERSION, TYPES, POSITION = "RINEX VERSION / TYPE", "# / TYPES OF OBSERV", "SENSOR POS XYZ/H"
MARKER, END = "MARKER NAME", "END OF HEADER"
LABELS = (VERSION, TYPES, POSITION, MARKER, END)

OBSERVATIONS = {"pressure": "PR", "temperature": "TD", "relative_humidity": "HR"}
"""Codes of what is read: hPa, degrees Celsius, %."""

CELSIUS_ZERO = 273.15

VALUE_WIDTH = 7
FIRST_LINE_VALUES, NEXT_LINE_VALUES = 8, 10
CONTINUATION_INDENT = 4

MISSING_FROM, MISSING_TO = 9999.0, -999.0
"""Values at or beyond these stand for none."""

SAME_HEIGHT_M = 10.0
"""A sensor height further from that of X, Y, Z is worth a warning."""

EPOCHS = (
    re.compile(r"\s*(\d{4}|\d{1,2})" + 5 * r" ([ \d]\d)"),
    re.compile(r"\s*(\d{4}|\d{1,2})" + 5 * r"\s+(\d{1,2})" + r"(?:\.0*)?(?=[\s-]|$)"),
)
"""Year, of two or four digits in either version, to second: in columns, which the first value may
touch, or else parted by blanks."""


def is_rinex_met(line: str) -> bool:
    """Whether a file that begins with `line` is RINEX."""
    return label_of(line) == VERSION


def read_rinex_met(path, *, name: str | None = None, pressure_unit: str = "hPa") -> WeatherRecords:
    """Pressure [hPa], temperature [K] and relative humidity [%] of one RINEX file.

    The site is called by its marker name, or as the file where that is blank. Its height is that of
    the barometer as the file gives it; some writers give it above mean sea level. Epochs in GPS
    time are taken as UTC, 18 s being far below the time step. Missing values are NaN. `name` stands
    for the file in messages; `pressure_unit` is one of PRESSURE_UNITS, for writers who do not keep
    to the format's hPa. Raises InputError if the header or the data cannot be used.
    """
    name = name or str(path)
    reading = _Reading(name, one_line(file_stem(path)).upper() or "?")
    for number, line in read_lines(path, name, reading.rejections):
        if line.strip():
            reading.take(number, line)
    return reading.records(pressure_unit)


def label_of(line: str) -> str:
    """The label of a header line among LABELS, '' if it has none; columns may be shifted."""
    text = " ".join(line.upper().split())
    return next((label for label in LABELS if text.endswith(label)), "")


def label_column(line: str, label: str) -> int:
    """Column, from 0, at which the content of a header line has ended."""
    found = line.upper().rfind(label)
    return min(found, LABEL_COLUMN) if found >= 0 else LABEL_COLUMN


@dataclass
class Header:
    """What a header says: site, codes of the observations in each record, sensor positions."""

    marker: str = ""
    declared_types: int = 0
    types: list[str] = field(default_factory=list)
    positions: dict[str, Site] = field(default_factory=dict)
    warnings: list[str] = field(default_factory=list)

    def take(self, label: str, content: str) -> None:
        """Take in one header line, without its label. Raises ValueError where it is garbled."""
        if label == VERSION:
            check_version(content)
        elif label == MARKER:
            self.marker = one_line(content).upper()
        elif label == TYPES:
            self._take_types(content.split())
        elif label == POSITION:
            self._take_position(content.split())

    def _take_types(self, words: list[str]) -> None:
        """Take in codes; the first such line begins with their number."""
        if not self.types:
            if not words or not words[0].isdecimal():
                raise ValueError(f"{TYPES} begins with {words[:1]}, expected a number")
            self.declared_types = int(words[0])
            words = words[1:]
        self.types += [word.upper() for word in words]

    def _take_position(self, words: list[str]) -> None:
        """Take in X, Y, Z, height and the code of the sensor they belong to."""
        *numbers, code = words or [""]
        try:
            *xyz, height = (float(number) for number in numbers)
        except ValueError:
            raise ValueError(f"{POSITION} is {' '.join(words)!r}, expected X Y Z H code") from None
        self.positions.setdefault(code.upper(), self._site(xyz, height))

    def _site(self, xyz: list[float], height: float) -> Site:
        """Place of a sensor; the height goes before that of X, Y, Z unless it is zero or absurd."""
        try:
            height = check_height(height)
        except ValueError as error:
            self.warnings.append(f"sensor {error}. It is not used.")
            height = np.nan
        if len(xyz) != 3 or not is_on_the_ground(*xyz):
            return Site(ellipsoidal_height=height)
        place = geodetic_position(*xyz)
        if height == 0.0 or np.isnan(height):
            height = place.ellipsoidal_height
        elif abs(height - place.ellipsoidal_height) > SAME_HEIGHT_M:
            self.warnings.append(
                f"sensor height is {height:.1f} m, expected {place.ellipsoidal_height:.1f} m as"
                " X, Y, Z say. It may be above mean sea level."
            )
        return Site(place.longitude, place.latitude, height)

    def check(self) -> None:
        """Raise ValueError if records cannot be read with this header."""
        if len(self.types) != self.declared_types:
            raise ValueError(
                f"{TYPES} lists {len(self.types)} codes, expected {self.declared_types}"
            )
        if not {OBSERVATIONS["pressure"], OBSERVATIONS["temperature"]} & set(self.types):
            found = " ".join(self.types[:20]) or "none"
            raise ValueError(f"observations are {found}, expected PR or TD among them")

    def sensor_site(self) -> Site:
        """Place of the barometer, or of another sensor if it has none."""
        others = iter(self.positions.values())
        return self.positions.get(OBSERVATIONS["pressure"]) or next(others, Site())


def check_version(content: str) -> None:
    """Raise ValueError unless the file is meteorological, version 2 or 3."""
    words = content.split()
    if len(words) < 2 or not words[1].upper().startswith("M"):
        raise ValueError(f"file type is {' '.join(words[1:2])!r}, expected M (meteorological)")
    if not re.match(r"[23](\.|$)", words[0]):
        raise ValueError(f"version is {words[0]}, expected 2 or 3")


@dataclass
class Record:
    """A record of which all lines or the first ones have been read."""

    line: int
    time: int
    values: list[str]


def find_epoch(line: str) -> re.Match | None:
    """The epoch that a line begins with, if it does."""
    return next((match for pattern in EPOCHS if (match := pattern.match(line))), None)


def begin_record(number: int, line: str, count: int) -> Record:
    """The record of `count` values that begins in this line; LineError if none does."""
    match = find_epoch(line)
    if not match:
        raise LineError("no epoch", f"line begins {line.strip()[:40]!r}")
    try:
        time = calendar_epoch(*match.groups())
    except ValueError as error:
        raise LineError("impossible epoch", str(error)) from None
    text = line[match.end() :]
    on_this_line = count if len(text.split()) == count else min(count, FIRST_LINE_VALUES)
    return Record(number, time, split_values(text, on_this_line))


def split_values(text: str, count: int) -> list[str]:
    """`count` values: one word each, else cut by the columns, '' for blank ones."""
    words = text.split()
    if len(words) == count:
        return words
    text = text.rstrip()
    if len(text) > count * VALUE_WIDTH:
        raise LineError("wrong number of values", f"{len(words)}, expected {count}")
    starts = range(0, count * VALUE_WIDTH, VALUE_WIDTH)
    return [text[start : start + VALUE_WIDTH].strip() for start in starts]


def value_of(text: str) -> float:
    """A value, NaN if it is missing; LineError if it is not a number."""
    try:
        value = float(text) if text else np.nan
    except ValueError:
        raise LineError("not a number", f"value is {text!r}") from None
    return value if MISSING_TO < value < MISSING_FROM else np.nan


@dataclass
class _Reading:
    """What has been read of one file so far. Several files may have been joined into one."""

    file: str
    default_site: str
    rejections: Rejections = field(default_factory=Rejections)
    warnings: list[str] = field(default_factory=list)
    header: Header | None = None
    in_header: bool = False
    record: Record | None = None
    sites: dict[str, Site] = field(default_factory=dict)
    site_numbers: dict[str, int] = field(default_factory=dict)
    rows: Rows = field(default_factory=lambda: Rows(WEATHER_VALUES))

    def take(self, number: int, line: str) -> None:
        """Read a line that is not empty."""
        if VERSION in line.upper():
            self._give_up_record()
            self.header, self.in_header = Header(), True
        if self.header is None:
            raise InputError(
                f"{self.file}, line {number}: header begins {line.strip()[:40]!r},"
                f" expected {VERSION} in columns 61 to 80."
            )
        if self.in_header:
            self._take_header(number, line)
        else:
            self._take_data(number, line, self.header)

    def _take_header(self, number: int, line: str) -> None:
        label = label_of(line)
        try:
            self.header.take(label, line[: label_column(line, label)])
            if label == END:
                self.header.check()
                self._end_header(self.header)
        except ValueError as error:
            detail = str(error)[:LONGEST_DETAIL]
            raise InputError(f"{self.file}, line {number}: {detail}.") from None

    def _end_header(self, header: Header) -> None:
        self.in_header = False
        site = header.marker or self.default_site
        self.site_numbers.setdefault(site, len(self.site_numbers))
        self.sites.setdefault(site, header.sensor_site())
        self.warnings += header.warnings

    def _take_data(self, number: int, line: str, header: Header) -> None:
        """Read a line of data: the first of a record, or one that continues it."""
        try:
            if self.record and not find_epoch(line):
                left = len(header.types) - len(self.record.values)
                text = line[CONTINUATION_INDENT:]
                self.record.values += split_values(text, min(left, NEXT_LINE_VALUES))
            else:
                self._give_up_record()
                self.record = begin_record(number, line, len(header.types))
            if len(self.record.values) == len(header.types):
                self._finish_record(self.record, header)
        except LineError as error:
            self.rejections.add(self.file, number, error.reason, error.detail)
            self.record = None

    def _finish_record(self, record: Record, header: Header) -> None:
        """Keep what is wanted of a complete record, in fieldgen's units."""
        self.record = None
        values = dict.fromkeys(WEATHER_VALUES, np.nan)
        for quantity, code in OBSERVATIONS.items():
            if code in header.types:
                values[quantity] = value_of(record.values[header.types.index(code)])
        values["temperature"] += CELSIUS_ZERO
        place = self.site_numbers[header.marker or self.default_site]
        self.rows.add(record.line, place, record.time, *values.values())

    def _give_up_record(self) -> None:
        """Count a record whose last lines are missing."""
        if self.record:
            self.rejections.add(self.file, self.record.line, "record cut short")
            self.record = None

    def records(self, pressure_unit: str) -> WeatherRecords:
        """The records of the whole file."""
        if self.header is None or self.in_header:
            raise InputError(f"{self.file}: header does not end, expected a line {END}.")
        self._give_up_record()
        columns = self.rows.columns()
        convert_pressure(columns, pressure_unit)
        return weather_records(
            self.file,
            list(self.site_numbers),
            columns,
            self.rejections,
            sites=self.sites,
            warnings=self.warnings,
        )
