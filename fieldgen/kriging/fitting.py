"""Parameters of the field from the stations themselves, pooled over hours.

References
----------
Patterson, H. D. and R. Thompson (1971), Biometrika 58, 545: restricted maximum likelihood.
Emardson, T. R. et al. (2003), J. Geophys. Res. 108, 2231: the fallback covariance.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from scipy.optimize import minimize

from fieldgen.kriging.covariance import MODELS, Covariance, distances
from fieldgen.kriging.places import Places, determine_drift
from fieldgen.kriging.solver import Gaps, Kriging


class Expectation(NamedTuple):
    """What a parameter is before the stations have spoken, and how far it may go.

    usual : the value without any data; spread : of its logarithm; low, high : bounds
    """

    usual: float
    spread: float
    low: float
    high: float


EXPECTED = {
    "partial_sill": Expectation(16.0, 1.5, 0.05, 400.0),
    "range": Expectation(500.0, 1.0, 10.0, 3000.0),
    "nugget": Expectation(0.25, 1.5, 1e-3, 16.0),
    "slope_sill": Expectation(0.5, 1.5, 1e-4, 25.0),
    "curvature_sill": Expectation(0.5, 1.5, 1e-4, 25.0),
}
"""Parameters of the covariance [kg2 m-4, km, kg2 m-4, kg2 m-4 km-2, kg2 m-4 km-4].

