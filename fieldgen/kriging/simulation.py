"""Random fields with a given correlation, at any points, and noise that remembers.

References
----------
Vecchia, A. V. (1988), J. R. Stat. Soc. B 50, 297: each point given its nearest earlier ones.
Guinness, J. (2018), Technometrics 60, 415: in random order the approximation is close.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import cholesky
from scipy.sparse import csc_array, eye_array
from scipy.sparse.linalg import splu
from scipy.spatial import KDTree

from fieldgen.kriging.covariance import Covariance, distances
from fieldgen.kriging.error_in_time import KRIGING_ERROR, Part

EXACT_POINTS = 600
"""The first points, drawn together without any approximation."""

NEIGHBOURS = 24
"""Earlier points that each later one is drawn from."""

_SAFETY = 1e-6
"""Variance that points have of their own: two at one place would else make a matrix singular."""


class RandomField:
    """White noise -> a Gaussian field of variance 1 with a model's correlation, at p points.

    The order of the points matters: the first `EXACT_POINTS` are exact among each other, later ones
    should be in random order, so that neighbours from near and far stand before each.
    """

    def __init__(self, covariance: Covariance, positions):
        """positions : (p, 3) [km]"""
        self._exact = min(len(positions), EXACT_POINTS)
        first = positions[: self._exact]
        correlation = covariance.correlation(distances(first, first))
        correlation[np.diag_indices_from(correlation)] += _SAFETY
        self._root = cholesky(correlation, lower=True)
        if self._exact < len(positions):
            self._prepare(covariance, positions)

    def _prepare(self, covariance: Covariance, positions) -> None:
        """Weights of each later point's neighbours, and what of it they leave open."""
        near = earlier_neighbours(positions, self._exact, NEIGHBOURS)
        own = positions[self._exact :]
        among = _paired(positions[near][:, :, None], positions[near][:, None])
        matrix = covariance.correlation(among) + _SAFETY * np.eye(near.shape[1])
        right = covariance.correlation(_paired(own[:, None], positions[near]))
        weights = np.linalg.solve(matrix, right[..., None])[..., 0]
        self._left_open = np.sqrt(np.maximum(1.0 - (weights * right).sum(axis=1), 0.0))[:, None]
        count = len(own)
        rows = np.repeat(np.arange(count), near.shape[1])
        whole = csc_array((weights.ravel(), (rows, near.ravel())), shape=(count, len(positions)))
        self._from_first = whole[:, : self._exact]
        later = csc_array(eye_array(count) - whole[:, self._exact :])
        self._solver = splu(
            later, permc_spec="NATURAL", diag_pivot_thresh=0.0, options={"SymmetricMode": True}
        )

    def __call__(self, white):
        """Field (p, k) of independent standard normal numbers (p, k)."""
        first = self._root @ white[: self._exact]
        if self._exact == len(white):
            return first
        right = self._left_open * white[self._exact :] + self._from_first @ first
        return np.concatenate([first, self._solver.solve(right)])


def _paired(one, other):
    """Distances [km] of positions (..., 3) that are broadcast against each other."""
    return np.sqrt(np.square(one - other).sum(axis=-1))


def earlier_neighbours(positions, first: int, count: int):
    """Indices (p - first, count) of near points that stand before each point from `first` on.

    The nearest of all earlier ones where the order is random; `first` must be `count` or more.
    """
    found = []
    start = first
    while start < len(positions):
        stop = min(2 * start, len(positions))
        own = np.arange(start, stop)
        _, near = KDTree(positions[:stop]).query(positions[start:stop], min(4 * count, stop))
        later = near >= own[:, None]
        nearest_first = np.argsort(later, axis=1, kind="stable")[:, :count]
        chosen = np.take_along_axis(near, nearest_first, axis=1)
        lacking = np.take_along_axis(later, nearest_first, axis=1)
        for row in np.flatnonzero(lacking.any(axis=1)):  # rare: search the earlier ones alone
            chosen[row] = KDTree(positions[: own[row]]).query(positions[own[row]], count)[1]
        found.append(chosen)
        start = stop
    return np.concatenate(found)


class LastingNoise:
    """Independent standard normal numbers that resemble themselves from one time to the next.

    A sum of first-order autoregressive processes; its correlation is that of
    `error_in_time.correlation_in_time`.
    """

    def __init__(self, shape, draw: np.random.Generator, parts: tuple[Part, ...] = KRIGING_ERROR):
        self._draw, self._parts, self._shape = draw, parts, shape
        self._states = [self._new() for _ in parts]

    def _new(self):
        return self._draw.standard_normal(self._shape, np.float32)

    def advance(self, time: np.timedelta64) -> None:
        """Let a time go by."""
        for part, state in zip(self._parts, self._states, strict=True):
            kept = np.float32(np.exp(-(time / part.lasts)))
            state *= kept
            state += np.sqrt(1.0 - kept**2) * self._new()

    @property
    def now(self):
        """The numbers of the present time."""
        shares = [np.float32(np.sqrt(part.share)) for part in self._parts]
        return sum(share * state for share, state in zip(shares, self._states, strict=True))
