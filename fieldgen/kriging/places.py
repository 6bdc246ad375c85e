"""Where stations and cells are, as kriging needs to know it."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from fieldgen.kriging.covariance import chord_positions


class Places(NamedTuple):
    """Stations or targets of kriging.

    positions (n, 3) [km]; drift (n, k), the drift functions, the first of them constant;
    lift (n,) [km] above the reference height
    """

    positions: np.ndarray
    drift: np.ndarray
    lift: np.ndarray

    def __getitem__(self, rows) -> Places:
        """The places of some rows."""
        return Places(*(part[rows] for part in tuple.__iter__(self)))


class PlaceMaker:
    """Places from coordinates, with the drift functions of one region.

    The linear drift runs along east and north of the tangent plane at the stations' middle, in
    units of their spread, so that all functions are of order one. Stations on a line (narrower than
    2 % of its length) do not determine a plane: the drift falls back to constant.
    """

    def __init__(self, longitude, latitude, drift: str = "constant"):
        positions = chord_positions(longitude, latitude)
        self._origin = positions.mean(axis=0)
        self._spread = max(np.ptp(positions, axis=0).max(), 1.0)
        self._axes = _tangent_axes(self._origin)
        plane = (positions - self._origin) @ self._axes / self._spread
        spans_plane = np.linalg.svd(plane - plane.mean(axis=0), compute_uv=False).min() > 0.02
        self.drift = drift if spans_plane else "constant"

    def places(self, longitude, latitude, lift=0.0) -> Places:
        """Places of coordinates (n,) [degrees], lift (n,) [km] above the reference height."""
        positions = chord_positions(longitude, latitude)
        functions = np.ones((len(positions), 1))
        if self.drift == "linear":
            plane = (positions - self._origin) @ self._axes / self._spread
            functions = np.hstack([functions, plane])
        return Places(positions, functions, np.broadcast_to(lift, len(positions)))


def determine_drift(places: Places, present) -> bool:
    """Whether the places present (n,) bool determine every drift function."""
    functions = places.drift[present]
    count = functions.shape[1]
    return len(functions) > count and (count == 1 or np.linalg.matrix_rank(functions) == count)


def _tangent_axes(origin):
    """Unit vectors (3, 2) to the east and north of a position."""
    up = origin / np.linalg.norm(origin)
    east = np.cross([0.0, 0.0, 1.0], up)
    east /= np.linalg.norm(east)
    return np.stack([east, np.cross(up, east)], axis=1)
