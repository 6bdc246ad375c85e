"""The grid that the fields lie on, in any CRS: evenly spaced, or cells of any shape.

`Grid` and `cells.CellGrid` have in common: crs, shape, is_even, is_projected, description,
identity, longitude_latitude, contains. Along axes `y` and `x` ascend: south row first, west column
first.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

import numpy as np
import pyproj

from fieldgen.errors import GridError
from fieldgen.ground.cells import CellGrid
from fieldgen.ground.cf_grid import (
    axis_of,
    cells_of_axes,
    file_crs,
    has_axes,
    read_axis,
    read_cells,
)
from fieldgen.input_files import check_is_file
from fieldgen.settings import MOST_CELLS


@dataclass(frozen=True)
class Grid:
    """Cells of equal size in a CRS.

    x (nx,), y (ny,) : cell centres, ascending; spacing: (dx, dy), units of the CRS
    """

    crs: pyproj.CRS
    x: np.ndarray
    y: np.ndarray
    spacing: tuple[float, float]

    @classmethod
    def between(cls, crs, west, south, east, north, spacing) -> Grid:
        """Grid of square cells between outer edges; the edges are whole spacings apart."""
        nx, ny = round((east - west) / spacing), round((north - south) / spacing)
        x = west + spacing * (np.arange(nx) + 0.5)
        y = south + spacing * (np.arange(ny) + 0.5)
        return cls(read_crs(crs, "grid.crs"), x, y, (spacing, spacing))

    @property
    def is_even(self) -> bool:
        """Whether all cells are alike, in rows and columns of the CRS."""
        return True

    @property
    def shape(self) -> tuple[int, int]:
        """(ny, nx)."""
        return len(self.y), len(self.x)

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """Outer edges west, south, east, north."""
        dx, dy = self.spacing
        return (
            self.x[0] - dx / 2, self.y[0] - dy / 2, self.x[-1] + dx / 2, self.y[-1] + dy / 2
        )  # fmt: skip

    @property
    def is_projected(self) -> bool:
        """Whether x and y are lengths rather than degrees."""
        return self.crs.is_projected

    @property
    def description(self) -> str:
        """Size of the cells and CRS, for people."""
        return f"cells of {self.spacing[0]:g} in {self.crs.name}"

    @property
    def identity(self) -> bytes:
        """What tells the grid from another."""
        return repr((self.crs.to_wkt(), self.bounds, self.shape)).encode()

    @property
    def axis_bounds(self) -> tuple[np.ndarray, np.ndarray]:
        """Contiguous bounds (nx, 2) of the columns and (ny, 2) of the rows."""
        dx, dy = self.spacing
        return _contiguous(self.x, dx), _contiguous(self.y, dy)

    @cached_property
    def longitude_latitude(self):
        """Longitude and latitude (ny, nx) [degrees] of the cell centres."""
        to_degrees = pyproj.Transformer.from_crs(self.crs, "EPSG:4326", always_xy=True)
        return to_degrees.transform(*np.meshgrid(self.x, self.y))

    def locate(self, longitude, latitude):
        """Grid coordinates x, y (n,) of points in degrees; not finite where the CRS fails."""
        to_grid = pyproj.Transformer.from_crs("EPSG:4326", self.crs, always_xy=True)
        return to_grid.transform(longitude, latitude)

    def contains(self, longitude, latitude):
        """Whether points (n,) [degrees] lie on the grid."""
        x, y = (np.asarray(part) for part in self.locate(longitude, latitude))
        west, south, east, north = self.bounds
        return (x >= west) & (x <= east) & (y >= south) & (y <= north)


def _contiguous(centres, spacing: float):
    """Bounds (n, 2)."""
    edges = np.append(centres - spacing / 2, centres[-1] + spacing / 2)
    return np.stack([edges[:-1], edges[1:]], axis=1)


def read_crs(text: str, where: str) -> pyproj.CRS:
    """CRS from a text that names it; raises GridError that names `where` it stands."""
    shown = repr(text[:80])
    try:
        crs = pyproj.CRS.from_user_input(text)
    except (pyproj.exceptions.CRSError, ValueError, TypeError):
        raise GridError(f'{where}: is {shown}, expected a CRS such as "EPSG:32626".') from None
    if not (crs.is_projected or crs.is_geographic):
        raise GridError(f"{where}: is {shown}, expected a projected or geographic CRS.")
    return crs


def read_grid(path: Path) -> Grid | CellGrid:
    """Grid of a CF NetCDF file: along one-dimensional coordinates, even or not, or of cells whose
    longitudes and latitudes the file lists.

    The CRS is that of the file's grid mapping; longitude and latitude without one are WGS 84.
    Raises GridError.
    """
    import xarray as xr

    try:
        check_is_file(path)
        with xr.open_dataset(path, decode_times=False) as dataset:
            return grid_of(dataset, path)
    except (OSError, ValueError, RuntimeError, LookupError, TypeError, AttributeError) as error:
        reason = getattr(error, "strerror", None) or " ".join(str(error).split())[:200]
        raise GridError(f"{path}: cannot be read as NetCDF: {reason}") from None


def grid_of(dataset, where) -> Grid | CellGrid:
    """The same of an opened dataset; errors name `where` it comes from."""
    if not has_axes(dataset):
        return read_cells(dataset, where)
    x, y = (read_axis(dataset, where, letter) for letter in "xy")
    if len(x.centres) * len(y.centres) > MOST_CELLS:
        raise GridError(
            f"{where}: cells are {len(x.centres)} x {len(y.centres)}, expected at most "
            f"{MOST_CELLS}."
        )
    crs = file_crs(dataset, where)
    _check_kind(crs, x.name, where)
    if x.even and y.even and not x.name.startswith("grid_"):
        steps = (float(np.diff(axis.centres).mean()) for axis in (x, y))
        return Grid(crs, x.centres, y.centres, tuple(steps))
    return cells_of_axes(crs, x, y)


def _check_kind(crs: pyproj.CRS, name: str, where) -> None:
    """Coordinates on a plane or a turned globe mean nothing without the CRS that they belong to."""
    needed = {"projection_x_coordinate": crs.is_projected, "grid_longitude": crs.is_derived}
    if not needed.get(name, True):
        raise GridError(
            f"{where}: its grid mapping is {crs.name}, expected one that fits {name}. Add a "
            "grid_mapping variable to the file."
        )


def uneven_cells(fields, where) -> CellGrid | None:
    """Cells of a dataset of fields; None where they are evenly spaced along x and y.

    Of cells that x and y do not tell, being rows and columns, the file lists the corners.
    """
    if "longitude" in fields.variables and "bounds" in fields["longitude"].attrs:
        return grid_of(fields, where)
    if "x" in fields.variables and "y" in fields.variables:
        axes = [axis_of(fields, where, fields[letter], letter) for letter in "xy"]
        if all(axis.even and not axis.name.startswith("grid_") for axis in axes):
            return None
    return grid_of(fields, where)
