"""How much of each cell lies in an area: exact intersections in an equal-area projection."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pyproj
import shapely


class Overlap(NamedTuple):
    """The cells under an area.

    cells : (m,) indices into the flattened grid; size : (m,) [m2] of each within the area
    area : [m2] of the whole area, on the grid or not
    """

    cells: np.ndarray
    size: np.ndarray
    area: float


def equal_area(longitude: float, latitude: float) -> pyproj.CRS:
    """Lambert's azimuthal equal-area projection of the WGS 84 ellipsoid about a place [degrees]."""
    return pyproj.CRS.from_dict(
        {"proj": "laea", "lon_0": longitude, "lat_0": latitude, "datum": "WGS84", "units": "m"}
    )


def corners_between(x_bounds, y_bounds):
    """Corners x, y (ny, nx, 4) of the cells between bounds (nx, 2) and (ny, 2), in turn."""
    shape = (len(y_bounds), len(x_bounds), 4)
    x = np.broadcast_to(x_bounds[None, :, [0, 1, 1, 0]], shape)
    y = np.broadcast_to(y_bounds[:, None, [0, 0, 1, 1]], shape)
    return x, y


def overlap(corner_x, corner_y, outline) -> Overlap:
    """Cells that share some of an outline.

    corner_x, corner_y : (ny, nx, 4) [m] in an equal-area projection, as the outline
    """
    x, y = corner_x.reshape(-1, 4), corner_y.reshape(-1, 4)
    west, south, east, north = shapely.bounds(outline)
    near = np.flatnonzero(
        (x.max(axis=1) > west) & (x.min(axis=1) < east)
        & (y.max(axis=1) > south) & (y.min(axis=1) < north)
    )  # fmt: skip
    polygons = shapely.polygons(np.stack([x[near], y[near]], axis=-1))
    shapely.prepare(outline)
    size = shapely.area(polygons)
    crossing = ~shapely.contains_properly(outline, polygons)
    size[crossing] = shapely.area(shapely.intersection(polygons[crossing], outline))
    held = size > 0.0
    return Overlap(near[held], size[held], float(shapely.area(outline)))
