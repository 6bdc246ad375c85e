"""Trials -> the figures of a report, by height, position, hour of the day, method and station."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import xarray as xr

from fieldgen.readers.network import Network
from fieldgen.scoring.figures import (
    Figures,
    bias_standard_error,
    figures,
    reliability,
    root_mean_square,
)
from fieldgen.scoring.hull import POSITIONS
from fieldgen.scoring.trials import METHODS, Score, Trial
from fieldgen.settings import NetworkTable
from fieldgen.station.screening import STATION_FLAGS

HEIGHT_EDGES = (200, 500, 1000, 1500, 2000)
"""Edges [m] of the bands of station height; the lowest and the highest band are open."""

SIGNIFICANT = 3.0
"""Standard errors that a bias must be off zero to be more than chance: of four networks of a
hundred stations, one has such a station by chance."""

NOTABLE = 1.0
"""Error bars that a bias must be off zero to matter."""


@dataclass(frozen=True)
class PlainFigures:
    """A plainer method on the same stations and steps.

    bias, rmse, mae [kg m-2]; gain : share by which the field's RMSE is below the method's
    """

    bias: float
    rmse: float
    mae: float
    gain: float


@dataclass(frozen=True)
class TrialReport:
    """Figures of one trial; groups without a value are left out.

    by_hour : by the UTC hour that a step ends in, 1 to 24; reliability : nominal and observed
    """

    overall: Figures
    by_height: dict[str, Figures]
    by_position: dict[str, Figures]
    by_hour: dict[str, Figures]
    reliability: list[tuple[float, float]]
    plain: dict[str, PlainFigures]


@dataclass(frozen=True)
class StationReport:
    """A station as the others see it.

    figures : of leaving it out, bias positive where the others say more than the station
    position : against the hull of the others, most of the time; empty if never predicted
    bias_sigma : standard error of the bias [kg m-2]; bias_ratio : mean of error over sigma
    rejected : values that screening took away; rejected_bias : median error of those [kg m-2]
    """

    id: str
    name: str
    longitude: float
    latitude: float
    height: float
    position: str
    figures: Figures
    bias_sigma: float
    bias_ratio: float
    rejected: int
    rejected_bias: float

    @property
    def significance(self) -> float:
        """The bias over its standard error."""
        return self.figures.bias / self.bias_sigma if self.bias_sigma else np.nan

    @property
    def stands_off(self) -> bool:
        """Whether the bias is more than chance and matters."""
        return bool(abs(self.significance) > SIGNIFICANT and abs(self.bias_ratio) > NOTABLE)


@dataclass(frozen=True)
class ScoreReport:
    """All that `fieldgen score` tells.

    time (t,) : ends of the steps; scale_height (t,) [m]
    steps : figures of each step by trial; rejected : values by the reason of screening
    """

    network: NetworkTable
    time: np.ndarray
    scale_height: np.ndarray
    trials: dict[str, TrialReport]
    steps: dict[str, list[Figures]]
    stations: list[StationReport]
    rejected: dict[str, int]

    @property
    def period(self) -> tuple[np.datetime64, np.datetime64]:
        """Start of the first step and end of the last."""
        step = np.timedelta64(int(self.network.time_step.total_seconds()), "s")
        return self.time[0] - step, self.time[-1]

    @property
    def worst(self) -> list[StationReport]:
        """Stations whose bias is the largest in units of their error bars, the worst first."""
        scored = [one for one in self.stations if np.isfinite(one.bias_ratio)]
        return sorted(scored, key=lambda one: -abs(one.bias_ratio))

    @property
    def condemned(self) -> list[StationReport]:
        """Stations of which screening has left nothing."""
        return [one for one in self.stations if one.rejected and not one.figures.count]


def report_score(network: Network, score: Score) -> ScoreReport:
    """Report of the trials of a network."""
    table = network.settings.network
    heights = network.stations.orthometric_height.values
    flags = score.flag
    return ScoreReport(
        network=table,
        time=score.time,
        scale_height=score.scale_height,
        trials={
            name: _report_trial(trial, heights, hour_of_day(score.time))
            for name, trial in score.trials.items()
        },
        steps={
            name: [figures(*pair) for pair in zip(trial.error, trial.sigma, strict=True)]
            for name, trial in score.trials.items()
        },
        stations=_report_stations(network.stations, score),
        rejected={
            name: count
            for name, bit in STATION_FLAGS.items()
            if (count := int(((flags & bit) > 0).sum()))
        },
    )


def hour_of_day(time):
    """UTC hour (t,) that steps with these ends fall into, 1 to 24, named after its end."""
    second = (time - time.astype("datetime64[D]")).astype("timedelta64[s]").astype(int)
    return (second - 1) % 86400 // 3600 + 1


def height_bands(heights) -> dict[str, np.ndarray]:
    """Which heights (n,) [m] fall into each band, by the band's name."""
    names = [
        f"below {HEIGHT_EDGES[0]} m",
        *(f"{low}-{high} m" for low, high in pairwise(HEIGHT_EDGES)),
        f"above {HEIGHT_EDGES[-1]} m",
    ]
    band = np.digitize(heights, HEIGHT_EDGES)
    return {name: band == number for number, name in enumerate(names)}


