"""Two microwave radiometers that no map is made from, to compare the maps with."""

from types import SimpleNamespace

import numpy as np

from generator.columns import terrain_at
from generator.setting import HOURS, START, geographic, random_numbers
from generator.truth import hourly_mean, instants, station_air

NAMES = ("Dovrane observatory", "Telmire ridge")
EASTING, NORTHING = np.array([392_000.0, 433_000.0]), np.array([5_300_500.0, 5_275_500.0])
NOISE, LISTED_SIGMA = 0.5, 0.6  # of an hour's mean, and what the table says of it [kg m-2]


def radiometer_table(weather, height):
    """Lines of the table that `fieldgen compare` reads."""
    ground = terrain_at(height, EASTING, NORTHING)
    sites = SimpleNamespace(easting=EASTING, northing=NORTHING, orthometric_height=ground)
    true = hourly_mean(station_air(weather, height, sites, instants())["pwv"])
    random = random_numbers("radiometer")
    measured = true + NOISE * random.standard_normal(true.shape)
    longitude, latitude = geographic(EASTING, NORTHING)
    lines = ["station,time,longitude,latitude,height,value,sigma"]
    for hour in range(HOURS):
        stamp = START + np.timedelta64(3600 * (hour + 1), "s")
        lines += [
            f"{name},{stamp}Z,{x:.5f},{y:.5f},{z:.1f},{value:.2f},{LISTED_SIGMA}"
            for name, x, y, z, value in zip(
                NAMES, longitude, latitude, ground, measured[hour], strict=True
            )
        ]
    return lines
