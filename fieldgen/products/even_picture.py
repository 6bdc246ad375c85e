"""Fields on cells of any shape, brought to an even grid for pictures and the page."""

from __future__ import annotations

import numpy as np
import pyproj
import xarray as xr

from fieldgen.ground.cells import CellGrid
from fieldgen.ground.grid import uneven_cells
from fieldgen.quantities import QUANTITIES

LEAST_CELLS, MOST_CELLS = 20_000, 200_000
"""Of a picture: enough to see the shape of the model's cells, and for two days not more than a page
can hold."""

FINER = 3.0
"""Cells of the picture along a cell of the model, in the mean."""

MASKED = ("pwv", "pwv_sigma", "pwv_at_reference")
"""Variables that are missing outside the model's grid; the others go on as at its edge, so that
nothing draws a coast there."""


def on_even_grid(fields: xr.Dataset, where) -> xr.Dataset:
    """The same fields, each cell of the picture with the values of the model's cell that its centre
    lies in; fields on an even grid as they are.

    The picture is in the model's projection, or else in longitude and latitude. Raises GridError
    where the cells of the dataset from `where` cannot be understood.
    """
    cells = uneven_cells(fields, where)
    if cells is None:
        return fields
    crs = cells.crs if cells.is_projected else pyproj.CRS.from_epsg(4326)
    x, y = _axes(cells, crs)
    row, column, inside = _cells_at(cells, crs, *np.meshgrid(x, y))
    picture = xr.Dataset(attrs=fields.attrs, coords=_coordinates(crs, x, y))
    for name, variable in fields.variables.items():
        if "y" not in variable.dims:
            if not {"x", "bounds"} & set(variable.dims) or "time" in variable.dims:
                picture[name] = variable
        elif variable.dims[-2:] == ("y", "x") and name not in ("longitude", "latitude"):
            values = variable.values[..., row, column]
            values = np.where(inside, values, np.nan) if name in MASKED else values
            picture[name] = (variable.dims, values, variable.attrs)
    picture["crs"] = ((), 0, crs.to_cf())
    return picture


def _axes(cells: CellGrid, crs: pyproj.CRS):
    """Centres x, y of the picture's cells."""
    change = pyproj.Transformer.from_crs(cells.crs, crs, always_xy=True)
    edge_x, edge_y = change.transform(*cells.edge.T)
    west, east, south, north = min(edge_x), max(edge_x), min(edge_y), max(edge_y)
    wide = 1.0 if crs.is_projected else np.cos(np.radians((south + north) / 2))
    width, height = (east - west) * wide, north - south
    filled = max(cells.outline.area / cells.outline.envelope.area, 0.1)
    count = np.clip(np.prod(cells.shape) * FINER**2 / filled, LEAST_CELLS, MOST_CELLS)
    size = np.sqrt(width * height / count)
    nx, ny = (max(2, int(length / size)) for length in (width, height))
    return (
        west + (east - west) / nx * (np.arange(nx) + 0.5),
        south + (north - south) / ny * (np.arange(ny) + 0.5),
    )


def _cells_at(cells: CellGrid, crs: pyproj.CRS, x, y):
    """Row and column of the cells that places lie in, and whether they lie on the grid at all."""
    to_degrees = pyproj.Transformer.from_crs(crs, "EPSG:4326", always_xy=True)
    place = cells.locate(*to_degrees.transform(x.ravel(), y.ravel()))
    fraction = cells.fraction(*place)
    row, column = (
        np.clip(np.rint(part), 0, count - 1).astype(int).reshape(x.shape)
        for part, count in zip(fraction, cells.shape, strict=True)
    )
    return row, column, cells.holds(*place).reshape(x.shape)


def _coordinates(crs: pyproj.CRS, x, y) -> dict:
    if not crs.is_projected:
        names = {"x": "longitude", "y": "latitude"}
        return {
            axis: (axis, values, QUANTITIES[names[axis]].attributes())
            for axis, values in (("x", x), ("y", y))
        }
    to_degrees = pyproj.Transformer.from_crs(crs, "EPSG:4326", always_xy=True)
    longitude, latitude = to_degrees.transform(*np.meshgrid(x, y))
    return {
        "x": ("x", x), "y": ("y", y),
        "longitude": (("y", "x"), longitude), "latitude": (("y", "x"), latitude),
    }  # fmt: skip