Half the squared difference 2.5 sqrt(L) mm of delay (Emardson et al. 2003), at 0.157 kg m-2 per
millimetre, is 2.3 at 30 km and 7.7 at 100 km; the usual exponential gives 2.9 and 7.5. The
slope's sill is a scale height that varies by 7 % over the region, the curvature's a profile that
bends by 3.5 % in the first kilometre (common practice, no source). The
spreads are wide: a day of thirty stations outweighs them."""

AUTO = "auto"
"""The name that stands for the model of the highest likelihood."""

MINIMUM_STATIONS = 8
"""Fewer stations than this cannot tell a range from a sill."""

HOURS_USED = (6, 16)
"""Neighbouring hours say nearly the same: of a large and of a small network at least and at most
this many, spread over the window, are fitted to."""

VALUES_USED = 640
"""Values that are plenty for five parameters; as many hours are taken as hold them."""

STATIONS_USED = 80
"""Of a larger network this many stations, spread over the list, are fitted to: the cost of a step
grows with their third power, what they tell hardly at all."""

DECAY_LIMITS = (1e-4, 2e-3)
"""Of ln PWV with height [m-1]: scale heights of 10 km and 500 m."""

_RANGE_IN_SPACINGS = 1.0
_RANGE_IN_DIAMETERS = 3.0


@dataclass(frozen=True)
class CovarianceFit:
    """A covariance and how it was come by."""

    covariance: Covariance
    fitted: bool
    note: str
    log_likelihood: float = -np.inf


def usual_covariance(model: str, *, profile: bool = True) -> Covariance:
    """The covariance where the stations say nothing."""
    model = "exponential" if model == AUTO else model
    return Covariance(model, **{name: EXPECTED[name].usual for name in _names(profile)})


def _names(profile: bool) -> list[str]:
    """Parameters that are fitted."""
    return list(EXPECTED) if profile else ["partial_sill", "range", "nugget"]


def fit_covariance(
    values,
    error_variance,
    stations: Places,
    model: str,
    *,
    profile: bool = True,
    near: Covariance | None = None,
) -> CovarianceFit:
    """Covariance fitted by restricted maximum likelihood, every hour with its own drift.

    values : (t, n) [kg m-2] at the reference height, NaN where missing
    error_variance : (n,) [kg2 m-4], each station's own
    model : a name of `MODELS`, or `AUTO`
    stations : Places of the n stations; what their drift explains does not count as variability
    profile : whether the profile may differ from the hour's exponential, see `Covariance`
    near : a covariance of nearly the same values, where the search starts

    Each parameter has the weak expectation of `EXPECTED`, and bounds; the range lies between the
    median distance of nearest stations and three times the network's diameter. Falls back to the
    expectation, and says so in `note`, where fewer than eight stations report.
    """
    used = _spread(len(stations.lift), STATIONS_USED)
    values, error_variance, stations = values[:, used], error_variance[used], stations[used]
    hours = [
        hour
        for hour, present in enumerate(np.isfinite(values))
        if present.sum() >= MINIMUM_STATIONS and determine_drift(stations, present)
    ]
    if not hours:
        note = f"fewer than {MINIMUM_STATIONS} stations in every hour: usual covariance"
        return CovarianceFit(usual_covariance(model, profile=profile), False, note)
    enough = int(np.clip(VALUES_USED // len(used), *HOURS_USED))
    values = values[np.array(hours)[_spread(len(hours), enough)]]
    start = near or usual_covariance(model, profile=profile)
    fits = []
    for name in (
        list(MODELS) if model == AUTO else [model]
    ):  # their ranges mean the same, so each starts where the last one ended
        likelihood = RestrictedLikelihood(values, error_variance, stations, name, profile)
        fits.append(likelihood.maximise(fits[-1].covariance if fits else start))
    return max(fits, key=lambda fit: fit.log_likelihood)


def _spread(count: int, most: int):
    """Indices of at most `most` of `count` items, evenly spread."""
    return np.unique(np.linspace(0, count - 1, most).round().astype(int))


class RestrictedLikelihood:
    """Negative restricted log likelihood of pooled hours, and its gradient.

    All hours share one factorisation: an hour's gaps change the determinant by that of
    S^-1 = P_qq and the projector by a matrix of low rank, see `fieldgen.kriging.solver`.
    """

    def __init__(self, values, error_variance, stations: Places, model: str, profile: bool):
        self.missing = np.isnan(values)
        self.values = np.where(self.missing, 0.0, values)
        self.error_variance = error_variance
        self.stations = stations
        self.model = model
        self.names = _names(profile)
        self.distance = distances(stations.positions, stations.positions)
        self.lifts = np.outer(stations.lift, stations.lift)

    def bounds(self):
        """Lower and upper bounds (2, p) of the logarithms of the parameters."""
        low, high = (
            {name: getattr(EXPECTED[name], side) for name in self.names} for side in ("low", "high")
        )
        apart = self.distance + np.diag(np.full(len(self.distance), np.inf))
        low["range"] = max(_RANGE_IN_SPACINGS * float(np.median(apart.min(axis=1))), low["range"])
        high["range"] = max(_RANGE_IN_DIAMETERS * float(self.distance.max()), 2.0 * low["range"])
        return np.log([list(low.values()), list(high.values())])

    def maximise(self, start: Covariance) -> CovarianceFit:
        """The covariance of the highest likelihood within the bounds, searched from `start`."""
        lower, upper = self.bounds()
        start = np.clip(np.log([getattr(start, name) for name in self.names]), lower, upper)
        found = minimize(
            self.objective,
            start,
            jac=True,
            method="L-BFGS-B",
            bounds=list(zip(lower, upper, strict=True)),
            options={"ftol": 1e-6},
        )
        at_bound = [
            name
            for name, low, value, high in zip(self.names, lower, found.x, upper, strict=True)
            if min(value - low, high - value) < 1e-6
        ]
        note = f"{', '.join(at_bound).replace('_', ' ')} at its bound" if at_bound else ""
        return CovarianceFit(self.covariance(found.x), True, note, -float(found.fun))

    def covariance(self, log_parameters) -> Covariance:
        """The covariance of the logarithms (p,) of the parameters."""
        values = np.exp(log_parameters).tolist()
        return Covariance(self.model, **dict(zip(self.names, values, strict=True)))

    def objective(self, log_parameters):
        """Value and gradient (p,) of the negative log likelihood and the expectations."""
        covariance = self.covariance(log_parameters)
        kriging = Kriging(covariance, self.stations, self.error_variance)
        gaps = [kriging.gaps(row) for row in self.missing]
        filled = np.stack([kriging.fill(*pair) for pair in zip(gaps, self.values, strict=True)])
        residual = filled @ kriging.projector  # each hour's own projector times its values
        value = 0.5 * (
            len(gaps) * kriging.log_determinant
            - sum(gap.log_determinant for gap in gaps)
            + np.vdot(self.values, residual)
        )
        gradient = self._gradient(covariance, kriging, gaps, residual)
        usual, spread = np.array([EXPECTED[name][:2] for name in self.names]).T
        away = (log_parameters - np.log(usual)) / spread
        return value + 0.5 * away @ away, gradient + away / spread

    def _gradient(self, covariance: Covariance, kriging: Kriging, gaps: list[Gaps], residual):
        """Half of tr(P' dA) - (P' z)' dA (P' z), summed over the hours with their own P'.

        All hours and parameters share one matrix, because P' = P - P E S E' P.
        """
        updates = np.zeros_like(kriging.projector)
        for gap in gaps:
            updates[gap.changed[:, None], gap.changed] += gap.update
        shared = len(gaps) * kriging.projector - residual.T @ residual
        shared -= kriging.projector @ updates @ kriging.projector
        return np.array([0.5 * np.vdot(shared, part) for part in self._derivatives(covariance)])

    def _derivatives(self, covariance: Covariance):
        """Derivatives (n, n) of the stations' covariance by the log of each parameter."""
        correlation = covariance.correlation(self.distance)
        sills = covariance.partial_sill + covariance.slope_sill * self.lifts
        derivatives = {
            "partial_sill": covariance.partial_sill * correlation,
            "range": sills * covariance.stretch(self.distance),
            "nugget": covariance.nugget * np.eye(len(correlation)),
            "slope_sill": covariance.slope_sill * self.lifts * correlation,
            "curvature_sill": covariance.curvature_sill * self.lifts**2,
        }
        return [derivatives[name] for name in self.names]


