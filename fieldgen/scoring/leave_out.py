"""Predicting stations from the others, without solving anew.

With the projector P of an hour (see `fieldgen.kriging.solver`) and a block g of stations,

    (P_gg)^-1 (P z)_g

is what the block's values are above what all stations outside it say, and (P_gg)^-1 is the
covariance of that, the stations' own errors counted (Dubrule 1983, Math. Geol. 15, 687). The
covariance of the field, the scale height and who is trusted stay those of the whole network. This
is the default engine; PyKrige's differs in having one error variance for all stations.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldgen.analysis import MINIMUM_STATIONS, Day
from fieldgen.kriging.covariance import distances
from fieldgen.kriging.solver import Gaps, Kriging
from fieldgen.station.heights import reduction_factor

UNDETERMINED_VARIANCE = 1e4
"""Variance [kg2 m-4] above which the stations that are left do not determine the drift."""

_RIDGE = 1e-12
"""Added to blocks, relative to their size, so that a block the rest does not determine is a very
uncertain one rather than a singular one."""


def nearest_blocks(positions, size: int):
    """Blocks (n, size) of each station, which comes first, with its nearest neighbours.

    positions (n, 3) [km]; at least one station of the network stays outside a block.
    """
    apart = distances(positions, positions)
    np.fill_diagonal(apart, -1.0)
    return np.argsort(apart, axis=1, kind="stable")[:, : min(size, len(apart) - 1)]


def leave_out(kriging: Kriging, gaps: Gaps, values, blocks):
    """Residuals (n, c) of the first station of each block, and their variance (n,).

    values : (n, c), c fields of one hour that lack the same stations, NaN where missing
    blocks : (n, k) stations that are left out together; those missing take no part
    The residual is the station's value less what the stations outside its block say. NaN where the
    station has no value, or fewer than `MINIMUM_STATIONS` others are left to make a field.
    """
    present = np.isfinite(values).all(axis=1)
    takes_part = present[blocks]
    projector = _hour_projector(kriging, gaps)
    inverse = _invert(projector[blocks[:, :, None], blocks[:, None, :]], takes_part)[:, 0]
    filled = np.column_stack([kriging.fill(gaps, column) for column in values.T])
    solved = (kriging.projector @ filled)[blocks] * takes_part[:, :, None]
    residual, variance = np.einsum("nk,nkc->nc", inverse, solved), inverse[:, 0]
    left = present.sum() - takes_part.sum(axis=1)
    known = present & (left >= MINIMUM_STATIONS) & (variance < UNDETERMINED_VARIANCE)
    return np.where(known[:, None], residual, np.nan), np.where(known, variance, np.nan)


def _hour_projector(kriging: Kriging, gaps: Gaps):
    """Projector (n, n) of the hour's own stations: P less P_q' S P_q."""
    lost = gaps.root.T @ kriging.projector[gaps.changed]
    return kriging.projector - lost.T @ lost


def _invert(matrices, takes_part):
    """Inverses (n, k, k) of the rows and columns (n, k) that take part, the others left alone."""
    both = takes_part[:, :, None] & takes_part[:, None, :]
    one = np.eye(matrices.shape[1])
    size = np.einsum("nii->n", np.where(both, matrices, 0.0))
    ridge = _RIDGE * size[:, None, None] * one
    return np.linalg.inv(np.where(both, matrices, one) + ridge)


@dataclass(frozen=True)
class Prediction:
    """What the others say at the stations' own heights; t hours, n stations, NaN where not known.

    error (t, n) [kg m-2]: prediction less the station's value; sigma (t, n) [kg m-2] of it
    """

    error: np.ndarray
    sigma: np.ndarray


def predict(day: Day, blocks) -> Prediction:
    """Predictions of a day's window of stations, each without its block (n, k)."""
    shape = day.window.pwv.shape
    error, sigma = np.full(shape, np.nan), np.full(shape, np.nan)
    for hour in np.flatnonzero(day.makable):
        error[hour], sigma[hour] = _predict_hour(day, hour, blocks)
    return Prediction(error, sigma)


def _predict_hour(day: Day, hour: int, blocks):
    """Error and sigma (n,) of one hour.

    Leaving out the stations' heights as if they were values tells how far each station lies above
    those it is predicted from: over that way the scale height's error counts.
    """
    window, model = day.window, day.model
    values = model.values[hour]
    columns = np.column_stack([values, np.where(np.isfinite(values), window.height, np.nan)])
    found, variance = leave_out(model.kriging, model.gaps[hour], columns, blocks)
    residual, way = found.T
    scale = model.scale_height[hour]
    factor = reduction_factor(window.height, window.reference_height, scale)
    own = model.kriging.error_variance + model.excess[hour]
    between = np.maximum(variance - own, 0.0) * model.variance_factor[hour]
    predicted = (values - residual) * factor
    by_height = predicted * way * model.scale_height_sigma[hour] / scale**2
    return -residual * factor, np.sqrt((between + own) * factor**2 + by_height**2)
