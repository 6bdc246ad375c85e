"""Faults to plant in a network: each changes a copy and says which values it spoilt."""

from __future__ import annotations

from dataclasses import replace
from typing import NamedTuple

import numpy as np

from fieldgen.readers.network import Network

METRES_PER_KILOGRAM = 1.0 / 155.0
"""Delay [m] of 1 kg m-2."""

DAY = slice(24, 48)
"""The hours that are looked at."""


class Planted(NamedTuple):
    """A network with a fault and the values (t, n) bool that it touches."""

    network: Network
    touched: np.ndarray


def copy_of(network: Network) -> Network:
    """A network whose arrays may be changed."""
    return replace(
        network,
        stations=network.stations.copy(deep=True),
        delays=network.delays.copy(deep=True),
        weather=network.weather.copy(deep=True),
    )


def _some_stations(network: Network, draw, share: float):
    """Indices of a share of the stations, one at least, that report throughout."""
    whole = np.flatnonzero(np.isfinite(network.delays.ztd.values).all(axis=0))
    return draw.choice(whole, max(1, int(share * len(whole))), replace=False)


def _with_barometer(network: Network, draw) -> tuple[int, np.ndarray]:
    """A barometer that always reports, and an empty mask of its station's values."""
    whole = np.flatnonzero(np.isfinite(network.weather.pressure.values).all(axis=0))
    return int(draw.choice(whole)), np.zeros(network.delays.ztd.shape, bool)


def _add(network: Network, touched, error) -> Planted:
    """Errors [kg m-2] (t, n) added to the delays that are touched."""
    ztd = network.delays.ztd.values
    ztd[touched] += np.broadcast_to(error, ztd.shape)[touched] * METRES_PER_KILOGRAM
    return Planted(network, touched)


def _sign(draw):
    return draw.choice([-1.0, 1.0])


def spikes(network: Network, size: float, draw) -> Planted:
    """Two lone hours in one station of twelve."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    for station in _some_stations(network, draw, 1 / 12):
        touched[draw.choice(np.arange(26, 48, 5), 2, replace=False), station] = True
    return _add(network, touched, size * draw.choice([-1.0, 1.0], network.delays.ztd.shape))


def lasting_jumps(network: Network, size: float, draw) -> Planted:
    """Four hours in one station of twelve."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    error = np.zeros(touched.shape)
    for station in _some_stations(network, draw, 1 / 12):
        start = draw.integers(26, 42)
        touched[start : start + 4, station] = True
        error[:, station] = size * _sign(draw)
    return _add(network, touched, error)


def level_shift(network: Network, size: float, draw) -> Planted:
    """One station in twenty from the middle of the window on: an antenna changed."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    error = np.zeros(touched.shape)
    for station in _some_stations(network, draw, 1 / 20):
        touched[draw.integers(20, 34) :, station] = True
        error[:, station] = size * _sign(draw)
    return _add(network, touched, error)


def wrong_value(network: Network, size: float, draw) -> Planted:
    """Lone delays times a factor: another unit or mapping function."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    for station in _some_stations(network, draw, 1 / 12):
        touched[draw.choice(np.arange(25, 48), 3, replace=False), station] = True
    network.delays.ztd.values[touched] *= size
    return Planted(network, touched)


def noisy_station(network: Network, size: float, draw) -> Planted:
    """One station in twenty with independent errors of an SD [kg m-2] in every hour."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    touched[:, _some_stations(network, draw, 1 / 20)] = True
    return _add(network, touched, size * draw.normal(size=touched.shape))


def formal_errors(network: Network, size: float, draw) -> Planted:
    """Six hours in one station of twelve, formal errors times a size and errors of that SD."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    for station in _some_stations(network, draw, 1 / 12):
        start = draw.integers(25, 41)
        touched[start : start + 6, station] = True
    network.delays.ztd_sigma.values[touched] *= size
    return _add(network, touched, size * draw.normal(size=touched.shape))


def station_height(network: Network, size: float, draw) -> Planted:
    """One station listed too high by a size [m]; its barometer's height is right."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    station = _some_stations(network, draw, 0)
    touched[:, station] = True
    network.stations.orthometric_height.values[station] += size
    return Planted(network, touched)


def barometer_height(network: Network, size: float, draw) -> Planted:
    """One barometer listed too high by a size [m]."""
    site, touched = _with_barometer(network, draw)
    network.weather.orthometric_height.values[site] += size
    return Planted(network, touched)


def barometer_offset(network: Network, size: float, draw) -> Planted:
    """One barometer that reads a size [hPa] too much or too little."""
    site, touched = _with_barometer(network, draw)
    network.weather.pressure.values[:, site] += size * _sign(draw)
    return Planted(network, touched)


def frozen_barometer(network: Network, size: float, draw) -> Planted:
    """One barometer that repeats itself for the last hours of the day."""
    site, touched = _with_barometer(network, draw)
    pressure = network.weather.pressure.values
    pressure[48 - int(size) :, site] = pressure[48 - int(size), site]
    return Planted(network, touched)


def frozen_delay(network: Network, size: float, draw) -> Planted:
    """One station in twenty that repeats itself for the last hours of the day."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    ztd, start = network.delays.ztd.values, 48 - int(size)
    for station in _some_stations(network, draw, 1 / 20):
        ztd[start:, station] = ztd[start, station]
        touched[start + 1 :, station] = True
    return Planted(network, touched)


def swapped_rows(network: Network, size: float, draw) -> Planted:
    """Two stations whose places are mixed up in the table; their heights differ by a size [m]."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    height = network.stations.orthometric_height.values
    one = int(_some_stations(network, draw, 0)[0])
    apart = np.abs(height - height[one])
    other = int(np.argmin(np.where(apart > 0.0, np.abs(apart - size), np.inf)))
    for name in ("longitude", "latitude", "ellipsoidal_height", "orthometric_height"):
        values = network.stations[name].values
        values[[one, other]] = values[[other, one]]
    touched[:, [one, other]] = True
    return Planted(network, touched)


def two_neighbours(network: Network, size: float, draw) -> Planted:
    """Two stations beside each other, wrong alike in all hours."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    one = int(_some_stations(network, draw, 0)[0])
    away = np.hypot(
        *((network.stations[name].values - network.stations[name].values[one])
          for name in ("longitude", "latitude"))
    )  # fmt: skip
    touched[:, np.argsort(away)[:2]] = True
    return _add(network, touched, size * _sign(draw))


def supersaturated(network: Network, size: float, draw) -> Planted:
    """Lone hours with more water vapour than cold air holds."""
    touched = np.zeros(network.delays.ztd.shape, bool)
    for station in _some_stations(network, draw, 1 / 12):
        touched[draw.choice(np.arange(26, 48, 5), 2, replace=False), station] = True
    return _add(network, touched, size)
