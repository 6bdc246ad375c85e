"""A day's stations -> what their field looks like: scale height, covariance, and who is trusted.

Every day is analysed by itself from a window of hours that ends with it, so that days can be made
in any order, alone or together, and come out the same.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import timedelta
from typing import NamedTuple

import numpy as np
import xarray as xr

from fieldgen.kriging.covariance import Covariance, distances
from fieldgen.kriging.error_in_time import Part
from fieldgen.kriging.fitting import (
    AUTO,
    CovarianceFit,
    ScaleHeight,
    fit_covariance,
    fit_scale_height,
)
from fieldgen.kriging.places import PlaceMaker, Places, determine_drift
from fieldgen.kriging.solver import Gaps, Kriging
from fieldgen.settings import KrigingTable, ScreeningTable, Settings
from fieldgen.station.heights import reduction_factor
from fieldgen.station.screening import (
    STATION_FLAGS,
    amid_sharp_weather,
    biased_station,
    disagreements,
    habits,
    lasting_departure,
    level_shift,
    often_gone,
)

MINIMUM_STATIONS = 5
"""An hour with fewer usable stations is written as missing."""

EXCESS_RATIO = 1.5
"""An hour whose error variance is above this many times the station's usual one has its own."""

VARIANCE_FREEDOM = 10
"""Degrees of freedom that the expected factor has against the hour's own: with ten stations both
count alike."""

LEAST_MOISTURE = 1.0
"""Mean water vapour [kg m-2] below which air does not count as drier still."""

SCALE_HEIGHT_MEMORY = timedelta(hours=3)
"""Time after which an hour's scale height says little about the present one. Common practice, no
source."""

HEIGHT_ERROR = (Part(1.0, np.timedelta64(SCALE_HEIGHT_MEMORY)),)
"""How the scale height's error resembles itself in time."""

ROUNDS = 2
"""Fits and screenings in turn: what the first screening throws out has spoilt the first fit."""


@dataclass(frozen=True)
class Window:
    """The stations that report in a window of hours.

    index : (n,) into the network's stations
    day : the hours of the day among those of the window
    pwv, sigma : (t, n) [kg m-2] at the stations' own heights, NaN where a series test failed;
        sigma without what all stations share
    height : (n,) orthometric [m]
    """

    index: np.ndarray
    day: slice
    pwv: np.ndarray
    sigma: np.ndarray
    height: np.ndarray
    places: Places
    reference_height: float

    def at_reference(self, scale_height):
        """Values and error variances (t, n) at the reference height; scale_height (t,) [m]."""
        factor = reduction_factor(self.height, self.reference_height, scale_height[:, None])
        variance = np.where(np.isfinite(self.pwv), (self.sigma / factor) ** 2, np.nan)
        return self.pwv / factor, variance


@dataclass(frozen=True)
class Model:
    """What the field of a window looks like.

    scale_height, scale_height_sigma : (t,) [m]
    values : (t, n) at the reference height [kg m-2]; NaN where not trusted
    excess : (t, n) error variance beyond the usual [kg2 m-4]
    variance_factor : (t,) of the hour's kriging variance
    gaps : one an hour, None where too few stations report
    """

    fit: CovarianceFit
    kriging: Kriging
    scale_height: np.ndarray
    scale_height_sigma: np.ndarray
    values: np.ndarray
    excess: np.ndarray
    variance_factor: np.ndarray
    gaps: list[Gaps | None]


class Verdict(NamedTuple):
    """What the neighbours say: values (t, n) bool that disagree, values beyond a lasting shift of
    level, and condemned stations (n,)."""

    disagree: np.ndarray
    shifted: np.ndarray
    out: np.ndarray


@dataclass(frozen=True)
class Day:
    """Everything that makes one day's fields; t hours, all stations of the network.

    window, model : None where too few stations report; their hours are those of the day
    makable : (t,) bool, hours with enough stations
    stations : Dataset (time, station) of the day with the final flag, the residual of leaving
        each station out, and what the error of kriging follows from: error_variance [kg2 m-4] of
        the values used, at the reference height, and variance_factor by time
    """

    window: Window | None
    model: Model | None
    makable: np.ndarray
    stations: xr.Dataset


