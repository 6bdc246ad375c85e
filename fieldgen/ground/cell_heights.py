"""Heights of a raster at points within cells of any shape."""

from __future__ import annotations

import numpy as np
import pyproj
from rasterio.enums import Resampling
from rasterio.windows import Window
from scipy.ndimage import map_coordinates

from fieldgen.ground.cells import CellGrid

MOST_PIXELS = 50_000_000
"""Pixels of the raster that are held at once; a larger part of it is averaged while it is read."""

POINTS_AT_ONCE = 2_000_000

LEAST_ALONG = 2
"""Pixels along a part of a cell that are left when the raster is averaged: one alone would bring
in too much of the cells beside it."""

MOST_INNER = 8
"""Along each side of a part of a cell: 64 points tell the mean of a part that holds many pixels."""


def bounds_in(raster, grid: CellGrid):
    """Edges west, south, east, north of the grid in the raster's CRS; not finite where it fails."""
    x, y = _to_raster(raster, grid, *_dense(grid.edge))
    return x.min(), y.min(), x.max(), y.max()


def heights_in_cells(raster, grid: CellGrid, side: int, gap: float):
    """Heights (side * side, ny, nx) of the equal parts of each cell, those of gaps given.

    Each is the mean over points at most a pixel apart (an eighth of the part, at least), bilinear
    between the pixels of the raster, which are averaged first where all parts hold several.
    """
    ny, nx = grid.shape
    smallest = min(_part_sizes(raster, grid, rows, side).min() for rows in _samples(ny))
    window = _window_around(raster, grid)
    fits = np.sqrt(window.width * window.height / MOST_PIXELS)
    factor = max(1.0, np.floor(smallest / LEAST_ALONG), fits)
    pixels = _Pixels(raster, window, factor)
    heights = np.empty((side * side, ny, nx), np.float32)
    inner = MOST_INNER
    at_once = max(1, POINTS_AT_ONCE // (nx * (side * inner) ** 2))
    for first in range(0, ny, at_once):
        rows = slice(first, min(first + at_once, ny))
        largest = _part_sizes(raster, grid, rows, side).max() / factor
        inner = int(np.clip(np.round(largest), 1, MOST_INNER))
        x, y = grid.points(rows, side * inner)
        shape = (side, inner, side, inner, *x.shape[2:])
        some = pixels.mean_of_parts(*_to_raster(raster, grid, x, y), shape)
        heights[:, rows] = some.reshape(side * side, *x.shape[2:])
    return np.nan_to_num(heights, nan=gap)


class _Pixels:
    """A window of a raster, averaged by a factor."""

    def __init__(self, raster, window: Window, factor: float):
        shape = tuple(max(1, round(size / factor)) for size in (window.height, window.width))
        read = raster.read(
            1, window=window, out_shape=shape, resampling=Resampling.average, masked=True
        ).astype(np.float32)
        values = read.filled(np.nan)
        self.valid = np.isfinite(values).astype(np.float32)
        self.values = np.nan_to_num(values, nan=0.0)
        self.transform = ~raster.transform
        self.corner = window.col_off, window.row_off
        self.scale = window.width / shape[1], window.height / shape[0]

    def mean_of_parts(self, x, y, shape):
        """Mean (side, side, k, nx) over the inner points; gaps do not count, NaN where all are."""
        column, row = (
            (part - corner) / scale - 0.5
            for part, corner, scale in zip(
                _pixel_of(self.transform, x, y), self.corner, self.scale, strict=True
            )
        )
        place = np.stack([row.ravel(), column.ravel()])
        value, weight = (
            map_coordinates(part, place, order=1, mode="nearest").reshape(shape).sum(axis=(1, 3))
            for part in (self.values, self.valid)
        )
        return np.where(weight > 0.0, value / np.where(weight > 0.0, weight, 1.0), np.nan)


def _to_raster(raster, grid: CellGrid, x, y):
    """Coordinates of the raster; longitudes are counted from its western edge."""
    change = pyproj.Transformer.from_crs(grid.crs, raster.crs.to_wkt(), always_xy=True)
    x, y = (np.asarray(part) for part in change.transform(x, y))
    if raster.crs.is_geographic:
        west = min(raster.bounds.left, raster.bounds.right)
        slack = abs(raster.res[0]) * 1.5
        x = west - slack + (x - west + slack) % 360.0
    return x, y


def _pixel_of(transform, x, y):
    """Column and row, counted from the raster's corner."""
    return (
        transform.a * x + transform.b * y + transform.c,
        transform.d * x + transform.e * y + transform.f,
    )


def _part_sizes(raster, grid: CellGrid, rows: slice, side: int):
    """Pixels (4, k, nx) along the sides of the parts of some rows' cells."""
    corners = _to_raster(raster, grid, grid.corner_x[rows], grid.corner_y[rows])
    column, row = _pixel_of(~raster.transform, *corners)
    along = [np.hypot(column[..., i] - column[..., i - 1], row[..., i] - row[..., i - 1])
             for i in range(4)]  # fmt: skip
    return np.stack(along) / side


def _samples(count: int) -> list[slice]:
    """A hundred single rows at most, spread over all."""
    return [slice(row, row + 1) for row in np.unique(np.linspace(0, count - 1, 100).astype(int))]


def _dense(edge):
    """Points x, y along the edge, ten to a side: it is not straight in another CRS."""
    closed = np.concatenate([edge, edge[:1]])
    place = np.linspace(0.0, len(edge), 10 * len(edge) + 1)
    return tuple(np.interp(place, np.arange(len(closed)), part) for part in closed.T)


def _window_around(raster, grid: CellGrid) -> Window:
    """The part of the raster that the grid needs, two pixels more on each side."""
    column, row = _pixel_of(~raster.transform, *_to_raster(raster, grid, *_dense(grid.edge)))
    first_column, last_column = (
        int(np.clip(edge, 0, raster.width)) for edge in (column.min() - 2, column.max() + 3)
    )
    first_row, last_row = (
        int(np.clip(edge, 0, raster.height)) for edge in (row.min() - 2, row.max() + 3)
    )
    return Window(first_column, first_row, last_column - first_column, last_row - first_row)
