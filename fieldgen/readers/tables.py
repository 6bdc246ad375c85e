"""Tables (CSV) of delays, weather and stations: one header line, one record a line."""

from __future__ import annotations

import csv
from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import partial
from typing import NamedTuple

import numpy as np

from fieldgen.errors import InputError
from fieldgen.plain_text import one_line
from fieldgen.readers.assembly import (
    DELAY_VALUES,
    WEATHER_VALUES,
    Columns,
    Rows,
    check_anything_usable,
    convert_pressure,
    delay_records,
    weather_records,
)
from fieldgen.readers.epochs import iso_epoch
from fieldgen.readers.positions import UNDULATIONS, check_height, check_position, distance_km
from fieldgen.readers.records import DelayRecords, LineError, Rejections, Site, WeatherRecords
from fieldgen.readers.stated_places import StatedPlaces
from fieldgen.readers.text import first_content_line, read_lines

DELIMITERS = ",;\t"
MISSING_WORDS = ("", "nan", "na", "null", "none", "-")
LONGEST_IDENTIFIER = 40


class TableKind(NamedTuple):
    """Columns of one kind of table, in lower case.

    one_of : at least one of these is needed, if there are any
    """

    required: tuple[str, ...]
    one_of: tuple[str, ...]
    optional: tuple[str, ...]

    @property
    def known(self) -> tuple[str, ...]:
        """All columns."""
        return tuple(dict.fromkeys(self.required + self.one_of + self.optional))


PLACE = ("longitude", "latitude", "ellipsoidal_height", "orthometric_height")
"""[degrees east, degrees north, m, m]"""

DELAY_TABLE = TableKind(("station", "time"), ("ztd", "pwv"), ("ztd_sigma", "pwv_sigma", *PLACE))
"""ztd, ztd_sigma [m], pwv, pwv_sigma [kg m-2]"""

WEATHER_TABLE = TableKind(
    ("site", "time"), ("pressure", "temperature"), ("relative_humidity", *PLACE)
)
"""pressure [hPa], temperature [K], relative_humidity [%]"""

STATION_TABLE = TableKind(
    ("id", "longitude", "latitude", "ellipsoidal_height"),
    (),
    ("undulation", "orthometric_height", "barometer_height", "name"),
)
"""longitude, latitude [degrees], heights and undulation [m]"""


@dataclass(frozen=True)
class StationRow:
    """A station as the station table gives it; NaN where a column is blank or absent.

    longitude, latitude [degrees], longitude in -180 to 180; heights and undulation [m], undulation
    = ellipsoidal_height - orthometric_height; barometer_height is that of the barometer of the same
    identifier, above sea level.
    """

    id: str
    longitude: float
    latitude: float
    ellipsoidal_height: float = np.nan
    undulation: float = np.nan
    orthometric_height: float = np.nan
    name: str = ""
    barometer_height: float = np.nan


def read_delay_table(path, *, name: str | None = None) -> DelayRecords:
    """Delays of a table with the columns of DELAY_TABLE, plain or gzip.

    Times are ISO 8601 in UTC. `name` stands for the file in messages. Raises InputError for unknown
    or missing columns, and if no line can be used.
    """
    name = name or str(path)
    table = Table(name, *read_header(path, name, DELAY_TABLE))
    ids, columns, places = _read_records(path, table, "station", DELAY_VALUES)
    return delay_records(name, ids, columns, table.rejections, **places)


def read_weather_table(
    path, *, name: str | None = None, pressure_unit: str = "hPa"
) -> WeatherRecords:
    """Weather of a table with the columns of WEATHER_TABLE; else as the delays."""
    name = name or str(path)
    table = Table(name, *read_header(path, name, WEATHER_TABLE))
    ids, columns, places = _read_records(path, table, "site", WEATHER_VALUES)
    convert_pressure(columns, pressure_unit)
    return weather_records(name, ids, columns, table.rejections, **places)