def reference_height(settings: Settings, stations: xr.Dataset) -> float:
    """The height [m] that water vapour is reduced to: a setting, or the stations' median."""
    if settings.heights.reference_height != "auto":
        return float(settings.heights.reference_height)
    return float(np.round(np.median(stations.orthometric_height.values), -1))


def locate(settings: Settings, stations: xr.Dataset) -> tuple[PlaceMaker, Places]:
    """Places of all stations of a network, and what makes places of others."""
    longitude, latitude = stations.longitude.values, stations.latitude.values
    maker = PlaceMaker(longitude, latitude, settings.kriging.drift)
    lift = (stations.orthometric_height.values - reference_height(settings, stations)) / 1000.0
    return maker, maker.places(longitude, latitude, lift)


def analyse_day(
    settings: Settings, stations: xr.Dataset, places: Places, first: int, last: int
) -> Day:
    """Analysis of the hours first <= index < last of `stations`, all of one day.

    stations : what `retrieve_water_vapour` returns; all its hours before `last` are the window
    places : of all stations, see `locate`
    """
    day = slice(first, last)
    window = _make_window(settings, stations, places, day)
    of_day = stations.isel(time=day)
    if window is None:
        nothing = np.full(of_day.flag.shape, np.nan)
        without = _assign(of_day, 0, nothing, nothing, nothing, nothing[:, 0])
        return Day(None, None, np.zeros(last - first, bool), without)
    model, verdict = _model_window(settings, window)
    window, model = _cut(window, model)
    of_day = _with_tests(of_day, window, model, verdict, day)
    return Day(window, model, _makable(model), of_day)


def _make_window(settings: Settings, stations: xr.Dataset, places: Places, day: slice):
    """Window of the hours that end with the day; None if fewer than two stations report in it."""
    rows = slice(day.stop)
    usable = np.where(stations.flag.values[rows] == 0, stations.pwv.values[rows], np.nan)
    index = np.flatnonzero(np.isfinite(usable).any(axis=0))
    if len(index) < 2:
        return None
    return Window(
        index=index,
        day=day,
        pwv=usable[:, index],
        sigma=stations.pwv_independent_sigma.values[rows][:, index],
        height=stations.orthometric_height.values[index],
        places=places[index],
        reference_height=reference_height(settings, stations),
    )


def _model_window(settings: Settings, window: Window):
    """Model of a window, and what the neighbours say of its values."""
    present = np.isfinite(window.pwv)
    trusted, model = present, None
    for _ in range(ROUNDS):
        model = _fit_model(settings, window, trusted, model, _screening_model(settings.kriging))
        verdict = _screen(settings.screening, window, model)
        good = present & ~verdict.disagree & ~verdict.shifted & ~verdict.out
        if (good == trusted).all():
            if settings.kriging.covariance == model.fit.covariance.model:
                return model, verdict
            break
        trusted = good
    return _fit_model(settings, window, trusted, model, settings.kriging.covariance), verdict


def _screening_model(table: KrigingTable) -> str:
    """Model to screen with: which one is likeliest can be told when the bad values are gone."""
    return "exponential" if table.covariance == AUTO else table.covariance


