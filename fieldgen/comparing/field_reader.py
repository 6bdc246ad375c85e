"""Field files, and the field at any place, height and time."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pyproj
import xarray as xr

from fieldgen.errors import GridError, InputError
from fieldgen.ground.cells import CellGrid
from fieldgen.ground.grid import uneven_cells
from fieldgen.ground.overlay import corners_between
from fieldgen.quantities import PACKED_STEP

NEEDED = (
    "pwv", "pwv_sigma", "flag", "terrain", "scale_height", "scale_height_sigma", "time_bnds", "crs",
)  # fmt: skip
"""Variables of a field file that are used."""

ATTRIBUTES = {"crs": "crs_wkt", "flag": "flag_masks"}
"""Attributes of variables that are used."""


class Sample(NamedTuple):
    """The field at places (n,).

    pwv, sigma [kg m-2], NaN where the field is missing; flag : bits of all cells used
    """

    pwv: np.ndarray
    sigma: np.ndarray
    flag: np.ndarray


class Corners(NamedTuple):
    """The four cells around places (n,): rows and columns (4, n) and weights (4, n)."""

    row: np.ndarray
    column: np.ndarray
    weight: np.ndarray

    def of(self, places) -> Corners:
        """The corners of some of the places."""
        return Corners(*(part[:, places] for part in self))


@dataclass(frozen=True)
class FieldFile:
    """One file of fields, opened."""

    path: Path
    dataset: xr.Dataset

    @cached_property
    def cells(self) -> CellGrid | None:
        """Its cells where they are not evenly spaced; None where they are."""
        return uneven_cells(self.dataset, self.path)

    @property
    def places(self):
        """Coordinates x and y of the cells, one- or two-dimensional."""
        grid = self.dataset if self.cells is None else self.cells
        return np.asarray(grid.x), np.asarray(grid.y)

    @property
    def grid_variables(self) -> list[str]:
        """Names of the variables, beside coordinates, that tell where the cells are."""
        names = ("crs", "x_bnds", "y_bnds", "longitude_bnds", "latitude_bnds")
        return [name for name in names if name in self.dataset.variables]

    @property
    def cell_corners(self):
        """Corners x, y (ny, nx, 4) of the cells in the grid's CRS, in turn."""
        if self.cells is not None:
            return self.cells.corner_x, self.cells.corner_y
        return corners_between(self.dataset.x_bnds.values, self.dataset.y_bnds.values)

    def check_even(self, what: str) -> None:
        """Raise GridError if the cells are not evenly spaced, which `what` needs."""
        if self.cells is not None:
            raise GridError(f"{self.path}: its grid is uneven; {what} needs an evenly spaced grid.")

    @cached_property
    def steps(self):
        """Start and end (t,) datetime64[s] of each step."""
        return self.dataset.time_bnds.values.astype("datetime64[s]").T

    @property
    def flag_meanings(self) -> dict[str, int]:
        """Bits of the flag by their name."""
        attributes = self.dataset.flag.attrs
        masks = np.atleast_1d(attributes["flag_masks"]).tolist()
        return dict(zip(attributes["flag_meanings"].split(), masks, strict=True))

    @cached_property
    def terrain(self):
        """Mean height (ny, nx) [m] of the cells."""
        return self.dataset.terrain.values.astype(float)

    @property
    def crs(self) -> pyproj.CRS:
        """The grid's CRS."""
        return pyproj.CRS.from_wkt(self.dataset.crs.attrs["crs_wkt"])

    @cached_property
    def longitude_latitude(self):
        """Longitude and latitude (ny, nx) [degrees] of the cell centres."""
        if self.cells is not None:
            return self.cells.longitude_latitude
        to_degrees = pyproj.Transformer.from_crs(self.crs, "EPSG:4326", always_xy=True)
        return to_degrees.transform(*np.meshgrid(self.dataset.x.values, self.dataset.y.values))

    def corners(self, longitude, latitude) -> tuple[Corners, np.ndarray]:
        """Cells around places (n,) [degrees], and whether the places lie on the grid (n,).

        Between the outermost centres and the grid's edge the outermost cells count alone.
        """
        row, column, inside = self._fraction(longitude, latitude)
        count_y, count_x = self.terrain.shape
        low_column, right = _split(column, count_x)
        low_row, upper = _split(row, count_y)
        return Corners(
            np.stack([low_row, low_row, low_row + 1, low_row + 1]),
            np.stack([low_column, low_column + 1, low_column, low_column + 1]),
            np.stack([(1 - upper) * (1 - right), (1 - upper) * right,
                      upper * (1 - right), upper * right]),
        ), inside  # fmt: skip

    def _fraction(self, longitude, latitude):
        """Row and column (n,) of places, counted in cells from the first centre, and whether they
        lie on the grid."""
        if self.cells is not None:
            x, y = self.cells.locate(longitude, latitude)
            return *self.cells.fraction(x, y), self.cells.holds(x, y)
        crs = self.crs
        to_grid = pyproj.Transformer.from_crs("EPSG:4326", crs, always_xy=True)
        x, y = to_grid.transform(longitude, latitude)
        columns, rows = self.dataset.x.values, self.dataset.y.values
        if not crs.is_projected:  # the grid may count longitudes from 0 to 360
            x = columns.mean() + (np.asarray(x) - columns.mean() + 180.0) % 360.0 - 180.0
        column, row = _fractional(columns, x), _fractional(rows, y)
        return row, column, _within(column, len(columns)) & _within(row, len(rows))

    def terrain_at(self, corners: Corners):
        """Height of the terrain (n,) [m] between cells."""
        return (corners.weight * self.terrain[corners.row, corners.column]).sum(axis=0)

    def sample(self, step: int, corners: Corners, height) -> Sample:
        """The field of one step at places and heights (n,) [m].

        Each cell's value is brought from its terrain to the height with the step's scale height,
        and the logarithms are interpolated. The error bar is the cells' own, brought along, and
        the scale height's error over the way between the terrain and the height.
        """
        cells = self.dataset.isel(time=step)
        scale = float(cells.scale_height)
        at = corners.row, corners.column
        pwv, sigma, flag = (cells[name].values[at] for name in ("pwv", "pwv_sigma", "flag"))
        lift = (self.terrain[at] - height) / scale
        counts = corners.weight > 0.0
        logarithm = np.log(np.maximum(pwv, PACKED_STEP)) + lift
        value = np.exp(_weighted(corners, logarithm))
        own = _weighted(corners, sigma * np.exp(lift))
        way = np.abs(self.terrain_at(corners) - height)
        total = np.hypot(own, value * way * float(cells.scale_height_sigma) / scale**2)
        bits = np.bitwise_or.reduce(np.where(counts, flag.astype(int), 0), axis=0)
        return Sample(value, total, bits)


