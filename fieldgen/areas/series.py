"""Means over areas with their standard errors, by hour or by day."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pyproj

from fieldgen.areas.day import ProductDay
from fieldgen.errors import InputError
from fieldgen.ground.overlay import Overlap, equal_area, overlap
from fieldgen.readers.areas import Areas

LEAST_SHARE_OF_DAY = 0.75
"""Of the steps of a day, for its mean. Common practice, no source."""

KG_PER_MILLION_M3 = 1e9


@dataclass(frozen=True)
class AreaSeries:
    """Means over areas; a areas, t intervals.

    bounds : (t, 2) datetime64[s] start and end of each interval
    size : (a,) [m2] of each area
    pwv, sigma : (a, t) [kg m-2] mean over the cells that are usable, and its standard error; NaN
        where none is
    coverage : (a, t) share of the area with usable cells, a mean over the steps of a day
    steps : (a, t) number of steps that the mean is of
    """

    areas: Areas
    bounds: np.ndarray
    size: np.ndarray
    pwv: np.ndarray
    sigma: np.ndarray
    coverage: np.ndarray
    steps: np.ndarray

    @property
    def per_kilogram(self):
        """Volume (a, 1) [million m3] of 1 kg m-2 over each area."""
        return (self.size / KG_PER_MILLION_M3)[:, None]

    @property
    def volume(self):
        """Volume (a, t) [million m3] of the water vapour above each whole area, as liquid."""
        return self.pwv * self.per_kilogram

    @property
    def volume_sigma(self):
        """Its standard error."""
        return self.sigma * self.per_kilogram

    def between(self, start=None, end=None) -> AreaSeries:
        """The intervals that a period touches; start, end : datetime64, by default all."""
        first, last = self.bounds.T
        kept = np.ones(len(first), bool)
        if start is not None:
            kept &= last > start
        if end is not None:
            kept &= first < end
        cut = {name: getattr(self, name)[:, kept] for name in ("pwv", "sigma", "coverage", "steps")}
        return replace(self, bounds=self.bounds[kept], **cut)


def area_series(days: list[ProductDay], areas: Areas, every: str) -> AreaSeries:
    """Series of areas over days; every : "step" of the fields, or "day".

    Raises InputError if no area lies on the grid.
    """
    overlaps = find_overlaps(days[0], areas)
    of_days = [_of_day(day, overlaps, every) for day in days]
    bounds = [_bounds(day, every) for day in days]
    pwv, sigma, coverage, steps = (
        np.concatenate(part, axis=1) for part in zip(*of_days, strict=True)
    )
    size = np.array([one.area for one in overlaps])
    return AreaSeries(areas, np.concatenate(bounds), size, pwv, sigma, coverage, steps)


def find_overlaps(day: ProductDay, areas: Areas) -> list[Overlap]:
    """The cells under each area; raises InputError if there are none at all."""
    plane = equal_area(*(float(part.mean()) for part in day.fields.longitude_latitude))
    to_plane = pyproj.Transformer.from_crs(day.fields.crs, plane, always_xy=True)
    corners = to_plane.transform(*day.fields.cell_corners)
    found = [overlap(*corners, outline) for outline in areas.in_crs(plane)]
    if not any(len(one.cells) for one in found):
        raise InputError(
            f"areas: none of {len(found)} lies on the grid. Check the CRS of their file."
        )
    return found


def _bounds(day: ProductDay, every: str):
    bounds = day.fields.steps.T
    return np.array([[bounds[0, 0], bounds[-1, 1]]]) if every == "day" else bounds


def _of_day(day: ProductDay, overlaps: list[Overlap], every: str):
    """Mean, sigma, coverage and steps, each (a, t) or (a, 1)."""
    series = [_of_area(day, one) for one in overlaps]
    if every == "day":
        series = [_daily(*one) for one in series]
    else:
        series = [
            (mean, np.sqrt(np.diag(errors)), coverage, np.isfinite(mean).astype(int))
            for mean, errors, coverage in series
        ]
    return tuple(np.stack(part) for part in zip(*series, strict=True))


def _of_area(day: ProductDay, area: Overlap):
    """Mean (t,), covariance of its errors (t, t) and coverage (t,) of a day's steps."""
    steps = len(day.time)
    mean, errors, coverage = (
        np.full(steps, np.nan),
        np.full((steps, steps), np.nan),
        np.zeros(steps),
    )
    if day.model is None or not len(area.cells):
        return mean, errors, coverage
    size = area.size * _usable(day, area.cells)
    held = size.sum(axis=1)
    shares = size / np.where(held > 0.0, held, 1.0)[:, None]
    hours, there = day.model.hours, held > 0.0
    pwv = np.nan_to_num(day.hourly("pwv")[:, area.cells])
    mean[hours] = np.where(there, (shares * pwv).sum(axis=1), np.nan)
    found = day.error_covariance(area.cells, shares)
    found[~there], found[:, ~there] = np.nan, np.nan
    errors[np.ix_(hours, hours)] = found
    coverage[hours] = np.minimum(held / area.area, 1.0)
    return mean, errors, coverage


def _usable(day: ProductDay, cells):
    """Cells (t, m) bool that have a value whose error bar is not flagged as too long."""
    too_long = day.fields.flag_meanings.get("sigma_above_5_kg_m2", 0)
    flag = day.hourly("flag")[:, cells].astype(int)
    return np.isfinite(day.hourly("pwv")[:, cells]) & ((flag & too_long) == 0)


def _daily(mean, errors, coverage):
    """Mean over the day, its sigma, mean coverage and number of steps, each (1,)."""
    there = np.flatnonzero(np.isfinite(mean))
    count = np.array([len(there)])
    if len(there) < LEAST_SHARE_OF_DAY * len(mean):
        return np.array([np.nan]), np.array([np.nan]), coverage.mean(keepdims=True), count
    variance = errors[np.ix_(there, there)].sum() / len(there) ** 2
    return (
        mean[there].mean(keepdims=True),
        np.sqrt(np.array([variance])),
        coverage.mean(keepdims=True),
        count,
    )
