"""The terrain under each cell, at several points of the cell, and at the stations."""

from __future__ import annotations

from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import rasterio
from rasterio._err import CPLE_BaseError
from rasterio.enums import Resampling
from rasterio.transform import from_bounds
from rasterio.warp import reproject, transform_bounds

from fieldgen.errors import GridError, InputError
from fieldgen.ground.cell_heights import bounds_in, heights_in_cells
from fieldgen.ground.cells import CellGrid
from fieldgen.ground.grid import Grid
from fieldgen.input_files import check_is_file

MOST_POINTS = 4
"""Points along each side of a cell: 16 points describe its relief well enough for the mean of an
exponential, and more would only cost memory."""

SEA_LEVEL = 0.0
"""Height [m] of the sea, and of what the raster leaves out."""


HIGHEST_LAND = 9000.0
"""No land [m] is higher; what is, stands for none and the file does not say so."""

_RASTER_ERRORS = (OSError, rasterio.errors.RasterioError, CPLE_BaseError, ValueError, MemoryError)
"""What reading a damaged or foreign raster may raise."""


@dataclass(frozen=True)
class Terrain:
    """Orthometric heights [m] of the ground.

    points (k, ny, nx) : heights at k points spread evenly over each cell; gaps are 0
    is_sea (ny, nx) : cells without any land
    """

    points: np.ndarray
    is_sea: np.ndarray

    @property
    def mean(self):
        """Mean height (ny, nx) [m] of each cell."""
        return self.points.mean(axis=0)

    @property
    def sd(self):
        """Standard deviation (ny, nx) [m] of the heights within each cell."""
        return self.points.std(axis=0)


def read_terrain(path: Path, grid: Grid | CellGrid, lowest_land: float = SEA_LEVEL) -> Terrain:
    """Terrain of a raster file (GeoTIFF, NetCDF or another format of GDAL) under a grid.

    What lies at `lowest_land` [m] or below is sea, at height 0 however deep it is.

    Raises InputError if the file cannot be read, GridError if it does not cover the grid.
    """
    with _raster(path, "terrain") as raster:
        _check_covers(raster, path, grid)
        if grid.is_even:
            points = _even_heights(raster, grid)
        else:
            points = heights_in_cells(raster, grid, MOST_POINTS, SEA_LEVEL)
    if not points.max() <= HIGHEST_LAND:
        raise InputError(
            f"{path}: the terrain is {points.max():.7g} m, expected at most {HIGHEST_LAND:g} m. "
            "Name the value that stands for none in the file."
        )
    sea = points <= lowest_land
    return Terrain(np.where(sea, np.float32(SEA_LEVEL), points), sea.all(axis=0))


def _even_heights(raster, grid: Grid):
    """Heights (k, ny, nx) at points spread evenly over cells of equal size."""
    side = min(_pixels_per_cell(raster, grid), MOST_POINTS)
    fine = _resample(raster, grid, max(round(side), 1), finer=side >= 1)
    ny, nx = grid.shape
    side = len(fine) // ny
    return fine.reshape(ny, side, nx, side).transpose(1, 3, 0, 2).reshape(-1, ny, nx)


def read_raster_at(path: Path, longitude, latitude, what: str):
    """Values (n,) of a raster at points [degrees], bilinear; NaN outside it and near its gaps."""
    with _raster(path, what) as raster:
        return _sample(raster, np.asarray(longitude), np.asarray(latitude))


@contextmanager
def _raster(path: Path, what: str):
    """An open raster that has a CRS and a band; InputError where it cannot be read."""
    try:
        check_is_file(path)
        with rasterio.open(path) as raster:
            if raster.crs is None:
                raise InputError(f"{path}: the {what} file names no CRS. Write one into the file.")
            if not raster.count:
                raise InputError(f"{path}: the {what} file has no band, expected one of heights.")
            yield raster
    except _RASTER_ERRORS as error:
        reason = getattr(error, "strerror", None) or " ".join(str(error).split())[:200]
        raise InputError(f"{path}: the {what} file cannot be read as a raster: {reason}.") from None


