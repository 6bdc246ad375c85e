"""Invented fields and stations to draw, and ways to look at the pictures."""

import numpy as np
import pyproj
import xarray as xr

from fieldgen.products.maps import MapPainter

UTM = "EPSG:32637"
HOUR = np.timedelta64(1, "h")
FLAGS = {
    "flag_masks": np.array([1, 2, 4, 8, 16], dtype=np.uint8),
    "flag_meanings": "extrapolated_in_height far_from_stations too_few_stations "
    "sigma_above_5_kg_m2 sea",
}


def make_island(rows=94, columns=104, hours=2, crs=UTM, cell=1000.0, corner=(430e3, 3990e3)):
    """A field dataset over an island of two mountains, moist in the south and by day."""
    x = corner[0] + cell * (np.arange(columns) + 0.5)
    y = corner[1] + cell * (np.arange(rows) + 0.5)
    u, v = np.meshgrid(np.linspace(-1, 1, columns), np.linspace(-1, 1, rows))
    shore = u**2 + v**2 + 0.12 * np.sin(5 * np.arctan2(v, u)) + 0.05 * np.sin(17 * u - 11 * v)
    ridges = 900 + 500 * np.sin(9 * u + 4 * v) * np.cos(6 * v - 2 * u)
    ridges += 260 * np.abs(np.sin(31 * u - 13 * v)) + 180 * np.sin(23 * v + 41 * u)
    peaks = 1900 * np.exp(-((u - 0.3) ** 2 + (v + 0.1) ** 2) / 0.04)
    terrain = np.clip((ridges + peaks) * np.clip(1.1 * (0.72 - shore), 0, 1), 0, None)
    sea = shore >= 0.72
    hour = np.datetime64("2026-09-14T01:00", "ns") + np.arange(hours) * HOUR
    phase = 2 * np.pi * np.arange(hours)[:, None, None] / 24
    pwv = (27 - 5 * v + 4 * np.sin(3 * u + 2 * phase) - 3 * np.cos(phase)) * np.exp(-terrain / 2200)
    flag = (
        16 * sea
        + 1 * (terrain > 1100)
        + 2 * (u**2 + v**2 > 1.3)
        + 8 * ((u + 0.9) ** 2 + (v - 0.8) ** 2 < 0.12)
    )
    flag = np.broadcast_to(flag, pwv.shape).astype(np.uint8)
    reference = pyproj.CRS(crs)
    fields = xr.Dataset(
        {
            "pwv": (("time", "y", "x"), pwv),
            "flag": (("time", "y", "x"), flag.copy(), FLAGS),
            "time_bnds": (("time", "bounds"), np.stack([hour - HOUR, hour], axis=1)),
            "terrain": (("y", "x"), terrain),
            "scale_height": ("time", np.full(hours, 2140.0)),
            "station_count": ("time", np.full(hours, 38)),
            "crs": ((), 0, {"crs_wkt": reference.to_wkt()}),
        },
        coords={"time": ("time", hour, {"bounds": "time_bnds"}), "y": y, "x": x},
        attrs={"fieldgen_version": "0.1.0"},
    )
    if reference.is_geographic:
        return fields
    longitude, latitude = pyproj.Transformer.from_crs(
        reference, "EPSG:4326", always_xy=True
    ).transform(*np.meshgrid(x, y))
    return fields.assign_coords(longitude=(("y", "x"), longitude), latitude=(("y", "x"), latitude))


def make_stations(fields, cells):
    """A station dataset with stations in the middle of cells (row, column), all used."""
    row, column = np.transpose(cells)
    if "longitude" in fields:
        longitude, latitude = fields["longitude"].values, fields["latitude"].values
    else:
        longitude, latitude = np.meshgrid(fields["x"].values, fields["y"].values)
    pwv = fields["pwv"].values[:, row, column].T.copy()
    return xr.Dataset(
        {
            "pwv": (("station", "time"), pwv),
            "flag": (("station", "time"), np.zeros(pwv.shape, dtype=np.uint8)),
        },
        coords={
            "time": fields["time"],
            "longitude": ("station", longitude[row, column]),
            "latitude": ("station", latitude[row, column]),
        },
    )


def make_painter(fields, **options):
    return MapPainter(fields, **{"network_name": "Ostrana", "limits": (5, 40), **options})


GRIDS = {
    "projected": {"rows": 12, "columns": 16},
    "geographic": {
        "rows": 12, "columns": 16, "crs": "EPSG:4326", "cell": 0.25, "corner": (178.0, -20.0),
    },
}  # fmt: skip


def pixel_of_cell(picture, shape, row, column):
    """The pixel in the middle of a cell counted from the south-west corner."""
    width, height = picture.size
    across = int((column + 0.5) / shape[1] * width)
    down = int((shape[0] - row - 0.5) / shape[0] * height)
    return picture.getpixel((across, down))


def hex_bytes(colour):
    return tuple(int(colour[place : place + 2], 16) for place in (1, 3, 5))
