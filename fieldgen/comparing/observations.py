"""Independent water vapour from a table: values at places, or the levels of soundings."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from fieldgen.comparing.profile import Profile, specific_humidity
from fieldgen.plain_text import one_line
from fieldgen.quantities import QUANTITIES
from fieldgen.readers.assembly import check_anything_usable
from fieldgen.readers.positions import check_position
from fieldgen.readers.records import LineError, Rejections
from fieldgen.readers.tables import (
    Table,
    TableKind,
    parse_number,
    parse_time,
    read_header,
    split_header,
)
from fieldgen.readers.text import first_content_line
from fieldgen.station.heights import saturation_vapour_pressure

WHERE = ("time", "longitude", "latitude", "height")
"""Of both tables: ISO 8601 in UTC, degrees, m above sea level."""

VALUE_TABLE = TableKind((*WHERE, "value", "sigma"), (), ("station",))
"""value, sigma [kg m-2]"""

SOUNDING_TABLE = TableKind(
    (*WHERE, "pressure", "temperature"), ("dewpoint", "relative_humidity"), ("station",)
)
"""One level a row: pressure [hPa], temperature, dewpoint [K], relative_humidity over water [%]"""

LIMITS = {
    "height": (-500.0, 50_000.0, "m"),
    "value": (QUANTITIES["pwv"].low, QUANTITIES["pwv"].high, "kg m-2"),
    "sigma": (0.0, 20.0, "kg m-2"),
    "pressure": (1.0, 1100.0, "hPa"),
    "temperature": (150.0, 340.0, "K"),
    "dewpoint": (100.0, 320.0, "K"),
    "relative_humidity": (0.0, 120.0, "%"),
}
"""Lowest and highest plausible values with their unit."""

SOUNDING_SIGMA = 0.05
"""Standard error of a sounding's water vapour, relative. Common practice, no source."""

TOP_PRESSURE = 300.0
"""A sounding that ends below this level [hPa] misses water vapour, of which 1 % lies above it."""

LEAST_LEVELS = 5
"""Levels that a sounding needs."""


class Observation(NamedTuple):
    """Water vapour at a place: value, sigma [kg m-2] above height [m].

    line : of the file, the first one of a sounding; time : seconds since 1970-01-01 UTC
    """

    line: int
    station: str
    time: int
    longitude: float
    latitude: float
    height: float
    value: float
    sigma: float


@dataclass
class Truth:
    """What a table holds: values, or soundings whose lowest height is yet to be told.

    profiles : with the line, station, time, longitude and latitude of each
    """

    file: str
    rejections: Rejections
    values: list[Observation] = field(default_factory=list)
    profiles: list[tuple[tuple, Profile]] = field(default_factory=list)

    @property
    def is_soundings(self) -> bool:
        """Whether the table holds soundings."""
        return bool(self.profiles)

    def observations(self, terrain_height) -> list[Observation]:
        """Values at their places; soundings from the ground up.

        terrain_height : function of longitude and latitude (n,) [degrees], NaN where not known. A
        sounding that begins above the ground is taken from its lowest level.
        """
        if not self.is_soundings:
            return self.values
        longitude, latitude = np.array([where[3:] for where, _ in self.profiles]).T
        ground = terrain_height(longitude, latitude)
        return [
            _integrated(where, profile, height)
            for (where, profile), height in zip(self.profiles, ground, strict=True)
        ]


def _integrated(where: tuple, profile: Profile, ground: float) -> Observation:
    height = float(np.fmax(ground, profile.height[0]))
    value = profile.water_vapour_above(height)
    return Observation(*where, height, value, SOUNDING_SIGMA * value)


def read_truth(path) -> Truth:
    """Truth of a table with the columns of VALUE_TABLE or SOUNDING_TABLE, plain or gzip.

    Raises InputError for unknown or missing columns, and if no line can be used.
    """
    name = str(path)
    kind = _kind(split_header(first_content_line(path, name))[1])
    table = Table(name, *read_header(path, name, kind))
    truth = Truth(name, table.rejections)
    if kind is VALUE_TABLE:
        truth.values = list(_read_values(path, table))
    else:
        truth.profiles = list(_read_profiles(path, table))
    check_anything_usable(name, len(truth.values) + len(truth.profiles), table.rejections)
    return truth