def _check_covers(raster, path: Path, grid: Grid | CellGrid) -> None:
    """The grid's cells must lie inside the raster; its resolution is allowed as slack."""
    if grid.is_even:
        bounds = transform_bounds(grid.crs.to_wkt(), raster.crs, *grid.bounds, densify_pts=21)
    else:
        bounds = bounds_in(raster, grid)
    if not np.isfinite(bounds).all():
        raise GridError(
            f"grid: its edges have no place in {grid.crs.name}. Check grid.crs and the edges."
        )
    slack = 1.5 * max(abs(size) for size in raster.res)
    box = raster.bounds
    if (
        bounds[0] < box.left - slack
        or bounds[1] < box.bottom - slack
        or bounds[2] > box.right + slack
        or bounds[3] > box.top + slack
    ):
        needed = ", ".join(f"{edge:.6g}" for edge in bounds)
        held = ", ".join(f"{edge:.6g}" for edge in box)
        raise GridError(
            f"{path}: the terrain does not cover the grid: west, south, east, north {held}, "
            f"expected at least {needed} (units of the terrain file)."
        )


def _pixels_per_cell(raster, grid: Grid) -> float:
    """Pixels of the raster along the side of a cell."""
    west, south, east, north = transform_bounds(
        grid.crs.to_wkt(), raster.crs, *grid.bounds, densify_pts=21
    )
    pixels = np.hypot((east - west) / raster.res[0], (north - south) / raster.res[1])
    return float(pixels / np.hypot(*grid.shape))


def _resample(raster, grid: Grid, side: int, *, finer: bool):
    """Heights (ny * side, nx * side), south row first."""
    ny, nx = grid.shape
    heights = np.zeros((ny * side, nx * side), np.float32)
    reproject(
        rasterio.band(raster, 1),
        heights,
        dst_transform=from_bounds(*grid.bounds, nx * side, ny * side),
        dst_crs=grid.crs.to_wkt(),
        dst_nodata=np.nan,
        resampling=Resampling.average if finer else Resampling.bilinear,
    )
    return np.nan_to_num(heights, nan=SEA_LEVEL)[::-1]


def _sample(raster, longitude, latitude):
    """Bilinear values of band 1, read pixel by pixel: a raster may be larger than the memory."""
    import pyproj

    to_raster = pyproj.Transformer.from_crs("EPSG:4326", raster.crs, always_xy=True)
    x, y = to_raster.transform(longitude, latitude)
    around_the_globe = raster.crs.is_geographic and raster.width * raster.res[0] > 359.999
    if raster.crs.is_geographic:  # longitudes may run from -180 or from 0
        x = raster.bounds.left + (np.asarray(x) - raster.bounds.left) % 360.0
    row, column = rasterio.transform.rowcol(raster.transform, x, y, op=lambda position: position)
    column, row = np.asarray(column) - 0.5, np.asarray(row) - 0.5
    inside = (
        np.isfinite(column) & (column > -1) & (column < raster.width)
        & np.isfinite(row) & (row > -1) & (row < raster.height)
    )  # fmt: skip
    values = np.full(len(column), np.nan)
    for index in np.flatnonzero(inside):
        values[index] = _bilinear(raster, row[index], column[index], around_the_globe)
    return values


def _bilinear(raster, row: float, column: float, around_the_globe: bool) -> float:
    """Value between the four pixels around a place; at the edge the outermost ones count alone."""
    rows, lower = _neighbours(row, raster.height)
    columns, right = _neighbours(column, raster.width)
    if around_the_globe and column > raster.width - 1:  # the last column borders on the first
        columns, right = (raster.width - 1, 0), column - (raster.width - 1)
    corners = np.array([[_pixel(raster, y, x) for x in columns] for y in rows])
    return float(np.array([1.0 - lower, lower]) @ corners @ np.array([1.0 - right, right]))


def _neighbours(place: float, count: int) -> tuple[tuple[int, int], float]:
    """The two pixels around a place counted from the first centre, and the share of the second."""
    place = min(max(place, 0.0), count - 1.0)
    first = int(place)
    return (first, min(first + 1, count - 1)), place - first


def _pixel(raster, row: int, column: int) -> float:
    window = rasterio.windows.Window(column, row, 1, 1)
    return float(raster.read(1, window=window, masked=True).astype(float).filled(np.nan)[0, 0])
