"""The grid that the fields lie on, in any CRS.

South row first, west column first: `y` and `x` ascend.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

import numpy as np
import pyproj

from fieldgen.errors import GridError
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

    @cached_property
    def longitude_latitude(self):
        """Longitude and latitude (ny, nx) [degrees] of the cell centres."""
        to_degrees = pyproj.Transformer.from_crs(self.crs, "EPSG:4326", always_xy=True)
        return to_degrees.transform(*np.meshgrid(self.x, self.y))

    def locate(self, longitude, latitude):
        """Grid coordinates x, y (n,) of points in degrees; not finite where the CRS fails."""
        to_grid = pyproj.Transformer.from_crs("EPSG:4326", self.crs, always_xy=True)
        return to_grid.transform(longitude, latitude)


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


def read_grid(path: Path) -> Grid:
    """Grid of a CF NetCDF file with one-dimensional coordinates, evenly spaced.

    The CRS is that of the file's grid mapping; longitude and latitude without one are WGS 84.
    """
    import xarray as xr

    try:
        check_is_file(path)
        with xr.open_dataset(path, decode_times=False) as dataset:
            x, dx = _axis(dataset, path, ("projection_x_coordinate", "longitude"), "x")
            y, dy = _axis(dataset, path, ("projection_y_coordinate", "latitude"), "y")
            if len(x) * len(y) > MOST_CELLS:
                raise GridError(
                    f"{path}: cells are {len(x)} x {len(y)}, expected at most {MOST_CELLS}."
                )
            return Grid(_file_crs(dataset, path), x, y, (dx, dy))
    except (OSError, ValueError, RuntimeError, LookupError, TypeError, AttributeError) as error:
        reason = getattr(error, "strerror", None) or " ".join(str(error).split())[:200]
        raise GridError(f"{path}: cannot be read as NetCDF: {reason}") from None


def _axis(dataset, path: Path, standard_names, letter: str):
    """Ascending cell centres and spacing of the dataset's axis."""
    axes = [
        variable
        for variable in dataset.coords.values()
        if variable.ndim == 1 and variable.attrs.get("standard_name") in standard_names
    ]
    units = [variable.attrs.get("units") for variable in axes]
    if len(axes) != 1:
        raise GridError(
            f"{path}: {len(axes)} one-dimensional {letter} coordinates, expected one with "
            f"standard_name {' or '.join(standard_names)}."
        )
    if axes[0].size > MOST_CELLS:
        raise GridError(
            f"{path}: {letter} has {axes[0].size} values, expected at most {MOST_CELLS}."
        )
    centres = np.sort(axes[0].values.astype(float)) * (1000.0 if units == ["km"] else 1.0)
    steps = np.diff(centres)
    if len(steps) < 1 or not steps.min() > 0.0 or not np.allclose(steps, steps.mean(), rtol=1e-3):
        raise GridError(f"{path}: {letter} is not evenly spaced, expected cells of equal size.")
    return centres, float(steps.mean())


def _file_crs(dataset, path: Path) -> pyproj.CRS:
    mappings = [
        variable for variable in dataset.variables.values() if "grid_mapping_name" in variable.attrs
    ]
    if not mappings:
        return pyproj.CRS.from_epsg(4326)
    try:
        return pyproj.CRS.from_cf(mappings[0].attrs)
    except (pyproj.exceptions.CRSError, KeyError) as error:
        raise GridError(f"{path}: its grid mapping cannot be understood: {error}.") from None