def _kind(columns: list[str]) -> TableKind:
    """The table of soundings if there is a column that only they have."""
    of_soundings = set(SOUNDING_TABLE.known) - set(VALUE_TABLE.known)
    is_sounding = of_soundings & set(columns) and "value" not in columns
    return SOUNDING_TABLE if is_sounding else VALUE_TABLE


def _read_values(path, table: Table):
    for line, row in table.rows(path):
        try:
            value, sigma = (_number(row, name) for name in ("value", "sigma"))
            yield Observation(line, *_where(row), _number(row, "height"), value, sigma)
        except LineError as error:
            table.reject(line, error)


def _read_profiles(path, table: Table):
    """Where and what of each sounding, in the order of the file; levels may stand in any order."""
    levels: dict[tuple, list[tuple]] = {}
    for line, row in table.rows(path):
        try:
            level = (-_number(row, "pressure"), line, _number(row, "height"), _humidity(row))
            levels.setdefault(_where(row), []).append(level)
        except LineError as error:
            table.reject(line, error)
    for where, found in levels.items():
        first = min(line for _, line, _, _ in found)
        try:
            yield (first, *where), _profile(sorted(found), table)
        except LineError as error:
            table.reject(first, error)


def _profile(levels: list[tuple], table: Table) -> Profile:
    """Profile of levels, the lowest first; levels that do not rise are rejected."""
    kept: list[tuple] = []
    for pressure, line, height, humidity in levels:
        if kept and (height <= kept[-1][1] or pressure <= kept[-1][0]):
            table.reject(line, LineError("does not rise as the pressure falls", f"{height:g} m"))
        else:
            kept.append((pressure, height, humidity))
    if len(kept) < LEAST_LEVELS:
        raise LineError("sounding with too few levels", f"{len(kept)}, expected {LEAST_LEVELS}")
    pressure, height, humidity = np.array(kept).T
    if -pressure[-1] > TOP_PRESSURE:
        raise LineError(
            "sounding ends too low", f"at {-pressure[-1]:g} hPa, expected {TOP_PRESSURE:g} or less"
        )
    return Profile(-pressure, height, humidity)


def _humidity(row: dict[str, str]) -> float:
    """Specific humidity of a level, from the dew point where it is given."""
    pressure, temperature = _number(row, "pressure"), _number(row, "temperature")
    if np.isfinite(parse_number(row, "dewpoint")):
        dewpoint = _number(row, "dewpoint")
        if dewpoint > temperature + 1.0:
            raise LineError("dewpoint above temperature", f"{dewpoint:g} and {temperature:g} K")
        vapour_pressure = saturation_vapour_pressure(dewpoint)
    else:
        humidity = _number(row, "relative_humidity")
        vapour_pressure = humidity / 100.0 * saturation_vapour_pressure(temperature)
    if vapour_pressure >= pressure:
        raise LineError("vapour pressure above pressure", f"{pressure:g} hPa")
    return float(specific_humidity(vapour_pressure, pressure))


def _where(row: dict[str, str]) -> tuple[str, int, float, float]:
    """Station, time, longitude and latitude of a row."""
    longitude, latitude = (parse_number(row, name) for name in ("longitude", "latitude"))
    if np.isnan(longitude) or np.isnan(latitude):
        raise LineError("no position")
    try:
        place = check_position(longitude, latitude)
    except ValueError as error:
        raise LineError("impossible position", str(error)) from None
    return one_line(row.get("station", "")), parse_time(row["time"]), *place


def _number(row: dict[str, str], name: str) -> float:
    """A number within its limits."""
    value = parse_number(row, name)
    low, high, unit = LIMITS[name]
    if np.isnan(value):
        raise LineError(f"no {name}")
    if not low <= value <= high:
        rule = f"{name} is {value:g} {unit}, expected {low:g} to {high:g}"
        raise LineError(f"impossible {name}", rule)
    return value
