"""Equally likely fields: each agrees with the stations as far as their errors go.

A draw is the field plus an error drawn at random, with all that `pwv_sigma` counts. Conditioning by
kriging: a field of the day's covariance is drawn at the cells and at the stations, the stations'
errors are added, and what kriging makes of those stations is taken away from the drawn cells; what
is left is a kriging error, with its variance and its correlation from cell to cell. The micro-scale
part (nugget) is each cell's own. The errors of the scale height, of Tm and of the constants are one
number each for all cells. From hour to hour errors resemble themselves as
`kriging.error_in_time` says; what all stations share stays the same in a draw.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.analysis import HEIGHT_ERROR, Day
from fieldgen.chain import pieces_of
from fieldgen.day_maker import DayMaker
from fieldgen.errors import InputError
from fieldgen.fields import Fields, pack
from fieldgen.kriging.covariance import distances
from fieldgen.kriging.places import Places
from fieldgen.kriging.simulation import LastingNoise, RandomField
from fieldgen.products.field_file import COMPRESSION, write_fields
from fieldgen.quantities import MISSING, PACKED_STEP
from fieldgen.readers.network import Network

MOST_VALUES = 200_000_000
"""Cells times draws, whose noise is held: 5 GB."""

LEFT_OUT = (
    "pwv_sigma", "pwv_at_reference", "scale_height", "scale_height_sigma", "common_sigma",
    "common_relative_sigma",
)  # fmt: skip
"""Variables of the field file that say nothing of a draw."""

COMMENT = (
    "Equally likely fields. Their mean is the field, their standard deviation its standard error; "
    "cells and hours vary together as errors do. Values below zero are written as zero."
)


@dataclass
class Noise:
    """The random numbers of a moment for m cells, n stations and some draws.

    level, slope : fields at stations and cells (n + m, draws), before they are correlated
    bend : (draws,); micro : (n + m, draws); stations : (n, draws)
    height : (draws,) of the scale height
    constant, relative : (draws,), the same in all hours
    """

    level: LastingNoise
    slope: LastingNoise
    bend: LastingNoise
    micro: LastingNoise
    stations: LastingNoise
    height: LastingNoise
    constant: np.ndarray
    relative: np.ndarray

    @classmethod
    def start(cls, stations: int, cells: int, count: int, draw: np.random.Generator) -> Noise:
        """The noise of the first moment."""
        everywhere = (stations + cells, count)
        return cls(
            level=LastingNoise(everywhere, draw),
            slope=LastingNoise(everywhere, draw),
            bend=LastingNoise((count,), draw),
            micro=LastingNoise(everywhere, draw),
            stations=LastingNoise((stations, count), draw),
            height=LastingNoise((count,), draw, HEIGHT_ERROR),
            constant=draw.standard_normal(count),
            relative=draw.standard_normal(count),
        )

    def advance(self, time: np.timedelta64) -> None:
        """Let a time go by."""
        for one in (self.level, self.slope, self.bend, self.micro, self.stations, self.height):
            one.advance(time)


class Drawer:
    """Draws the days of a network one after the other; the next day begins as the last one ended.

    Raises InputError if the draws do not fit into memory.
    """

    def __init__(self, network: Network, count: int, seed: int):
        cells, stations = int(np.prod(network.grid.shape)), network.stations.sizes["station"]
        if cells * count > MOST_VALUES:
            raise InputError(
                f"draws: {count} draws of {cells} cells are {cells * count} values, expected at "
                f"most {MOST_VALUES}. Ask for fewer draws."
            )
        self.maker, self.count = DayMaker(network), count
        draw = np.random.default_rng(seed)
        self._order = draw.permutation(cells)  # of the cells, as `RandomField` wants them
        self._noise = Noise.start(stations, cells, count, draw)
        self._last: np.datetime64 | None = None
        self._targets, self._points = self._all_cells()

    def _all_cells(self):
        """All cells as targets of kriging, and the heights (k, m) [m] within them."""
        pieces = list(self.maker.cells)
        parts = zip(*(tuple.__iter__(piece.places) for piece in pieces), strict=True)
        places = Places(*(np.concatenate(part) for part in parts))
        return places, np.concatenate([piece.points for piece in pieces], axis=1)

    def draw_day(self, piece) -> xr.Dataset:
        """Draws of the asked steps of a day, packed; dimensions realization, time, y, x."""
        day, fields = self.maker.compute(piece)
        time = day.stations.time.values
        drawn = np.full((self.count, len(time), len(self._order)), MISSING, np.int16)
        hours = _Hours(self, day, fields) if day.makable.any() else None
        for hour, now in enumerate(time):
            if self._last is not None:
                self._noise.advance(now - self._last)
            self._last = now
            if day.makable[hour]:
                drawn[:, hour] = pack(hours.draw(hour, self._noise))
        drawn = drawn.reshape(self.count, len(time), *self.maker.network.grid.shape)
        dataset = self.maker.packed_dataset(time[piece.asked], fields.steps(piece.asked))
        return _with_draws(dataset, drawn[:, piece.asked])


class _Hours:
    """What the hours of a day have in common."""

    def __init__(self, drawer: Drawer, day: Day, fields: Fields):
        self.day, self.fields = day, fields
        self.targets, self.points = drawer._targets, drawer._points
        self.order = drawer._order
        kriging = day.model.kriging
        self.everywhere = drawer.maker.places[1]
        positions = np.concatenate([self.everywhere.positions, self.targets.positions[self.order]])
        self.correlate = RandomField(kriging.covariance, positions)
        apart = distances(kriging.stations.positions, self.targets.positions).astype(np.float32)
        self.covariances = kriging.covariance.between(
            apart, kriging.stations.lift, self.targets.lift
        )

    def draw(self, hour: int, noise: Noise):
        """Draws (draws, m) of an hour [kg m-2]."""
        model, day = self.day.model, self.day
        pwv = self.fields.pwv[hour].ravel().astype(float) * PACKED_STEP
        scale = model.scale_height[hour]
        above = self.points - day.window.reference_height
        factor = np.exp(-above / scale).mean(axis=0)
        kriging_error = self._kriging_error(hour, noise) * factor
        kriging_error *= np.sqrt(model.variance_factor[hour])
        decay_sigma = model.scale_height_sigma[hour] / scale**2
        height_error = pwv * (self._station_height(hour) - self.points.mean(axis=0)) * decay_sigma
        constant = day.stations.common_sigma.values[hour]
        relative = day.stations.common_relative_sigma.values[hour]
        return (
            pwv
            + kriging_error
            + np.outer(noise.height.now, height_error)
            + (constant * noise.constant)[:, None]
            + np.outer(relative * noise.relative, pwv)
        )

    def _kriging_error(self, hour: int, noise: Noise):
        """Kriging errors (draws, m) at the cells, at the reference height."""
        model = self.day.model
        at_stations, at_cells = self._field(noise)
        index, kriging = self.day.window.index, model.kriging
        error = np.sqrt(kriging.error_variance + model.excess[hour])[:, None]
        values = at_stations[index] + error * noise.stations.now[index]
        filled = kriging.fill(model.gaps[hour], values).T
        return at_cells.T - kriging.field(filled, self.covariances, self.targets)

    def _field(self, noise: Noise):
        """Drawn field at the stations (n, draws) and cells (m, draws)."""
        covariance, count = self.day.model.kriging.covariance, len(self.everywhere.lift)
        lift = np.concatenate([self.everywhere.lift, self.targets.lift[self.order]])[:, None]
        field = np.sqrt(covariance.partial_sill) * self.correlate(noise.level.now)
        if covariance.slope_sill:
            field += np.sqrt(covariance.slope_sill) * lift * self.correlate(noise.slope.now)
        field += np.sqrt(covariance.curvature_sill) * lift**2 * noise.bend.now
        field += np.sqrt(covariance.nugget) * noise.micro.now
        cells = np.empty((len(self.order), field.shape[1]))
        cells[self.order] = field[count:]
        return field[:count], cells

    def _station_height(self, hour: int):
        """Mean height (m,) [m] of the stations that each cell's value comes from."""
        window, model = self.day.window, self.day.model
        heights = np.where(np.isfinite(model.values[hour]), window.height, np.nan)
        filled = model.kriging.fill(model.gaps[hour], heights)[None]
        return model.kriging.field(filled, self.covariances, self.targets)[0]


