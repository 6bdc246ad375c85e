"""A small invented network written to a folder, for tests of the whole chain."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import rasterio
from rasterio.transform import from_bounds

WEST, SOUTH, EAST, NORTH = 300000, 5200000, 400000, 5300000
"""Of the terrain, EPSG:32626, open ocean."""

SETTINGS = """
[network]
name = "Test isle"
[grid]
crs = "EPSG:32626"
west = 320000
south = 5220000
east = 380000
north = 5280000
spacing = 5000
[stations]
delays = ["delays.csv"]
weather = ["weather.csv"]
[terrain]
file = "terrain.tif"
geoid = 57.0
[products]
maps = "none"
page = "none"
"""

START = np.datetime64("2026-03-01T00:00:00", "s")


def terrain_height(x, y):
    """Height [m] of a hill of 1500 m in the middle of the scene; x, y in EPSG:32626."""
    return 1500.0 * np.exp(-((x - 350000) ** 2 + (y - 5250000) ** 2) / 25000.0**2)


def write_terrain(folder: Path) -> None:
    """terrain.tif, 1 km."""
    x = np.arange(WEST + 500, EAST, 1000)
    y = np.arange(NORTH - 500, SOUTH, -1000)
    height = terrain_height(*np.meshgrid(x, y)).astype(np.float32)
    profile = {
        "driver": "GTiff", "width": len(x), "height": len(y), "count": 1, "dtype": "float32",
        "crs": "EPSG:32626", "transform": from_bounds(WEST, SOUTH, EAST, NORTH, len(x), len(y)),
    }  # fmt: skip
    with rasterio.open(folder / "terrain.tif", "w", **profile) as raster:
        raster.write(height, 1)


def station_places(count: int, seed: int = 1):
    """Longitude, latitude [degrees] and orthometric height [m] of stations spread over the hill."""
    import pyproj

    draw = np.random.default_rng(seed)
    x, y = draw.uniform(322000, 378000, count), draw.uniform(5222000, 5278000, count)
    to_degrees = pyproj.Transformer.from_crs("EPSG:32626", "EPSG:4326", always_xy=True)
    return *to_degrees.transform(x, y), terrain_height(x, y) + 3.0


def write_scene(
    folder: Path, *, stations: int = 12, hours: int = 6, water_vapour=None, settings: str = SETTINGS
) -> Path:
    """Scene with water vapour given directly: `water_vapour(height, hour)` [kg m-2].

    Returns the path of its network.toml.
    """
    write_terrain(folder)
    longitude, latitude, height = station_places(stations)
    water_vapour = water_vapour or (lambda h, hour: 20.0 * np.exp(-h / 2000.0))
    lines = ["station,time,pwv,pwv_sigma,longitude,latitude,orthometric_height,ellipsoidal_height"]
    for hour in range(hours):
        time = START + np.timedelta64(3600 * hour + 1800, "s")
        for index in range(stations):
            value = water_vapour(height[index], hour)
            lines.append(
                f"ST{index:02d},{time}Z,{value:.4f},0.7,{longitude[index]:.6f},"
                f"{latitude[index]:.6f},{height[index]:.2f},{height[index] + 57.0:.2f}"
            )
    (folder / "delays.csv").write_text("\n".join(lines) + "\n")
    weather = ["site,time,pressure,temperature,relative_humidity,longitude,latitude,"
               "orthometric_height"]  # fmt: skip
    for hour in range(hours):
        time = START + np.timedelta64(3600 * hour + 1800, "s")
        weather.append(f"WX01,{time}Z,1005.0,285.0,70,{longitude[0]:.6f},{latitude[0]:.6f},10.0")
    (folder / "weather.csv").write_text("\n".join(weather) + "\n")
    path = folder / "network.toml"
    path.write_text(settings)
    return path