def _weighted(corners: Corners, values):
    """Weighted sum (n,) of values (4, n); a missing value counts only where it has weight."""
    return np.where(corners.weight > 0.0, corners.weight * values, 0.0).sum(axis=0)


def _fractional(axis, place):
    """Place (n,) counted in cells from the first centre of an even axis."""
    return (np.asarray(place) - axis[0]) / (axis[-1] - axis[0]) * (len(axis) - 1)


def _within(fraction, count: int):
    return (fraction >= -0.5) & (fraction <= count - 0.5)


def _split(fraction, count: int):
    """Lower cell (n,) and share (n,) of the upper one, within the outermost centres."""
    fraction = np.clip(np.nan_to_num(fraction, nan=0.0, posinf=0.0, neginf=0.0), 0.0, count - 1.0)
    low = np.minimum(fraction.astype(int), count - 2)
    return low, fraction - low


def open_fields(paths) -> list[FieldFile]:
    """Field files in the order of their time.

    Raises InputError for a file that is no field file, for different grids, and for steps that
    stand in two files.
    """
    files = sorted((_open(Path(path)) for path in paths), key=lambda one: one.steps[0, 0])
    for earlier, later in pairwise(files):
        _check_together(earlier, later)
    return files


def _open(path: Path) -> FieldFile:
    try:
        dataset = xr.open_dataset(path)
    except (OSError, ValueError, RuntimeError) as error:
        reason = getattr(error, "strerror", None) or "it is not NetCDF"
        raise InputError(f"{path}: cannot be read: {reason}.") from None
    _check_content(path, dataset)
    return FieldFile(path, dataset)


def _check_content(path: Path, dataset: xr.Dataset) -> None:
    missing = [f"variable {name}" for name in NEEDED if name not in dataset.variables]
    missing = missing or [
        f"attribute {attribute} of {name}"
        for name, attribute in ATTRIBUTES.items()
        if attribute not in dataset[name].attrs
    ]
    if missing:
        raise InputError(f"{path}: {missing[0]} is missing, expected a file of fields.")
    if not dataset.time_bnds.size:
        raise InputError(f"{path}: steps are 0, expected at least 1.")


def _check_together(earlier: FieldFile, later: FieldFile) -> None:
    for one, other in zip(earlier.places, later.places, strict=True):
        if one.shape != other.shape or not np.allclose(one, other):
            raise InputError(
                f"{later.path}: its grid differs from that of {earlier.path}, expected the same."
            )
    if later.steps[0, 0] < earlier.steps[1, -1]:
        raise InputError(
            f"{later.path}: its first step lies within {earlier.path}, expected each step in one "
            "file. Name each file once."
        )


def matching_steps(files: list[FieldFile], time) -> Iterator[tuple[FieldFile, int, np.ndarray]]:
    """File, step and which of the times (n,) datetime64[s] lie in it, for steps that hold any.

    A step holds its end and not its start.
    """
    for one in files:
        for step, (start, end) in enumerate(one.steps.T):
            inside = (time > start) & (time <= end)
            if inside.any():
                yield one, step, np.flatnonzero(inside)
