"""A generated network in memory, with real weather's habits and invented values.

Shares no formula of the field with fieldgen: water vapour is a sum of drifting plane waves whose
structure function grows with distance, as Emardson et al. (2003) found for delays.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import xarray as xr

from fieldgen.readers.network import Network
from fieldgen.settings import Settings

HOURS = 50
"""Two days, and the two hours after them that the test for jumps looks at."""

KILOMETRES_PER_DEGREE = 111.2
ORIGIN = -28.0, 47.0  # open ocean


class Recipe(NamedTuple):
    """What a network is like.

    side [km] of the square it fills; moisture: mean water vapour at sea level [kg m-2];
    variation: SD [kg m-2] of the difference over 50 km; sea_temperature [K]
    """

    stations: int
    side: float
    moisture: float = 24.0
    variation: float = 1.8
    sea_temperature: float = 291.0
    barometer_share: float = 0.6


class Atmosphere:
    """Water vapour, pressure and temperature anywhere in a region."""

    def __init__(self, recipe: Recipe, draw):
        self.recipe = recipe
        count = 160
        wavelength = np.geomspace(6.0, 900.0, count)
        direction = draw.uniform(0.0, 2.0 * np.pi, count)
        self._wave = 2.0 * np.pi / wavelength * np.array([np.cos(direction), np.sin(direction)])
        wind = draw.uniform(15.0, 40.0)  # [km h-1]
        towards = draw.uniform(0.0, 2.0 * np.pi)
        self._wind = wind * np.array([np.cos(towards), np.sin(towards)])
        own = draw.normal(0.0, 1.0, count) * 4.0 * wavelength**-0.5  # change on the way [h-1]
        self._frequency = self._wind @ self._wave + own
        self._phase = draw.uniform(0.0, 2.0 * np.pi, count)
        size = np.sqrt(wavelength)
        over_50_km = np.sum(size**2 * (1.0 - np.cos(2.0 * np.pi / wavelength * 50.0 * 0.64)))
        self._size = size * recipe.variation / np.sqrt(over_50_km)
        self._slope = draw.normal(0.0, 1.0, 2)
        self._tide = draw.uniform(0.0, 2.0 * np.pi)

    def sea_level_water_vapour(self, east, north):
        """Water vapour (hours, n) [kg m-2] at sea level; east, north (n,) [km]."""
        hour = np.arange(HOURS)[:, None, None]
        angle = np.multiply.outer(east, self._wave[0]) + np.multiply.outer(north, self._wave[1])
        angle = angle[None] - hour * self._frequency + self._phase
        field = self.recipe.moisture + np.cos(angle) @ self._size
        field += 0.08 * self.recipe.moisture * np.sin(np.arange(HOURS)[:, None] / 9.0 + self._tide)
        return np.maximum(field, 0.15 * self.recipe.moisture)

    def profile(self, east, height):
        """Share (hours, n) of the sea level's water vapour above a height [m]."""
        hour = np.arange(HOURS)[:, None]
        scale = 2000.0 + 200.0 * np.sin(hour / 11.0 + self._tide)
        scale = scale + 120.0 * np.sin(east / 90.0 + hour / 8.0)
        return np.exp(-height / scale - 0.02 * (height / 1000.0) ** 2)

    def temperature(self, height):
        """Temperature (hours, n) [K]."""
        hour = np.arange(HOURS)[:, None]
        return self.recipe.sea_temperature - 0.006 * height + 3.0 * np.sin(hour * np.pi / 12.0 - 2)

    def pressure(self, east, north, height):
        """Pressure (hours, n) [hPa] of a passing low, brought up hydrostatically."""
        hour = np.arange(HOURS)[:, None]
        gradient = 0.02 * (self._slope[0] * east + self._slope[1] * north)
        sea_level = 1010.0 + gradient + 6.0 * np.sin(hour / 12.0 + self._slope[0])
        layer = self.temperature(height / 2.0) * 1.008  # virtual
        return sea_level * np.exp(-9.80665 * height / (287.05 * layer))


