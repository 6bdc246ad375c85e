"""A day's model -> its fields on the grid: krige at the reference height, lift with the terrain.

Fields are packed as the files hold them, in steps of 0.01 kg m-2, as soon as they are computed.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields

import numpy as np

from fieldgen.analysis import Day, Model, Window
from fieldgen.ground.cells import CellGrid
from fieldgen.ground.grid import Grid
from fieldgen.ground.terrain import Terrain
from fieldgen.kriging.covariance import distances
from fieldgen.kriging.places import PlaceMaker, Places
from fieldgen.kriging.pykrige_engine import krige_with_pykrige
from fieldgen.kriging.solver import hour_variance
from fieldgen.quantities import MISSING, PACKED_STEP
from fieldgen.settings import Settings
from fieldgen.station.delay import common_sigma

FIELD_FLAGS = {
    "extrapolated_in_height": 1,
    "far_from_stations": 2,
    "too_few_stations": 4,
    "sigma_above_5_kg_m2": 8,
    "sea": 16,
}
"""Bits of the field file's flag."""

UNUSABLE_SIGMA = 5.0
"""Standard error above which a value is not usable [kg m-2]: WMO OSCAR requirement 380."""

HIGHEST = 320.0
"""The highest value that can be packed [kg m-2], four times what air can hold on earth."""

HEIGHT_TOLERANCE = 50.0
"""Terrain this far [m] beyond the highest or lowest station of the hour is extrapolated."""

CELLS_AT_ONCE = 4096
"""Cells whose weights are held together: few enough for the processor's cache."""

KEPT_DISTANCES = 40_000_000
"""Distances between stations and cells that are kept from day to day, 4 bytes each."""


@dataclass
class Fields:
    """Fields of one or several days, packed as the files hold them.

    pwv, sigma, at_reference : (t, ny, nx) int16, steps of 0.01 kg m-2, `MISSING` where missing
    flag : (t, ny, nx) int8, bits of `FIELD_FLAGS`
    scale_height, scale_height_sigma : (t,) [m], NaN where missing; station_count : (t,)
    common_sigma, common_relative_sigma : (t,) [kg m-2], [1] what the cells' errors share
    clipped : cells and hours whose `pwv` was below zero, written as zero
    """

    pwv: np.ndarray
    sigma: np.ndarray
    at_reference: np.ndarray
    flag: np.ndarray
    scale_height: np.ndarray
    scale_height_sigma: np.ndarray
    station_count: np.ndarray
    common_sigma: np.ndarray
    common_relative_sigma: np.ndarray
    clipped: int = 0

    def arrays(self) -> dict[str, np.ndarray]:
        """All that runs along time, by name."""
        return {one.name: getattr(self, one.name) for one in fields(self) if one.name != "clipped"}

    def steps(self, rows: slice) -> Fields:
        """The fields of some steps."""
        arrays = {name: array[rows] for name, array in self.arrays().items()}
        return Fields(**arrays, clipped=self.clipped)


def join_fields(parts: list[Fields]) -> Fields:
    """Fields of several days, one after the other."""
    arrays = [part.arrays() for part in parts]
    joined = {name: np.concatenate([one[name] for one in arrays]) for name in arrays[0]}
    return Fields(**joined, clipped=sum(part.clipped for part in parts))


@dataclass(frozen=True)
class Cells:
    """Some cells of the grid as targets of kriging.

    rows : their slice of the flattened grid
    places : Places of the m cells, lift from the mean height
    points : (k, m) heights [m] within the cells, ground : (m,) their mean
    distance : (n, m) [km] from all stations of the network, float32
    """

    rows: slice
    places: Places
    points: np.ndarray
    ground: np.ndarray
    distance: np.ndarray


