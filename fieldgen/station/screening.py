"""What is taken away before a field is made, and why.

Every test sets a bit in the station's flag of that hour; a value is used where the flag is zero.
What a file's reader rejects line by line (impossible delays, spikes within the hour) is counted
there; here are the tests that need a station's series or its neighbours.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from fieldgen.kriging.places import determine_drift
from fieldgen.kriging.solver import Kriging
from fieldgen.station.series import column_median

STATION_FLAGS = {
    "no_delay": 1,
    "formal_error": 2,
    "no_pressure": 4,
    "out_of_range": 8,
    "jump": 16,
    "disagrees_with_neighbours": 32,
    "condemned": 64,
    "frozen": 256,
    "above_saturation": 512,
    "level_shift": 1024,
}
"""Bits of the station file's flag. `condemned`: the station as a whole is
biased against its neighbours or disagrees so often that no hour of it is used."""

MINIMUM_STEPS = 6
"""Steps a station must report before it is judged as a whole."""

SCALE_STEPS = 12
"""Steps of a station's own past that weigh as much as what the model says of its residuals."""

CALM_QUANTILE = 0.8
NORMAL_QUANTILE = 1.2816
"""Four stations in five of an hour tell how much it varies; of a normal distribution they lie
within 1.28 SD. A fifth may be wrong."""

HOUR_FREEDOM = 10
"""Stations that what is usual weighs as much as, against those of an hour."""

SHIFT_MEMORY = 6
"""Steps whose residuals count as one in a mean, because they hang together."""

SHIFT_RATIO = 4.0
"""A shift of level must be this many times its standard error."""


class Habit(NamedTuple):
    """What a station's residuals are like over the window: usual value and SD (n,) [kg m-2]."""

    usual: np.ndarray
    scale: np.ndarray


def habits(residual, sigma) -> Habit:
    """Habits of stations from the residuals and standard deviations (t, n) of leaving them out.

    Medians, so that a few bad hours change nothing. A short series is drawn to zero and to `sigma`.
    """
    count = np.isfinite(residual).sum(axis=0)
    weight = count / (count + SCALE_STEPS)
    usual = np.nan_to_num(column_median(residual)) * weight
    spread = np.nan_to_num(column_median(np.abs(residual - usual))) / 0.6745
    model = np.nan_to_num(column_median(sigma), nan=1.0)
    return Habit(usual, np.sqrt(weight * spread**2 + (1.0 - weight) * model**2))


def disagreements(
    kriging: Kriging, values, excess, habit: Habit, *, ratio: float, difference: float, minimum: int
):
    """Values (n,) bool of one hour that the other stations contradict.

    values (n,) [kg m-2] at the reference height, NaN where missing; excess as in `Kriging`.
    A value goes if its leave-one-out residual, less what is usual there, is above `difference`
    [kg m-2] and above `ratio` times its usual SD, both wider in an hour in which all stations
    differ more; the worst goes first and the rest is tested anew, so that one bad station does not
    condemn its neighbours. Stops at `minimum` stations.
    """
    values = values.copy()
    gone = np.zeros(len(values), bool)
    while np.isfinite(values).sum() > minimum and determine_drift(
        kriging.stations, np.isfinite(values)
    ):
        residual, sigma = kriging.leave_one_out(values, kriging.gaps(np.isnan(values), excess))
        unusual = np.abs(residual - habit.usual)
        standardised = unusual / np.sqrt(np.maximum(habit.scale**2, sigma**2 / 2.0) + excess)
        limit = ratio * _wider(standardised)
        suspect = (unusual > difference) & (standardised > limit)
        if not suspect.any():
            break
        worst = np.nanargmax(np.where(suspect, standardised, -1.0))
        gone[worst] = True
        values[worst] = np.nan
    return gone


def _wider(standardised) -> float:
    """By how much an hour's residuals are larger than usual, at least 1: a front is no fault."""
    known = standardised[np.isfinite(standardised)]
    found = np.quantile(known, CALM_QUANTILE) / NORMAL_QUANTILE
    square = (len(known) * found**2 + HOUR_FREEDOM) / (len(known) + HOUR_FREEDOM)
    return float(np.sqrt(max(square, 1.0)))


