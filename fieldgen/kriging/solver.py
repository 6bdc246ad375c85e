"""Kriging that is solved once and serves every hour, whatever stations are missing.

The stations' covariance matrix A holds the field's covariance plus each station's own error
variance on its diagonal; the targets are free of noise, so stations at one place are no problem.
With the drift functions F (n, k) everything follows from the projector

    P = A^-1 - A^-1 F (F' A^-1 F)^-1 F' A^-1.

Gaps. A station that is missing, or whose error variance is larger in one hour than in the others
by `excess`, changes A by a diagonal of low rank. With q the stations concerned and
S = (diag(1/excess) + P_qq)^-1 (1/excess is 0 where a station is missing)

    weights' z = weights (z - S (P z)_q on q),      variance' = variance + diag(w_q' S w_q),

so the weights w of every cell are needed once, and all hours share one matrix product.
The first is the Woodbury identity; for missing values it says that kriging from those present
equals kriging from all, the gaps filled with their own kriging prediction.

Leaving out. The residual of leaving station i out is (P z)_i / P_ii, its variance 1 / P_ii
(Dubrule 1983, Math. Geol. 15, 687).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from scipy.linalg import cho_factor, cho_solve

from fieldgen.kriging.covariance import Covariance, chord_positions, distances


class Places(NamedTuple):
    """Where something is: positions (n, 3) [km] and drift functions (n, k), the first constant."""

    positions: np.ndarray
    drift: np.ndarray


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

    def places(self, longitude, latitude) -> Places:
        """Places of coordinates (n,) [degrees]."""
        positions = chord_positions(longitude, latitude)
        functions = np.ones((len(positions), 1))
        if self.drift == "linear":
            plane = (positions - self._origin) @ self._axes / self._spread
            functions = np.hstack([functions, plane])
        return Places(positions, functions)


def _tangent_axes(origin):
    """Unit vectors (3, 2) to the east and north of a position."""
    up = origin / np.linalg.norm(origin)
    east = np.cross([0.0, 0.0, 1.0], up)
    east /= np.linalg.norm(east)
    return np.stack([east, np.cross(up, east)], axis=1)


@dataclass(frozen=True)
class Weights:
    """Kriging weights of targets from the full set of stations.

    values : (n, m), a row for each station, so that a missing station's row is contiguous
    variance : (m,) kriging variance with every station present
    """

    values: np.ndarray
    variance: np.ndarray


@dataclass(frozen=True)
class Gaps:
    """How one hour's stations differ from the full set.

    changed : (g,) indices of the stations missing or with excess variance
    update : (g, g) matrix S of the module's text
    """

    changed: np.ndarray
    update: np.ndarray


class Kriging:
    """Kriging from one set of stations with one covariance.

    stations : Places of n stations
    error_variance : (n,) [kg2 m-4], every station's own, above zero where stations coincide
    """

    def __init__(self, covariance: Covariance, stations: Places, error_variance):
        self.covariance = covariance
        self.stations = stations
        self.error_variance = np.asarray(error_variance)
        between = covariance.between(distances(stations.positions, stations.positions))
        np.fill_diagonal(between, covariance.sill + self.error_variance)
        self._factor = cho_factor(between, lower=True)
        drift = stations.drift
        self._solved_drift = cho_solve(self._factor, drift)  # A^-1 F
        self._drift_covariance = np.linalg.inv(drift.T @ self._solved_drift)
        inverse = cho_solve(self._factor, np.eye(len(drift)))
        self.projector = (
            inverse - self._solved_drift @ self._drift_covariance @ self._solved_drift.T
        )

    def weights(self, targets: Places, dtype=np.float32) -> Weights:
        """Weights and variance of m targets with every station present."""
        to_targets = self.covariance.between(distances(self.stations.positions, targets.positions))
        solved = cho_solve(self._factor, to_targets)
        remainder = targets.drift.T - self._solved_drift.T @ to_targets
        multipliers = self._drift_covariance @ remainder
        variance = self.covariance.sill - np.einsum("ij,ij->j", to_targets, solved)
        variance += np.einsum("ij,ij->j", remainder, multipliers)
        solved += self._solved_drift @ multipliers
        return Weights(solved.astype(dtype), variance.astype(dtype))

    def gaps(self, missing, excess=None) -> Gaps:
        """Gaps of an hour: missing (n,) bool; excess (n,) error variance beyond the usual, >= 0."""
        excess = np.zeros(len(missing)) if excess is None else excess
        changed = np.flatnonzero(missing | (excess > 0))
        block = self.projector[np.ix_(changed, changed)]
        larger = ~missing[changed]
        block[larger, larger] += 1.0 / excess[changed[larger]]
        return Gaps(changed, np.linalg.inv(block))

    def fill(self, gaps: Gaps, values):
        """Values (n,) or (n, k) after the gap identity, which suit the full set of stations.

        Their product with the weights is the hour's field, their product with the projector is
        what the hour's own projector makes of the values.
        """
        filled = np.where(np.isnan(values), 0.0, values)
        filled[gaps.changed] -= gaps.update @ (self.projector[gaps.changed] @ filled)
        return filled

    def diagonal(self, gaps: Gaps):
        """Diagonal (n,) of the hour's own projector; about zero where a station is missing."""
        root = np.linalg.cholesky(gaps.update)
        lost = root.T @ self.projector[gaps.changed]
        return np.diag(self.projector) - np.einsum("ij,ij->j", lost, lost)

    def leave_one_out(self, values, gaps: Gaps):
        """Residual (n,) and its standard deviation (n,) of leaving each station out in turn.

        The residual is the station's value less what the others say; its standard deviation
        counts the station's own error too. NaN where the station has no value.
        """
        present = np.isfinite(values)
        diagonal = np.where(present, self.diagonal(gaps), np.nan)
        residual = self.projector @ self.fill(gaps, values) / diagonal
        return residual, 1.0 / np.sqrt(diagonal)


def krige_hours(kriging: Kriging, targets: Places, values, gaps: list[Gaps], dtype=np.float32):
    """Field and kriging variance (t, m) of hours with values (t, n), NaN where missing."""
    weights = kriging.weights(targets, dtype)
    filled = np.stack([kriging.fill(*pair) for pair in zip(gaps, values, strict=True)])
    field = filled.astype(dtype) @ weights.values
    return field, np.stack([hour_variance(weights, hour) for hour in gaps])


def hour_variance(weights: Weights, gaps: Gaps):
    """Kriging variance (m,) of one hour's stations."""
    if not len(gaps.changed):
        return weights.variance
    root = np.linalg.cholesky(gaps.update).astype(weights.values.dtype)
    lost = root.T @ weights.values[gaps.changed]
    return weights.variance + np.einsum("ij,ij->j", lost, lost)
