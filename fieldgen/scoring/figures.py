"""Figures of merit of errors that come with error bars.

An error is what the field says less what was measured: positive where the field is too moist.

References
----------
Gneiting, T. et al. (2005), Mon. Weather Rev. 133, 1098, eq. 5: CRPS of a Gaussian.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from scipy.special import ndtr, ndtri

LEVELS = (0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.68, 0.7, 0.8, 0.9, 0.95, 0.99)
"""Nominal coverage of the reliability diagram."""

LEAST_STEPS = 6
"""Steps that a bias needs before its standard error is told."""


class Figures(NamedTuple):
    """Figures of one group of errors; NaN where the group is empty.

    bias, rmse, mae, crps, mean_sigma [kg m-2]; coverage_68, coverage_95 : shares of errors within
    the error bars of 68 and 95 %; standardised_sd : of errors over their sigma, about zero, so that
    honest error bars give 1 and a bias counts as an error
    """

    count: int
    bias: float
    rmse: float
    mae: float
    crps: float
    coverage_68: float
    coverage_95: float
    standardised_sd: float
    mean_sigma: float


def figures(error, sigma) -> Figures:
    """Figures of errors and their standard deviations [kg m-2], any equal shapes; NaN is left out.

    sigma : above zero
    """
    counts = np.isfinite(error)
    error, sigma = error[counts], sigma[counts]
    if not len(error):
        return Figures(0, *[np.nan] * (len(Figures._fields) - 1))
    standardised = error / sigma
    return Figures(
        count=len(error),
        bias=float(error.mean()),
        rmse=root_mean_square(error),
        mae=float(np.abs(error).mean()),
        crps=float(gaussian_crps(error, sigma).mean()),
        coverage_68=coverage(standardised, 0.68),
        coverage_95=coverage(standardised, 0.95),
        standardised_sd=root_mean_square(standardised),
        mean_sigma=float(sigma.mean()),
    )


def root_mean_square(values) -> float:
    """Root mean square of values of any shape, NaN left out; NaN if there is none."""
    values = values[np.isfinite(values)]
    return float(np.sqrt(np.mean(values**2))) if len(values) else np.nan


def gaussian_crps(error, sigma):
    """Continuous ranked probability score [kg m-2] of Gaussian estimates, of the errors' shape.

    sigma (z (2 Phi(z) - 1) + 2 phi(z) - 1/sqrt(pi)) with z = error / sigma.
    """
    z = error / sigma
    density = np.exp(-0.5 * z**2) / np.sqrt(2.0 * np.pi)
    return sigma * (z * (2.0 * ndtr(z) - 1.0) + 2.0 * density - 1.0 / np.sqrt(np.pi))


def coverage(standardised, level: float) -> float:
    """Share of standardised errors (n,) within the central interval of probability `level`."""
    return float(np.mean(np.abs(standardised) <= ndtri(0.5 + level / 2.0)))


def reliability(error, sigma) -> list[tuple[float, float]]:
    """Nominal and observed coverage at each of LEVELS; empty if there is no error."""
    standardised = (error / sigma)[np.isfinite(error)]
    return [(level, coverage(standardised, level)) for level in LEVELS if len(standardised)]


def bias_standard_error(error) -> float:
    """Standard error [kg m-2] of the mean of one series of errors (t,), NaN where missing.

    Neighbouring steps say nearly the same: n correlated values count as n (1 - r) / (1 + r), with
    the series' own lag-one correlation r, from 0 to 0.95. NaN for fewer than six values.
    """
    known = np.isfinite(error)
    count = int(known.sum())
    if count < LEAST_STEPS:
        return np.nan
    away = error - error[known].mean()
    variance = float(np.mean(away[known] ** 2))
    pairs = away[1:] * away[:-1]
    pairs = pairs[np.isfinite(pairs)]
    memory = float(pairs.mean()) / variance if len(pairs) and variance > 0.0 else 0.0
    memory = np.clip(memory, 0.0, 0.95)
    return float(np.sqrt(variance / (count - 1) * (1.0 + memory) / (1.0 - memory)))