class CellMaker:
    """The grid's cells in pieces, which one pass over a day takes one after the other."""

    def __init__(
        self,
        grid: Grid | CellGrid,
        terrain: Terrain,
        maker: PlaceMaker,
        stations: Places,
        reference: float,
    ):
        """stations : places of all stations of the network; reference : reference height [m]"""
        self.shape = grid.shape
        self.is_sea = terrain.is_sea.ravel()
        self.maker, self.stations, self.reference = maker, stations, reference
        self.longitude, self.latitude = (part.ravel() for part in grid.longitude_latitude)
        self.points = terrain.points.reshape(len(terrain.points), -1)
        keeps = len(stations.lift) * len(self.is_sea) <= KEPT_DISTANCES
        self._kept = list(self._make()) if keeps else None

    def __iter__(self) -> Iterator[Cells]:
        return iter(self._kept if self._kept is not None else self._make())

    def _make(self) -> Iterator[Cells]:
        for start in range(0, len(self.is_sea), CELLS_AT_ONCE):
            rows = slice(start, start + CELLS_AT_ONCE)
            points = self.points[:, rows]
            ground = points.mean(axis=0)
            places = self.maker.places(
                self.longitude[rows], self.latitude[rows], (ground - self.reference) / 1000.0
            )
            distance = distances(self.stations.positions, places.positions).astype(np.float32)
            yield Cells(rows, places, points, ground, distance)


@dataclass(frozen=True)
class Solution:
    """What kriging says of some cells, at the reference height; t hours, m cells.

    lifted : (t, m) with the local change with height up to the terrain; level : (t, m) without
    variance : (t, m) of `lifted`
    station_height : (t, m) mean height [m] of the stations that a cell's value comes from
    """

    lifted: np.ndarray
    level: np.ndarray
    variance: np.ndarray
    station_height: np.ndarray


class OwnEngine:
    """The default engine: what a day's hours need is prepared once, for all pieces of the grid."""

    def __init__(self, window: Window, model: Model, hours):
        self.window, self.kriging = window, model.kriging
        self.gaps = [model.gaps[hour] for hour in hours]
        values = model.values[hours]
        heights = np.where(np.isfinite(values), window.height, np.nan)
        self.values = self._fill(values)
        self.heights = self._fill(heights).astype(np.float32)

    def _fill(self, values):
        """Values (t, n) after the gap identity."""
        return np.stack([self.kriging.fill(*pair) for pair in zip(self.gaps, values, strict=True)])

    def __call__(self, cells: Cells) -> Solution:
        """Solution of some cells, from one set of weights for all hours."""
        kriging, targets = self.kriging, cells.places
        covariance, lift = kriging.covariance, kriging.stations.lift
        correlation = covariance.correlation(cells.distance[self.window.index])
        level = covariance.of_correlation(correlation, lift, np.zeros_like(targets.lift))
        lifted = covariance.of_correlation(correlation, lift, targets.lift)
        weights = kriging.weights_of_covariances(lifted, targets)
        return Solution(
            self.values.astype(np.float32) @ weights.values,
            kriging.field(self.values, level, targets),
            np.stack([hour_variance(weights, gaps) for gaps in self.gaps]),
            self.heights @ weights.values,
        )


class PykrigeEngine:
    """PyKrige, hour by hour; the heights of the stations are kriged like a field."""

    def __init__(self, window: Window, model: Model, hours):
        self.kriging, self.values = model.kriging, model.values[hours]
        self.heights = np.where(np.isfinite(self.values), window.height, np.nan)

    def __call__(self, cells: Cells) -> Solution:
        """Solution of some cells."""
        field, variance = krige_with_pykrige(self.kriging, cells.places, self.values)
        station_height, _ = krige_with_pykrige(self.kriging, cells.places, self.heights)
        return Solution(field, field, variance, station_height)


ENGINES = {"fieldgen": OwnEngine, "pykrige": PykrigeEngine}
"""Made for the hours of a day, then called with pieces of the grid."""


def make_fields_of_day(settings: Settings, cells: CellMaker, day: Day) -> Fields:
    """Fields of one day; hours with too few stations are missing and flagged."""
    made = _empty(day, cells)
    hours = np.flatnonzero(day.makable)
    if len(hours):
        engine = ENGINES[settings.kriging.engine](day.window, day.model, hours)
        for piece in cells:
            solution = engine(piece)
            made.clipped += _fill_piece(settings, cells, day, hours, piece, solution, made)
    return made


