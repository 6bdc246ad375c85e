"""Plainer ways to predict a station from the others, as the measure of what the rest is worth.

Each is given the same trusted values as the field. Kriging fits its own covariance, of the same
form as the day's, to the values it is given, with constant drift and no terms for the profile.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import partial

import numpy as np

from fieldgen.analysis import Day
from fieldgen.kriging.covariance import distances
from fieldgen.kriging.fitting import fit_covariance
from fieldgen.kriging.solver import Kriging
from fieldgen.scoring.leave_out import leave_out
from fieldgen.station.heights import reduction_factor

PLAIN_SCALE_HEIGHT = 2000.0
"""The usual fixed scale height of water vapour [m]."""

SAME_PLACE = 0.1
"""Distance [km] below which stations count as at one place, in weights by distance."""

Predictor = Callable[[np.ndarray], np.ndarray]
"""From blocks (n, k) to errors (t, n) [kg m-2] at the stations' own heights: prediction less value,
NaN where there is no value."""


def _nearest(day: Day, scale_height: float) -> Predictor:
    """The value of the nearest station."""

    def errors(blocks):
        values = _reduced(day, scale_height)
        order = _outside_first(day, blocks)
        known = np.isfinite(values)[:, order]
        first = known.argmax(axis=2)
        predicted = values[:, order][*np.indices(first.shape), first]
        return _error(day, predicted, scale_height)

    return errors


def _outside_first(day: Day, blocks):
    """Stations (n, n - k) outside each station's block, the nearest first."""
    apart = _distances(day)
    np.put_along_axis(apart, blocks, np.inf, axis=1)
    return np.argsort(apart, axis=1, kind="stable")[:, : len(apart) - blocks.shape[1]]


def _inverse_distance(day: Day, scale_height: float) -> Predictor:
    """The mean of all stations, weighted by the inverse square of their distance."""

    def errors(blocks):
        values = _reduced(day, scale_height)
        weights = np.maximum(_distances(day), SAME_PLACE) ** -2.0
        np.put_along_axis(weights, blocks, 0.0, axis=1)
        with np.errstate(invalid="ignore"):  # an hour without other stations
            predicted = np.nan_to_num(values) @ weights.T / (np.isfinite(values) @ weights.T)
        return _error(day, predicted, scale_height)

    return errors


def _kriging(day: Day, scale_height: float) -> Predictor:
    """Kriging of the values as they are reduced with one scale height."""
    window = day.window
    values = _reduced(day, scale_height)
    usual = _error_variance(day, scale_height)
    places = window.places._replace(lift=np.zeros(len(usual)), drift=np.ones((len(usual), 1)))
    form = day.model.kriging.covariance.model
    fit = fit_covariance(values, usual, places, form, profile=False)
    kriging = Kriging(fit.covariance, places, usual)

    def errors(blocks):
        residual = np.full(values.shape, np.nan)
        for hour in np.flatnonzero(day.makable):
            gaps = kriging.gaps(np.isnan(values[hour]))
            residual[hour] = leave_out(kriging, gaps, values[hour][:, None], blocks)[0][:, 0]
        return -residual * _factor(day, scale_height)

    return errors


METHODS: dict[str, Callable[[Day], Predictor]] = {
    "kriging without heights": partial(_kriging, scale_height=np.inf),
    "kriging, 2 km scale height": partial(_kriging, scale_height=PLAIN_SCALE_HEIGHT),
    "inverse distance squared, 2 km": partial(_inverse_distance, scale_height=PLAIN_SCALE_HEIGHT),
    "nearest station, 2 km": partial(_nearest, scale_height=PLAIN_SCALE_HEIGHT),
}
"""Plainer methods by their name in the report."""


def _reduced(day: Day, scale_height: float):
    """Trusted values (t, n) at the reference height, NaN where there is none."""
    values = day.window.pwv / _factor(day, scale_height)
    return np.where(np.isfinite(day.model.values), values, np.nan)


def _factor(day: Day, scale_height: float):
    """Water vapour at the stations (n,) over that at the reference height; one if infinite."""
    return reduction_factor(day.window.height, day.window.reference_height, scale_height)


def _error_variance(day: Day, scale_height: float):
    """Usual error variance (n,) [kg2 m-4] at the reference height: the day's own, brought there
    with this scale height instead of the day's."""
    window, typical = day.window, np.median(day.model.scale_height)
    factor = reduction_factor(window.height, window.reference_height, typical)
    return day.model.kriging.error_variance * (factor / _factor(day, scale_height)) ** 2


def _error(day: Day, predicted, scale_height: float):
    """Errors (t, n) of predictions at the reference height."""
    return (predicted - _reduced(day, scale_height)) * _factor(day, scale_height)


def _distances(day: Day):
    """Distances (n, n) [km] between the stations."""
    positions = day.window.places.positions
    return distances(positions, positions)
