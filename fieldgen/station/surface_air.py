"""Pressure and temperature at the antennas: four sources, in an order of preference.

`own`: the antenna's barometer. `neighbours`: every barometer brought to the network's common level
hydrostatically, kriged there, and brought to the antenna. `grid`: a weather model, brought from its
surface, or from sea level, to the antenna. `climatology`: the average of the season. What the way
up and down adds to the error is carried along, and so is what all stations share of it.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from fieldgen.constants import GAS_CONSTANT_DRY_AIR, GRAVITY, STANDARD_LAPSE_RATE
from fieldgen.kriging.covariance import Covariance, chord_positions, distances
from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.solver import Kriging, krige_hours
from fieldgen.station.climatology import REGIONAL_SIGMA, TEMPERATURE_SIGMA, climate
from fieldgen.station.heights import layer_mean, pressure_at_height, virtual_temperature

PRESSURE_SOURCES = {"none": 0, "own": 1, "neighbours": 2, "grid": 3, "climatology": 4}
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

GRID_SIGMA = 1.2
"""Standard error of a weather model's pressure [hPa], its way to the antenna left out: hydrostatic
delays of models are good to 2.4 to 3.0 mm (Chen et al. 2021, Earth Space Sci.)."""

GRID_COMMON_SHARE = 0.5
"""Share of a model's error variance that all stations of a region have in common: its highs and
lows lie off by the same amount over hundreds of kilometres. Common practice, no source."""

SEA_LEVEL_WAY = 1.5
"""What the error of the way up is multiplied with where a model's pressure is that at sea level:
the model came down from its ground by a rule of its own. Measured on one analysis of North
America."""

GRID_TEMPERATURE_SIGMA = 2.0
"""Standard error of a model's temperature at 2 m [K]. Common practice, no source."""

SIGMA_LIMIT = 2.0
"""A source less sure than this [hPa] steps back behind those that follow: 0.7 kg m-2."""

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

    pressure, pressure_sigma, pressure_common_sigma (the part that all stations share) [hPa],
    temperature, temperature_sigma [K], source: a code of `PRESSURE_SOURCES`; pressure is NaN and
    source 0 where no source serves.
    """

    pressure: np.ndarray
    pressure_sigma: np.ndarray
    pressure_common_sigma: np.ndarray
    temperature: np.ndarray
    temperature_sigma: np.ndarray
    source: np.ndarray

    @property
    def pressure_own_sigma(self):
        """The part (t, n) of the pressure's standard error [hPa] that the others do not share."""
        return np.sqrt(self.pressure_sigma**2 - self.pressure_common_sigma**2)


class Weather(NamedTuple):
    """What the barometers measured, every array (t, s): hPa, K, %; NaN where missing."""

    pressure: np.ndarray
    temperature: np.ndarray
    relative_humidity: np.ndarray


class GridWeather(NamedTuple):
    """What weather grids say at the antennas, every array (t, n), NaN where they do not.

    pressure [hPa] at pressure_height [m]; temperature [K] at 2 m above surface_height [m], the
    height of the model's ground.
    """

    pressure: np.ndarray
    pressure_height: np.ndarray
    temperature: np.ndarray
    surface_height: np.ndarray


class Estimate(NamedTuple):
    """What one source says, arrays (t, n) [hPa]: the standard error and its part that all stations
    share."""

    pressure: np.ndarray
    sigma: np.ndarray
    common_sigma: np.ndarray


class _Inputs(NamedTuple):
    """What the sources draw from; temperature (t, n) [K] at the antennas, time (t,)."""

    weather: Weather
    barometers: Sites
    antennas: Sites
    own: np.ndarray
    temperature: np.ndarray
    barometer_sigma: float
    grid: GridWeather | None
    grid_sigma: float
    time: np.ndarray | None


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
    at_level, error = temperature_at_level(weather, barometers, level)
    field, variance = _krige_hours(
        TEMPERATURE_COVARIANCE, at_level[known], error, barometers, antennas, "constant"
    )
    way = antennas.height - level
    temperature[known] = field - STANDARD_LAPSE_RATE.value * way
    sigma[known] = np.sqrt(variance + (LAPSE_RATE_SIGMA * way) ** 2)
    return temperature, sigma


def temperature_at_level(weather: Weather, sites: Sites, level: float):
    """Temperatures (t, s) [K] brought to the height `level` [m], and their error variance (s,)
    [K2]."""
    way = sites.height - level
    error = THERMOMETER_SIGMA**2 + (LAPSE_RATE_SIGMA * way) ** 2
    return weather.temperature + STANDARD_LAPSE_RATE.value * way, error


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
    time=None,
    grid: GridWeather | None = None,
    grid_sigma: float = GRID_SIGMA,
    sigma_limit: float = SIGMA_LIMIT,
) -> SurfaceAir:
    """Pressure and temperature at the antennas.

    Pressure of an hour comes from the first source whose standard error is at most `sigma_limit`
    [hPa]; where no source is that sure, from the surest. Temperature comes from the surest.

    own : (n,) index of each antenna's own barometer, -1 without one
    sources : names of `PRESSURE_SOURCES` in the order of preference
    time : (t,) datetime64, which the climatology asks for
    """
    inputs = _Inputs(
        weather, barometers, antennas, own, None, barometer_sigma, grid, grid_sigma, time
    )
    temperature, temperature_sigma = _surest_temperature(inputs, sources)
    inputs = inputs._replace(temperature=temperature)
    estimates = {name: _ESTIMATES[name](inputs) for name in sources}
    chosen = _choose(list(estimates.values()), sigma_limit)
    codes = np.array([0, *(PRESSURE_SOURCES[name] for name in sources)], np.int8)
    return SurfaceAir(
        *(_pick([getattr(one, part) for one in estimates.values()], chosen)
          for part in Estimate._fields),
        temperature, temperature_sigma, codes[chosen + 1],
    )  # fmt: skip


