"""The coordinates and bounds of a grid in a CF dataset, as arrays."""

from __future__ import annotations

from itertools import permutations
from typing import NamedTuple

import numpy as np
import pyproj

from fieldgen.errors import GridError
from fieldgen.ground.cells import CellGrid, check_cells, corners_of_nodes, near, nodes_between
from fieldgen.settings import MOST_CELLS

AXIS_NAMES = {
    "x": ("projection_x_coordinate", "longitude", "grid_longitude"),
    "y": ("projection_y_coordinate", "latitude", "grid_latitude"),
}
"""Standard names of one-dimensional coordinates."""

DEGREES = {
    "longitude": ("degrees_east", "degree_east", "degree_E", "degrees_E", "degreeE", "degreesE"),
    "latitude": ("degrees_north", "degree_north", "degree_N", "degrees_N", "degreeN", "degreesN"),
}
"""Units that make a coordinate a longitude or latitude, CF 4.1 and 4.2."""

EVEN = 1e-3
"""Share of a spacing by which steps of an even axis may differ; bounds ten times that."""


class Axis(NamedTuple):
    """A one-dimensional coordinate, ascending.

    name : its standard name; centres (n,), bounds (n, 2); even : whether all cells are alike
    """

    name: str
    centres: np.ndarray
    bounds: np.ndarray
    even: bool


def has_axes(dataset) -> bool:
    """Whether the dataset has one-dimensional coordinates of a grid."""
    return any(_axes(dataset, letter) for letter in AXIS_NAMES)


def _axes(dataset, letter: str):
    return [
        variable
        for variable in dataset.coords.values()
        if variable.ndim == 1 and variable.attrs.get("standard_name") in AXIS_NAMES[letter]
    ]


def read_axis(dataset, where, letter: str) -> Axis:
    """The dataset's axis x or y. Raises GridError."""
    axes = _axes(dataset, letter)
    if len(axes) != 1:
        raise GridError(
            f"{where}: {len(axes)} one-dimensional {letter} coordinates, expected one with "
            f"standard_name {' or '.join(AXIS_NAMES[letter])}."
        )
    variable = axes[0]
    if not 2 <= variable.size <= MOST_CELLS:
        raise GridError(
            f"{where}: {letter} has {variable.size} values, expected at least 2 and at most "
            f"{MOST_CELLS}."
        )
    return axis_of(dataset, where, variable, letter)


def axis_of(dataset, where, variable, letter: str) -> Axis:
    """Axis of a coordinate variable. Raises GridError."""
    factor = 1000.0 if variable.attrs.get("units") == "km" else 1.0
    centres = variable.values.astype(float) * factor
    name = variable.attrs.get("standard_name", "")
    if not np.isfinite(centres).all():
        raise GridError(f"{where}: {letter} has values that are missing, expected numbers.")
    direction = 1 if centres[-1] > centres[0] else -1
    if not (np.diff(centres) * direction > 0.0).all():
        raise GridError(
            f"{where}: {letter} is not monotonic, expected values that rise, or fall, from cell to "
            "cell. Longitudes count on at 360, as 359, 360, 361."
        )
    bounds = _bounds(dataset, where, variable, (variable.size, 2))
    bounds = None if bounds is None else np.sort(bounds * factor, axis=1)[::direction]
    return _finish_axis(where, letter, name, centres[::direction], bounds)


def _finish_axis(where, letter: str, name: str, centres, bounds) -> Axis:
    steps = np.diff(centres)
    between = _edges(centres, 90.0 if name == "latitude" else np.inf)
    even = bool(np.allclose(steps, steps.mean(), rtol=EVEN))
    if bounds is None:
        return Axis(name, centres, between, even)
    slack = 10 * EVEN * steps.min()
    even &= np.allclose(bounds, between, rtol=0.0, atol=slack)
    outside = (centres < bounds[:, 0] - slack) | (centres > bounds[:, 1] + slack)
    empty = ~(bounds[:, 1] > bounds[:, 0])
    if outside.any() or empty.any():
        cell = int(np.flatnonzero(outside | empty)[0])
        raise GridError(
            f"{where}: the bounds of {letter} at {centres[cell]:g} are {bounds[cell, 0]:g} to "
            f"{bounds[cell, 1]:g}, expected a length that holds the coordinate."
        )
    across = bounds[:-1, 1] - bounds[1:, 0]
    if (across > slack).any():
        cell = int(across.argmax())
        raise GridError(
            f"{where}: the cells of {letter} at {centres[cell]:g} and {centres[cell + 1]:g} "
            f"overlap by {across[cell]:g}, expected bounds side by side."
        )
    return Axis(name, centres, bounds, even)


def _edges(centres, most: float):
    """Bounds (n, 2) halfway between centres, within -most to most."""
    inner = 0.5 * (centres[:-1] + centres[1:])
    edges = np.r_[2 * centres[0] - inner[0], inner, 2 * centres[-1] - inner[-1]]
    edges = np.clip(edges, -most, most)
    return np.stack([edges[:-1], edges[1:]], axis=1)


def _bounds(dataset, where, variable, shape):
    """Values of the bounds of a coordinate; None where it names none."""
    name = variable.attrs.get("bounds")
    if name is None or name not in dataset.variables:
        return None
    bounds = dataset[name]
    if variable.ndim == 2 and set(variable.dims) < set(bounds.dims):
        bounds = bounds.transpose(*variable.dims, ...)
    if bounds.shape != shape:
        raise GridError(
            f"{where}: {name} has the shape {bounds.shape}, expected {shape}, the bounds of "
            f"{variable.name}."
        )
    values = bounds.values.astype(float)
    if not np.isfinite(values).all():
        raise GridError(f"{where}: {name} has values that are missing, expected numbers.")
    return values


