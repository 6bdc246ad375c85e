"""Covariance models and the distances they work on.

At one height ``C(0) = partial_sill + nugget`` and ``C(d) = partial_sill * correlation(d/range)``.
The nugget is variability of the field itself below the distance between stations; errors of
measurement are kept apart, in each station's own variance. The definitions of sill, range and
nugget are PyKrige's: for the exponential model the *range* is where the covariance has fallen to
5 % of the partial sill.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

_MATERN32_AT_RANGE = 4.7438645
"""Where (1 + x) exp(-x) is 0.05, so that the range means the same as for the exponential."""

_WGS84_SEMI_MAJOR = 6378.137  # [km]
_WGS84_ECCENTRICITY_SQUARED = 0.00669437999014


class Model(NamedTuple):
    """A correlation model, two functions of lag = distance / range, a float array.

    correlation : works in place, because it meets arrays of stations times cells
    stretch : the derivative of the correlation by the logarithm of the range, for fitting
    """

    correlation: Callable
    stretch: Callable


def _exponential(lag):
    lag *= -3.0
    return np.exp(lag, out=lag)


def _exponential_stretch(lag):
    return 3.0 * lag * np.exp(-3.0 * lag)


def _matern32(lag):
    lag *= -_MATERN32_AT_RANGE
    correlation = np.exp(lag)
    np.subtract(1.0, lag, out=lag)
    correlation *= lag
    return correlation


def _matern32_stretch(lag):
    scaled = _MATERN32_AT_RANGE * lag
    return np.square(scaled) * np.exp(-scaled)


def _spherical(lag):
    np.minimum(lag, 1.0, out=lag)
    correlation = np.square(lag)
    correlation -= 3.0
    correlation *= lag
    correlation *= 0.5
    correlation += 1.0
    return correlation


def _spherical_stretch(lag):
    lag = np.minimum(lag, 1.0)
    return 1.5 * (lag - lag**3)


def _gaussian(lag):
    lag *= 1.75
    np.square(lag, out=lag)
    np.minimum(lag, 80.0, out=lag)  # beyond it numbers become slow, not smaller
    np.negative(lag, out=lag)
    return np.exp(lag, out=lag)


def _gaussian_stretch(lag):
    exponent = np.minimum(np.square(1.75 * lag), 80.0)
    return 2.0 * exponent * np.exp(-exponent)


MODELS = {
    "exponential": Model(_exponential, _exponential_stretch),
    "matern32": Model(_matern32, _matern32_stretch),
    "spherical": Model(_spherical, _spherical_stretch),
    "gaussian": Model(_gaussian, _gaussian_stretch),
}
"""Correlation models by their name. Range: the exponential and Matern 3/2 have fallen to 5 %, the
Gaussian to 4.7 %, the spherical to zero."""


class Covariance(NamedTuple):
    """A covariance model with its parameters.

    partial_sill, nugget [kg2 m-4], range [km]; slope_sill [kg2 m-4 km-2], curvature_sill [kg2 m-4
    km-4]. The last two say how far the profile is from the hour's exponential: with `slope_sill` it
    is steeper at one place than at another, with `curvature_sill` it bends the same way everywhere.
    Two places `lift` and `other` [km] above the reference height share

        (partial_sill + slope_sill lift other) correlation + curvature_sill lift^2 other^2.
    """

    model: str
    partial_sill: float
    range: float
    nugget: float
    slope_sill: float = 0.0
    curvature_sill: float = 0.0

    def correlation(self, distance):
        """Correlation of the smooth part of the field by distance [km], any shape."""
        return MODELS[self.model].correlation(np.asarray(distance * (1.0 / self.range)))

    def stretch(self, distance):
        """Derivative of the correlation by the logarithm of the range."""
        return MODELS[self.model].stretch(distance * (1.0 / self.range))

    def between(self, distance, lift, other):
        """Covariance (n, m) [kg2 m-4] of different places.

        distance (n, m) [km], lift (n,) and other (m,) [km] above the reference height
        """
        return self.of_correlation(self.correlation(distance), lift, other)

    def of_correlation(self, correlation, lift, other):
        """The same from the correlation (n, m) of their distances."""
        if not (self.slope_sill or self.curvature_sill):
            return self.partial_sill * correlation
        lift, other = (np.asarray(part, correlation.dtype) for part in (lift, other))
        covariance = np.multiply.outer(self.slope_sill * lift, other)
        covariance += self.partial_sill
        covariance *= correlation
        covariance += np.multiply.outer(self.curvature_sill * lift**2, other**2)
        return covariance

    def at(self, lift):
        """Variance of the field (n,) at points `lift` (n,) [km] above the reference height."""
        square = np.square(lift)
        by_height = self.slope_sill * square + self.curvature_sill * square**2
        return self.partial_sill + self.nugget + by_height


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
    square = np.zeros((len(positions), len(other_positions)))
    for here, there in zip(positions.T, other_positions.T, strict=True):
        difference = np.subtract.outer(here, there)
        square += np.square(difference, out=difference)
    return np.sqrt(square, out=square)
