"""What all parts of the demo agree on: where, when, and the seed."""

import numpy as np
from pyproj import Transformer

SEED = 20417
CRS = "EPSG:32626"
WEST, SOUTH, EAST, NORTH = 306_000, 5_206_000, 514_000, 5_394_000  # outer cell edges [m]
SPACING = 2_000  # [m]
TERRAIN_SPACING = 500  # [m]
TERRAIN_MARGIN = 6_000  # terrain beyond the grid on each side [m]
CENTRE = ((WEST + EAST) / 2, (SOUTH + NORTH) / 2)
START = np.datetime64("2026-09-08T00:00:00")
DAYS = 3
HOURS = 24 * DAYS
UNDULATION = 57.3  # [m], what a user of the demo is told

_to_geographic = Transformer.from_crs(CRS, "EPSG:4326", always_xy=True)
_to_projected = Transformer.from_crs("EPSG:4326", CRS, always_xy=True)
_to_geocentric = Transformer.from_crs("EPSG:4979", "EPSG:4978", always_xy=True)


def random_numbers(subject):
    """Random numbers of one subject: a change in one subject leaves the others as they are."""
    return np.random.default_rng([SEED, *subject.encode()])


def geographic(easting, northing):
    """Longitude and latitude [degree]."""
    return _to_geographic.transform(easting, northing)


def projected(longitude, latitude):
    """Easting and northing [m]."""
    return _to_projected.transform(longitude, latitude)


def geocentric(longitude, latitude, ellipsoidal_height):
    """X, Y, Z [m], shape (..., 3)."""
    return np.stack(_to_geocentric.transform(longitude, latitude, ellipsoidal_height), axis=-1)


def undulation(easting, northing):
    """The geoid as it is [m]: the published figure and a slight tilt that it leaves out."""
    return (
        UNDULATION
        + 0.25 * (easting - CENTRE[0]) / 100_000
        - 0.10 * (northing - CENTRE[1]) / 100_000
    )


def cell_centres(spacing=SPACING, margin=0):
    """Easting and northing of cell centres [m], south row first."""
    return (
        np.arange(WEST - margin + spacing / 2, EAST + margin, spacing),
        np.arange(SOUTH - margin + spacing / 2, NORTH + margin, spacing),
    )
