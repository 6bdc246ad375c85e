"""A month of a network in figures: what its sheet tells."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
import xarray as xr

from fieldgen.outreach.folder import ProductFolder, Step
from fieldgen.products import look
from fieldgen.products.maps.painter import read_flag_bits


@dataclass(frozen=True)
class StationMonth:
    """A station over a month; used: share of the steps on file; mean and residual [kg m-2]."""

    id: str
    name: str
    height: float
    used: float
    mean: float
    residual: float


@dataclass
class Month:
    """Fields and stations of a month.

    possible, made : steps of the month, and those with a field
    mean_field : pwv [kg m-2] and flag (y, x), None without any field; a cell is flagged where it
        is in more than half of its steps
    mean : over region and month [kg m-2]
    moistest, driest : steps, None without any field, and their means over the region [kg m-2]
    time, median, spread : ends of all steps (time,), median of the stations, and their quantiles
        0.1 and 0.9 (2, time) [kg m-2]
    has_field : (time,) bool
    """

    possible: int
    made: int
    mean_field: xr.Dataset | None
    mean: float
    moistest: tuple[Step, float] | None
    driest: tuple[Step, float] | None
    time: np.ndarray
    median: np.ndarray
    spread: np.ndarray
    has_field: np.ndarray
    stations: list[StationMonth]


def read_month(folder: ProductFolder, month: np.datetime64) -> tuple[Month, xr.Dataset]:
    """Figures of a month, and its stations (station, time).

    Raises InputError if there are no station files of the month.
    """
    start = month.astype("datetime64[s]")
    end = (month + 1).astype("datetime64[s]")
    stations = folder.read_stations(start, end)
    time = folder.steps_between(start, end)
    sums = _Sums(read_flag_bits(folder.newest["flag"]))
    for step in folder.read_steps(start, end):
        sums.add(step)
    median, spread = _course(stations, time)
    done = Month(
        possible=len(time),
        made=sums.made,
        mean_field=sums.mean_field(),
        mean=float(np.mean(sums.means)) if sums.means else np.nan,
        moistest=sums.moistest,
        driest=sums.driest,
        time=time,
        median=median,
        spread=spread,
        has_field=np.isin(time, sums.times),
        stations=[_station_month(stations.isel(station=n)) for n in range(len(stations.station))],
    )
    return done, stations


class _Sums:
    """Sums over the fields of a month, which are held one at a time."""

    def __init__(self, flag_bits: dict):
        self.marks = {name: int(flag_bits[name]) for name in look.HATCHES}
        self.times: list[np.datetime64] = []
        self.means: list[float] = []
        self.moistest = self.driest = None
        self.total = self.count = 0
        self.marked = dict.fromkeys(self.marks, 0)

    @property
    def made(self) -> int:
        return len(self.times)

    def add(self, step: Step) -> None:
        """Take a step into account, if it has a field."""
        if step.field is None or not np.isfinite(step.field["pwv"].values).any():
            return
        pwv, flag = step.field["pwv"].values.astype(float), step.field["flag"].values
        there = np.isfinite(pwv)
        self.total = self.total + np.where(there, pwv, 0.0)
        self.count = self.count + there
        for name, bit in self.marks.items():
            self.marked[name] = self.marked[name] + (there & (flag & bit != 0))
        mean = float(pwv[there].mean())
        self.times.append(step.end)
        self.means.append(mean)
        if self.moistest is None or mean > self.moistest[1]:
            self.moistest = step, mean
        if self.driest is None or mean < self.driest[1]:
            self.driest = step, mean

    def mean_field(self) -> xr.Dataset | None:
        """Mean of each cell, NaN where it never had a value."""
        if not self.made:
            return None
        mean = np.where(self.count > 0, self.total / np.maximum(self.count, 1), np.nan)
        flag = sum(bit * (2 * self.marked[name] > self.count) for name, bit in self.marks.items())
        return xr.Dataset({"pwv": (("y", "x"), mean), "flag": (("y", "x"), flag)})


def _course(stations: xr.Dataset, time: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Median (time,) and quantiles 0.1 and 0.9 (2, time) of the stations' used values."""
    used = stations["pwv"].where(stations["flag"] == 0).transpose("time", "station")
    used = used.reindex(time=time.astype("datetime64[ns]"))
    low, middle, high = pd.DataFrame(used.values).quantile([0.1, 0.5, 0.9], axis=1).values
    return middle, np.array([low, high])


def _station_month(one: xr.Dataset) -> StationMonth:
    used = (one["flag"].values == 0) & np.isfinite(one["pwv"].values)
    pwv, residual = one["pwv"].values[used], one["residual"].values[used]
    return StationMonth(
        id=str(one["station"].values),
        name=str(one["station_name"].values),
        height=float(one["orthometric_height"]),
        used=float(used.mean()),
        mean=_mean(pwv),
        residual=_mean(residual),
    )


def _mean(values: np.ndarray) -> float:
    """Mean of the values that are there, NaN without any."""
    there = np.isfinite(values)
    return float(values[there].mean(dtype=float)) if there.any() else np.nan
