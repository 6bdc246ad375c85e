"""The invented weather: a moist warm sector with a plume, cool air ahead and dry air behind it.

Distances are in kilometres from the grid's centre, heights in kilometres, hours from the start of
the period. A front is a line that travels along its normal; the cold front leans back with height,
the warm front forward. Every coefficient is invented, and chosen to give autumn days of the middle
latitudes.
"""

import numpy as np

from generator.air import saturation_vapour_pressure
from generator.noise import DriftingField
from generator.setting import random_numbers

# air masses in the order cool, warm, cold
SEA_LEVEL_TEMPERATURE = (288.6, 292.8, 286.0)  # [K]
LAPSE_LOW = (5.6, 5.1, 7.6)  # below LOW_TOP [K/km]
LAPSE_HIGH = (6.0, 6.3, 6.5)  # above it [K/km]
LOW_TOP = 1.3  # [km]
INVERSION = (1.0, 0.0, 2.4)  # warming across a layer above the boundary layer [K]
BOUNDARY_LAYER_TOP = (1.6, 2.3, 1.8)  # [km]
HUMIDITY_LOW = (0.80, 0.85, 0.71)  # relative humidity below it
HUMIDITY_HIGH = (0.38, 0.46, 0.22)  # and above it
TROPOPAUSE = 11.0  # the air above it is all but dry [km]
TROPOPAUSE_TEMPERATURE = 216.0  # [K]

WARM_FRONT = {"passes": 21.0, "speed": 26.0, "bearing": 75.0, "width": 80.0, "lean": 70.0}
COLD_FRONT = {"passes": 48.0, "speed": 30.0, "bearing": 110.0, "width": 45.0, "lean": -45.0}
PLUME_LEAD, PLUME_WIDTH = 170.0, 120.0  # distance ahead of the cold front and half width [km]
# hour, height [km], relative humidity added
MOIST_LAYERS = [
    (7.0, 3.1, 0.36),
    (18.0, 3.7, 0.30),
    (62.5, 2.9, 0.42),
]
LAYER_SPEED = 45.0  # [km/h], eastward
# until hour, east and north [km/h]
WINDS = [
    (24.0, (30.0, 20.0)),
    (48.0, (32.0, 44.0)),
    (96.0, (46.0, -24.0)),
]
# correlation length [km], spectral slope, strength in ln(humidity), height, depth [km], wind factor
SWIRLS = {
    "boundary layer": (38.0, 3.0, 0.036, 0.6, 1.3, 1.0),
    "free air": (42.0, 3.0, 0.15, 3.4, 1.5, 1.5),
    "small": (6.0, 8 / 3, 0.025, 1.0, 2.0, 1.1),
}


class Weather:
    """State of the air at any place, height and hour."""

    def __init__(self):
        self.swirls = {
            name: DriftingField(length, slope, random_numbers(f"swirls {name}"), lifetime=30.0)
            for name, (length, slope, *_) in SWIRLS.items()
        }

    def state(self, columns, level, hour):
        """Temperature [K] and vapour pressure [hPa] (level, column) at heights [m] (level, 1)."""
        height = level / 1000
        masses = air_masses(columns, height, hour)
        warming = daily_warming(columns, height, hour)
        temperature = _temperature(columns, height, masses) + warming
        humidity = _relative_humidity(columns, height, hour, masses)
        humidity = humidity + _upslope(columns, height, hour)
        humidity = humidity * np.exp(
            self._swirling(columns, height, hour) - 0.062 * warming
        )  # warming dries
        saturated = np.clip(humidity, 0.01, 0.99)  # what exceeds saturation has rained out
        dryness = np.exp(-np.maximum(height - TROPOPAUSE, 0) / 1.5)
        return temperature, saturated * dryness * saturation_vapour_pressure(temperature)

    def _swirling(self, columns, height, hour):
        """Departure of ln(humidity) by turbulence of the middle scales."""
        drift = wind_run(hour)
        return sum(
            strength
            * np.exp(-(((height - middle) / depth) ** 2))
            * self.swirls[name].at(columns.east, columns.north, hour, drift * factor)
            for name, (_, _, strength, middle, depth, factor) in SWIRLS.items()
        )


def sea_level_pressure(columns, hour):
    """Sea-level pressure [hPa]: a trough along the cold front, a ridge behind it, the tide."""
    ahead = distance_ahead(COLD_FRONT, columns, hour)
    trough = -9 * np.exp(-(np.abs(ahead / 420) ** 1.5))
    ridge = -3.5 * np.tanh(ahead / 350)
    return (
        1014.5 + trough + ridge - 0.008 * columns.north + 0.5 * np.cos(4 * np.pi * (hour - 12) / 24)
    )


def distance_ahead(front, columns, hour):
    """Distance [km] ahead of a front at the ground."""
    bearing = np.radians(front["bearing"])
    along = columns.east * np.sin(bearing) + columns.north * np.cos(bearing)
    across = columns.east * np.cos(bearing) - columns.north * np.sin(bearing)
    return along + 18 * np.sin(across / 75) - front["speed"] * (hour - front["passes"])


