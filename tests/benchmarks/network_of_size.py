"""A generated network of any size, written as input files, for the benchmarks."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import rasterio
from rasterio.transform import from_bounds
from scipy.ndimage import gaussian_filter

SETTINGS = """
[network]
name = "Benchmark"
[grid]
crs = "EPSG:32626"
west = 300000
south = 5100000
east = {east}
north = {north}
spacing = 1000
[stations]
delays = ["*.tro"]
weather = ["weather.csv"]
table = "stations.csv"
[terrain]
file = "terrain.tif"
geoid = 57.0
[products]
maps = "none"
"""

HEADER = """%=TRO 2.00 TST {day}:00000 TST {day}:00000 {day}:86400 P MIX
+TROP/DESCRIPTION
 TROPO PARAMETER NAMES          TROTOT STDDEV
 TROPO PARAMETER UNITS          1e+03 1e+03
 TROPO PARAMETER WIDTH          6 5
-TROP/DESCRIPTION
+TROP/SOLUTION
*STATION__ ____EPOCH_____ TROTOT STDDEV
"""

START = np.datetime64("2026-03-01T00:30:00", "s")


def write_network(
    folder: Path, *, hours: int, stations: int, cells: int, gap_share: float, seed: int = 1
) -> Path:
    """Files of a network with hourly water vapour; returns the path of its network.toml.

    cells : along each side, of 1 km. Gaps are outages of about six hours that make up `gap_share`.
    """
    draw = np.random.default_rng(seed)
    side = cells * 1000
    settings = SETTINGS.format(east=300000 + side, north=5100000 + side)
    (folder / "network.toml").write_text(settings)
    terrain = write_terrain(folder, cells, draw)
    x, y = draw.uniform(0.02, 0.98, (2, stations)) * side
    height = terrain[cells - 1 - (y / 1000).astype(int), (x / 1000).astype(int)]
    values = _water_vapour(x, y, height, hours, draw)
    values[_outages(hours, stations, gap_share, draw)] = np.nan
    write_stations(folder, x, y, height)
    _write_weather(folder, hours)
    _write_delays(folder, zenith_delay(height, values))
    return folder / "network.toml"


def write_terrain(folder: Path, cells: int, draw):
    """Hills up to about 1500 m, heights (cells, cells), north row first."""
    relief = gaussian_filter(draw.normal(size=(cells, cells)), cells / 25)
    terrain = np.clip(relief / np.abs(relief).max() * 1500.0 + 200.0, 0.0, None).astype(np.float32)
    bounds = (300000, 5100000, 300000 + cells * 1000, 5100000 + cells * 1000)
    profile = {
        "driver": "GTiff", "width": cells, "height": cells, "count": 1, "dtype": "float32",
        "crs": "EPSG:32626", "transform": from_bounds(*bounds, cells, cells),
    }  # fmt: skip
    with rasterio.open(folder / "terrain.tif", "w", **profile) as raster:
        raster.write(terrain, 1)
    return terrain


def _water_vapour(x, y, height, hours: int, draw):
    """Values (hours, stations) of moving waves, an exponential profile and noise [kg m-2]."""
    hour = np.arange(hours)[:, None]
    field = 22.0 + 4.0 * np.sin(hour / 40.0)
    for _ in range(12):
        wave = draw.uniform(-1, 1, 2) / draw.uniform(20e3, 120e3)
        field = field + np.sin(wave[0] * x + wave[1] * y + hour * draw.uniform(-0.3, 0.3))
    scale_height = 2000.0 + 200.0 * np.sin(hour / 30.0)
    return field * np.exp(-height / scale_height) + draw.normal(0, 0.6, field.shape)


def _outages(hours: int, stations: int, share: float, draw):
    """Missing values (hours, stations) bool in outages of 3 to 9 hours."""
    missing = np.zeros((hours, stations), bool)
    while missing.mean() < share:
        start, station = draw.integers(-5, hours), draw.integers(stations)
        missing[max(start, 0) : start + draw.integers(3, 10), station] = True
    return missing


def write_stations(folder: Path, x, y, height) -> None:
    import pyproj

    to_degrees = pyproj.Transformer.from_crs("EPSG:32626", "EPSG:4326", always_xy=True)
    longitude, latitude = to_degrees.transform(x + 300000, y + 5100000)
    lines = ["id,longitude,latitude,ellipsoidal_height,orthometric_height"]
    lines += [
        f"S{index:03d},{east:.6f},{north:.6f},{up + 57.0:.1f},{up:.1f}"
        for index, (east, north, up) in enumerate(zip(longitude, latitude, height, strict=True))
    ]
    (folder / "stations.csv").write_text("\n".join(lines) + "\n")


def _write_weather(folder: Path, hours: int) -> None:
    """One barometer at sea level in the standard atmosphere."""
    times = np.datetime_as_string(START + np.arange(hours).astype("m8[h]"), timezone="UTC")
    place = "-29.0,46.5,0.0"
    lines = ["site,time,pressure,temperature,relative_humidity,longitude,latitude,"
             "orthometric_height"]  # fmt: skip
    lines += [f"SEA0,{time},1013.25,288.15,0,{place}" for time in times]
    (folder / "weather.csv").write_text("\n".join(lines) + "\n")


def zenith_delay(height, water_vapour):
    """Delays (hours, stations) [m] of the standard atmosphere with water vapour [kg m-2]."""
    pressure = 1013.25 * (1.0 - 0.0065 * height / 288.15) ** 5.2559
    return 0.0022768 * pressure + water_vapour / 155.0


def _write_delays(folder: Path, delay) -> None:
    """SINEX_TRO files, one a day, without the missing records."""
    for day, rows in enumerate(np.array_split(delay, range(24, len(delay), 24))):
        date = START + np.timedelta64(day, "D")
        year, start = date.astype("M8[Y]"), date.astype("M8[D]")
        number = (start - year.astype("M8[D]")).astype(int) + 1
        epochs = [f"{year}:{number:03d}:{3600 * hour + 1800:05d}" for hour in range(len(rows))]
        lines = [
            f" S{station:03d}      {epoch} {1000.0 * value:6.1f} {2.5:5.1f}"
            for epoch, row in zip(epochs, rows, strict=True)
            for station, value in enumerate(row)
            if np.isfinite(value)
        ]
        head = HEADER.format(day=f"{year}:{number:03d}")
        tail = "-TROP/SOLUTION\n%=ENDTRO\n"
        (folder / f"day{day:03d}.tro").write_text(head + "\n".join(lines) + "\n" + tail)
