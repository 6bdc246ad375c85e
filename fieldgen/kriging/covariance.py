"""Covariance models and the distances they work on.

A covariance is ``C(0) = partial_sill + nugget`` and ``C(d) = partial_sill * correlation(d/range)``.
The nugget is variability of the field itself below the distance between stations; errors of
measurement are kept apart, in each station's own variance. The definitions of sill, range and
nugget are PyKrige's: for the exponential model the *range* is where the covariance has fallen to
5 % of the partial sill.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from scipy.spatial.distance import cdist

_WGS84_SEMI_MAJOR = 6378.137  # [km]
_WGS84_ECCENTRICITY_SQUARED = 0.00669437999014


def _exponential(lag):
    return np.exp(-3.0 * lag)


def _gaussian(lag):
    return np.exp(-((7.0 / 4.0 * lag) ** 2))


def _spherical(lag):
    lag = np.minimum(lag, 1.0)
    return 1.0 - 1.5 * lag + 0.5 * lag**3


MODELS = {"exponential": _exponential, "gaussian": _gaussian, "spherical": _spherical}
"""Correlation as a function of distance over range, by the model's name."""


class Covariance(NamedTuple):
    """A covariance model with its parameters.

    partial_sill, nugget [kg2 m-4], range [km].
    """

    model: str
    partial_sill: float
    range: float
    nugget: float

    def between(self, distance):
        """Covariance [kg2 m-4] of two different places, by their distance [km], any shape."""
        return self.partial_sill * MODELS[self.model](np.asarray(distance) / self.range)

    @property
    def sill(self) -> float:
        """Variance of the field at a point [kg2 m-4]."""
        return self.partial_sill + self.nugget


def chord_positions(longitude, latitude):
    """Positions (n, 3) [km] on the WGS 84 ellipsoid, whose straight-line distances are chords.

    longitude, latitude (n,) [degrees]. One formula serves every CRS and every region.
    """
    longitude, latitude = np.radians(longitude), np.radians(latitude)
    radius = _WGS84_SEMI_MAJOR / np.sqrt(1.0 - _WGS84_ECCENTRICITY_SQUARED * np.sin(latitude) ** 2)
    return np.stack(
        [
            radius * np.cos(latitude) * np.cos(longitude),
            radius * np.cos(latitude) * np.sin(longitude),
            radius * (1.0 - _WGS84_ECCENTRICITY_SQUARED) * np.sin(latitude),
        ],
        axis=-1,
    )


def distances(positions, other_positions):
    """Distances (n, m) [km] between positions (n, 3) and (m, 3) [km]."""
    return cdist(positions, other_positions)