def _report_trial(trial: Trial, heights, hours) -> TrialReport:
    shape = trial.error.shape
    bands = {name: np.broadcast_to(of, shape) for name, of in height_bands(heights).items()}
    positions = {name: trial.position == code for code, name in enumerate(POSITIONS)}
    by_hour = {str(h): np.broadcast_to((hours == h)[:, None], shape) for h in np.unique(hours)}
    overall = figures(trial.error, trial.sigma)
    return TrialReport(
        overall=overall,
        by_height=_by(trial, bands),
        by_position=_by(trial, positions),
        by_hour=_by(trial, by_hour),
        reliability=reliability(trial.error, trial.sigma),
        plain={name: _plain(trial.plain[name], overall.rmse) for name in METHODS},
    )


def _by(trial: Trial, groups: dict[str, np.ndarray]) -> dict[str, Figures]:
    """Figures of groups (t, n) bool, without the empty ones."""
    found = {
        name: figures(trial.error[group], trial.sigma[group]) for name, group in groups.items()
    }
    return {name: one for name, one in found.items() if one.count}


def _plain(error, rmse: float) -> PlainFigures:
    error = error[np.isfinite(error)]
    if not len(error):
        return PlainFigures(*[np.nan] * 4)
    plain = root_mean_square(error)
    return PlainFigures(float(error.mean()), plain, float(np.abs(error).mean()), 1.0 - rmse / plain)


def _report_stations(stations: xr.Dataset, score: Score) -> list[StationReport]:
    trial = score.trials["each_station"]
    return [
        _report_station(stations.isel(station=index), trial, score, index)
        for index in range(stations.sizes["station"])
    ]


def _report_station(station: xr.Dataset, trial: Trial, score: Score, index: int) -> StationReport:
    error, sigma = trial.error[:, index], trial.sigma[:, index]
    known = np.isfinite(error)
    rejected = score.flag[:, index] != 0
    residual = score.residual[rejected, index]
    residual = residual[np.isfinite(residual)]
    codes = trial.position[known, index]
    return StationReport(
        id=str(station.station.item()),
        name=str(station.name.item()) if "name" in station else "",
        longitude=float(station.longitude),
        latitude=float(station.latitude),
        height=float(station.orthometric_height),
        position=POSITIONS[np.bincount(codes).argmax()] if len(codes) else "",
        figures=figures(error, sigma),
        bias_sigma=bias_standard_error(error),
        bias_ratio=float((error[known] / sigma[known]).mean()) if known.any() else np.nan,
        rejected=int(rejected.sum()),
        rejected_bias=-float(np.median(residual)) if len(residual) else np.nan,
    )