def _choose(estimates: list[Estimate], sigma_limit: float):
    """Index (t, n) of the estimate that serves, -1 where none does."""
    sigma = np.array([np.where(np.isfinite(one.pressure), one.sigma, np.inf) for one in estimates])
    sure = sigma <= sigma_limit
    chosen = np.where(sure.any(axis=0), sure.argmax(axis=0), sigma.argmin(axis=0))
    return np.where(np.isfinite(sigma).any(axis=0), chosen, -1)


def _pick(arrays, chosen):
    """Values (t, n) of the array that `chosen` names, NaN where it is -1."""
    picked = np.take_along_axis(np.array(arrays), np.maximum(chosen, 0)[None], axis=0)[0]
    return np.where(chosen < 0, np.nan, picked)


def _surest_temperature(inputs: _Inputs, sources: list[str]):
    """Temperature and its standard error (t, n) [K] of whichever is surest."""
    found = [surface_temperature(inputs.weather, inputs.barometers, inputs.antennas)]
    shape = found[0][0].shape
    if "grid" in sources and inputs.grid is not None:
        way = inputs.antennas.height - inputs.grid.surface_height
        error = np.hypot(GRID_TEMPERATURE_SIGMA, LAPSE_RATE_SIGMA * way)
        found.append((inputs.grid.temperature - STANDARD_LAPSE_RATE.value * way, error))
    if "climatology" in sources:
        average = climate(inputs.time, inputs.antennas.latitude, inputs.antennas.height)
        found.append((average.temperature, np.full(shape, TEMPERATURE_SIGMA)))
    values, sigmas = zip(*found, strict=True)
    unsure = [np.where(np.isfinite(v), s, np.inf) for v, s in found]
    surest = np.argmin(unsure, axis=0)
    return _pick(values, surest), _pick(sigmas, surest)


def _nothing(inputs: _Inputs) -> Estimate:
    """A source that says nothing anywhere; its arrays may be written to."""
    return Estimate(*(np.full(inputs.temperature.shape, np.nan) for _ in range(2)),
                    np.zeros(inputs.temperature.shape))  # fmt: skip


def _own_pressure(inputs: _Inputs) -> Estimate:
    found = _nothing(inputs)
    weather = inputs.weather
    with_own = np.flatnonzero(inputs.own >= 0)
    mine = inputs.own[with_own]
    measured = weather.temperature[:, mine]
    found.pressure[:, with_own], way = _bring(
        weather.pressure[:, mine],
        weather.relative_humidity[:, mine],
        np.where(np.isfinite(measured), measured, inputs.temperature[:, with_own]),
        inputs.barometers.height[mine],
        inputs.antennas.height[with_own],
    )
    found.sigma[:, with_own] = np.hypot(inputs.barometer_sigma, way)
    return found


def _neighbours_pressure(inputs: _Inputs) -> Estimate:
    found = _nothing(inputs)
    barometers, antennas = inputs.barometers, inputs.antennas
    if not len(barometers.height):
        return found
    level = barometers.height.mean()
    at_level, error = pressure_at_level(inputs.weather, barometers, level, inputs.barometer_sigma)
    at_level_temperature = _temperature_at(inputs, level)
    drifts = np.array([drift_of_pressure(count) for count in np.isfinite(at_level).sum(axis=1)])
    for drift in ("constant", "linear"):
        hours = (drifts == drift) & np.isfinite(at_level).any(axis=1)
        if not hours.any():
            continue
        field, variance = _krige_hours(
            PRESSURE_COVARIANCE, at_level[hours], usual_variance(error), barometers, antennas, drift
        )
        found.pressure[hours], way = _bring(
            field, np.full_like(field, np.nan), at_level_temperature[hours], level, antennas.height
        )
        found.sigma[hours] = np.hypot(np.sqrt(variance), way)
    return found


def _grid_pressure(inputs: _Inputs) -> Estimate:
    grid = inputs.grid
    if grid is None:
        return _nothing(inputs)
    pressure, way = _bring(
        grid.pressure,
        np.full_like(grid.pressure, np.nan),
        _temperature_at(inputs, grid.pressure_height),
        grid.pressure_height,
        inputs.antennas.height,
    )
    way = np.where(grid.pressure_height == grid.surface_height, way, SEA_LEVEL_WAY * way)
    common = np.full(pressure.shape, np.sqrt(GRID_COMMON_SHARE) * inputs.grid_sigma)
    return Estimate(pressure, np.hypot(inputs.grid_sigma, way), common)


def _climatology_pressure(inputs: _Inputs) -> Estimate:
    height = inputs.antennas.height
    average = climate(inputs.time, inputs.antennas.latitude, height)
    layer = average.temperature + STANDARD_LAPSE_RATE.value * height / 2.0
    way = layer_pressure_sigma(average.pressure, height, layer)
    way = way * TEMPERATURE_SIGMA / LAYER_TEMPERATURE_SIGMA
    common = np.broadcast_to(average.synoptic_sigma, way.shape)
    sigma = np.sqrt(common**2 + REGIONAL_SIGMA**2 + way**2)
    return Estimate(average.pressure, sigma, common)


_ESTIMATES = {
    "own": _own_pressure,
    "neighbours": _neighbours_pressure,
    "grid": _grid_pressure,
    "climatology": _climatology_pressure,
}


def _temperature_at(inputs: _Inputs, height):
    """Temperature (t, n) [K] above or below the antennas, at a height [m]."""
    return inputs.temperature + STANDARD_LAPSE_RATE.value * (inputs.antennas.height - height)


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
