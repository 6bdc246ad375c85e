"""Pressure and temperature at the antennas, from their own barometer or from the others.

Every barometer is brought to the network's common level hydrostatically, kriged there, and
brought to the antenna; what the way up and down adds to the error is carried along.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from fieldgen.constants import GAS_CONSTANT_DRY_AIR, GRAVITY, STANDARD_LAPSE_RATE
from fieldgen.kriging.covariance import Covariance, chord_positions, distances
from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.solver import Kriging, krige_hours
from fieldgen.station.heights import layer_mean, pressure_at_height, virtual_temperature

PRESSURE_SOURCES = {"none": 0, "own": 1, "neighbours": 2}
"""Codes of the source of a station's pressure, as written to the station file."""

PRESSURE_COVARIANCE = Covariance("exponential", 4.0, 1500.0, 0.02)
"""Of sea-level pressure about a plane [hPa2, km, hPa2]: 0.4 hPa over 20 km, 1.2 hPa over 100 km.
Common practice, no source."""

TEMPERATURE_COVARIANCE = Covariance("exponential", 6.0, 300.0, 1.0)
"""Of surface temperature at one level [K2, km, K2]. Common practice, no source."""

LAYER_TEMPERATURE_SIGMA = 3.0
"""Standard error of the mean virtual temperature of the layer between two heights [K].
Common practice, no source."""

LAPSE_RATE_SIGMA = 0.002
"""Standard error of the lapse rate of surface temperature [K m-1]. Common practice, no source."""

THERMOMETER_SIGMA = 0.5
"""Standard error of a thermometer and its exposure [K]. Common practice, no source."""

_DEFAULT_HUMIDITY = 70.0
"""Relative humidity where none is measured [%]; 30 % wrong is 0.02 hPa on a way of 100 m."""

_STANDARD_TEMPERATURE = 288.15
_STANDARD_TEMPERATURE_SIGMA = 10.0
"""Temperature at sea level where no thermometer reports [K]: ICAO standard atmosphere."""

_LINEAR_DRIFT_MINIMUM = 6
"""Barometers needed before a plane is fitted through them."""


class Sites(NamedTuple):
    """Places of barometers or antennas: longitude, latitude [degrees], orthometric height [m]."""

    longitude: np.ndarray
    latitude: np.ndarray
    height: np.ndarray


class SurfaceAir(NamedTuple):
    """Air at the antennas, every array (t, n).

    pressure, pressure_sigma [hPa], temperature, temperature_sigma [K], source: a code of
    `PRESSURE_SOURCES`; pressure is NaN and source 0 where no source serves.
    """

    pressure: np.ndarray
    pressure_sigma: np.ndarray
    temperature: np.ndarray
    temperature_sigma: np.ndarray
    source: np.ndarray


class Weather(NamedTuple):
    """What the barometers measured, every array (t, s): hPa, K, %; NaN where missing."""

    pressure: np.ndarray
    temperature: np.ndarray
    relative_humidity: np.ndarray


def layer_pressure_sigma(pressure, height_difference, temperature):
    """Standard error [hPa] that a way of `height_difference` [m] adds to a pressure [hPa].

    dP = P g |dH| / (Rd Tv^2) sigma(Tv), temperature [K].
    """
    scale = GRAVITY.value / (GAS_CONSTANT_DRY_AIR.value * temperature**2)
    return pressure * scale * np.abs(height_difference) * LAYER_TEMPERATURE_SIGMA


def own_barometer(antennas: Sites, barometers: Sites, limit: float):
    """Index (n,) of the nearest barometer within `limit` [km] of each antenna, -1 without one."""
    if not len(barometers.height):
        return np.full(len(antennas.height), -1)
    apart = distances(
        chord_positions(antennas.longitude, antennas.latitude),
        chord_positions(barometers.longitude, barometers.latitude),
    )
    nearest = apart.argmin(axis=1)
    return np.where(apart.min(axis=1) <= limit, nearest, -1)


def surface_temperature(weather: Weather, barometers: Sites, antennas: Sites):
    """Temperature and its standard error (t, n) [K] at the antennas.

    Kriged at the barometers' mean height; the standard atmosphere where no thermometer reports.
    """
    hours, count = len(weather.temperature), len(antennas.height)
    standard = _STANDARD_TEMPERATURE - STANDARD_LAPSE_RATE.value * antennas.height
    temperature = np.tile(standard, (hours, 1))
    sigma = np.full((hours, count), _STANDARD_TEMPERATURE_SIGMA)
    known = np.isfinite(weather.temperature).any(axis=1)
    if not known.any():
        return temperature, sigma
    level = barometers.height.mean()
    at_level = weather.temperature + STANDARD_LAPSE_RATE.value * (barometers.height - level)
    error = THERMOMETER_SIGMA**2 + (LAPSE_RATE_SIGMA * (barometers.height - level)) ** 2
    field, variance = _krige_hours(
        TEMPERATURE_COVARIANCE, at_level[known], error, barometers, antennas, "constant"
    )
    way = antennas.height - level
    temperature[known] = field - STANDARD_LAPSE_RATE.value * way
    sigma[known] = np.sqrt(variance + (LAPSE_RATE_SIGMA * way) ** 2)
    return temperature, sigma