def _fit_model(settings: Settings, window: Window, trusted, last: Model | None, name: str) -> Model:
    """Covariance, then the scale heights of that covariance, then the values they reduce to.

    last : the model of the round before, where this one's search starts
    name : of the covariance
    """
    prior = np.full(len(window.pwv), settings.heights.prior)
    values, variance = window.at_reference(prior)
    values = np.where(trusted, values, np.nan)
    usual = _usual(variance)
    moisture = _relative_moisture(values, window.day)
    fit = _fit_covariance(
        settings.kriging,
        values / moisture[:, None],
        usual * np.mean(moisture**-2.0),
        window.places,
        name,
        last and last.fit.covariance,
    )
    kriging = Kriging(fit.covariance, window.places, usual)
    scale, sigma = _fit_scale_heights(settings, window, kriging, values, moisture)
    values, variance = window.at_reference(scale)
    values = np.where(trusted, values, np.nan)
    usual = _usual(variance)
    excess = np.nan_to_num(np.where(variance > EXCESS_RATIO * usual, variance - usual, 0.0))
    kriging = Kriging(fit.covariance, window.places, usual)
    gaps = [
        kriging.gaps(~row, more) if _enough(window.places, row) else None
        for row, more in zip(trusted, excess, strict=True)
    ]
    factor = _variance_factor(kriging, values, gaps, moisture**2)
    return Model(fit, kriging, scale, sigma, values, excess, factor, gaps)


def _fit_covariance(
    table: KrigingTable,
    values,
    usual_variance,
    places: Places,
    name: str,
    near: Covariance | None,
) -> CovarianceFit:
    if table.partial_sill is not None:
        fixed = Covariance(
            table.covariance,
            table.partial_sill,
            table.range,
            table.nugget,
            table.slope_sill,
            table.curvature_sill,
        )
        return CovarianceFit(fixed, False, "as set")
    if np.ptp(places.lift) > 0.0:  # each hour's scale height is not variability of the field
        places = places._replace(drift=np.column_stack([places.drift, places.lift]))
    profile = table.engine != "pykrige"  # its covariances depend on distance alone
    return fit_covariance(values, usual_variance, places, name, profile=profile, near=near)


def _usual(variance):
    """Usual error variance (n,) of each station: its median over the hours."""
    return np.nanmedian(variance, axis=0)


def _fit_scale_heights(settings: Settings, window: Window, kriging: Kriging, values, moisture):
    """Scale height and its standard error (t,) [m], each hour from its own stations.

    moisture (t,) : of each hour relative to the day. The field varies in proportion to it, so that
    its logarithm varies alike in all hours, as in one of the day's mean.
    """
    mean = max(float(np.nanmean(values / moisture[:, None])), LEAST_MOISTURE)
    heights = settings.heights
    count = len(values)
    if heights.scale_height != "estimated":
        return np.full(count, heights.scale_height), np.full(count, heights.prior_sigma)
    usual = ScaleHeight(heights.prior, heights.prior_sigma)
    kept = np.exp(-settings.network.time_step / SCALE_HEIGHT_MEMORY)
    found = [usual]
    for water_vapour, at_reference in zip(window.pwv, values, strict=True):
        prior = usual.remembering(found[-1], kept)
        trusted = np.isfinite(at_reference)
        if not _enough(window.places, trusted):
            found.append(prior)
            continue
        measured = fit_scale_height(
            kriging,
            kriging.gaps(~trusted),
            np.where(trusted, water_vapour, np.nan),
            window.height,
            mean,
            prior,
        )
        found.append(measured)
    return np.array([one.value for one in found[1:]]), np.array([one.sigma for one in found[1:]])


def _relative_moisture(values, day: slice):
    """Mean of each hour (t,) over that of the day; hours without any value count as usual.

    The field varies in proportion to it: a dry hour before a front says less of moist air than
    its plain variance would (common practice, no source).
    """
    reporting = np.isfinite(values).any(axis=1)
    mean = np.full(len(values), np.nan)
    mean[reporting] = np.maximum(np.nanmean(values[reporting], axis=1), LEAST_MOISTURE)
    of_day = mean[day] if reporting[day].any() else mean
    return np.where(reporting, mean / np.nanmean(of_day), 1.0)


def _enough(places: Places, present) -> bool:
    """Whether the stations present (n,) bool are enough for a field."""
    return present.sum() >= MINIMUM_STATIONS and determine_drift(places, present)