def _with_draws(dataset: xr.Dataset, drawn) -> xr.Dataset:
    """The field file's dataset with draws in place of the field."""
    attributes = dataset.pwv.attrs | {"ancillary_variables": "flag", "comment": COMMENT}
    dataset = dataset.drop_vars(LEFT_OUT)
    dataset["pwv"] = (("realization", "time", "y", "x"), drawn, attributes)
    dataset["pwv"].encoding = {**COMPRESSION, "chunksizes": (1, 1, *drawn.shape[2:])}
    about = {
        "standard_name": "realization", "long_name": "number of the draw", "units": "1",
        "coverage_content_type": "coordinate",
    }  # fmt: skip
    dataset["realization"] = ("realization", np.arange(1, len(drawn) + 1, dtype=np.int32), about)
    dataset.attrs["title"] += ", equally likely fields"
    dataset.attrs["id"] = dataset.attrs["id"].replace("pwv_", "draws_")
    return dataset


def write_draws(
    network: Network,
    folder: Path,
    *,
    count: int,
    seed: int,
    start: str | None = None,
    end: str | None = None,
    progress: Callable[[str, int], None] = lambda day, of: None,
) -> list[Path]:
    """Draws of a period as <folder>/draws_YYYYMMDD.nc, a file a day; returns their paths.

    The same seed, count and period give the same draws. Raises InputError if the period holds no
    step or the draws are too many, OutputError.
    """
    days = pieces_of(network, start, end)
    drawer, paths = Drawer(network, count, seed), []
    for piece in days:
        dataset = drawer.draw_day(piece)
        dataset.attrs["seed"] = np.int32(seed)
        paths.append(folder / f"draws_{piece.name}.nc")
        write_fields(dataset, paths[-1])
        progress(piece.name, len(days))
    return paths