def read_station_table(
    path, *, name: str | None = None
) -> tuple[dict[str, StationRow], Rejections]:
    """Stations by identifier, and rejected lines, of a table with the columns of STATION_TABLE.

    A later line for the same station wins. A station that would lie with the others if its
    longitude and latitude were exchanged is rejected. Raises InputError as the other tables do.
    """
    name = name or str(path)
    table = Table(name, *read_header(path, name, STATION_TABLE))
    stations, lines = _read_stations(path, table)
    for station in exchanged_positions(list(stations.values())):
        del stations[station.id]
        detail = (
            f"station {station.id}: longitude is {station.longitude:g},"
            f" latitude {station.latitude:g}"
        )
        table.reject(lines[station.id], LineError("longitude and latitude exchanged", detail))
    check_anything_usable(name, len(stations), table.rejections)
    return stations, table.rejections


def _read_stations(path, table: Table) -> tuple[dict[str, StationRow], dict[str, int]]:
    """Stations by identifier, and the line that each comes from."""
    lines: dict[str, int] = {}
    stations: dict[str, StationRow] = {}
    for number, row in table.rows(path):
        try:
            station = parse_station(row)
        except LineError as error:
            table.reject(number, error)
            continue
        if station.id in stations:
            detail = f"station {station.id}: a later line is used"
            table.reject(lines[station.id], LineError("duplicate station", detail))
        stations[station.id], lines[station.id] = station, number
    return stations, lines


def is_table(line: str, kind: TableKind) -> bool:
    """Whether a file that begins with `line` is meant as this kind of table."""
    return any(column in kind.known for column in split_header(line)[1])


def split_header(line: str) -> tuple[str, list[str]]:
    """The delimiter and the column names, in lower case, of a header line."""
    delimiter = max(DELIMITERS, key=line.count)
    return delimiter, [word.strip().strip('"').lower() for word in line.split(delimiter)]


def read_header(path, name: str, kind: TableKind) -> tuple[str, list[str]]:
    """Delimiter and columns of a file, checked; InputError tells the columns that are known."""
    line = first_content_line(path, name)
    if not line:
        raise InputError(f"{name}: nothing in the file, expected columns {', '.join(kind.known)}.")
    delimiter, columns = split_header(line)
    known = f"Known columns: {', '.join(kind.known)}."
    unknown = [column for column in columns if column not in kind.known]
    if unknown:
        raise InputError(f"{name}: column {unknown[0][:40]!r} is unknown. {known}")
    if len(set(columns)) < len(columns):
        raise InputError(f"{name}: a column occurs twice, expected each once. {known}")
    missing = [column for column in kind.required if column not in columns]
    if missing:
        raise InputError(f"{name}: column {missing[0]} is missing. {known}")
    if kind.one_of and not set(kind.one_of) & set(columns):
        raise InputError(f"{name}: columns {' and '.join(kind.one_of)} are missing. {known}")
    return delimiter, columns


@dataclass
class Table:
    """A file whose header has been read."""

    file: str
    delimiter: str
    columns: list[str]
    rejections: Rejections = field(default_factory=Rejections)

    def rows(self, path) -> Iterator[tuple[int, dict[str, str]]]:
        """Line number and cells by column of each line after the header; others are rejected."""
        lines = (
            (number, line)
            for number, line in read_lines(path, self.file, self.rejections)
            if line.strip() and not line.lstrip().startswith("#")
        )
        next(lines, None)
        for number, line in lines:
            try:
                cells = split_cells(line, self.delimiter, len(self.columns))
            except LineError as error:
                self.reject(number, error)
            else:
                yield number, dict(zip(self.columns, cells, strict=True))

    def reject(self, line: int, error: LineError) -> None:
        """Count a line that cannot be used."""
        self.rejections.add(self.file, line, error.reason, error.detail)


def split_cells(line: str, delimiter: str, count: int) -> list[str]:
    """The cells of a line, which must be `count`; quotes may enclose a delimiter."""
    if '"' in line:
        try:
            cells = next(csv.reader([line], delimiter=delimiter, strict=True))
        except csv.Error:
            raise LineError("quotes do not match", f"line begins {line[:40]!r}") from None
    else:
        cells = line.split(delimiter)
    if len(cells) != count:
        raise LineError("wrong number of columns", f"{len(cells)}, expected {count}")
    return [cell.strip() for cell in cells]