def _empty(day: Day, cells: CellMaker) -> Fields:
    steps = len(day.makable)
    flag = np.tile((FIELD_FLAGS["sea"] * cells.is_sea).astype(np.int8), (steps, 1))
    flag[~day.makable] |= FIELD_FLAGS["too_few_stations"]
    scale_height, sigma = np.full((2, steps), np.nan)
    if day.model is not None:
        scale_height[day.makable] = day.model.scale_height[day.makable]
        sigma[day.makable] = day.model.scale_height_sigma[day.makable]
    used = (day.stations.flag.values == 0).sum(axis=1)
    shape = (steps, *cells.shape)
    return Fields(
        *(np.full(shape, MISSING, np.int16) for _ in range(3)),
        flag=flag.reshape(shape),
        scale_height=scale_height,
        scale_height_sigma=sigma,
        station_count=used.astype(np.int16),
        common_sigma=day.stations.common_sigma.values,
        common_relative_sigma=day.stations.common_relative_sigma.values,
    )


def _fill_piece(
    settings: Settings,
    maker: CellMaker,
    day: Day,
    hours,
    cells: Cells,
    solution: Solution,
    made: Fields,
) -> int:
    """Fill some cells of the fields; returns how many values were clipped."""
    window, model = day.window, day.model
    scale = model.scale_height[hours].astype(np.float32)[:, None]
    factor = np.exp((maker.reference - cells.points) / scale[..., None]).mean(axis=1)
    pwv = solution.lifted * factor
    variance = solution.variance * np.square(factor)
    variance *= model.variance_factor[hours].astype(np.float32)[:, None]
    height_sigma = model.scale_height_sigma[hours].astype(np.float32)[:, None] / np.square(scale)
    sigma = _sigma(
        pwv,
        variance,
        np.abs(cells.ground - solution.station_height) * height_sigma,
        _common_sigma(day, hours, pwv),
    )
    flags = _quality(window, model.values[hours], cells, sigma, settings.kriging.far_distance)
    for field, values in (
        (made.pwv, pwv),
        (made.sigma, sigma),
        (made.at_reference, solution.level),
    ):
        field.reshape(len(field), -1)[hours, cells.rows] = pack(values)
    made.flag.reshape(len(made.flag), -1)[hours, cells.rows] |= flags
    return int((pwv < 0.0).sum())


def _common_sigma(day: Day, hours, pwv):
    """Standard error (t, m) [kg m-2] that all cells of an hour share."""
    parts = (day.stations.common_sigma, day.stations.common_relative_sigma)
    constant, relative = (part.values[hours].astype(np.float32)[:, None] for part in parts)
    return common_sigma(pwv, constant, relative)


def _sigma(pwv, kriging_variance, relative_height_sigma, common):
    """Standard error [kg m-2]: kriging, the scale height over the way lifted, the common error.

    Stations are brought down and cells brought up with the same scale height, so only the height
    between a cell and the stations its value comes from suffers from its error.
    """
    return np.sqrt(kriging_variance + np.square(pwv * relative_height_sigma) + np.square(common))


def pack(values):
    """Values [kg m-2] in packed steps; below zero as zero."""
    packed = np.clip(values, 0.0, HIGHEST) * np.float32(1.0 / PACKED_STEP)
    return np.where(np.isnan(packed), MISSING, np.rint(packed)).astype(np.int16)


def _quality(window: Window, values, cells: Cells, sigma, far_distance: float):
    """Flag bits (t, m) int8 of hours with the stations' values (t, n), NaN where missing."""
    present = np.isfinite(values)
    highest = np.where(present, window.height, -np.inf).max(axis=1, keepdims=True)
    lowest = np.where(present, window.height, np.inf).min(axis=1, keepdims=True)
    ground = cells.ground
    near = (cells.distance[window.index] <= far_distance).astype(np.float32)
    found = {
        "extrapolated_in_height": (ground > highest + HEIGHT_TOLERANCE)
        | (ground < lowest - HEIGHT_TOLERANCE),
        "far_from_stations": present.astype(np.float32) @ near < 0.5,
        "sigma_above_5_kg_m2": sigma > UNUSABLE_SIGMA,
    }
    return sum(np.int8(FIELD_FLAGS[name]) * bits for name, bits in found.items())
