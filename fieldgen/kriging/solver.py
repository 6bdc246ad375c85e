"""Kriging that is solved once and serves every hour, whatever stations are missing.

The stations' covariance matrix A holds the field's covariance plus each station's own error
variance on its diagonal; the targets are free of noise, so stations at one place are no problem.
With the drift functions F (n, k) and G = (F' A^-1 F)^-1 everything follows from the projector

    P = A^-1 - A^-1 F G F' A^-1.

Weights. For a target with covariances c and drift functions f, w = P c + A^-1 F G f, and the
variance is C(0) + f' G f - c' (w + A^-1 F G f). The field alone needs no weights: with P z and
G F' A^-1 z once for all targets it is c' P z + f' G F' A^-1 z, the dual form.

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

import numpy as np
from scipy.linalg import lapack

from fieldgen.kriging.covariance import Covariance, distances
from fieldgen.kriging.places import Places


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
    update : (g, g) matrix S of the module's text, root: its lower Cholesky factor
    """

    changed: np.ndarray
    update: np.ndarray
    root: np.ndarray

    @property
    def log_determinant(self) -> float:
        """Logarithm of the determinant of S."""
        return 2.0 * float(np.log(np.diag(self.root)).sum())


class Kriging:
    """Kriging from one set of stations with one covariance.

    stations : Places of n stations
    error_variance : (n,) [kg2 m-4], every station's own, above zero where stations coincide
    """

    def __init__(self, covariance: Covariance, stations: Places, error_variance):
        self.covariance = covariance
        self.stations = stations
        self.error_variance = np.asarray(error_variance, dtype=float)
        apart = distances(stations.positions, stations.positions)
        matrix = covariance.between(apart, stations.lift, stations.lift)
        np.fill_diagonal(matrix, covariance.at(stations.lift) + self.error_variance)
        self._solve(matrix)

    def _solve(self, matrix) -> None:
        factor, failed = lapack.dpotrf(matrix, lower=1)
        if failed:
            raise np.linalg.LinAlgError("the stations' covariance is not positive definite")
        half, _ = lapack.dpotri(factor, lower=1)
        inverse = np.tril(half) + np.tril(half, -1).T
        drift = self.stations.drift
        solved_drift = inverse @ drift
        information = drift.T @ solved_drift
        self.drift_covariance = np.linalg.inv(information)  # G
        self.drift_weights = solved_drift @ self.drift_covariance  # A^-1 F G
        self.projector = inverse - self.drift_weights @ solved_drift.T
        self.log_determinant = 2.0 * float(np.log(np.diag(factor)).sum())
        self.log_determinant += float(np.linalg.slogdet(information)[1])

    def weights(self, targets: Places, dtype=np.float32) -> Weights:
        """Weights and variance of m targets with every station present."""
        distance = distances(self.stations.positions, targets.positions).astype(dtype)
        covariances = self.covariance.between(distance, self.stations.lift, targets.lift)
        return self.weights_of_covariances(covariances, targets)

    def weights_of_covariances(self, covariances, targets: Places) -> Weights:
        """The same from the covariances (n, m) of stations and targets, in their precision."""
        dtype = covariances.dtype
        by_drift = (self.drift_weights @ targets.drift.T).astype(dtype)
        weights = self.projector.astype(dtype) @ covariances
        weights += by_drift
        by_drift += weights
        explained = np.einsum("nm,nm->m", covariances, by_drift)
        trend = np.einsum("mi,ij,mj->m", targets.drift, self.drift_covariance, targets.drift)
        variance = self.covariance.at(targets.lift) + trend - explained
        return Weights(weights, np.maximum(variance, 0.0).astype(dtype))

    def field(self, filled, covariances, targets: Places):
        """Field (t, m) of filled values (t, n) without any weights: the dual form of kriging."""
        dtype = covariances.dtype
        field = (filled @ self.projector).astype(dtype) @ covariances
        return field + (filled @ self.drift_weights).astype(dtype) @ targets.drift.T.astype(dtype)

    def gaps(self, missing, excess=None) -> Gaps:
        """Gaps of an hour: missing (n,) bool; excess (n,) error variance beyond the usual, >= 0."""
        excess = np.zeros(len(missing)) if excess is None else excess
        changed = np.flatnonzero(missing | (excess > 0))
        block = self.projector[changed[:, None], changed]
        larger = np.flatnonzero(~missing[changed])
        block[larger, larger] += 1.0 / excess[changed[larger]]
        update = np.linalg.inv(block)
        return Gaps(changed, update, np.linalg.cholesky(update))

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
        lost = gaps.root.T @ self.projector[gaps.changed]
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

    def leave_pairs_out(self, values, gaps: Gaps, partner):
        """Residual (n,) and its standard deviation of leaving out each station and its partner.

        partner : (n,) index of another station; the residuals of a group g are (P_gg)^-1 (P z)_g
        """
        present = np.isfinite(values)
        index = np.arange(len(values))
        lost = gaps.root.T @ self.projector[gaps.changed]
        diagonal = np.where(present, self.diagonal(gaps), np.nan)
        both = self.projector[index, partner] - np.einsum("ij,ij->j", lost, lost[:, partner])
        error = self.projector @ self.fill(gaps, values)
        other, other_error = diagonal[partner], error[partner]
        alone = np.isnan(other)
        determinant = np.where(alone, diagonal, diagonal * other - both**2)
        residual = np.where(alone, error, other * error - both * other_error) / determinant
        return residual, np.sqrt(np.where(alone, 1.0, other) / determinant)


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
    lost = gaps.root.T.astype(weights.values.dtype) @ weights.values[gaps.changed]
    return weights.variance + np.einsum("ij,ij->j", lost, lost)
