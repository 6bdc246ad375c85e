"""A day's model -> its fields on the grid: krige at the reference height, lift with the terrain."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields

import numpy as np

from fieldgen.analysis import Day, Model, Window
from fieldgen.ground.grid import Grid
from fieldgen.ground.terrain import Terrain
from fieldgen.kriging.covariance import distances
from fieldgen.kriging.pykrige_engine import krige_hours_with_pykrige
from fieldgen.kriging.solver import Places, krige_hours
from fieldgen.settings import Settings

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

HEIGHT_TOLERANCE = 50.0
"""Terrain this far [m] beyond the highest or lowest station of the hour is extrapolated."""

CELLS_AT_ONCE = 100_000
"""Cells whose weights are held in memory together."""

ENGINES: dict[str, Callable] = {"fieldgen": krige_hours, "pykrige": krige_hours_with_pykrige}


@dataclass
class Fields:
    """Fields of one day, float32, NaN where missing.

    pwv, sigma, at_reference : (t, ny, nx) [kg m-2], flag : (t, ny, nx) uint8
    scale_height : (t,) [m], station_count : (t,), clipped : cells below zero, written as zero
    """

    pwv: np.ndarray
    sigma: np.ndarray
    at_reference: np.ndarray
    flag: np.ndarray
    scale_height: np.ndarray
    station_count: np.ndarray
    clipped: int = 0


def join_fields(parts: list[Fields]) -> Fields:
    """Fields of several days, one after the other."""
    arrays = {
        one.name: np.concatenate([getattr(part, one.name) for part in parts])
        for one in fields(Fields)
        if one.name != "clipped"
    }
    return Fields(**arrays, clipped=sum(part.clipped for part in parts))


def make_fields_of_day(settings: Settings, grid: Grid, terrain: Terrain, day: Day) -> Fields:
    """Fields of one day; hours with too few stations are NaN and flagged."""
    made = _empty(day, grid)
    flat = {
        name: getattr(made, name).reshape(len(day.makable), -1)
        for name in ("pwv", "sigma", "at_reference", "flag")
    }
    longitude, latitude = (part.ravel() for part in grid.longitude_latitude)
    points = terrain.points.reshape(len(terrain.points), -1)
    flat["flag"] |= np.where(terrain.is_sea.ravel(), FIELD_FLAGS["sea"], 0).astype(np.uint8)
    flat["flag"][~day.makable] |= FIELD_FLAGS["too_few_stations"]
    if not day.makable.any():
        return made
    for start in range(0, points.shape[1], CELLS_AT_ONCE):
        cells = slice(start, start + CELLS_AT_ONCE)
        targets = day.window.maker.places(longitude[cells], latitude[cells])
        piece = {name: array[:, cells] for name, array in flat.items()}
        made.clipped += _make_piece(settings, day, targets, points[:, cells], piece)
    return made


def _empty(day: Day, grid: Grid) -> Fields:
    shape = (len(day.makable), *grid.shape)
    scale_height = np.full(shape[0], np.nan)
    if day.model is not None:
        scale_height[day.makable] = day.model.scale_height[day.makable]
    used = (day.stations.flag.values == 0).sum(axis=1)
    return Fields(
        *(np.full(shape, np.nan, np.float32) for _ in range(3)),
        flag=np.zeros(shape, np.uint8),
        scale_height=scale_height,
        station_count=used.astype(np.int16),
    )


def _make_piece(settings: Settings, day: Day, targets: Places, points, piece) -> int:
    """Fill the cells of a piece (t, m) of the fields; returns how many values were clipped."""
    hours = np.flatnonzero(day.makable)
    window, model = day.window, day.model
    values = model.values[hours]
    gaps = [model.gaps[hour] for hour in hours]
    engine = ENGINES[settings.kriging.engine]
    reference, variance = engine(model.kriging, targets, values, gaps)
    lifted = _lifted_height(window, model, targets, points)
    clipped = 0
    for row, hour in enumerate(hours):
        factor = _mean_factor(points, window.reference_height, model.scale_height[hour])
        pwv = reference[row] * factor
        height_sigma = (
            pwv * lifted * (model.scale_height_sigma[hour] / model.scale_height[hour] ** 2)
        )
        sigma = np.hypot(np.sqrt(np.maximum(variance[row], 0.0)) * factor, height_sigma)
        clipped += int((pwv < 0).sum())
        piece["pwv"][hour] = np.maximum(pwv, 0.0)
        piece["sigma"][hour] = sigma
        piece["at_reference"][hour] = np.maximum(reference[row], 0.0)
        piece["flag"][hour] |= _quality(settings, window, values[row], targets, points, sigma)
    return clipped


def _mean_factor(points, reference_height: float, scale_height: float):
    """Mean over each cell's points (k, m) of PWV(h)/PWV(reference), not that of the mean height."""
    return np.exp((reference_height - points) / np.float32(scale_height)).mean(axis=0)


def _lifted_height(window: Window, model: Model, targets: Places, points):
    """Height (m,) [m] between each cell and the stations that its value comes from.

    Stations are brought down and cells brought up with the same scale height, so only the
    difference to the kriged height of the stations suffers from its error.
    """
    weights = model.kriging.weights(targets)
    return np.abs(points.mean(axis=0) - window.height.astype(np.float32) @ weights.values)


def _quality(settings: Settings, window: Window, values, targets: Places, points, sigma):
    """Flag bits (m,) of one hour."""
    used = np.isfinite(values)
    height, ground = window.height[used], points.mean(axis=0)
    beyond = (ground > height.max() + HEIGHT_TOLERANCE) | (ground < height.min() - HEIGHT_TOLERANCE)
    near = distances(window.places.positions[used], targets.positions).min(axis=0)
    far = near > settings.kriging.far_distance
    return (
        FIELD_FLAGS["extrapolated_in_height"] * beyond
        + FIELD_FLAGS["far_from_stations"] * far
        + FIELD_FLAGS["sigma_above_5_kg_m2"] * (sigma > UNUSABLE_SIGMA)
    ).astype(np.uint8)
