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
    "climatological_pressure": 128,
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


RUN_STEPS = 4
"""Steps whose mean is looked at: an error of some hours shows in it where none of them would."""

RUN_RATIO = 4.0
"""A mean of some steps must be this many times the SD that such means have in the network."""


NEIGHBOURS = 6
"""Nearest stations that tell whether weather is sharp about a station."""


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


def amid_sharp_weather(values, apart, limit: float, margin: float):
    """Values (t, n) bool that lie between what the stations around had within a step.

    values (t, n) [kg m-2] at the reference height, apart (n, n) [km]. True where the `NEIGHBOURS`
    nearest stations ran over more than `limit` [kg m-2] from the step before to the step after,
    without the highest and the lowest of them, and the value lies within that or `margin` [kg m-2]
    beyond: a front passes.
    """
    nearest = np.argsort(apart, axis=1)[:, :NEIGHBOURS]
    if nearest.shape[1] < NEIGHBOURS:
        return np.zeros(values.shape, bool)
    padded = np.pad(values, ((1, 1), (0, 0)), constant_values=np.nan)
    three = np.stack([padded[:-2], padded[1:-1], padded[2:]])
    low = np.where(np.isnan(three), np.inf, three).min(axis=0)[:, nearest]
    high = np.where(np.isnan(three), -np.inf, three).max(axis=0)[:, nearest]
    low, high = np.sort(low, axis=2)[:, :, 1], np.sort(high, axis=2)[:, :, -2]
    with np.errstate(invalid="ignore"):
        return (high - low > limit) & (values >= low - margin) & (values <= high + margin)


def disagreements(
    kriging: Kriging,
    values,
    excess,
    habit: Habit,
    excused=False,
    *,
    ratio: float,
    difference: float,
    minimum: int,
):
    """Values (n,) bool of one hour that the other stations contradict.

    values (n,) [kg m-2] at the reference height, NaN where missing; excess as in `Kriging`.
    A value goes if its leave-one-out residual, less what is usual there, is above `difference`
    [kg m-2] and above `ratio` times its usual SD, both wider in an hour in which all stations
    differ more, and if it is not `excused` (n,) bool; the worst goes first and the rest is tested
    anew, so that one bad station does not condemn its neighbours. Stops at `minimum` stations.
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
        suspect = (unusual > difference) & (standardised > limit) & ~np.asarray(excused)
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


def level_shift(residual, difference: float):
    """Values (t, n) bool on the wrong side of the largest lasting step in a station's residuals.

    residual (t, n), NaN where a value is missing. Of each station the step that explains most; it
    counts if it is above `difference` [kg m-2] and `SHIFT_RATIO` times its standard error. The
    wrong side is the one further from the other stations; sides have at least six steps. A change
    of antenna or radome, of the software or of the place does this.
    """
    found = np.zeros(residual.shape, bool)
    known = np.isfinite(residual)
    before = np.cumsum(known, axis=0)
    after = before[-1] - before
    total = np.cumsum(np.where(known, residual, 0.0), axis=0)
    enough = (before >= MINIMUM_STEPS) & (after >= MINIMUM_STEPS)
    step = (total[-1] - total) / np.maximum(after, 1) - total / np.maximum(before, 1)
    step = np.where(enough, np.abs(step), 0.0)
    share = np.sqrt(1.0 / np.maximum(before, 1) + 1.0 / np.maximum(after, 1))
    split = np.argmax(step / share, axis=0)
    largest = 0.0
    for station in np.flatnonzero(step.max(axis=0) > difference):
        sides = [slice(0, split[station] + 1), slice(split[station] + 1, None)]
        levels = [np.nanmedian(residual[side, station]) for side in sides]
        away = np.repeat(levels, [split[station] + 1, len(residual) - split[station] - 1])
        spread = np.nanmedian(np.abs(residual[:, station] - away)) / 0.6745
        error = spread * share[split[station], station] * np.sqrt(SHIFT_MEMORY)
        size = abs(levels[1] - levels[0])
        if size > max(difference, SHIFT_RATIO * error, largest):
            largest = size
            found[:] = False
            wrong = sides[int(np.argmax(np.abs(levels)))]
            found[wrong, station] = known[wrong, station]
    return found


def lasting_departure(residual, habit: Habit, difference: float, excused=False):
    """Values (t, n) bool of the station that departs most from its habit for some hours.

    residual (t, n), NaN where a value is missing. The mean of `RUN_STEPS` residuals, less what is
    usual, counts if it is above `difference` [kg m-2] and `RUN_RATIO` times the SD that means of
    the network's standardised residuals have; of its steps those above `difference` are marked.
    Values that are `excused` (t, n) bool do not count.
    """
    found = np.zeros(residual.shape, bool)
    residual = np.where(excused, np.nan, residual)
    if len(residual) < RUN_STEPS:
        return found
    unusual = residual - habit.usual
    windows = np.lib.stride_tricks.sliding_window_view(unusual, RUN_STEPS, axis=0)
    mean = np.abs(windows.mean(axis=2))  # NaN where a step is missing
    standardised = mean / habit.scale
    known = standardised[np.isfinite(standardised)]
    if not len(known):
        return found
    limit = RUN_RATIO * np.median(known) / 0.6745
    suspect = (mean > difference) & (standardised > limit)
    if suspect.any():
        start, station = np.unravel_index(np.argmax(np.where(suspect, mean, -1.0)), mean.shape)
        rows = slice(start, start + RUN_STEPS)
        same = np.sign(unusual[rows, station]) == np.sign(windows[start, station].sum())
        found[rows, station] = same & (np.abs(unusual[rows, station]) > difference)
    return found


def often_gone(gone, tested, share: float):
    """Stations (n,) bool that disagree in more than `share` of the hours they were tested in.

    gone, tested : (t, n) bool. Fewer than six tested steps condemn nobody.
    """
    count = tested.sum(axis=0)
    return (count >= MINIMUM_STEPS) & (gone.sum(axis=0) > share * count)
