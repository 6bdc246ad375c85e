"""What is taken away before a field is made, and why.

Every test sets a bit in the station's flag of that hour; a value is used where the flag is zero.
What a file's reader rejects line by line (impossible delays, spikes within the hour) is counted
there; here are the tests that need a station's series or its neighbours.
"""

from __future__ import annotations

import numpy as np

from fieldgen.kriging.places import determine_drift
from fieldgen.kriging.solver import Kriging

STATION_FLAGS = {
    "no_delay": 1,
    "formal_error": 2,
    "no_pressure": 4,
    "out_of_range": 8,
    "jump": 16,
    "disagrees_with_neighbours": 32,
    "condemned": 64,
    "climatological_pressure": 128,
}
"""Bits of the station file's flag. `condemned`: the station as a whole is
biased against its neighbours or disagrees so often that no hour of it is used."""

MINIMUM_STEPS = 6
"""Steps a station must report before it is judged as a whole."""

MEDIAN_STEPS = 5
"""Width of the running median that a jump is measured from: a front, which is no spike, passes."""


def formal_error_too_large(ztd_sigma, limit: float, ratio: float):
    """Values (t, n) bool whose formal error [m] is above `limit` or `ratio` times the station's
    median. False where no formal error is given."""
    with np.errstate(invalid="ignore"):
        usual = _median(ztd_sigma)
        return (ztd_sigma > limit) | (ztd_sigma > ratio * usual)


def _median(values):
    """Median by column (n,), NaN without a warning where a column is empty."""
    empty = np.isnan(values).all(axis=0)
    return np.nanmedian(np.where(empty, 0.0, values), axis=0) + np.where(empty, np.nan, 0.0)


def jumps(water_vapour, limit: float):
    """Values (t, n) bool that lie more than `limit` [kg m-2] from the running median of five steps.

    Fewer than three values in the window mark nothing.
    """
    half = MEDIAN_STEPS // 2
    padded = np.pad(water_vapour, ((half, half), (0, 0)), constant_values=np.nan)
    window = np.lib.stride_tricks.sliding_window_view(padded, MEDIAN_STEPS, axis=0)
    enough = np.isfinite(window).sum(axis=2) >= 3
    median = np.nanmedian(np.where(enough[..., None], window, 0.0), axis=2)
    with np.errstate(invalid="ignore"):
        return enough & (np.abs(water_vapour - median) > limit)


def disagreements(
    kriging: Kriging, values, excess, *, ratio: float, difference: float, minimum: int
):
    """Values (n,) bool of one hour that the other stations contradict.

    values (n,) [kg m-2] at the reference height, NaN where missing; excess as in `Kriging`.
    A value goes if its leave-one-out residual is above `difference` [kg m-2] and above `ratio`
    times its standard deviation; the worst goes first and the rest is tested anew, so that one
    bad station does not condemn its neighbours. Stops at `minimum` stations.
    """
    values = values.copy()
    gone = np.zeros(len(values), bool)
    while np.isfinite(values).sum() > minimum and determine_drift(
        kriging.stations, np.isfinite(values)
    ):
        residual, sigma = kriging.leave_one_out(values, kriging.gaps(np.isnan(values), excess))
        standardised = np.abs(residual) / sigma
        suspect = (np.abs(residual) > difference) & (standardised > ratio)
        if not suspect.any():
            break
        worst = np.nanargmax(np.where(suspect, standardised, -1.0))
        gone[worst] = True
        values[worst] = np.nan
    return gone


def biased_station(residual, sigma, *, ratio: float, difference: float) -> int | None:
    """The station that always lies off the others by the most, or None.

    residual, sigma (t, n) of leaving each station out, NaN where it has no value. A station's
    median residual over the hours counts if it is above `difference` [kg m-2] and above `ratio`
    times the median standard deviation; stations with fewer than six steps are not judged.
    """
    judged = np.isfinite(residual).sum(axis=0) >= MINIMUM_STEPS
    bias = np.abs(_median(np.where(judged, residual, np.nan)))
    standardised = bias / _median(sigma)
    suspect = (bias > difference) & (standardised > ratio)
    return int(np.argmax(np.where(suspect, standardised, -1.0))) if suspect.any() else None


def often_gone(gone, tested, share: float):
    """Stations (n,) bool that disagree in more than `share` of the hours they were tested in.

    gone, tested : (t, n) bool. Fewer than six tested steps condemn nobody.
    """
    count = tested.sum(axis=0)
    return (count >= MINIMUM_STEPS) & (gone.sum(axis=0) > share * count)