def parse_number(row: dict[str, str], column: str) -> float:
    """A cell as a number, NaN if it is missing or there is no such column; LineError for others."""
    text = row.get(column, "")
    try:
        return float(text)
    except ValueError:
        if text.lower() in MISSING_WORDS:
            return np.nan
        raise LineError("not a number", f"{column} is {text[:20]!r}") from None


def parse_identifier(text: str) -> str:
    """An identifier in upper case; LineError if it is blank, absurdly long or cannot be printed."""
    if not 1 <= len(text) <= LONGEST_IDENTIFIER or not text.isprintable():
        raise LineError("no identifier", f"it is {text[:40]!r}")
    return text.upper()


def parse_time(text: str) -> int:
    """Seconds of an ISO 8601 time in UTC; LineError for anything else."""
    try:
        return iso_epoch(text)
    except ValueError as error:
        raise LineError("impossible time", str(error)) from None


def parse_place(identifier: str, row: dict[str, str]) -> tuple[float, ...]:
    """The values of PLACE, NaN where not given; LineError if there is no such place on Earth."""
    longitude, latitude, *heights = (parse_number(row, column) for column in PLACE)
    if not np.isnan([longitude, latitude]).all():
        try:
            longitude, latitude = check_position(longitude, latitude)
        except ValueError as error:
            raise LineError("impossible position", f"{identifier}: {error}") from None
    try:
        return longitude, latitude, *(check_height(height) for height in heights)
    except ValueError as error:
        raise LineError("impossible height", f"{identifier}: {error}") from None


def parse_station(row: dict[str, str]) -> StationRow:
    """A row of the station table; LineError if it says not who and where the station is."""
    identifier = parse_identifier(row["id"])
    longitude, latitude, ellipsoidal, orthometric = parse_place(identifier, row)
    if np.isnan(longitude):
        raise LineError("no position", identifier)
    barometer = parse_number(row, "barometer_height")
    if np.isnan([ellipsoidal, orthometric, barometer]).all():
        raise LineError("no height", identifier)
    undulation = _parse_undulation(identifier, row)
    name = one_line(row.get("name", ""))
    return StationRow(
        identifier, longitude, latitude, ellipsoidal, undulation, orthometric, name, barometer
    )


def _parse_undulation(identifier: str, row: dict[str, str]) -> float:
    """The undulation [m] of a row, NaN if not given; LineError if there is no such on Earth."""
    undulation = parse_number(row, "undulation")
    low, high = UNDULATIONS
    if not (np.isnan(undulation) or low <= undulation <= high):
        detail = f"{identifier}: {undulation:g} m, expected {low:g} to {high:g} m"
        raise LineError("impossible undulation", detail)
    return undulation


EXCHANGED_KM, NETWORK_KM = 300.0, 1000.0
"""A position counts as exchanged if it lies further than NETWORK_KM from the middle of the network
and, exchanged, within EXCHANGED_KM."""


def exchanged_positions(stations: list[StationRow]) -> list[StationRow]:
    """Stations whose longitude and latitude stand in each other's place, judged by the others."""
    if len(stations) < 3:
        return []
    middle = (
        np.median([station.longitude for station in stations]),
        np.median([station.latitude for station in stations]),
    )
    return [
        station
        for station in stations
        if distance_km(station.longitude, station.latitude, *middle) > NETWORK_KM
        and distance_km(station.latitude, station.longitude, *middle) < EXCHANGED_KM
    ]


def _read_records(
    path, table: Table, id_column: str, value_names: tuple[str, ...]
) -> tuple[list[str], Columns, dict]:
    """Identifiers, records that refer to them, and what the file says of their places."""
    places, rows = StatedPlaces(), Rows(value_names)
    for number, row in table.rows(path):
        try:
            identifier = parse_identifier(row[id_column])
            time = parse_time(row["time"])
            values = [parse_number(row, name) for name in value_names]
            cells = tuple(row.get(column, "") for column in PLACE)
            place = places.number(identifier, cells, time, partial(_site, identifier, row))
            rows.add(number, place, time, *values)
        except LineError as error:
            table.reject(number, error)
    return places.tell(rows.columns(), table.file, table.rejections)


def _site(identifier: str, row: dict[str, str]) -> Site:
    return Site(*parse_place(identifier, row))
