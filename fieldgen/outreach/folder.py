"""The fields and stations of a period, as an output folder holds them."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.errors import InputError
from fieldgen.products.even_picture import on_even_grid
from fieldgen.products.lines import NAMES
from fieldgen.products.maps import read_geometries

NO_VALUE = 1
"""Flag of a station in steps that its files lack."""


@dataclass(frozen=True)
class Step:
    """One step of the time axis: its start and end, and its field, None if no file holds it."""

    start: np.datetime64
    end: np.datetime64
    field: xr.Dataset | None


class ProductFolder:
    """What `make` and `update` left in a folder.

    start, end : of all fields in it; step : of time
    newest : the field of the last step
    Raises InputError if it holds no field files.
    """

    def __init__(self, path: Path):
        self.path = path
        self._files = {
            file.stem.removeprefix("pwv_"): file for file in (path / "fields").glob("pwv_*.nc")
        }
        if not self._files:
            raise InputError(f"{path}: holds no field files, expected those of a run. Run make.")
        with _open_fields(self._files[max(self._files)]) as newest:
            self.newest = newest.isel(time=[-1]).load()
            self.end = newest["time"].values[-1].astype("datetime64[s]")
        bounds = self.newest["time_bnds"].values[0].astype("datetime64[s]")
        self.step = bounds[1] - bounds[0]
        with _open_fields(self._files[min(self._files)]) as oldest:
            self.start = oldest["time"].values[0].astype("datetime64[s]") - self.step

    @property
    def network_name(self) -> str:
        """Name of the network."""
        return self.newest.attrs["project"]

    @property
    def version(self) -> str:
        """Version of fieldgen that made the newest fields."""
        return self.newest.attrs["fieldgen_version"]

    @property
    def limits(self) -> tuple[float, float]:
        """Colour limits of the maps [kg m-2]; raises InputError if run.json does not tell them."""
        path = self.path / "run.json"
        try:
            low, high = json.loads(path.read_text(encoding="utf-8"))["colour_limits"]
            return float(low), float(high)
        except (OSError, ValueError, LookupError, TypeError):
            raise InputError(
                f"{path}: does not tell colour_limits, expected two numbers. Run make or update."
            ) from None

    @property
    def lines(self) -> dict[str, list]:
        """Geometries of coast and rivers, where the folder has them."""
        paths = {name: self.path / "lines" / f"{name}.geojson" for name in NAMES[:2]}
        return {name: read_geometries(path) for name, path in paths.items() if path.is_file()}

    def steps_between(self, start: np.datetime64, end: np.datetime64) -> np.ndarray:
        """Ends of all steps that lie between two times, whether there are files or not."""
        offset = (self.end - start) // self.step * self.step
        return np.arange(self.end - offset + self.step, end + 1, self.step)

    def read_steps(self, start: np.datetime64, end: np.datetime64) -> Iterator[Step]:
        """The steps between two times, one after another; one day's file is open at a time.

        Raises InputError if the grid is not the newest file's.
        """
        ends = self.steps_between(start, end)
        days = np.datetime_as_string(ends - self.step, unit="D")
        for day in np.unique(days):
            file = self._files.get(day.replace("-", ""))
            if file is None:
                yield from (Step(one - self.step, one, None) for one in ends[days == day])
                continue
            with _open_fields(file) as fields:
                self._check_grid(file, fields)
                held = fields["time"].values.astype("datetime64[s]")
                for one in ends[days == day]:
                    place = np.flatnonzero(held == one)
                    field = fields.isel(time=place[0]).load() if len(place) else None
                    yield Step(one - self.step, one, field)

    def _check_grid(self, file: Path, fields: xr.Dataset) -> None:
        for axis in ("x", "y"):
            if not np.array_equal(fields[axis].values, self.newest[axis].values):
                raise InputError(
                    f"{file}: its grid is not that of the newest field file. "
                    "Choose a period with one grid, or run make for all of it."
                )

    def read_stations(
        self, start: np.datetime64 | None = None, end: np.datetime64 | None = None
    ) -> xr.Dataset:
        """All stations (station, time) of a period, by default of all files.

        Steps that a station's files lack are NaN and flagged 1. Places and names are those of the
        newest file that has the station. Raises InputError if there are no station files.
        """
        days = []
        for file in sorted((self.path / "stations").glob("stations_*.nc")):
            if not _may_hold(file.stem.removeprefix("stations_"), start, end):
                continue
            with _open(file) as day:
                days.append(day.drop_dims("bounds").set_index(station="station_id").load())
        if not days:
            raise InputError(f"{self.path}: holds no station files of the period. Run make.")
        series = xr.concat(
            [day.reset_coords(drop=True) for day in days],
            "time",
            data_vars="minimal",
            coords="minimal",
            compat="override",
            join="outer",
            fill_value={"flag": NO_VALUE},
            combine_attrs="override",
        )
        series = series.assign_coords(_newest_places(days, series["station"].values))
        time = series["time"].values.astype("datetime64[s]")
        low = time[0] if start is None else start + np.timedelta64(1, "s")
        return series.isel(time=(time >= low) & (time <= (time[-1] if end is None else end)))


def _newest_places(days: list[xr.Dataset], ids) -> dict:
    """Coordinates of stations (station,) from the newest file that has each."""
    found = {}
    for day in days:
        for index, one in enumerate(day["station"].values):
            found[str(one)] = [day[name].values[index] for name in _PLACES]
    columns = zip(*(found[str(one)] for one in ids), strict=True)
    return {
        name: ("station", np.array(column)) for name, column in zip(_PLACES, columns, strict=True)
    }


_PLACES = ("station_name", "longitude", "latitude", "orthometric_height")


def _may_hold(day: str, start, end) -> bool:
    """Whether the file of a day can hold steps of a period."""
    date = np.datetime64(f"{day[:4]}-{day[4:6]}-{day[6:]}", "s")
    one = np.timedelta64(1, "D")
    return (start is None or date + one > start) and (end is None or date < end)


def _open_fields(file: Path) -> xr.Dataset:
    """Fields as a picture shows them."""
    return on_even_grid(_open(file), file)


def _open(file: Path) -> xr.Dataset:
    try:
        return xr.open_dataset(file)
    except (OSError, ValueError):
        raise InputError(
            f"{file}: is not a NetCDF file that can be read. Make its day anew."
        ) from None


def observed_at(stations: xr.Dataset, time: np.datetime64) -> tuple[np.ndarray, np.ndarray]:
    """Water vapour [kg m-2] and flag (station) of one step; NaN and 1 if the files lack it."""
    place = np.flatnonzero(stations["time"].values.astype("datetime64[s]") == time)
    if not len(place):
        count = stations.sizes["station"]
        return np.full(count, np.nan), np.full(count, NO_VALUE)
    one = stations.isel(time=place[0])
    return one["pwv"].values, one["flag"].values