def _variance_factor(kriging: Kriging, values, gaps: list[Gaps | None], expected):
    """How much more or less each hour (t,) varies than the day, drawn towards `expected` (t,)."""
    factor = np.array(expected, dtype=float)
    for hour, (gap, row) in enumerate(zip(gaps, values, strict=True)):
        if gap is None:
            continue
        squares = np.nan_to_num(row) @ kriging.projector @ kriging.fill(gap, row)
        freedom = np.isfinite(row).sum() - kriging.stations.drift.shape[1]
        factor[hour] = (VARIANCE_FREEDOM * factor[hour] + squares) / (VARIANCE_FREEDOM + freedom)
    return factor


def _screen(limits: ScreeningTable, window: Window, model: Model) -> Verdict:
    """What the neighbours say of a window's values.

    Stations that are wrong as a whole, beyond a lasting step or for some hours go first, the worst
    of them before the others; then single values.
    """
    values, _ = window.at_reference(model.scale_height)
    apart = distances(window.places.positions, window.places.positions)
    np.fill_diagonal(apart, np.inf)
    excused = amid_sharp_weather(values, apart, limits.jump, limits.neighbour_difference)
    left_out = LeftOut.of(window, model, values, apart.argmin(axis=1))
    verdict = _screen_stations(limits, left_out, excused)
    disagree, shifted, out = verdict
    if np.isnan(left_out.alone[0]).all():
        return verdict
    habit = habits(*left_out.alone)
    single = np.stack(
        [
            disagreements(
                model.kriging,
                row,
                more,
                habit,
                fine,
                ratio=limits.neighbour_ratio,
                difference=limits.neighbour_difference,
                minimum=MINIMUM_STATIONS,
            )
            for row, more, fine in zip(left_out.values, model.excess, excused, strict=True)
        ]
    )
    tested = np.isfinite(left_out.values) | disagree
    disagree = disagree | single
    return Verdict(disagree, shifted, out | often_gone(disagree, tested, limits.condemn_share))


def _screen_stations(limits: ScreeningTable, left_out: LeftOut, excused) -> Verdict:
    """What takes several hours to see; it is taken away from `left_out`."""
    shape, difference = left_out.values.shape, limits.neighbour_difference
    disagree, shifted, out = np.zeros(shape, bool), np.zeros(shape, bool), np.zeros(shape[1], bool)
    while np.isfinite(left_out.values).any(axis=0).sum() > MINIMUM_STATIONS:
        worst = biased_station(
            *left_out.alone,
            ratio=limits.bias_ratio,
            difference=difference,
            pairs=(*left_out.in_pairs, left_out.nearest),
        )
        suspects = ~shifted.any(axis=0)
        if worst is not None:
            suspects &= np.arange(shape[1]) == worst
        residual = left_out.alone[0]
        step = level_shift(np.where(suspects, residual, np.nan), difference)
        departure = np.zeros(shape, bool)
        if step.any():
            shifted |= step
        elif worst is not None:
            out[worst] = True
        else:
            departure = lasting_departure(residual, habits(*left_out.alone), difference, excused)
            if not departure.any():
                break
            disagree |= departure
        left_out.take_away(shifted | disagree | out)
    return Verdict(disagree, shifted, out)


@dataclass
class LeftOut:
    """Residuals of leaving each station out, kept up to date while values are taken away.

    values : (t, n) at the reference height, NaN where taken away
    alone, in_pairs : (2, t, n) residuals and standard deviations, leaving out a station, or a
        station and its `nearest` (n,); NaN in hours with too few stations
    """

    window: Window
    model: Model
    values: np.ndarray
    nearest: np.ndarray
    alone: np.ndarray
    in_pairs: np.ndarray

    @classmethod
    def of(cls, window: Window, model: Model, values, nearest) -> LeftOut:
        """All values of a window."""
        empty = np.full((2, *values.shape), np.nan)
        left_out = cls(window, model, values.copy(), nearest, empty, empty.copy())
        left_out._solve(range(len(values)))
        return left_out

    def take_away(self, gone) -> None:
        """Take away values (t, n) bool, and solve the hours anew that lose one."""
        lost = gone & np.isfinite(self.values)
        self.values[lost] = np.nan
        self._solve(np.flatnonzero(lost.any(axis=1)))

    def _solve(self, hours) -> None:
        kriging = self.model.kriging
        for hour in hours:
            row = self.values[hour]
            self.alone[:, hour] = self.in_pairs[:, hour] = np.nan
            if _enough(self.window.places, np.isfinite(row)):
                gaps = kriging.gaps(np.isnan(row), self.model.excess[hour])
                self.alone[:, hour] = kriging.leave_one_out(row, gaps)
                self.in_pairs[:, hour] = kriging.leave_pairs_out(row, gaps, self.nearest)


