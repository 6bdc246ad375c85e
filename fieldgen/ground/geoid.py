"""Orthometric heights: orthometric = ellipsoidal - undulation."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from fieldgen.errors import InputError
from fieldgen.ground.terrain import read_raster_at


def undulation(geoid: float | Path, longitude, latitude):
    """Height (n,) [m] of the geoid above the ellipsoid at points [degrees].

    geoid : one number [m], or a grid file (GTX, GeoTIFF or another format of GDAL). Raises
    InputError where the file does not cover a point.
    """
    if not isinstance(geoid, Path):
        return np.full(len(np.atleast_1d(longitude)), float(geoid))
    values = read_raster_at(geoid, longitude, latitude, "geoid")
    if np.isnan(values).any():
        outside = np.flatnonzero(np.isnan(values))[0]
        raise InputError(
            f"{geoid}: the geoid does not cover {np.atleast_1d(longitude)[outside]:.3f} E, "
            f"{np.atleast_1d(latitude)[outside]:.3f} N."
        )
    return values
