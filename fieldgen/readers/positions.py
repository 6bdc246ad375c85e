"""Places as the formats write them: geocentric X, Y, Z, longitudes of 0 to 360 degrees."""

from __future__ import annotations

from functools import cache
from math import asin, cos, hypot, isnan, radians, sin, sqrt
from typing import NamedTuple

from pyproj import Transformer

EARTH_RADIUS_KM = 6371.0
GEOCENTRIC_RADII = (6.33e6, 6.40e6)
"""Distances [m] from the Earth's centre at which ground stations lie."""


HEIGHTS = (-500.0, 9000.0)
"""Heights [m] at which stations stand on Earth, above the ellipsoid or the sea."""

UNDULATIONS = (-110.0, 90.0)
"""Geoid heights [m] that occur on Earth: ellipsoidal minus mean-sea-level height."""


class Geodetic(NamedTuple):
    """longitude (-180 to 180), latitude [degrees], ellipsoidal_height [m]."""

    longitude: float
    latitude: float
    ellipsoidal_height: float


def wrap_longitude(longitude: float) -> float:
    """Longitude [degrees] in -180 to 180, of one in -180 to 360."""
    return longitude - 360.0 if longitude > 180.0 else longitude


def check_position(longitude: float, latitude: float) -> tuple[float, float]:
    """The position [degrees], longitude in -180 to 180; ValueError if there is none such."""
    if not abs(latitude) <= 90.0:
        swapped = abs(longitude) <= 90.0
        hint = "; longitude and latitude may be swapped" if swapped else ""
        raise ValueError(f"latitude is {latitude:g}, expected -90 to 90{hint}")
    if not -180.0 <= longitude <= 360.0:
        raise ValueError(f"longitude is {longitude:g}, expected -180 to 360")
    return wrap_longitude(longitude), latitude


def check_height(height: float) -> float:
    """The height [m], or NaN; ValueError if no station stands so high or low."""
    low, high = HEIGHTS
    if not (isnan(height) or low <= height <= high):
        raise ValueError(f"height is {height:g} m, expected {low:g} to {high:g} m")
    return height


def is_on_the_ground(x: float, y: float, z: float) -> bool:
    """Whether X, Y, Z [m] lie where a station can stand."""
    low, high = GEOCENTRIC_RADII
    if not low <= hypot(x, y, z) <= high:
        return False
    return HEIGHTS[0] <= geodetic_position(x, y, z).ellipsoidal_height <= HEIGHTS[1]


def geodetic_position(x: float, y: float, z: float) -> Geodetic:
    """Position on the WGS 84 ellipsoid of geocentric X, Y, Z [m]."""
    return Geodetic(*_to_geodetic().transform(x, y, z))


@cache
def _to_geodetic() -> Transformer:
    """Geocentric to geodetic coordinates of WGS 84."""
    return Transformer.from_crs(4978, 4979, always_xy=True)


def distance_km(longitude1, latitude1, longitude2, latitude2) -> float:
    """Distance [km] along a sphere between two places [degrees] (haversine); NaN if one is NaN."""
    lat1, lat2 = radians(latitude1), radians(latitude2)
    half_lat = sin((lat2 - lat1) / 2.0)
    half_lon = sin(radians(longitude2 - longitude1) / 2.0)
    chord = sqrt(half_lat**2 + cos(lat1) * cos(lat2) * half_lon**2)
    return 2.0 * EARTH_RADIUS_KM * asin(min(chord, 1.0))  # in this order NaN stays NaN