def _cut(window: Window, model: Model) -> tuple[Window, Model]:
    """The same with the hours of the day alone."""
    day = window.day
    cut_window = replace(window, pwv=window.pwv[day], sigma=window.sigma[day])
    cut_model = replace(
        model,
        scale_height=model.scale_height[day],
        scale_height_sigma=model.scale_height_sigma[day],
        values=model.values[day],
        excess=model.excess[day],
        variance_factor=model.variance_factor[day],
        gaps=model.gaps[day],
    )
    return cut_window, cut_model


def _makable(model: Model):
    """Hours (t,) bool with enough stations for a field."""
    return np.array([gap is not None for gap in model.gaps])


def _with_tests(
    stations: xr.Dataset, window: Window, model: Model, verdict: Verdict, day: slice
) -> xr.Dataset:
    """The day's stations with the flags of the tests between them and their residuals."""
    shape = stations.flag.shape
    bits = np.zeros(shape, stations.flag.dtype)
    has_value = np.isfinite(window.pwv)
    bits[:, window.index] = STATION_FLAGS["disagrees_with_neighbours"] * verdict.disagree[day]
    bits[:, window.index] |= STATION_FLAGS["level_shift"] * verdict.shifted[day]
    bits[:, window.index] |= STATION_FLAGS["condemned"] * (verdict.out & has_value)
    residual, sigma, error_variance = np.full((3, *shape), np.nan)
    variance_factor = np.where(_makable(model), model.variance_factor, np.nan)
    at_reference, _ = window.at_reference(model.scale_height)
    factor = window.pwv / at_reference
    for hour in np.flatnonzero(_makable(model)):
        found = _residuals(model, hour, at_reference[hour])
        residual[hour, window.index], sigma[hour, window.index] = found * factor[hour]
        error = model.kriging.error_variance + model.excess[hour]
        error_variance[hour, window.index] = np.where(
            np.isfinite(model.values[hour]), error, np.nan
        )
    return _assign(stations, bits, residual, sigma, error_variance, variance_factor)


def _residuals(model: Model, hour: int, at_reference):
    """Residual and its standard deviation (2, n) of leaving out each station, trusted or not."""
    values, gaps = model.values[hour], model.gaps[hour]
    residual, sigma = model.kriging.leave_one_out(values, gaps)
    out = np.isnan(values)
    predicted = model.kriging.fill(gaps, values)
    own = np.zeros(len(values))
    own[gaps.changed] = np.sqrt(np.diag(gaps.update))
    error = model.kriging.error_variance + model.excess[hour]  # the station's own
    between = np.maximum(np.where(out, own, sigma) ** 2 - error, 0.0) * model.variance_factor[hour]
    sigma = np.sqrt(between + error)
    return np.array([np.where(out, at_reference - predicted, residual), sigma])


def _assign(
    stations: xr.Dataset, bits, residual, sigma, error_variance, variance_factor
) -> xr.Dataset:
    dimensions = ("time", "station")
    return stations.assign(
        flag=(dimensions, stations.flag.values | bits),
        residual=(dimensions, residual),
        residual_sigma=(dimensions, sigma),
        error_variance=(dimensions, error_variance),
        variance_factor=("time", variance_factor),
    )
