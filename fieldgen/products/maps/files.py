"""Maps as PNG files: one an hour, and the newest under a name of its own."""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import xarray as xr
from PIL import Image

from fieldgen.products.atomic import whole_file
from fieldgen.products.maps.painter import MapPainter

COMPRESSION = 2  # zlib level; higher ones take longer and save little


def write_maps(
    fields: xr.Dataset, stations: xr.Dataset, folder: Path, painter: MapPainter
) -> list[Path]:
    """One map an hour and a copy of the newest, each complete as soon as it can be seen.

    fields : (time, y, x) on the grid that the painter was made for
    stations : (station, time); hours that it lacks have all stations crossed out
    folder : made if need be. Maps are named ``pwv_YYYYMMDDTHHMMZ.png`` after the time coordinate;
        ``latest.png`` copies the newest map in the folder, be it from this run or an earlier one
    Returns the hourly maps in order of time. Raises OutputError if one cannot be written.
    """
    marks = painter.place_stations(stations)
    observed = select_hours(stations, fields["time"].values)
    paths = []
    for hour in range(fields.sizes["time"]):
        field = fields.isel(time=hour)
        picture = painter.draw_hour(field, observed.isel(time=hour), marks)
        paths.append(folder / f"pwv_{format_stamp(field['time'].values)}.png")
        write_picture(picture, paths[-1])
    if paths:
        copy_newest(folder)
    return paths


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


def copy_newest(folder: Path) -> None:
    """The newest hourly map of a folder as ``latest.png``; raises OutputError."""
    newest = max(folder.glob("pwv_*Z.png"))
    with whole_file(folder / "latest.png") as part:
        shutil.copyfile(newest, part)
