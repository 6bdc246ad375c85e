"""Real soundings as profiles, and what integrates along them."""

from __future__ import annotations

from pathlib import Path
from typing import NamedTuple

import numpy as np
import xarray as xr

GRAVITY = 9.80665
GAS_CONSTANT_DRY_AIR = 287.05
GAS_CONSTANT_VAPOUR = 461.5
EPSILON = 0.622

COLUMN_WIDTH = 7
"""Of the listings of radiosondes: pressure [hPa], height [m], temperature and dew point [C]."""

HIGHEST_TOP = 380.0
"""A sounding that ends below this pressure level [hPa] misses water vapour above it."""


class Profile(NamedTuple):
    """A sounding from the ground up: pressure [hPa], height [m], temperature, dew point [K]."""

    name: str
    pressure: np.ndarray
    height: np.ndarray
    temperature: np.ndarray
    dew_point: np.ndarray

    @property
    def vapour_pressure(self):
        """[hPa] over water, WMO-No. 8."""
        celsius = self.dew_point - 273.15
        return 6.112 * np.exp(17.62 * celsius / (243.12 + celsius))

    @property
    def specific_humidity(self):
        """[kg kg-1], of moist air: the mixing ratio in its place gives about 1 % too much."""
        vapour = self.vapour_pressure
        return EPSILON * vapour / (self.pressure - (1 - EPSILON) * vapour)

    @property
    def water_vapour_above(self):
        """[kg m-2] above each level: the integral of q dp / g."""
        return integral_above(self.specific_humidity, -100 * self.pressure) / GRAVITY

    @property
    def mean_temperature(self) -> float:
        """Tm [K]: the integral of e/T dz over that of e/T^2 dz (Davis et al. 1985)."""
        ratio = self.vapour_pressure / self.temperature
        return np.trapezoid(ratio, self.height) / np.trapezoid(
            ratio / self.temperature, self.height
        )


def normal_gravity(latitude, height):
    """Gravity of the GRS 80 ellipsoid [m s-2] (Moritz 1980), second order in height [m]."""
    sine = np.sin(np.radians(latitude)) ** 2
    on_ellipsoid = 9.7803267715 * (1 + 0.001931851353 * sine) / np.sqrt(1 - 0.00669438002290 * sine)
    flattening, ratio = 0.00335281068118, 0.00344978600308
    linear = 2 / 6378137.0 * (1 + flattening + ratio - 2 * flattening * sine)
    return on_ellipsoid * (1 - linear * height + 3 / 6378137.0**2 * height**2)


def integral_above(values, coordinate):
    """Trapezoidal integral of values (n,) over an ascending coordinate (n,), from each level up."""
    layers = (values[1:] + values[:-1]) / 2 * np.diff(coordinate)
    return np.append(layers[::-1].cumsum()[::-1], 0.0)


def read_radiosonde(path: Path) -> Profile:
    """A listing of pressure, height, temperature, dew point and more; incomplete lines are left."""
    rows = []
    for line in path.read_text().splitlines():
        cells = [line[i * COLUMN_WIDTH : (i + 1) * COLUMN_WIDTH] for i in range(4)]
        try:
            rows.append([float(cell) for cell in cells])
        except ValueError:
            continue
    return _profile(path.stem, *np.array(rows).T)


def read_dropsonde(path: Path) -> Profile | None:
    """A dropsonde, thinned to 5 hPa; None where it does not reach from the sea to the top."""
    with xr.open_dataset(path, decode_timedelta=False) as opened:
        columns = np.stack([opened[name].values for name in ("pres", "alt", "tdry", "dp")])
    columns = columns[:, np.isfinite(columns).all(axis=0)].astype(float)
    layer = np.round(columns[0] / 5)
    columns = np.stack([columns[:, layer == one].mean(axis=1) for one in np.unique(layer)[::-1]])
    profile = _profile(path.stem, *columns.T)
    reaches = profile.pressure[0] > 1000 and profile.pressure[-1] < HIGHEST_TOP
    return profile if reaches and (np.diff(profile.height) > 0).all() else None


def _profile(name, pressure, height, temperature, dew_point) -> Profile:
    return Profile(name, pressure, height, temperature + 273.15, dew_point + 273.15)