def cells_of_axes(crs: pyproj.CRS, x: Axis, y: Axis) -> CellGrid:
    """Cells between the bounds of two axes."""
    shape = (len(y.centres), len(x.centres))
    return CellGrid(
        crs,
        np.broadcast_to(x.centres, shape),
        np.broadcast_to(y.centres[:, None], shape),
        np.broadcast_to(x.bounds[None, :, [0, 1, 1, 0]], (*shape, 4)),
        np.broadcast_to(y.bounds[:, None, [0, 0, 1, 1]], (*shape, 4)),
        along_axes=True,
    )


def read_cells(dataset, where) -> CellGrid:
    """Cells of a dataset that lists the longitude and latitude of each, in its order of rows and
    columns; between the corners of the bounds, or else halfway between the places.

    Raises GridError.
    """
    longitude, latitude = (_places(dataset, where, name) for name in DEGREES)
    if set(longitude.dims) != set(latitude.dims):
        raise GridError(
            f"{where}: longitude and latitude have the dimensions {longitude.dims} and "
            f"{latitude.dims}, expected the same."
        )
    longitude = longitude.transpose(*latitude.dims)
    x, y = longitude.values.astype(float), latitude.values.astype(float)
    _check_places(where, x, y)
    middle = x[x.shape[0] // 2, x.shape[1] // 2]
    x = near(x, middle)
    corners = [_bounds(dataset, where, one, (*x.shape, 4)) for one in (longitude, latitude)]
    if None in [None if one is None else 0 for one in corners]:
        corners = [corners_of_nodes(nodes_between(part)) for part in (x, y)]
    else:
        corners = _in_turn(near(corners[0], middle), corners[1])
    if np.abs(corners[1]).max() > 90.0:
        raise GridError(
            f"{where}: the corners of cells lie at up to {np.abs(corners[1]).max():.6g} degrees of "
            "latitude, expected at most 90. Grids across a pole need bounds, or a grid_mapping."
        )
    crs = file_crs(dataset, where)
    plain = crs.is_geographic and not crs.is_derived
    crs = crs if plain else pyproj.CRS.from_epsg(4326)
    return check_cells(CellGrid(crs, x, y, *corners, along_axes=False), where)


def _places(dataset, where, name: str):
    """The two-dimensional coordinate of a standard name, or else of a unit."""
    flat = [one for one in map(dataset.get, dataset.variables) if one.ndim == 2]
    bounds = {str(one.attrs.get("bounds")) for one in map(dataset.get, dataset.variables)}
    flat = [one for one in flat if one.name not in bounds]
    found = [one for one in flat if one.attrs.get("standard_name") == name]
    found = found or [one for one in flat if one.attrs.get("units") in DEGREES[name]]
    if len(found) != 1:
        raise GridError(
            f"{where}: {len(found)} coordinates of a grid for {name}, expected a one-dimensional "
            f"{' or '.join(AXIS_NAMES['x' if name == 'longitude' else 'y'])}, or a two-dimensional "
            f"{name}, by their standard_name."
        )
    cells = found[0].size
    if cells > MOST_CELLS:
        raise GridError(f"{where}: cells are {cells}, expected at most {MOST_CELLS}.")
    if min(found[0].shape) < 2:
        raise GridError(f"{where}: {name} has the shape {found[0].shape}, expected 2 x 2 or more.")
    return found[0]


def _check_places(where, longitude, latitude) -> None:
    missing = ~(np.isfinite(longitude) & np.isfinite(latitude))
    if missing.any():
        raise GridError(
            f"{where}: {int(missing.sum())} of {missing.size} cells have no longitude or latitude, "
            "expected one for each cell, masked or not."
        )
    if np.abs(latitude).max() > 90.0 or np.abs(longitude).max() > 720.0:
        raise GridError(
            f"{where}: longitude is up to {np.abs(longitude).max():g} and latitude up to "
            f"{np.abs(latitude).max():g}, expected degrees."
        )


def _in_turn(x, y):
    """Corners (ny, nx, 4) in the order of `cells.CORNERS`, whichever of them comes first.

    Of the eight ways around a cell it is the one where neighbours' corners lie closest.
    """
    some = slice(100), slice(100)
    orders = [order for order in permutations(range(4)) if (order[0] - order[2]) % 4 == 2]

    def apart(order) -> float:
        total = 0.0
        for part in (x[some], y[some]):
            a, b, c, d = (part[..., corner] for corner in order)
            total += np.abs(b[:, :-1] - a[:, 1:]).mean() + np.abs(c[:, :-1] - d[:, 1:]).mean()
            total += np.abs(d[:-1] - a[1:]).mean() + np.abs(c[:-1] - b[1:]).mean()
        return total

    best = list(min(orders, key=apart))
    return [x[..., best], y[..., best]]


def file_crs(dataset, where) -> pyproj.CRS:
    """CRS of the dataset's grid mapping; WGS 84 without one. Raises GridError."""
    mappings = [
        variable
        for variable in dataset.variables.values()
        if "grid_mapping_name" in variable.attrs or "crs_wkt" in variable.attrs
    ]
    if not mappings:
        return pyproj.CRS.from_epsg(4326)
    try:
        return pyproj.CRS.from_cf(mappings[0].attrs)
    except (pyproj.exceptions.CRSError, KeyError) as error:
        raise GridError(f"{where}: its grid mapping cannot be understood: {error}.") from None