def make_network(recipe: Recipe, seed: int) -> Network:
    """Network of a recipe without faults; grid and terrain are not made."""
    draw = np.random.default_rng(seed)
    count = recipe.stations
    east, north = draw.uniform(0.0, recipe.side, (2, count))
    ridge = np.exp(-(((east - recipe.side * 0.5) / (0.2 * recipe.side)) ** 2))
    height = 20.0 + 1200.0 * ridge * draw.uniform(0.1, 1.0, count)
    air = Atmosphere(recipe, draw)
    water_vapour = air.sea_level_water_vapour(east, north) * air.profile(east, height)
    pressure = air.pressure(east, north, height)
    longitude, latitude = _degrees(east, north)
    mean_temperature = 70.2 + 0.72 * air.temperature(height)
    wet = water_vapour / _conversion(mean_temperature)
    gravity = 1.0 - 0.00266 * np.cos(2.0 * np.radians(latitude)) - 2.8e-7 * height
    delay = 0.0022768 * pressure / gravity + wet + _noise(draw, (HOURS, count))
    formal = 0.0025 * np.exp(draw.normal(0.0, 0.15, (HOURS, count)) + draw.normal(0, 0.2, count))
    stations = _stations(longitude, latitude, height)
    time = np.datetime64("2026-03-01T01:00", "ns") + np.arange(HOURS) * np.timedelta64(1, "h")
    empty = np.full((HOURS, count), np.nan)
    delays = xr.Dataset(
        {
            name: (("time", "station"), values)
            for name, values in (
                ("ztd", np.round(delay, 4)), ("ztd_sigma", np.round(formal, 4)),
                ("pwv", empty), ("pwv_sigma", empty.copy()),
            )
        },
        coords={"time": time, "station": stations.station},
    )  # fmt: skip
    weather = _weather(air, draw, east, north, height)
    settings = Settings(
        folder=".",
        grid={"like": "grid.nc"},
        stations={"delays": ["*"]},
        terrain={"file": "terrain.tif"},
    )
    return Network(settings, None, None, stations, delays, weather.assign_coords(time=time), None)


def _conversion(mean_temperature):
    """Conversion factor [kg m-2 per m] with the constants of Bevis et al. (1994)."""
    return 1e8 / (461.5 * (22.1 + 373900.0 / mean_temperature))


def _noise(draw, shape):
    """Errors of delays [m], 4 mm, correlated over some hours."""
    noise = np.empty(shape)
    noise[0] = draw.normal(0.0, 1.0, shape[1])
    for hour in range(1, shape[0]):
        noise[hour] = 0.7 * noise[hour - 1] + np.sqrt(1 - 0.49) * draw.normal(0.0, 1.0, shape[1])
    return 0.004 * noise


def _degrees(east, north):
    latitude = ORIGIN[1] + north / KILOMETRES_PER_DEGREE
    longitude = ORIGIN[0] + east / (KILOMETRES_PER_DEGREE * np.cos(np.radians(latitude)))
    return longitude, latitude


def _stations(longitude, latitude, height) -> xr.Dataset:
    names = np.array([f"S{index:03d}" for index in range(len(height))], dtype=object)
    columns = {
        "longitude": longitude, "latitude": latitude, "ellipsoidal_height": height + 57.0,
        "orthometric_height": height, "terrain_height": height, "name": names,
    }  # fmt: skip
    return xr.Dataset(
        {name: ("station", values) for name, values in columns.items()}, coords={"station": names}
    )


def _weather(air: Atmosphere, draw, east, north, height) -> xr.Dataset:
    """Barometers beside a share of the stations, 0.15 hPa off each and 0.1 hPa every hour."""
    here = np.sort(draw.permutation(len(height))[: int(len(height) * air.recipe.barometer_share)])
    longitude, latitude = _degrees(east[here], north[here])
    low = height[here] - 2.0
    pressure = air.pressure(east[here], north[here], low)
    pressure += draw.normal(0.0, 0.15, len(here)) + draw.normal(0.0, 0.1, pressure.shape)
    temperature = air.temperature(low) + draw.normal(0.0, 0.4, pressure.shape)
    series = {
        "pressure": np.round(pressure, 2), "temperature": np.round(temperature, 2),
        "relative_humidity": np.full(pressure.shape, 75.0),
    }  # fmt: skip
    places = {"longitude": longitude, "latitude": latitude, "orthometric_height": low}
    names = np.array([f"W{index:03d}" for index in here], dtype=object)
    return xr.Dataset(
        {name: (("time", "site"), values) for name, values in series.items()}
        | {name: ("site", values) for name, values in places.items()},
        coords={"site": names},
    )
