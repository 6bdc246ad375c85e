"""The newest hours of an output folder, read back from its files."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import timedelta
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.errors import InputError
from fieldgen.products.even_picture import on_even_grid

FIELDS = ("pwv", "pwv_sigma", "pwv_at_reference", "flag")
SERIES = ("pwv", "pwv_sigma", "residual", "residual_sigma")
PLACES = ("longitude", "latitude", "orthometric_height")

_NEEDED_FIELDS = (*FIELDS, "terrain", "time_bnds", "station_count", "crs")
_NEEDED_ATTRIBUTES = {"flag": ("flag_masks", "flag_meanings"), "crs": ("crs_wkt",)}
_NEEDED_GLOBALS = ("project", "fieldgen_version")
_NEEDED_STATIONS = (*SERIES, *PLACES, "flag", "station_id", "station_name", "time")


@dataclass(frozen=True)
class Hours:
    """The hours of a page.

    fields : field dataset (time, y, x) of `products.field_file`
    stations : `SERIES` and flag (station, time) at the times of the fields, `PLACES` and
        name (station); a station that a file lacks is flagged as without delay
    limits : colour limits of water vapour [kg m-2]
    """

    fields: xr.Dataset
    stations: xr.Dataset
    limits: tuple[float, float]


def read_hours(folder: Path, last: timedelta | None) -> Hours:
    """The hours of an output folder that end within `last` of the newest, all if it is None.

    Raises InputError if there are none, or if a file is not what it should be.
    """
    files = sorted((folder / "fields").glob("pwv_*.nc"), reverse=True)
    if not files:
        raise InputError(
            f"{folder}: holds no field files, expected those of a run. Run make or update."
        )
    days = list(_newest_days(files, last))
    _check_grids(days)
    fields = xr.concat(
        [dataset for _, dataset in reversed(days)],
        "time",
        data_vars="minimal",
        coords="minimal",
        compat="override",
        join="override",
        combine_attrs="override",
    )
    fields.attrs = days[0][1].attrs
    stations = [
        _load(path, _NEEDED_STATIONS, "stations")
        for day, _ in reversed(days)
        if (path := _station_file(folder, day)).is_file()
    ]
    return Hours(
        fields, _join_stations(stations, fields["time"].values), read_limits(folder / "run.json")
    )


def read_limits(path: Path) -> tuple[float, float]:
    """Colour limits [kg m-2] of a run.json. Raises InputError."""
    try:
        low, high = json.loads(path.read_text(encoding="utf-8"))["colour_limits"]
        return float(low), float(high)
    except OSError as error:
        raise InputError(f"{path}: cannot be read: {error.strerror}. Run make or update.") from None
    except (ValueError, LookupError, TypeError):
        raise InputError(
            f"{path}: colour_limits is missing, expected two numbers. Run make or update."
        ) from None


def flag_bits(flag: xr.DataArray) -> dict[str, int]:
    """Flag meaning -> bit, from the CF attributes of a flag variable."""
    masks = np.atleast_1d(flag.attrs["flag_masks"]).tolist()
    return dict(zip(flag.attrs["flag_meanings"].split(), masks, strict=True))


def _newest_days(files: list[Path], last: timedelta | None) -> Iterator[tuple[Path, xr.Dataset]]:
    """Field files from the newest back, cut to the hours that are asked for."""
    first = None
    for path in files:
        dataset = on_even_grid(_load(path, _NEEDED_FIELDS, "fields"), path)
        time = dataset["time"].values
        if first is None and last is not None:
            first = time[-1] - np.timedelta64(int(last.total_seconds()), "s")
        if first is not None and time[-1] <= first:
            return
        yield path, dataset if first is None else dataset.isel(time=time > first)


def _load(path: Path, needed, kind: str) -> xr.Dataset:
    try:
        with xr.open_dataset(path) as dataset:
            dataset.load()
    except (OSError, ValueError, RuntimeError) as error:
        reason = getattr(error, "strerror", None) or "it is not NetCDF"
        raise InputError(f"{path}: cannot be read: {reason}.") from None
    for missing in _missing_parts(dataset, needed):
        raise InputError(f"{path}: {missing} is missing, expected a file of {kind}.")
    if not dataset.sizes["time"]:
        raise InputError(f"{path}: hours are 0, expected at least 1.")
    return dataset


def _missing_parts(dataset: xr.Dataset, needed) -> Iterator[str]:
    """What a file lacks of the variables and attributes that are used."""
    yield from (f"variable {name}" for name in needed if name not in dataset.variables)
    yield from (f"attribute {name}" for name in _NEEDED_GLOBALS if name not in dataset.attrs)
    for variable, attributes in _NEEDED_ATTRIBUTES.items():
        if variable in needed:
            held = dataset[variable].attrs
            yield from (
                f"attribute {name} of {variable}" for name in attributes if name not in held
            )


def _check_grids(days: list[tuple[Path, xr.Dataset]]) -> None:
    newest, like = days[0]
    for path, dataset in days[1:]:
        if not all(np.array_equal(dataset[axis].values, like[axis].values) for axis in "yx"):
            raise InputError(
                f"{path}: its grid differs from that of {newest}, expected the same. Make the day "
                "anew, or ask for hours after it."
            )


def _station_file(folder: Path, day: Path) -> Path:
    return folder / "stations" / day.name.replace("pwv_", "stations_", 1)


def _join_stations(days: list[xr.Dataset], time: np.ndarray) -> xr.Dataset:
    """Stations of all days; places and names are those of the newest day that has them."""
    index = {
        name: number
        for number, name in enumerate(sorted({str(one) for day in days for one in _ids(day)}))
    }
    shape = (len(index), len(time))
    values = {name: np.full(shape, np.nan) for name in SERIES}
    places = {name: np.full(len(index), np.nan) for name in PLACES}
    names = np.array(list(index), dtype=object)
    bits = flag_bits(days[-1]["flag"]) if days else {}
    flag = np.full(shape, bits.get("no_delay", 1), dtype=np.int16)
    for day in days:
        rows = [index[str(one)] for one in _ids(day)]
        _, columns, its = np.intersect1d(time, day["time"].values, return_indices=True)
        for name in PLACES:
            places[name][rows] = day[name].values
        names[rows] = [str(name) for name in day["station_name"].values]
        for name in SERIES:
            values[name][np.ix_(rows, columns)] = _turned(day, name)[:, its]
        flag[np.ix_(rows, columns)] = _turned(day, "flag")[:, its]
    variables: dict[str, tuple] = {
        name: (("station", "time"), series) for name, series in values.items()
    }
    variables |= {name: ("station", place) for name, place in places.items()}
    variables["flag"] = (("station", "time"), flag, days[-1]["flag"].attrs if days else {})
    variables["name"] = ("station", names)
    return xr.Dataset(variables, coords={"station": list(index), "time": time})


def _ids(day: xr.Dataset) -> np.ndarray:
    return day["station_id"].values


def _turned(day: xr.Dataset, name: str) -> np.ndarray:
    return day[name].transpose("station", "time").values
