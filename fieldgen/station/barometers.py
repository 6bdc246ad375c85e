"""What the barometers say of each other: which of them is not to be believed, and why."""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.solver import Kriging
from fieldgen.station.series import column_median
from fieldgen.station.surface_air import (
    PRESSURE_COVARIANCE,
    TEMPERATURE_COVARIANCE,
    Sites,
    Weather,
    drift_of_pressure,
    pressure_at_level,
    temperature_at_level,
    usual_variance,
)

SURE = 4.0
"""A barometer's residual counts if it is this many times its own standard deviation, too."""

COSTLY = 4.0
"""A lasting difference that costs more than its sigma promises is this many barometer sigmas."""

NOTABLE = 3.0
"""A lasting difference is told when it is this many times its standard error."""

THERMOMETER_LIMIT = 8.0
"""A temperature this far [K] from the others at its height is suspect: inversions and sheltered
valleys differ by less. Common practice, no source."""

FEWEST = 3
"""Barometers that can contradict one."""

LEAST_STEPS = 6
"""Steps a barometer must report before it is judged as a whole."""

WEATHER_MEMORY = 6.0
"""Steps after which the weather between barometers is another. Common practice, no source."""


def screen_barometers(weather: Weather, barometers: Sites, barometer_sigma: float, limit: float):
    """Pressures (t, s) [hPa] brought to one level differ from the others' by more than `limit`,
    and by more than `SURE` times what weather and the way to the level explain.

    Returns rejected (t, s) bool and the residuals (t, s) [hPa] of leaving each barometer out.
    The worst barometer of an hour goes first, so that it does not condemn its neighbours.
    """
    rejected = np.zeros(weather.pressure.shape, bool)
    residuals = np.full(weather.pressure.shape, np.nan)
    if not len(barometers.height):
        return rejected, residuals
    level = barometers.height.mean()
    at_level, error = pressure_at_level(weather, barometers, level, barometer_sigma)
    krigings = {
        drift: _kriging(PRESSURE_COVARIANCE, usual_variance(error), barometers, drift)
        for drift in ("constant", "linear")
    }
    for hour, values in enumerate(at_level):
        found = _contradicted(values, lambda count: krigings[drift_of_pressure(count)], limit)
        rejected[hour], residuals[hour] = found
    return rejected, residuals


def screen_thermometers(weather: Weather, sites: Sites):
    """Temperatures (t, s) bool that differ from the others' at one level by more than
    `THERMOMETER_LIMIT`, and by more than `SURE` times what weather and the way explain; the worst
    goes first. A wrong one would warm or cool every station around it."""
    rejected = np.zeros(weather.temperature.shape, bool)
    if not len(sites.height):
        return rejected
    at_level, error = temperature_at_level(weather, sites, sites.height.mean())
    kriging = _kriging(TEMPERATURE_COVARIANCE, error, sites, "constant")
    for hour, values in enumerate(at_level):
        rejected[hour], _ = _contradicted(values, lambda count: kriging, THERMOMETER_LIMIT)
    return rejected


def _contradicted(values, kriging_of: Callable[[int], Kriging], limit: float):
    """Values (s,) of one step that the others contradict, bool, and the residuals (s,).

    kriging_of : for a number of values present
    """
    values = values.copy()
    rejected = np.zeros(len(values), bool)
    residuals = np.full(len(values), np.nan)
    while (count := int(np.isfinite(values).sum())) >= FEWEST:
        kriging = kriging_of(count)
        residual, sigma = kriging.leave_one_out(values, kriging.gaps(np.isnan(values)))
        residuals = np.where(np.isfinite(residual), residual, residuals)
        suspect = (np.abs(residual) > limit) & (np.abs(residual) > SURE * sigma)
        if not suspect.any():
            break
        worst = np.argmax(np.where(suspect, np.abs(residual), -1.0))
        rejected[worst] = True
        values[worst] = np.nan
    return rejected, residuals


class Bias(NamedTuple):
    """What barometers read more than the others over a window, every array (s,) [hPa].

    value, sigma : median residual and its standard error, NaN for a barometer that cannot be judged
    rejected : bool, it costs more than a barometer's standard error promises
    doubtful : bool, it is sure, and not yet so large: a drift in its beginning
    """

    value: np.ndarray
    sigma: np.ndarray
    rejected: np.ndarray
    doubtful: np.ndarray


def barometer_bias(weather: Weather, barometers: Sites, barometer_sigma: float) -> Bias:
    """Lasting difference of each barometer from the others: an offset, a drift, a wrong height.

    The worst goes first and the others are judged without it. What the way to the common level and
    the barometer itself add is the same in all hours; the weather between barometers is another
    every `WEATHER_MEMORY` steps.
    """
    count = len(barometers.height)
    value, sigma = np.full(count, np.nan), np.full(count, np.nan)
    rejected = np.zeros(count, bool)
    pressure = weather.pressure.copy()
    while np.isfinite(pressure).any(axis=0).sum() >= FEWEST:
        residual, spread, error = _residuals(
            weather._replace(pressure=pressure), barometers, barometer_sigma
        )
        hours = np.isfinite(residual).sum(axis=0)
        judged = ~rejected & (hours >= LEAST_STEPS)
        seen = np.where(judged, column_median(residual), np.nan)
        weather_variance = np.maximum(column_median(spread) ** 2 - error, 0.0)
        independent = np.maximum(hours / WEATHER_MEMORY, 1.0)
        promised = np.sqrt(np.maximum(error - barometer_sigma**2, 0.0))  # of the way
        own = np.sqrt(promised**2 + weather_variance / independent + (barometer_sigma / 3.0) ** 2)
        value = np.where(judged, seen, value)
        sigma = np.where(judged, own, sigma)
        with np.errstate(invalid="ignore"):
            bad = judged & (np.abs(seen) > COSTLY * barometer_sigma) & (np.abs(seen) > SURE * own)
        if not bad.any():
            break
        worst = int(np.argmax(np.where(bad, np.abs(seen), -1.0)))
        rejected[worst] = True
        pressure[:, worst] = np.nan
    with np.errstate(invalid="ignore"):
        sure = (np.abs(value) > 2.0 * barometer_sigma) & (np.abs(value) > NOTABLE * sigma)
    return Bias(value, sigma, rejected, sure & ~rejected)


def _residuals(weather: Weather, barometers: Sites, barometer_sigma: float):
    """Residuals and standard deviations (t, s) of leaving each barometer out, and each one's usual
    error variance (s,) with that of its way to the common level."""
    level = barometers.height.mean()
    at_level, error = pressure_at_level(weather, barometers, level, barometer_sigma)
    usual = usual_variance(error)
    residual, spread = np.full(at_level.shape, np.nan), np.full(at_level.shape, np.nan)
    krigings: dict[str, Kriging] = {}
    for hour, values in enumerate(at_level):
        count = np.isfinite(values).sum()
        if count < FEWEST:
            continue
        drift = drift_of_pressure(count)
        if drift not in krigings:
            krigings[drift] = _kriging(PRESSURE_COVARIANCE, usual, barometers, drift)
        kriging = krigings[drift]
        residual[hour], spread[hour] = kriging.leave_one_out(values, kriging.gaps(np.isnan(values)))
    return residual, spread, usual


def _kriging(covariance, error_variance, sources: Sites, drift: str) -> Kriging:
    maker = PlaceMaker(sources.longitude, sources.latitude, drift)
    places = maker.places(sources.longitude, sources.latitude)
    return Kriging(covariance, places, error_variance)
