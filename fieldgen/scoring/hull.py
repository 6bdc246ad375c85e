"""Where a station lies against the stations that it is predicted from."""

from __future__ import annotations

import numpy as np
import pyproj
from scipy.spatial import ConvexHull, QhullError

EDGE_DISTANCE = 10.0
"""Distance [km] from the hull's boundary, on either side, up to which a place is at its edge."""

POSITIONS = ("inside", "edge", "outside")
"""Positions against the hull, from the easiest to the hardest to predict."""


def local_plane(longitude, latitude):
    """Coordinates (n, 2) [km] to the east and north of the middle of places [degrees]."""
    middle = {"lon_0": float(np.mean(longitude)), "lat_0": float(np.mean(latitude))}
    to_plane = pyproj.Transformer.from_crs(
        "EPSG:4326", {"proj": "aeqd", "units": "km", "datum": "WGS84", **middle}, always_xy=True
    )
    return np.column_stack(to_plane.transform(longitude, latitude))


def positions(plane, reports, blocks):
    """Position (n,), a word of POSITIONS, of each station against the hull without its block.

    plane (n, 2) [km]; reports (n,) bool, stations that have values; blocks (n, k), see
    `fieldgen.scoring.leave_out`
    """
    return np.array(
        [position(plane[np.setdiff1d(np.flatnonzero(reports), block)], plane[block[0]])
         for block in blocks]
    )  # fmt: skip


def position(others, place) -> str:
    """Position of a place (2,) [km] against the hull of others (n, 2) [km], a word of POSITIONS.

    Others on one line have no hull: everything is outside it.
    """
    try:
        hull = ConvexHull(others)
    except (QhullError, ValueError):
        return "outside"
    corners = others[hull.vertices]
    if _distance_to_ring(corners, place) <= EDGE_DISTANCE:
        return "edge"
    within = hull.equations[:, :2] @ place + hull.equations[:, 2] <= 0.0
    return "inside" if within.all() else "outside"


def _distance_to_ring(corners, place) -> float:
    """Distance [km] from a place to the nearest side of a ring of corners (n, 2) [km]."""
    sides = np.roll(corners, -1, axis=0) - corners
    along = np.einsum("nd,nd->n", place - corners, sides) / np.einsum("nd,nd->n", sides, sides)
    nearest = corners + np.clip(along, 0.0, 1.0)[:, None] * sides
    return float(np.linalg.norm(nearest - place, axis=1).min())