def air_masses(columns, height, hour):
    """Shares of cool, warm and cold air, each (level, column)."""
    warm_passed, cold_passed = (
        _passed(front, columns, height, hour) for front in (WARM_FRONT, COLD_FRONT)
    )
    return (1 - warm_passed) * (1 - cold_passed), warm_passed * (1 - cold_passed), cold_passed


def _passed(front, columns, height, hour):
    """0 ahead of a front to 1 behind it."""
    ahead = distance_ahead(front, columns, hour) - front["lean"] * np.minimum(height, 8)
    return 0.5 * (1 - np.tanh(ahead / front["width"]))


def _mix(values, masses):
    """Value of each air mass weighted with its share."""
    return sum(value * share for value, share in zip(values, masses, strict=True))


def _temperature(columns, height, masses):
    """Temperature [K] without the daily course, meeting the tropopause smoothly."""
    low, high = np.minimum(height, LOW_TOP), np.maximum(height - LOW_TOP, 0)
    top = _mix(BOUNDARY_LAYER_TOP, masses)
    lid = (
        _mix(INVERSION, masses)
        * _step((height - top - 0.2) / 0.25)
        * np.exp(-np.maximum(height - top, 0) / 2.5)
    )
    troposphere = (
        _mix(SEA_LEVEL_TEMPERATURE, masses)
        - _mix(LAPSE_LOW, masses) * low
        - _mix(LAPSE_HIGH, masses) * high
        + lid
    ) - 0.007 * columns.north
    stratosphere = (
        TROPOPAUSE_TEMPERATURE
        + 1.3 * np.clip(height - 20, 0, 27)
        - 1.8 * np.maximum(height - 50, 0)
    )
    return 0.5 * (troposphere + stratosphere + np.hypot(troposphere - stratosphere, 4))


def daily_warming(columns, height, hour):
    """Daily course [K], strong near the ground over land; the local hour is two behind UTC."""
    above_ground = np.maximum(height - columns.land, 0)
    course = np.cos(2 * np.pi * (hour - 16) / 24)
    return (0.25 + 2.9 * columns.landness) * course * np.exp(-above_ground / 0.7)


def _relative_humidity(columns, height, hour, masses):
    """Relative humidity, 0 to about 1, without turbulence."""
    low, high = _mix(HUMIDITY_LOW, masses), _mix(HUMIDITY_HIGH, masses)
    aloft = high * (0.75 + 0.5 * np.exp(-(((height - 5.5) / 2.5) ** 2)))
    above = _step((height - _mix(BOUNDARY_LAYER_TOP, masses)) / 0.45)
    humidity = (
        low
        + 0.05 * np.minimum(height, 1)
        + (aloft - low) * above
        + _moist_layers(columns, height, hour)
    )
    humidity = humidity + (0.95 - humidity) * 0.62 * _plume(columns, height, hour)
    return 0.02 + humidity * _step((10.5 - height) / 1.0)


def _moist_layers(columns, height, hour):
    """Humidity of layers aloft that come and go."""
    return sum(
        amount
        * np.exp(-(((height - middle) / 0.55) ** 2))
        * np.exp(
            -(
                (
                    (
                        hour
                        - passes
                        - columns.east / LAYER_SPEED
                        - 0.25 * columns.north / LAYER_SPEED
                    )
                    / 4.0
                )
                ** 2
            )
        )
        for passes, middle, amount in MOIST_LAYERS
    )


def _plume(columns, height, hour):
    """Strength of the moist band that runs along the cold front and ahead of it."""
    ahead = distance_ahead(COLD_FRONT, columns, hour) + 10 * np.minimum(height, 8)
    return np.exp(-(((ahead - PLUME_LEAD) / PLUME_WIDTH) ** 2)) * np.exp(-((height / 5.5) ** 4))


def _upslope(columns, height, hour):
    """Humidity won where the wind climbs the mountains and lost where it descends."""
    east, north = wind(hour)
    climb = (east * columns.slope_east + north * columns.slope_north) / 3.6
    return 0.07 * np.tanh(climb / 0.25) * np.exp(-((height / 3.5) ** 2))


def wind(hour):
    """Wind that carries the turbulence (east, north) [km/h]; a change takes about six hours."""
    speeds = np.array([speed for _, speed in WINDS])
    veer = [_step((hour - until) / 3.0) for until, _ in WINDS[:-1]]
    return speeds[0] + sum(
        share * change for share, change in zip(veer, np.diff(speeds, axis=0), strict=True)
    )


def wind_run(hour, step=0.25):
    """Distance the wind has travelled since the start (east, north) [km]."""
    moments = np.arange(0, hour, step) + step / 2
    return sum((wind(moment) * step for moment in moments), np.zeros(2))


def _step(value):
    """Smooth step from 0 to 1."""
    return 0.5 * (1 + np.tanh(value))
