"""What the files say -> water vapour at every station and hour, with the tests of its series."""

from __future__ import annotations

import numpy as np
import xarray as xr

from fieldgen.constants import REFRACTIVITY, STANDARD_LAPSE_RATE, ZHD_PER_HECTOPASCAL
from fieldgen.quantities import QUANTITIES
from fieldgen.readers.network import Network
from fieldgen.readers.places import sites_of
from fieldgen.settings import RetrievalTable, Settings
from fieldgen.station.barometers import barometer_bias, screen_barometers, screen_thermometers
from fieldgen.station.delay import (
    common_sigma,
    conversion_factor,
    hydrostatic_delay,
    independent_sigma,
    mean_temperature,
)
from fieldgen.station.screening import STATION_FLAGS
from fieldgen.station.series import (
    above_saturation,
    formal_error_too_large,
    frozen,
    frozen_pressure,
    jumps,
)
from fieldgen.station.surface_air import (
    PRESSURE_SOURCES,
    GridWeather,
    SurfaceAir,
    Weather,
    own_barometer,
    surface_air,
)

CONSTANT_FACTOR_SIGMA = 0.025
"""Relative standard error of a constant conversion factor: Pi runs from 0.146 to 0.165 between
Tm of 255 and 290 K."""

GRID_MEAN_TEMPERATURE_SIGMA = 1.5
"""Standard error of a weather model's own Tm [K]; 1.1 to 1.5 K, Chen et al. 2021, Earth Space
Sci."""


def retrieve_water_vapour(network: Network, rows=slice(None)) -> xr.Dataset:
    """Water vapour of every station and step, Dataset (time, station).

    rows : slice or indices of the steps, by default all; a station's median formal error and the
        running median are those of these steps

    ztd, ztd_sigma, zhd, zwd [m], pressure [hPa], pressure_source, mean_temperature [K], pwv,
    pwv_sigma, pwv_independent_sigma [kg m-2] and flag, zero where the value passes every test on
    its own series; common_sigma [kg m-2] and common_relative_sigma by time, what the stations'
    errors have in common; barometer_residual (time, site) [hPa] against the others, and
    barometer_rejected where it is too large; with the stations' places.
    """
    settings, stations = network.settings, network.stations
    delays, weather = network.delays.isel(time=rows), network.weather.isel(time=rows)
    grid = None if network.weather_grid is None else network.weather_grid.isel(time=rows)
    air, barometers = _air_at_antennas(settings, stations, weather, grid)
    sigma = _realistic_ztd_sigma(delays.ztd_sigma.values, settings.retrieval)
    zhd = hydrostatic_delay(
        air.pressure, stations.latitude.values, stations.orthometric_height.values
    )
    tm, factor, relative_sigma = _conversion(settings.retrieval, stations, air, grid)
    zwd = delays.ztd.values - zhd
    given = np.isnan(delays.ztd.values) & np.isfinite(delays.pwv.values)
    pwv = np.where(given, delays.pwv.values, factor * zwd)
    flag = _series_flags(settings, delays, given, air, pwv)
    hectopascal = np.where(given, 0.0, factor * ZHD_PER_HECTOPASCAL.value)  # [kg m-2]
    by_pressure = hectopascal * air.pressure_common_sigma
    shared, rest = _split_common(by_pressure, np.isfinite(pwv) & _usable_pressure(flag))
    own_sigma = independent_sigma(factor, sigma, air.pressure_own_sigma)
    own_sigma = np.where(given, _given_sigma(delays, factor, settings.retrieval), own_sigma)
    constant = np.where(given, 0.0, settings.retrieval.common_sigma)
    relative_sigma = np.where(given, 0.0, relative_sigma)
    common = common_sigma(pwv, np.hypot(constant, by_pressure), relative_sigma)
    variables = {
        "ztd": delays.ztd.values, "ztd_sigma": sigma, "zhd": zhd, "zwd": zwd,
        "pressure": air.pressure, "pressure_source": air.source, "mean_temperature": tm,
        "pwv": pwv, "pwv_sigma": np.hypot(own_sigma, common),
        "pwv_independent_sigma": np.hypot(own_sigma, rest), "flag": flag,
    }  # fmt: skip
    series = {name: (("time", "station"), values) for name, values in variables.items()}
    common = _common_sigma_by_hour(
        np.isfinite(pwv) & _usable_pressure(flag), np.hypot(constant, shared), relative_sigma
    )
    return stations.assign(series | common | barometers).assign_coords(
        time=delays.time, site=weather.site
    )


def _given_sigma(delays: xr.Dataset, factor, settings: RetrievalTable):
    """Standard error [kg m-2] of water vapour given in a file: its own, or a delay's floor."""
    given = delays.pwv_sigma.values
    return np.where(given > 0.0, given, factor * settings.ztd_sigma_floor)


def _split_common(sigma, present):
    """Error (t, n) that comes from one source of pressure, told apart by what it does to a field.

    Stations that draw on a weather model, or on climatology, are off together. What their mean over
    an hour's `present` (t, n) stations is off by moves the whole field (t, 1); what a station is
    off by beyond that tells it from stations with a barometer, and counts as its own (t, n), so
    that those with a barometer weigh more.
    """
    count = np.maximum(present.sum(axis=1, keepdims=True), 1)
    sigma = np.nan_to_num(sigma)
    shared = np.where(present, sigma, 0.0).sum(axis=1, keepdims=True) / count
    return shared, np.maximum(sigma - shared, 0.0)


