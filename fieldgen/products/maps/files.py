"""Maps as PNG files: one an hour, and the newest under a name of its own."""

from __future__ import annotations

import filecmp
import shutil
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import xarray as xr
from PIL import Image

from fieldgen.products.atomic import whole_file
from fieldgen.products.maps.painter import MapPainter

LATEST = "latest.png"

COMPRESSION = 2  # zlib level; higher ones take longer and save little


def write_maps(
    fields: xr.Dataset, stations: xr.Dataset, folder: Path, painter: MapPainter
) -> list[Path]:
    """One map an hour, each complete as soon as it can be seen.

    fields : (time, y, x) on the grid that the painter was made for
    stations : (station, time); hours that it lacks have all stations crossed out
    folder : made if need be; see `map_name` for the names
    Returns the maps in order of time. Raises OutputError if one cannot be written.
    """
    paths = []
    for time, picture in _draw_hours(fields, stations, painter):
        paths.append(folder / map_name(time))
        write_picture(picture, paths[-1])
    return paths


def write_latest(
    fields: xr.Dataset, stations: xr.Dataset, folder: Path, painter: MapPainter
) -> Path:
    """The last hour of `fields` as ``latest.png`` alone; arguments as of `write_maps`."""
    for _, picture in _draw_hours(fields.isel(time=[-1]), stations, painter):
        write_picture(picture, folder / LATEST)
    return folder / LATEST


def _draw_hours(fields: xr.Dataset, stations: xr.Dataset, painter: MapPainter) -> Iterator:
    """Time and picture of each hour."""
    marks = painter.place_stations(stations)
    observed = select_hours(stations, fields["time"].values)
    for hour in range(fields.sizes["time"]):
        field = fields.isel(time=hour)
        yield field["time"].values, painter.draw_hour(field, observed.isel(time=hour), marks)


def map_name(time: np.datetime64) -> str:
    """File name of the map of an hour, such as pwv_20260914T1300Z.png."""
    return f"pwv_{format_stamp(time)}.png"


def select_hours(stations: xr.Dataset, time: np.ndarray) -> xr.Dataset:
    """Values and flags of stations at given times; where they lack one, all are flagged 1."""
    series = {
        name: (("station", "time"), stations[name].transpose("station", "time").values)
        for name in ("pwv", "flag")
    }
    hours = xr.Dataset(series, coords={"time": stations["time"].values})
    return hours.reindex(time=time, fill_value={"flag": 1})


def format_stamp(time: np.datetime64) -> str:
    """A time as in the names of files, such as 20260914T1300Z."""
    return np.datetime_as_string(time, "m").replace("-", "").replace(":", "") + "Z"


def write_picture(picture: Image.Image, path: Path) -> None:
    """A picture as a PNG file; makes the folder, raises OutputError."""
    with whole_file(path) as part:
        picture.save(part, format="PNG", compress_level=COMPRESSION)


def copy_newest(folder: Path) -> Path | None:
    """The newest hourly map of a folder as ``latest.png``, be it of this run or an earlier one.

    Returns its path if it was written anew, None if it is there already or there is no map.
    Raises OutputError.
    """
    newest = max(folder.glob("pwv_*Z.png"), default=None)
    latest = folder / LATEST
    if newest is None or (latest.exists() and filecmp.cmp(newest, latest, shallow=False)):
        return None
    with whole_file(latest) as part:
        shutil.copyfile(newest, part)
    return latest
