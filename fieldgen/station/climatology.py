"""Pressure and temperature that a place has on the average, by latitude and day of the year.

The tables are those of UNB3 (Collins and Langley 1997, UNB Geodesy and Geomatics Engineering
Technical Report 187), which RTCA DO-229 (MOPS for SBAS receivers, appendix A.4.2.4) took over.
Average less amplitude times cos(2 pi (day - day of minimum) / 365.25), linear in latitude.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from fieldgen.constants import GAS_CONSTANT_DRY_AIR, GRAVITY

LATITUDE = (15.0, 30.0, 45.0, 60.0, 75.0)
"""Latitudes of the tables [degrees], either hemisphere; nearer the equator or a pole the last."""

PRESSURE = (1013.25, 1017.25, 1015.75, 1011.75, 1013.00), (0.0, -3.75, -2.25, -1.75, -0.50)
"""Average and amplitude at mean sea level [hPa]."""

TEMPERATURE = (299.65, 294.15, 283.15, 272.15, 263.65), (0.0, 7.0, 11.0, 15.0, 14.5)
"""Average and amplitude at mean sea level [K]."""

LAPSE_RATE = (
    (6.30e-3, 6.05e-3, 5.58e-3, 5.39e-3, 4.53e-3),
    (0.0, 0.25e-3, 0.32e-3, 0.81e-3, 0.62e-3),
)
"""Average and amplitude [K m-1]."""

DAY_OF_MINIMUM = {"north": 28.0, "south": 211.0}
"""Day of the year of the lowest temperature in each hemisphere."""

SYNOPTIC_SIGMA = (2.5, 5.0, 8.0, 10.0, 10.0)
"""Standard deviation of sea-level pressure [hPa] about its season's mean, by `LATITUDE`: highs and
lows, which whole regions share. Common practice, no source."""

REGIONAL_SIGMA = 1.5
"""What the stations of one region do not share of it [hPa]: its gradient. Common practice, no
source."""

TEMPERATURE_SIGMA = 6.0
"""Standard error of the temperature of a day [K]. Common practice, no source."""


class Climate(NamedTuple):
    """Arrays (t, n): pressure [hPa], temperature [K]; synoptic_sigma (n,) [hPa]."""

    pressure: np.ndarray
    temperature: np.ndarray
    synoptic_sigma: np.ndarray


def climate(time, latitude, orthometric_height) -> Climate:
    """Average air at places and days.

    time (t,) datetime64; latitude (n,) [degrees], orthometric_height (n,) [m]. Pressure falls as
    P0 (1 - beta H / T0)^(g / (Rd beta)), temperature by beta H.
    """
    latitude = np.asarray(latitude, float)
    day = _day_of_year(time)[:, None]
    minimum = np.where(latitude < 0, DAY_OF_MINIMUM["south"], DAY_OF_MINIMUM["north"])
    season = np.cos(2 * np.pi * (day - minimum) / 365.25)
    sea_level, temperature, lapse_rate = (
        _at(latitude, average) - _at(latitude, amplitude) * season
        for average, amplitude in (PRESSURE, TEMPERATURE, LAPSE_RATE)
    )
    exponent = GRAVITY.value / (GAS_CONSTANT_DRY_AIR.value * lapse_rate)
    fall = lapse_rate * orthometric_height
    pressure = sea_level * (1.0 - fall / temperature) ** exponent
    return Climate(pressure, temperature - fall, _at(latitude, SYNOPTIC_SIGMA))


def _at(latitude, column):
    """Values (n,) of a column of the tables."""
    return np.interp(np.abs(latitude), LATITUDE, column)


def _day_of_year(time):
    """Days (t,) since the year began, 1 at its first midnight."""
    time = np.asarray(time).astype("datetime64[s]")
    return 1.0 + (time - time.astype("datetime64[Y]")) / np.timedelta64(1, "D")