def biased_station(residual, sigma, *, ratio: float, difference: float, pairs=None) -> int | None:
    """The station that as a whole is off the others by the most, or None.

    residual, sigma (t, n) of leaving each station out, NaN where it has no value. A station's
    median residual over the hours counts if it is above `difference` [kg m-2] and above `ratio`
    times the median standard deviation, and so does the scatter about it; stations with fewer than
    six steps are not judged.

    pairs : residuals (t, n) with each station's nearest one left out, too, their standard
        deviations (t, n) and the nearest (n,): two bad stations side by side bear each other out,
        and both count if both are biased alike without the other
    """
    judged = np.isfinite(residual).sum(axis=0) >= MINIMUM_STEPS
    residual = np.where(judged, residual, np.nan)
    usual, promised = column_median(residual), column_median(sigma)
    scatter = column_median(np.abs(residual - usual)) / 0.6745
    off = np.maximum(np.abs(usual), scatter)
    suspect = (off > difference) & (off > ratio * promised)
    standardised = off / promised
    if pairs is not None and not suspect.any():
        apart, apart_sigma, nearest = pairs
        bias = column_median(np.where(judged, apart, np.nan))
        biased = (np.abs(bias) > difference) & (np.abs(bias) > ratio * column_median(apart_sigma))
        suspect = biased & biased[nearest] & (np.sign(bias) == np.sign(bias[nearest]))
        standardised = np.abs(bias)
    return int(np.argmax(np.where(suspect, standardised, -1.0))) if suspect.any() else None


def level_shifts(residual, difference: float):
    """Values (t, n) bool on the wrong side of a lasting step in a station's residuals (t, n).

    The step that explains most counts if it is above `difference` [kg m-2] and `SHIFT_RATIO` times
    its standard error; the wrong side is the one further from the other stations. Sides have at
    least six steps. A change of antenna or radome, of the software or of the place does this.
    """
    found = np.zeros(residual.shape, bool)
    known = np.isfinite(residual)
    count = np.cumsum(known, axis=0)[:-1]
    total = np.cumsum(np.where(known, residual, 0.0), axis=0)[:-1]
    after = known.sum(axis=0) - count
    enough = (count >= MINIMUM_STEPS) & (after >= MINIMUM_STEPS)
    if not enough.any():
        return found
    before_mean = total / np.maximum(count, 1)
    whole = np.where(known, residual, 0.0).sum(axis=0)
    after_mean = (whole - total) / np.maximum(after, 1)
    step = np.where(enough, after_mean - before_mean, 0.0)
    share = np.sqrt(1.0 / np.maximum(count, 1) + 1.0 / np.maximum(after, 1))
    best = np.argmax(np.abs(step) / share, axis=0)
    for station in np.flatnonzero(np.abs(step).max(axis=0) > difference):
        split = best[station]
        sides = [residual[: split + 1, station], residual[split + 1 :, station]]
        if min(np.isfinite(side).sum() for side in sides) < MINIMUM_STEPS:
            continue
        levels = np.array([np.nanmedian(side) for side in sides])
        away = [np.abs(side - level) for side, level in zip(sides, levels, strict=True)]
        spread = np.nanmedian(np.concatenate(away)) / 0.6745
        error = spread * share[split, station] * np.sqrt(SHIFT_MEMORY)
        size = abs(levels[1] - levels[0])
        if size > max(difference, SHIFT_RATIO * error):
            wrong = int(np.argmax(np.abs(levels)))
            rows = slice(None, split + 1) if wrong == 0 else slice(split + 1, None)
            found[rows, station] = known[rows, station]
    return found


def often_gone(gone, tested, share: float):
    """Stations (n,) bool that disagree in more than `share` of the hours they were tested in.

    gone, tested : (t, n) bool. Fewer than six tested steps condemn nobody.
    """
    count = tested.sum(axis=0)
    return (count >= MINIMUM_STEPS) & (gone.sum(axis=0) > share * count)