def _common_sigma_by_hour(present, constant, relative):
    """Parts (t,) of the error that the stations of an hour share, their mean over the stations."""
    count = np.maximum(present.sum(axis=1), 1)
    return {
        name: ("time", np.where(present, part, 0.0).sum(axis=1) / count)
        for name, part in (("common_sigma", constant), ("common_relative_sigma", relative))
    }


def _usable_pressure(flag):
    """Values (t, n) bool whose pressure is good enough for the fields."""
    return (flag & STATION_FLAGS["climatological_pressure"]) == 0


def _air_at_antennas(settings: Settings, stations: xr.Dataset, weather: xr.Dataset, grid):
    """Air at the antennas, and what the barometers' test against each other found."""
    barometers, antennas = sites_of(weather), sites_of(stations)
    measured = Weather(
        weather.pressure.values, weather.temperature.values, weather.relative_humidity.values
    )
    warm_or_cold = screen_thermometers(measured, barometers)
    measured = measured._replace(temperature=np.where(warm_or_cold, np.nan, measured.temperature))
    sigma = settings.retrieval.barometer_sigma
    still = frozen_pressure(measured.pressure, 2 * frozen_steps(settings))
    moving = measured._replace(pressure=np.where(still, np.nan, measured.pressure))
    rejected, residual = screen_barometers(
        moving, barometers, sigma, settings.screening.pressure_difference
    )
    kept = moving._replace(pressure=np.where(rejected, np.nan, moving.pressure))
    bias = barometer_bias(kept, barometers, sigma)
    rejected |= still | (bias.rejected & np.isfinite(measured.pressure))
    air = surface_air(
        measured._replace(pressure=np.where(rejected, np.nan, measured.pressure)),
        barometers,
        antennas,
        own_barometer(antennas, barometers, settings.retrieval.barometer_distance),
        barometer_sigma=sigma,
        sources=settings.retrieval.pressure,
        time=weather.time.values,
        grid=None if grid is None else GridWeather(*(grid[n].values for n in GridWeather._fields)),
        grid_sigma=settings.retrieval.grid_sigma,
        sigma_limit=settings.retrieval.pressure_sigma_limit,
    )
    by_step = {
        "barometer_rejected": rejected, "barometer_residual": residual, "barometer_frozen": still,
        "thermometer_rejected": warm_or_cold,
    }  # fmt: skip
    whole = {
        "barometer_bias": bias.value, "barometer_bias_sigma": bias.sigma,
        "barometer_doubtful": bias.doubtful,
    }  # fmt: skip
    return air, {name: (("time", "site"), values) for name, values in by_step.items()} | {
        name: ("site", values) for name, values in whole.items()
    }


def _realistic_ztd_sigma(formal, settings: RetrievalTable):
    """Formal errors, which are optimistic, scaled and floored [m]; without one, the floor."""
    return np.fmax(settings.ztd_sigma_scale * formal, settings.ztd_sigma_floor)


def _conversion(settings: RetrievalTable, stations: xr.Dataset, air: SurfaceAir, grid):
    """Tm [K], conversion factor [kg m-2 per m] and its relative standard error, each (t, n)."""
    if settings.conversion_factor is not None:
        shape = air.temperature.shape
        factor = np.full(shape, settings.conversion_factor)
        return np.full(shape, np.nan), factor, np.full(shape, CONSTANT_FACTOR_SIGMA)
    model = settings.mean_temperature_model
    tm = mean_temperature(air.temperature, model)
    sigma = np.hypot(model.rms, model.slope * air.temperature_sigma)
    if grid is not None and "grid" in settings.pressure:
        way = stations.orthometric_height.values - grid.surface_height.values
        at_antenna = grid.mean_temperature.values - model.slope * STANDARD_LAPSE_RATE.value * way
        known = np.isfinite(at_antenna)
        tm = np.where(known, at_antenna, tm)
        sigma = np.where(known, GRID_MEAN_TEMPERATURE_SIGMA, sigma)
    return tm, conversion_factor(tm, REFRACTIVITY[settings.refractivity]), sigma / tm


def _series_flags(settings: Settings, delays: xr.Dataset, given, air: SurfaceAir, pwv):
    """Flags (t, n) of the tests that need nothing but the station's own series."""
    limits, plausible = settings.screening, QUANTITIES["pwv"]
    no_delay = np.isnan(delays.ztd.values) & ~given
    formal = formal_error_too_large(
        delays.ztd_sigma.values, limits.formal_error, limits.formal_error_ratio
    )
    no_pressure = ~no_delay & ~given & np.isnan(air.pressure)
    climatological = ~no_delay & ~given & (air.source == PRESSURE_SOURCES["climatology"])
    climatological &= not settings.retrieval.climatology_in_fields
    with np.errstate(invalid="ignore"):
        range_ = (pwv < plausible.low) | (pwv > plausible.high)
    saturated = above_saturation(pwv, air.temperature, air.temperature_sigma)
    still = frozen(delays.ztd.values, frozen_steps(settings))
    unfit = formal | range_ | saturated | climatological
    jump = jumps(np.where(unfit, np.nan, pwv), limits.jump)
    tests = {
        "no_delay": no_delay, "formal_error": formal, "no_pressure": no_pressure,
        "out_of_range": range_, "jump": jump, "climatological_pressure": climatological,
        "frozen": still, "above_saturation": saturated,
    }  # fmt: skip
    return sum(STATION_FLAGS[name] * found for name, found in tests.items()).astype(np.int16)


def frozen_steps(settings: Settings) -> int:
    """Steps after which an unchanging value is a fault."""
    return int(settings.screening.frozen / settings.network.time_step)
