"""Tests of a station's own series: what needs no neighbours to be seen as wrong."""

from __future__ import annotations

from functools import cache

import numpy as np

from fieldgen.constants import GAS_CONSTANT_DRY_AIR, GAS_CONSTANT_VAPOUR, GRAVITY
from fieldgen.station.heights import saturation_vapour_pressure

MEDIAN_STEPS = 5
"""Width of the running median that a jump is measured from: a front, which is no spike, passes."""

LIVELY = 4.0
"""A jump must also be this many times what the hour's stations usually differ from their medians:
where the whole region changes, one station may, too."""

FEWEST_STATIONS = 6
"""Stations that can tell how lively an hour is."""

FEWEST_EQUAL = 5
"""Equal values in a row that chance does not make, however long a step is."""

COARSE = 0.3
"""Pressures [hPa] printed no finer than this repeat themselves in quiet weather."""

WARMER_ALOFT = 8.0
"""What air above a station may be warmer [K] than its thermometer, in a calm night's inversion.
Common practice, no source."""

THERMOMETER_AT_HAND = 5.0
"""Standard error of the temperature [K] up to which it says how much water vapour air can hold."""

_TOP = 16000.0
_LAYER = 100.0
_UPPER_PRESSURE = 700.0
"""Pressure at the column's foot [hPa]: the lower it is, the warmer a saturated column, so that this
serves all stations below about 3000 m and errs on the safe side."""

_LATENT_HEAT = 2.501e6  # [J kg-1]
_SPECIFIC_HEAT = 1004.7  # [J kg-1 K-1]
_RATIO = 0.622


def formal_error_too_large(ztd_sigma, limit: float, ratio: float):
    """Values (t, n) bool whose formal error [m] is above `limit` or `ratio` times the station's
    median. False where no formal error is given."""
    with np.errstate(invalid="ignore"):
        usual = column_median(ztd_sigma)
        return (ztd_sigma > limit) | (ztd_sigma > ratio * usual)


def column_median(values):
    """Median by column (n,), NaN without a warning where a column is empty."""
    empty = np.isnan(values).all(axis=0)
    return np.nanmedian(np.where(empty, 0.0, values), axis=0) + np.where(empty, np.nan, 0.0)


def jumps(water_vapour, limit: float):
    """Values (t, n) bool far from the running median of five steps.

    Far is more than `limit` [kg m-2], and more than `LIVELY` times what the stations usually differ
    from their medians in the hour. Fewer than three values in the window mark nothing.
    """
    half = MEDIAN_STEPS // 2
    padded = np.pad(water_vapour, ((half, half), (0, 0)), constant_values=np.nan)
    window = np.lib.stride_tricks.sliding_window_view(padded, MEDIAN_STEPS, axis=0)
    enough = np.isfinite(window).sum(axis=2) >= 3
    median = np.nanmedian(np.where(enough[..., None], window, 0.0), axis=2)
    away = np.where(enough, np.abs(water_vapour - median), np.nan)
    told = np.isfinite(away).sum(axis=1) >= FEWEST_STATIONS
    usual = np.where(told, column_median(away.T) / 0.6745, 0.0)  # of a normal distribution: its SD
    with np.errstate(invalid="ignore"):
        return away > np.maximum(limit, LIVELY * usual)[:, None]


def frozen(values, steps: int):
    """Values (t, n) bool that repeat the one before, in runs of at least `steps` equal values.

    The first of a run was measured and is not marked. A missing value ends a run.
    """
    steps = max(steps, FEWEST_EQUAL)
    with np.errstate(invalid="ignore"):
        same = np.abs(np.diff(values, axis=0, prepend=np.nan)) < 1e-9
    count = np.zeros(values.shape, int)  # repetitions up to here
    for row in range(1, len(values)):
        count[row] = np.where(same[row], count[row - 1] + 1, 0)
    found = np.zeros(values.shape, bool)
    long = np.zeros(values.shape[1:], bool)
    for row in range(len(values) - 1, -1, -1):
        long = same[row] & (long | (count[row] >= steps - 1))
        found[row] = long
    return found


def frozen_pressure(pressure, steps: int):
    """Pressures (t, s) bool that repeat the one before, see `frozen`; barometers that print no
    finer than `COARSE` [hPa] are not judged, and none where no other barometer moves."""
    change = np.abs(np.diff(pressure, axis=0))
    with np.errstate(invalid="ignore"):
        finest = np.where(change > 1e-9, change, np.inf).min(axis=0, initial=np.inf)
    fine = ~(np.isfinite(finest) & (finest >= COARSE))
    still = frozen(pressure, steps) & fine
    return still & (np.isfinite(pressure) & ~still).any(axis=1, keepdims=True)


def above_saturation(water_vapour, temperature, temperature_sigma):
    """Values (t, n) bool above what a saturated column can hold.

    water_vapour [kg m-2], temperature [K] at the antenna and its standard error. The column is
    `WARMER_ALOFT` and two standard errors warmer than the thermometer says. False where the
    standard error is above `THERMOMETER_AT_HAND`: the temperature is no measurement then.
    """
    warm = temperature + WARMER_ALOFT + 2.0 * temperature_sigma
    with np.errstate(invalid="ignore"):
        known = temperature_sigma <= THERMOMETER_AT_HAND
        return known & (water_vapour > saturated_column(warm))


def saturated_column(temperature):
    """Water vapour [kg m-2] of a column saturated up to 16 km whose foot has a temperature [K].

    Integral of es(T) / (Rv T) along the saturated adiabat, whose lapse rate is
    g (1 + Lv r / (Rd T)) / (cp + Lv^2 r 0.622 / (Rd T^2)), r = 0.622 es / (P - es)
    (American Meteorological Society, Glossary of Meteorology, from memory).
    """
    return np.interp(temperature, *_saturated_columns())


@cache
def _saturated_columns():
    """Temperatures [K] at the foot and the columns' water vapour [kg m-2]."""
    foot = np.arange(190.0, 326.0)
    temperature, pressure = foot.copy(), np.full(len(foot), _UPPER_PRESSURE)
    column = np.zeros(len(foot))
    for _ in np.arange(0.0, _TOP, _LAYER):
        vapour = np.minimum(saturation_vapour_pressure(temperature), 0.5 * pressure)
        column += 100.0 * vapour / (GAS_CONSTANT_VAPOUR.value * temperature) * _LAYER
        gas = GAS_CONSTANT_DRY_AIR.value * temperature
        mixed = _RATIO * vapour / (pressure - vapour)
        latent = _LATENT_HEAT * mixed
        lapse = GRAVITY.value * (1.0 + latent / gas)
        lapse /= _SPECIFIC_HEAT + _RATIO * _LATENT_HEAT * latent / (gas * temperature)
        pressure = pressure * np.exp(-GRAVITY.value * _LAYER / gas)
        temperature = temperature - lapse * _LAYER
    return foot, column
