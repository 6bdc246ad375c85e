"""Parameters of the field from the stations themselves, pooled over hours.

References
----------
Patterson, H. D. and R. Thompson (1971), Biometrika 58, 545: restricted maximum likelihood.
Emardson, T. R. et al. (2003), J. Geophys. Res. 108, 2231: the fallback covariance.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_factor, cho_solve
from scipy.optimize import minimize

from fieldgen.kriging.covariance import Covariance, distances
from fieldgen.kriging.solver import Gaps, Kriging, Places

FALLBACK = {"partial_sill": 16.0, "range": 500.0, "nugget": 0.25}
"""Covariance where too few stations speak, [kg2 m-4, km, kg2 m-4].

Half the squared difference 2.5 sqrt(L) mm of delay (Emardson et al. 2003), at 0.157 kg m-2 per
millimetre, is 2.3 at 30 km and 7.7 at 100 km; this exponential gives 2.9 and 7.5.
"""

MINIMUM_STATIONS = 8
"""Fewer stations than this cannot tell a range from a sill."""

HOURS_USED = 16
"""Neighbouring hours say nearly the same; this many, spread over the window, say it all."""

_LOWER = {"partial_sill": 0.05, "nugget": 1e-3}
_UPPER = {"partial_sill": 400.0, "nugget": 16.0}
_RANGE_IN_SPACINGS = 1.0
_RANGE_IN_DIAMETERS = 3.0


@dataclass(frozen=True)
class CovarianceFit:
    """A covariance and how it was come by."""

    covariance: Covariance
    fitted: bool
    note: str


def fit_covariance(values, error_variance, stations: Places, model: str) -> CovarianceFit:
    """Covariance fitted by restricted maximum likelihood, every hour with its own drift.

    values, error_variance : (t, n) [kg m-2], [kg2 m-4], NaN where missing
    stations : Places of the n stations
    Parameters are bounded: the range lies between the median distance of nearest stations and
    three times the network's diameter. Falls back to `FALLBACK`, and says so in `note`, where
    fewer than eight stations report.
    """
    enough = np.isfinite(values).sum(axis=1) >= MINIMUM_STATIONS
    hours = np.flatnonzero(enough)
    if not len(hours):
        note = f"fewer than {MINIMUM_STATIONS} stations in every hour: default covariance"
        return CovarianceFit(Covariance(model, **FALLBACK), False, note)
    hours = hours[np.unique(np.linspace(0, len(hours) - 1, HOURS_USED).round().astype(int))]
    likelihood = _RestrictedLikelihood(values[hours], error_variance[hours], stations, model)
    return likelihood.maximise()


class _RestrictedLikelihood:
    """Negative restricted log likelihood of pooled hours and its gradient."""

    def __init__(self, values, error_variance, stations, model):
        self.model = model
        self.distance = distances(stations.positions, stations.positions)
        self.hours = []
        for hour_values, hour_variance in zip(values, error_variance, strict=True):
            present = np.flatnonzero(np.isfinite(hour_values))
            self.hours.append(
                (present, hour_values[present], hour_variance[present], stations.drift[present])
            )
        self.bounds = self._log_bounds()

    def _log_bounds(self):
        apart = self.distance + np.diag(np.full(len(self.distance), np.inf))
        spacing = max(np.median(apart.min(axis=1)), 1.0)
        diameter = max(self.distance.max(), 2.0 * spacing)
        lower = [_LOWER["partial_sill"], _RANGE_IN_SPACINGS * spacing, _LOWER["nugget"]]
        upper = [_UPPER["partial_sill"], _RANGE_IN_DIAMETERS * diameter, _UPPER["nugget"]]
        return np.log([lower, upper])

    def maximise(self) -> CovarianceFit:
        """The covariance of the highest likelihood within the bounds."""
        lower, upper = self.bounds
        start = np.clip(np.log(list(FALLBACK.values())), lower, upper)
        found = minimize(
            self._objective,
            start,
            jac=True,
            method="L-BFGS-B",
            bounds=list(zip(lower, upper, strict=True)),
            options={"ftol": 1e-7},
        )
        covariance = Covariance(self.model, *np.exp(found.x).tolist())
        at_bound = [
            name
            for name, low, value, high in zip(FALLBACK, lower, found.x, upper, strict=True)
            if min(value - low, high - value) < 1e-6
        ]
        note = f"{', '.join(at_bound)} at its bound" if at_bound else ""
        return CovarianceFit(covariance, True, note)

    def _objective(self, log_parameters):
        covariance = Covariance(self.model, *np.exp(log_parameters))
        between = covariance.between(self.distance)
        step = 1e-4
        longer = covariance._replace(range=covariance.range * np.exp(step))
        shorter = covariance._replace(range=covariance.range * np.exp(-step))
        by_log_range = (longer.between(self.distance) - shorter.between(self.distance)) / (2 * step)
        total, gradient = 0.0, np.zeros(3)
        for present, values, variance, drift in self.hours:
            square = np.ix_(present, present)
            matrix = between[square].copy()
            derivatives = (matrix.copy(), by_log_range[square], covariance.nugget)
            np.fill_diagonal(derivatives[0], covariance.partial_sill)
            np.fill_diagonal(matrix, covariance.sill + variance)
            value, slope = _hour_likelihood(matrix, values, drift, derivatives)
            total += value
            gradient += slope
        return total, gradient


def _hour_likelihood(matrix, values, drift, derivatives):
    """Negative restricted log likelihood of one hour and its slope by each log parameter."""
    factor = cho_factor(matrix, lower=True)
    inverse = cho_solve(factor, np.eye(len(values)))
    solved_drift = inverse @ drift
    information = drift.T @ solved_drift
    projector = inverse - solved_drift @ np.linalg.solve(information, solved_drift.T)
    residual = projector @ values
    log_determinant = 2.0 * np.log(np.diag(factor[0])).sum()
    value = 0.5 * (log_determinant + np.linalg.slogdet(information)[1] + values @ residual)
    by_sill, by_range, nugget = derivatives
    slope = [
        np.vdot(projector, by_sill) - residual @ by_sill @ residual,
        np.vdot(projector, by_range) - residual @ by_range @ residual,
        nugget * (np.trace(projector) - residual @ residual),
    ]
    return value, 0.5 * np.array(slope)


@dataclass(frozen=True)
class ScaleHeight:
    """Scale height of an hour [m] with its standard error [m]."""

    value: float
    sigma: float


def fit_scale_height(
    kriging: Kriging, gaps: Gaps, water_vapour, height, mean: float, prior: ScaleHeight
) -> ScaleHeight:
    """Scale height of one hour by generalised least squares on ln PWV.

    kriging : of the stations at the reference height, so that a moist side of the region is not
        mistaken for an effect of height
    gaps : of the hour
    water_vapour : (n,) [kg m-2] at the stations' own heights, NaN where missing
    height : (n,) [m], mean : mean PWV at the reference height [kg m-2], which scales the
        covariance of PWV to that of its logarithm
    prior : takes over where the stations say nothing, as in a network without relief
    """
    present = np.isfinite(water_vapour)
    logarithm = np.log(np.maximum(water_vapour, 0.5), where=present, out=np.zeros(len(height)))
    height = np.where(present, height, 0.0)
    projected_height = kriging.projector @ kriging.fill(gaps, height)
    information = mean**2 * (projected_height @ height)
    slope_information = -(mean**2) * (projected_height @ logarithm)
    prior_information = (prior.value**2 / prior.sigma) ** 2
    decay = (slope_information + prior_information / prior.value) / (
        information + prior_information
    )
    decay = np.clip(decay, 1e-4, 2e-3)  # 500 m to 10 km
    return ScaleHeight(1.0 / decay, 1.0 / (decay**2 * np.sqrt(information + prior_information)))
