"""What the barometers say of each other: which of them is not to be believed, and why."""

from __future__ import annotations

import numpy as np

from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.solver import Kriging
from fieldgen.station.surface_air import (
    PRESSURE_COVARIANCE,
    Sites,
    Weather,
    drift_of_pressure,
    pressure_at_level,
    usual_variance,
)

SURE = 4.0
"""A barometer's residual counts if it is this many times its own standard deviation, too."""


def screen_barometers(weather: Weather, barometers: Sites, barometer_sigma: float, limit: float):
    """Pressures (t, s) [hPa] brought to one level differ from the others' by more than `limit`,
    and by more than `SURE` times what weather and the way to the level explain.

    Returns rejected (t, s) bool and the residuals (t, s) [hPa] of leaving each barometer out.
    The worst barometer of an hour goes first, so that it does not condemn its neighbours.
    """
    rejected = np.zeros(weather.pressure.shape, bool)
    residuals = np.full(weather.pressure.shape, np.nan)
    if not len(barometers.height):
        return rejected, residuals
    level = barometers.height.mean()
    at_level, error = pressure_at_level(weather, barometers, level, barometer_sigma)
    krigings = {
        drift: _kriging(PRESSURE_COVARIANCE, usual_variance(error), barometers, drift)
        for drift in ("constant", "linear")
    }
    for hour, values in enumerate(at_level):
        values = values.copy()
        while (count := np.isfinite(values).sum()) >= 3:
            kriging = krigings[drift_of_pressure(count)]
            residual, sigma = kriging.leave_one_out(values, kriging.gaps(np.isnan(values)))
            residuals[hour] = np.where(np.isfinite(residual), residual, residuals[hour])
            suspect = (np.abs(residual) > limit) & (np.abs(residual) > SURE * sigma)
            if not suspect.any():
                break
            worst = np.argmax(np.where(suspect, np.abs(residual), -1.0))
            rejected[hour, worst] = True
            values[worst] = np.nan
    return rejected, residuals


def _kriging(covariance, error_variance, sources: Sites, drift: str) -> Kriging:
    maker = PlaceMaker(sources.longitude, sources.latitude, drift)
    places = maker.places(sources.longitude, sources.latitude)
    return Kriging(covariance, places, error_variance)