def pressure_at_level(weather: Weather, barometers: Sites, level: float, barometer_sigma: float):
    """Pressures and their error variance (t, s) [hPa], [hPa2] brought to the height `level` [m]."""
    own_temperature, _ = surface_temperature(weather, barometers, barometers)
    temperature = np.where(np.isfinite(weather.temperature), weather.temperature, own_temperature)
    brought, sigma = _bring(
        weather.pressure, weather.relative_humidity, temperature, barometers.height, level
    )
    return brought, barometer_sigma**2 + sigma**2


def _bring(pressure, relative_humidity, temperature, height, new_height):
    """Pressure at another height and the error of the way [hPa]."""
    humidity = np.where(np.isfinite(relative_humidity), relative_humidity, _DEFAULT_HUMIDITY)
    virtual = virtual_temperature(temperature, humidity, pressure)
    layer = layer_mean(virtual, height, new_height)
    brought = pressure_at_height(pressure, height, new_height, layer)
    return brought, layer_pressure_sigma(brought, new_height - height, layer)


def surface_air(
    weather: Weather,
    barometers: Sites,
    antennas: Sites,
    own,
    *,
    barometer_sigma: float,
    sources: list[str],
) -> SurfaceAir:
    """Pressure and temperature at the antennas, each hour from the first source that serves.

    own : (n,) index of each antenna's own barometer, -1 without one
    sources : names of `PRESSURE_SOURCES` in the order of preference
    """
    temperature, temperature_sigma = surface_temperature(weather, barometers, antennas)
    shape = temperature.shape
    pressure, sigma = np.full(shape, np.nan), np.full(shape, np.nan)
    source = np.zeros(shape, np.int8)
    makers = {"own": _own_pressure, "neighbours": _neighbours_pressure}
    for name in sources:
        value, error = makers[name](
            weather, barometers, antennas, own, temperature, barometer_sigma
        )
        fresh = np.isnan(pressure) & np.isfinite(value)
        pressure[fresh], sigma[fresh] = value[fresh], error[fresh]
        source[fresh] = PRESSURE_SOURCES[name]
    return SurfaceAir(pressure, sigma, temperature, temperature_sigma, source)


def _own_pressure(weather, barometers, antennas, own, temperature, barometer_sigma):
    with_own = np.flatnonzero(own >= 0)
    mine = own[with_own]
    pressure, sigma = np.full(temperature.shape, np.nan), np.full(temperature.shape, np.nan)
    measured = weather.temperature[:, mine]
    pressure[:, with_own], way = _bring(
        weather.pressure[:, mine],
        weather.relative_humidity[:, mine],
        np.where(np.isfinite(measured), measured, temperature[:, with_own]),
        barometers.height[mine],
        antennas.height[with_own],
    )
    sigma[:, with_own] = np.hypot(barometer_sigma, way)
    return pressure, sigma


def _neighbours_pressure(weather, barometers, antennas, own, temperature, barometer_sigma):
    pressure, sigma = np.full(temperature.shape, np.nan), np.full(temperature.shape, np.nan)
    if not len(barometers.height):
        return pressure, sigma
    level = barometers.height.mean()
    at_level, error = pressure_at_level(weather, barometers, level, barometer_sigma)
    at_level_temperature = temperature + STANDARD_LAPSE_RATE.value * (antennas.height - level)
    drifts = np.array([drift_of_pressure(count) for count in np.isfinite(at_level).sum(axis=1)])
    for drift in ("constant", "linear"):
        hours = (drifts == drift) & np.isfinite(at_level).any(axis=1)
        if not hours.any():
            continue
        field, variance = _krige_hours(
            PRESSURE_COVARIANCE, at_level[hours], usual_variance(error), barometers, antennas, drift
        )
        pressure[hours], way = _bring(
            field, np.full_like(field, np.nan), at_level_temperature[hours], level, antennas.height
        )
        sigma[hours] = np.hypot(np.sqrt(variance), way)
    return pressure, sigma


def drift_of_pressure(count: int) -> str:
    """Drift of pressure for a number of barometers: a plane needs a few more than three."""
    return "linear" if count >= _LINEAR_DRIFT_MINIMUM else "constant"


def usual_variance(error_variance):
    """Mean over the hours (s,) of error variances (t, s); one where a barometer is silent."""
    known = np.isfinite(error_variance)
    total = np.where(known, error_variance, 0.0).sum(axis=0)
    count = known.sum(axis=0)
    return np.where(count > 0, total / np.maximum(count, 1), 1.0)


def _krige_hours(covariance, values, error_variance, sources: Sites, targets: Sites, drift):
    """Values and variance (t, m) at the targets, from values (t, s) with gaps."""
    maker = PlaceMaker(sources.longitude, sources.latitude, drift)
    kriging = Kriging(covariance, maker.places(sources.longitude, sources.latitude), error_variance)
    places = maker.places(targets.longitude, targets.latitude)
    gaps = [kriging.gaps(np.isnan(row)) for row in values]
    return krige_hours(kriging, places, values, gaps, np.float64)