@dataclass(frozen=True)
class ScaleHeight:
    """Scale height of an hour [m] with its standard error [m]."""

    value: float
    sigma: float

    @classmethod
    def from_decay(cls, decay: float, sigma: float) -> ScaleHeight:
        """Scale height from the decay of ln PWV with height [m-1] and its standard error."""
        return cls(1.0 / decay, sigma / decay**2)

    @property
    def decay(self) -> float:
        """Decay of ln PWV with height [m-1]."""
        return 1.0 / self.value

    @property
    def decay_sigma(self) -> float:
        """Standard error of the decay [m-1]."""
        return self.sigma / self.value**2

    def remembering(self, last: ScaleHeight, kept: float) -> ScaleHeight:
        """This usual value, drawn to the one of the hour before, of which `kept` (0 to 1) is kept.

        The decay is a first-order autoregressive process about the usual one.
        """
        decay = self.decay + kept * (last.decay - self.decay)
        variance = (1.0 - kept**2) * self.decay_sigma**2 + kept**2 * last.decay_sigma**2
        return ScaleHeight.from_decay(decay, float(np.sqrt(variance)))


def fit_scale_height(
    kriging: Kriging, gaps: Gaps, water_vapour, height, mean: float, prior: ScaleHeight
) -> ScaleHeight:
    """Scale height of one hour by generalised least squares on ln PWV.

    kriging : of the stations at the reference height, so that a moist side of the region is not
        mistaken for an effect of height
    gaps : of the hour
    water_vapour : (n,) [kg m-2] at the stations' own heights, NaN where missing
    height : (n,) [m]
    mean : PWV at the reference height [kg m-2] that the covariance belongs to, and that scales it
        to the covariance of the logarithm
    prior : takes over where the stations say nothing, as in a network without relief
    """
    present = np.isfinite(water_vapour)
    logarithm = np.log(np.maximum(water_vapour, 0.5), where=present, out=np.zeros(len(height)))
    height = np.where(present, height, 0.0)
    projected_height = kriging.projector @ kriging.fill(gaps, height)
    information = mean**2 * (projected_height @ height)
    slope_information = -(mean**2) * (projected_height @ logarithm)
    prior_information = prior.decay_sigma**-2
    total = information + prior_information
    decay = (slope_information + prior_information * prior.decay) / total
    return ScaleHeight.from_decay(float(np.clip(decay, *DECAY_LIMITS)), float(total**-0.5))
