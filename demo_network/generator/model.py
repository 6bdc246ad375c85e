"""What an invented weather model says on its coarse grid, and what it has wrong.

The model knows the island as a smooth hill, gives a state of the air every three hours, and lies
off the truth as models do: its lows and highs by some tenths of a hectopascal everywhere alike, and
by as much again from place to place.
"""

import numpy as np
from scipy.ndimage import gaussian_filter

from generator.columns import terrain_at
from generator.noise import DriftingField
from generator.setting import HOURS, START, TERRAIN_SPACING, projected, random_numbers
from generator.stations import Sites
from generator.truth import station_air
from generator.weather import wind_run

LONGITUDE = np.arange(-30.0, -26.25, 0.25)
LATITUDE = np.arange(46.5, 49.25, 0.25)
STEP = 3  # between states [hour]
SMOOTHED = 12_000  # what the model resolves of the land [m]
COMMON, COMMON_LASTS = 0.6, 12.0  # error of pressure everywhere alike [hPa], and how long [hour]
LOCAL, LOCAL_LENGTH = 0.5, 120.0  # error from place to place [hPa], [km]
WARMTH = 1.0  # error of temperature from place to place [K]
TM_ERROR = 1.2  # error of the weighted mean temperature [K]


def model_weather(weather, height):
    """States of the model: a dict of arrays (time, latitude, longitude), and its hours.

    `surface_pressure` [hPa], `temperature`, `tm` [K]; `surface_height` [m] (latitude, longitude).
    """
    longitude, latitude = np.meshgrid(LONGITUDE, LATITUDE)
    easting, northing = projected(longitude.ravel(), latitude.ravel())
    ground = terrain_at(gaussian_filter(height, SMOOTHED / TERRAIN_SPACING), easting, northing)
    cells = Sites([], [], [], easting, northing, ground)
    hours = np.arange(0, HOURS + 1, STEP)
    air = station_air(weather, height, cells, hours)
    pressure_error = _common(len(hours))[:, None] + LOCAL * _local(easting, northing, hours, "p")
    states = {
        "surface_pressure": air["pressure"] + pressure_error,
        "temperature": air["temperature"] + WARMTH * _local(easting, northing, hours, "t"),
        "tm": air["tm"] + TM_ERROR * _local(easting, northing, hours, "tm"),
    }
    shape = longitude.shape
    states = {name: values.reshape(len(hours), *shape) for name, values in states.items()}
    moments = START + (hours * 3600).astype("timedelta64[s]")
    return {**states, "surface_height": ground.reshape(shape)}, moments


def _common(steps):
    """Error that the whole model shares [hPa], (step,)."""
    random = random_numbers("model, common")
    memory = np.exp(-STEP / COMMON_LASTS)
    noise = random.standard_normal(steps)
    for step in range(1, steps):
        noise[step] = memory * noise[step - 1] + np.sqrt(1 - memory**2) * noise[step]
    return COMMON * noise


def _local(easting, northing, hours, subject):
    """Error of variance 1 that changes from place to place, (step, cell)."""
    field = DriftingField(
        LOCAL_LENGTH, 3.0, random_numbers(f"model, {subject}"), 24.0, spacing=8.0, cells=256
    )
    east, north = easting / 1000, northing / 1000
    return np.array([field.at(east, north, hour, wind_run(hour)) for hour in hours])
