"""Block kriging: the error of a weighted sum over cells, such as the mean over a catchment.

With shares a of cells whose covariances with the stations are c, the sum has the covariance
c_B = sum of a c with them, the variance C_BB = sum of a a' C with itself, and the weights
w = P c_B + A^-1 F G f_B, as any target has. The nugget is variability below the distance of
stations and is taken to be that of each cell alone: over many cells it averages out.

The variance of its error is C_BB - 2 w'c_B + w'A w, with the stations' error variances of the
hour in A, which is the kriging variance of the block.
"""

from __future__ import annotations

import numpy as np

from fieldgen.kriging.covariance import Covariance, distances
from fieldgen.kriging.places import Places
from fieldgen.kriging.solver import Gaps, Kriging

CELLS_AT_ONCE = 1024

CELLS_OF_A_BLOCK = 4096
"""Of a larger block this many cells, drawn at random, stand for all in its variance with itself:
a mean of that many points is known far better than the covariance."""


def block_covariances(kriging: Kriging, cells: Places, shares):
    """Covariance (n, t) of the stations with the blocks; shares (t, m) of the m cells."""
    found = np.zeros((len(kriging.stations.lift), len(shares)))
    for rows in _pieces(len(cells.lift)):
        some = cells[rows]
        apart = distances(kriging.stations.positions, some.positions)
        found += kriging.covariance.between(apart, kriging.stations.lift, some.lift) @ (
            shares[:, rows].T
        )
    return found


def block_weights(kriging: Kriging, gaps: list[Gaps], covariances, cells: Places, shares):
    """Weights (n, t) of the stations, each hour's own, 0 where a station is missing.

    covariances : of `block_covariances`
    """
    drift = shares @ cells.drift
    weights = kriging.projector @ covariances + kriging.drift_weights @ drift.T
    for hour, gap in enumerate(gaps):
        part = gap.update @ weights[gap.changed, hour]
        weights[:, hour] -= kriging.projector[:, gap.changed] @ part
    return weights


def block_error_covariance(kriging: Kriging, gaps: list[Gaps], excess, cells: Places, shares):
    """Covariance (t, t) [kg2 m-4] of the errors of sums over cells, by hour.

    gaps, excess (t, n) : of the hours, as in `Kriging.gaps`
    shares (t, m) : what each cell counts; those of a mean sum to 1

    Its diagonal is the kriging variance. Beside it stands what two hours would share if field and
    errors stayed as they are and only the weights and shares changed.
    """
    covariances = block_covariances(kriging, cells, shares)
    weights = block_weights(kriging, gaps, covariances, cells, shares)
    covariance, stations = kriging.covariance, kriging.stations
    apart = distances(stations.positions, stations.positions)
    between = covariance.between(apart, stations.lift, stations.lift)
    np.fill_diagonal(between, covariance.at(stations.lift))
    crossed = weights.T @ covariances
    noise = weights * np.sqrt(kriging.error_variance[:, None] + excess.T)
    own = _own_covariance(covariance, cells, shares)
    return own - crossed - crossed.T + weights.T @ between @ weights + noise.T @ noise


def _own_covariance(covariance: Covariance, cells: Places, shares):
    """Covariance (t, t) of the blocks of the hours with each other."""
    micro = covariance.nugget * shares @ shares.T
    bend = np.outer(*(2 * [shares @ cells.lift**2])) * covariance.curvature_sill
    used = _sample(len(cells.lift), CELLS_OF_A_BLOCK)
    whole = shares.sum(axis=1, keepdims=True)
    some = shares[:, used]
    held = some.sum(axis=1, keepdims=True)
    some = some * np.divide(whole, held, out=np.ones_like(held), where=held != 0.0)
    cells = cells[used]
    lifted = some * cells.lift
    smooth = np.zeros_like(micro)
    for rows in _pieces(len(used)):
        correlation = covariance.correlation(distances(cells.positions[rows], cells.positions))
        smooth += covariance.partial_sill * some[:, rows] @ correlation @ some.T
        smooth += covariance.slope_sill * lifted[:, rows] @ correlation @ lifted.T
    return smooth + micro + bend


def _sample(count: int, most: int):
    """Indices of at most `most` of `count` items, the same in every run."""
    if count <= most:
        return np.arange(count)
    return np.sort(np.random.default_rng(0).choice(count, most, replace=False))


def _pieces(count: int):
    return [slice(start, start + CELLS_AT_ONCE) for start in range(0, count, CELLS_AT_ONCE)]
