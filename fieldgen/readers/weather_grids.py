"""Gridded weather of a model or an analysis -> pressure and temperature at places and steps.

CF NetCDF, its variables known by standard_name and unit, and GRIB, by parameter. Pressure at the
model's surface together with that surface's height is preferred; sea-level pressure serves without
it. Between cells bilinear (linear in triangles where the grid is not rectangular), between fields
linear in time, never beyond them.
"""

from __future__ import annotations

import importlib.util
import json
import subprocess
import sys
import tempfile
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pyproj
import xarray as xr

from fieldgen.constants import GRAVITY
from fieldgen.errors import InputError
from fieldgen.quantities import QUANTITIES
from fieldgen.readers.grib_decoder import UNITS
from fieldgen.readers.records import NO_TIME, Rejections
from fieldgen.readers.text import open_bytes

STANDARD_NAMES = {
    "surface_pressure": ("surface_air_pressure",),
    "msl_pressure": ("air_pressure_at_mean_sea_level", "air_pressure_at_sea_level"),
    "temperature": ("air_temperature",),
    "surface_height": ("surface_altitude",),
    "surface_geopotential": ("surface_geopotential", "geopotential"),
}
"""CF standard names by what they are here."""

LONG_NAMES = {
    "mean_temperature": QUANTITIES["mean_temperature"].long_name,
    "temperature": "2 metre temperature",
}
"""Long names of what has no CF standard name, or of what often comes without it."""

_CONVERSIONS = {
    "Pa": ("pressure", 0.01, 0.0), "hPa": ("pressure", 1.0, 0.0), "mbar": ("pressure", 1.0, 0.0),
    "millibar": ("pressure", 1.0, 0.0), "K": ("temperature", 1.0, 0.0),
    "degC": ("temperature", 1.0, 273.15), "degree_Celsius": ("temperature", 1.0, 273.15),
    "Celsius": ("temperature", 1.0, 273.15), "m": ("height", 1.0, 0.0),
    "m2 s-2": ("geopotential", 1.0 / GRAVITY.value, 0.0),
    "m**2 s**-2": ("geopotential", 1.0 / GRAVITY.value, 0.0),
}  # fmt: skip
"""By unit: kind, factor and offset that lead to hPa, K or m."""

_KINDS = {
    "surface_pressure": "pressure", "msl_pressure": "pressure", "temperature": "temperature",
    "mean_temperature": "temperature", "surface_height": "height",
    "surface_geopotential": "geopotential",
}  # fmt: skip

_PLAUSIBLE = {
    "surface_pressure": (400.0, 1100.0), "msl_pressure": (850.0, 1100.0),
    "temperature": (180.0, 340.0), "mean_temperature": (180.0, 320.0),
    "surface_height": (-500.0, 9000.0),
}  # fmt: skip
"""Limits [hPa, K, m] beyond which a value at a place is not used."""

AROUND = 300.0
"""Points of a grid further than this [km] from all places are not looked at."""

PARTS_OF_A_STEP = 4
"""Moments of a step whose mean is the step's value."""

_LEVELS = ("air_pressure", "altitude", "model_level_number", "depth", "geopotential_height")
"""Standard names of vertical coordinates that are not the ground's."""

HIGHEST_THERMOMETER = 10.0
"""Height above the ground [m] up to which an air temperature is that of a screen."""

TIMEOUT_S = 600
"""A decoder that takes longer hangs."""


class GridField(NamedTuple):
    """A quantity at the places: time (m,) datetime64[s], NaT where it never changes; values
    (m, n)."""

    quantity: str
    time: np.ndarray
    values: np.ndarray


@dataclass
class GridRecords:
    """What one file says at the places; it does not tell when it was created."""

    file: str
    fields: list[GridField]
    created: np.datetime64 = NO_TIME
    rejections: Rejections = field(default_factory=Rejections)
    warnings: list[str] = field(default_factory=list)

    @property
    def time(self):
        """Moments (k,) of all fields."""
        return np.concatenate([one.time for one in self.fields])

    def compact(self) -> None:
        """Nothing is held but the values at the places."""


def read_weather_grid(path, *, name: str, longitude, latitude) -> GridRecords:
    """Fields of a NetCDF or GRIB file at places (n,) [degrees].

    Values are NaN at places outside the grid or beside a gap of it. Raises InputError where the
    file is neither, cannot be read, or holds nothing of use.
    """
    with open_bytes(path, name) as file:
        start = file.read(8)
    places = np.asarray(longitude, float), np.asarray(latitude, float)
    if start.startswith(b"GRIB"):
        fields = _read_grib(path, name, *places)
    elif start.startswith((b"CDF", b"\x89HDF")):
        fields = _read_netcdf(path, name, *places)
    else:
        raise InputError(f"{name}: file is neither NetCDF nor GRIB, expected gridded weather.")
    if not fields:
        wanted = ", ".join(dict.fromkeys(n for names in STANDARD_NAMES.values() for n in names))
        raise InputError(
            f"{name}: holds no surface field that is known, expected {wanted} on a grid."
        )
    records = GridRecords(name, [])
    for one in fields:
        records.fields.append(_without_impossible(one, name, records.rejections))
    return records


def _without_impossible(one: GridField, name: str, rejections: Rejections) -> GridField:
    low, high = _PLAUSIBLE[one.quantity]
    with np.errstate(invalid="ignore"):
        impossible = (one.values < low) | (one.values > high)
    if impossible.any():
        what = f"{one.quantity.replace('_', ' ')} outside {low:g} to {high:g}"
        rejections.counts[name, what] += int(impossible.sum())
    return one._replace(values=np.where(impossible, np.nan, one.values))


def _converted(quantity: str, time, values, unit: str, where: str) -> GridField:
    """A field in hPa, K or m."""
    kind, factor, offset = _CONVERSIONS.get(unit, ("", 1.0, 0.0))
    if kind != _KINDS[quantity]:
        known = ", ".join(
            key for key, entry in _CONVERSIONS.items() if entry[0] == _KINDS[quantity]
        )
        raise InputError(f"{where}: units is {unit!r}, expected {known}.")
    quantity = "surface_height" if quantity == "surface_geopotential" else quantity
    return GridField(quantity, time, values * factor + offset)


# ------------------------------------------------------------------------- between the cells


def _interpolate(values, axes, at):
    """Values (m, ...) on axes (south to north, west to east) or points, at places (m, n)."""
    from scipy.interpolate import RegularGridInterpolator

    interpolate = RegularGridInterpolator(
        axes, np.moveaxis(values, 0, -1), bounds_error=False, fill_value=np.nan
    )
    return np.moveaxis(interpolate(np.column_stack(at)), -1, 0)


def _window(axis, at):
    """Indices of an axis, ascending, that surround the places by two cells or more."""
    order = np.argsort(axis)
    ordered = np.asarray(axis, float)[order]
    first = max(np.searchsorted(ordered, np.min(at), side="right") - 3, 0)
    last = np.searchsorted(ordered, np.max(at), side="left") + 3
    return order[first:last]


def _near(longitude, centre: float):
    """The same longitudes [degrees], within half a turn of a centre."""
    return centre + (np.asarray(longitude, float) - centre + 180.0) % 360.0 - 180.0


def _centre(longitude) -> float:
    """The longitude [degrees] in the middle of places, wherever 180 or 360 falls."""
    angle = np.radians(longitude)
    return float(np.degrees(np.arctan2(np.sin(angle).mean(), np.cos(angle).mean())))


def _scattered(grid_longitude, grid_latitude, longitude, latitude):
    """Indices of the points of a grid around the places, and what interpolates between them.

    Linear in the triangles of a plane about the middle of the places (azimuthal equidistant).
    """
    from scipy.interpolate import LinearNDInterpolator

    centre = _centre(longitude), float(np.mean(latitude))
    plane = pyproj.Proj(proj="aeqd", lon_0=centre[0], lat_0=centre[1])
    points = np.column_stack(plane(np.ravel(grid_longitude), np.ravel(grid_latitude)))
    at = np.column_stack(plane(longitude, latitude))
    reach = np.hypot(*at.T).max() + AROUND * 1000.0
    with np.errstate(invalid="ignore"):
        index = np.flatnonzero(np.hypot(*points.T) <= reach)

    def interpolate(values):
        if len(index) < 4:
            return np.full((len(values), len(at)), np.nan)
        return LinearNDInterpolator(points[index], np.moveaxis(values, 0, -1))(at).T

    return index, interpolate


# ------------------------------------------------------------------------------------- GRIB


def _read_grib(path, name: str, longitude, latitude) -> list[GridField]:
    if importlib.util.find_spec("eccodes") is None:
        raise InputError(
            f"{name}: file is GRIB, and its decoder is not installed. "
            "Run pip install 'fieldgen[grib]'."
        )
    centre, margin = _centre(longitude), AROUND / 111.0
    near = _near(longitude, centre)
    wider = margin / max(np.cos(np.radians(np.abs(latitude).max())), 0.1)
    box = (near.min() - wider, latitude.min() - margin, near.max() + wider, latitude.max() + margin)
    with tempfile.TemporaryDirectory() as folder:
        output = Path(folder) / "fields.npz"
        command = [sys.executable, "-m", "fieldgen.readers.grib_decoder", str(path), str(output)]
        command += map(str, box)
        try:
            done = subprocess.run(command, capture_output=True, text=True, timeout=TIMEOUT_S)
        except subprocess.TimeoutExpired:
            raise InputError(f"{name}: GRIB is not decoded after {TIMEOUT_S} s.") from None
        if not output.exists():
            problem = (done.stderr.strip().splitlines() or ["no reason given"])[-1]
            raise InputError(f"{name}: GRIB cannot be decoded: {problem}.")
        with np.load(output) as arrays:
            return _grib_fields(dict(arrays), name, near, latitude)


def _grib_fields(arrays: dict, name: str, longitude, latitude) -> list[GridField]:
    """Fields at the places, of one moment each; the latest forecast of a moment comes last."""
    described = json.loads(str(arrays["fields"]))
    ways: dict[str, Callable] = {}
    found = []
    for index in sorted(range(len(described)), key=lambda i: described[i]["base"]):
        entry = described[index]
        quantity, grid = entry["quantity"], entry["grid"]
        if grid not in ways:
            points = arrays[f"longitude_{grid}"], arrays[f"latitude_{grid}"]
            ways[grid] = _grib_way(*points, longitude, latitude)
        values = _bring_to_places(quantity, ways[grid], arrays[f"values_{index}"][None])
        invariant = quantity in ("surface_height", "surface_geopotential")
        time = np.array(["NaT" if invariant else entry["time"]], "datetime64[s]")
        found.append(_converted(quantity, time, values, UNITS[quantity], name))
    return found


def _grib_way(grid_longitude, grid_latitude, longitude, latitude) -> Callable:
    """What brings values (1, k) on a grid's points to the places."""
    x, column = np.unique(grid_longitude.round(6), return_inverse=True)
    y, row = np.unique(grid_latitude.round(6), return_inverse=True)
    if len(x) * len(y) == len(grid_longitude) and min(len(x), len(y)) > 1:

        def on_axes(values):
            table = np.full((len(values), len(y), len(x)), np.nan)
            table[:, row, column] = values
            return _interpolate(table, (y, x), (latitude, longitude))

        return on_axes
    index, interpolate = _scattered(grid_longitude, grid_latitude, longitude, latitude)
    return lambda values: interpolate(values[:, index])


def _bring_to_places(quantity: str, way: Callable, values):
    """Values at the places; pressure by its logarithm, which is linear in height."""
    if quantity == "surface_pressure":
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.exp(way(np.log(values)))
    return way(values)


# ----------------------------------------------------------------------------------- NetCDF


def _read_netcdf(path, name: str, longitude, latitude) -> list[GridField]:
    try:
        dataset = xr.open_dataset(path, engine="netcdf4")
    except (OSError, ValueError, RuntimeError) as error:  # ValueError: times that make no sense
        raise InputError(f"{name}: cannot be read as CF NetCDF: {error}.") from None
    with dataset:
        return [
            _netcdf_field(dataset, variable, quantity, name, longitude, latitude)
            for variable, quantity in _known_variables(dataset)
        ]


def _known_variables(dataset: xr.Dataset) -> list[tuple[str, str]]:
    """Names of the dataset's variables that serve, and what each is; one a quantity."""
    found: dict[str, str] = {}
    for variable, array in dataset.data_vars.items():
        standard, long = (array.attrs.get(key, "") for key in ("standard_name", "long_name"))
        for quantity in _KINDS:
            named = standard in STANDARD_NAMES.get(quantity, ())
            named |= str(long).lower() == LONG_NAMES.get(quantity)
            if named and _is_at_ground(array):
                found.setdefault(quantity, str(variable))
    return [(variable, quantity) for quantity, variable in found.items()]


def _is_at_ground(array: xr.DataArray) -> bool:
    """Whether no coordinate says that the values belong to a level above the ground."""
    for coordinate in array.coords.values():
        name = coordinate.attrs.get("standard_name", "")
        unit = coordinate.attrs.get("units", "")
        above = name in _LEVELS or name.startswith("atmosphere_") or unit in ("Pa", "hPa", "mbar")
        if coordinate.ndim == 0 and name == "height":
            above |= float(coordinate) > HIGHEST_THERMOMETER
        if above:
            return False
    return True


def _netcdf_field(
    dataset: xr.Dataset, variable: str, quantity: str, name: str, longitude, latitude
) -> GridField:
    where = f"{name}, {variable}"
    array = dataset[variable]
    time = _time_of(array)
    over_time = () if time is None else time.dims
    array = array.transpose(*over_time, ...)  # turns the coordinates as well
    cells, way = _netcdf_way(dataset, array, where, longitude, latitude)
    array = array.isel(cells)
    extra = [
        dim for dim in array.dims if dim not in cells and (time is None or dim not in time.dims)
    ]
    if any(array.sizes[dim] > 1 for dim in extra):
        raise InputError(f"{where}: has the dimensions {', '.join(array.dims)}, expected one field "
                         "a time on a plane.")  # fmt: skip
    array = array.isel({dim: 0 for dim in extra})
    moments = np.array([np.datetime64("NaT", "s")])
    if quantity in ("surface_height", "surface_geopotential"):
        if time is not None and time.ndim == 1:
            array = array.isel({time.dims[0]: slice(1)})
    elif time is None:
        raise InputError(f"{where}: has no time, expected a coordinate with standard_name time.")
    else:
        moments = np.atleast_1d(time.values).astype("datetime64[s]")
    try:
        values = np.asarray(array.values, float).reshape(len(moments), *way.shape)
    except (OSError, RuntimeError) as error:
        raise InputError(f"{where}: cannot be read: {error}.") from None
    brought = _bring_to_places(quantity, way.interpolate, values)
    return _converted(quantity, moments, brought, str(array.attrs.get("units", "")), where)


def _time_of(array: xr.DataArray) -> xr.DataArray | None:
    """The coordinate of valid times, None without one."""
    times = [c for c in array.coords.values() if c.dtype.kind == "M" and c.ndim <= 1]
    named = [c for c in times if c.attrs.get("standard_name") == "time"]
    named = named or [c for c in times if c.name in ("time", "valid_time")] or times
    return named[0] if named else None


class _Way(NamedTuple):
    """How values of some cells, (m, *shape), come to the places."""

    shape: tuple[int, ...]
    interpolate: Callable


def _netcdf_way(dataset: xr.Dataset, array: xr.DataArray, where: str, longitude, latitude):
    """Cells to read, indices by dimension in the array's order, and their way to the places."""
    mapped = _coordinate(array, ("projection_y_coordinate", "grid_latitude")), _coordinate(
        array, ("projection_x_coordinate", "grid_longitude")
    )  # fmt: skip
    y, x = _coordinate(array, ("latitude",)), _coordinate(array, ("longitude",))
    if y is not None and x is not None and y.ndim == x.ndim == 1 and y.dims != x.dims:
        centre = _centre(longitude)
        axes = y.values, _near(x.values, centre)
        return _axes_way(
            array, where, (y.dims[0], x.dims[0]), axes, (latitude, _near(longitude, centre))
        )
    if all(axis is not None for axis in mapped) and "grid_mapping" in array.attrs:
        at = _in_crs(dataset, array, where, longitude, latitude)
        scale = [1000.0 if axis.attrs.get("units") == "km" else 1.0 for axis in mapped]
        axes = [axis.values * by for axis, by in zip(mapped, scale, strict=True)]
        if mapped[1].attrs.get("standard_name") == "grid_longitude":
            centre = _centre(at[0])
            axes[1], at = _near(axes[1], centre), (_near(at[0], centre), at[1])
        return _axes_way(array, where, tuple(axis.dims[0] for axis in mapped), axes, at[::-1])
    if y is not None and x is not None and y.ndim and y.dims == x.dims:
        index, interpolate = _scattered(x.values, y.values, longitude, latitude)
        shape = tuple(array.sizes[dim] for dim in y.dims)

        def from_all(values):
            return interpolate(values.reshape(len(values), -1)[:, index])

        return {dim: slice(None) for dim in y.dims}, _Way(shape, from_all)
    raise InputError(
        f"{where}: has no known grid, expected coordinates with standard_name latitude and "
        "longitude, or projection coordinates and a grid_mapping."
    )


def _axes_way(array: xr.DataArray, where: str, dims, axes, at):
    """Cells around the places on two axes, south to north, west to east, and their way."""
    for dim, axis in zip(dims, axes, strict=True):
        if not (np.isfinite(axis).all() and len(np.unique(axis)) == len(axis)):
            raise InputError(
                f"{where}: the axis {dim} has values that are missing or stand twice, expected "
                "those of a grid."
            )
    windows = [_window(axis, places) for axis, places in zip(axes, at, strict=True)]
    cells = dict(zip(dims, windows, strict=True))
    swapped = array.dims.index(dims[0]) > array.dims.index(dims[1])
    cut = tuple(np.asarray(axis, float)[window] for axis, window in zip(axes, windows, strict=True))
    if min(map(len, cut)) < 2:
        return cells, _Way(
            tuple(len(cells[dim]) for dim in array.dims if dim in cells),
            lambda values: np.full((len(values), len(at[0])), np.nan),
        )

    def interpolate(values):
        return _interpolate(values.swapaxes(1, 2) if swapped else values, cut, at)

    return cells, _Way(tuple(len(cells[dim]) for dim in array.dims if dim in cells), interpolate)


def _coordinate(array: xr.DataArray, standard_names) -> xr.DataArray | None:
    """The coordinate of a standard name, or of its units where it is latitude or longitude."""
    units = {"latitude": "degrees_north", "longitude": "degrees_east"}.get(standard_names[0])
    for coordinate in array.coords.values():
        named = coordinate.attrs.get("standard_name")
        if named in standard_names or (
            named is None and units == coordinate.attrs.get("units", "")
        ):
            return coordinate
    return None


def _in_crs(dataset: xr.Dataset, array: xr.DataArray, where: str, longitude, latitude):
    """Places in the coordinates of the array's grid mapping, x and y."""
    mapping = str(array.attrs["grid_mapping"]).split(":")[0].strip()
    try:
        crs = pyproj.CRS.from_cf(dataset[mapping].attrs)
    except (KeyError, pyproj.exceptions.CRSError) as error:
        raise InputError(f"{where}: its grid mapping cannot be understood: {error}.") from None
    to_grid = pyproj.Transformer.from_crs("EPSG:4326", crs, always_xy=True)
    return to_grid.transform(longitude, latitude)


# --------------------------------------------------------------------- between the moments


def weather_on_steps(records: list[GridRecords], count: int, stamps, step, gap) -> xr.Dataset:
    """What grids say at `count` places, Dataset (time, place), NaN where they do not.

    pressure [hPa], pressure_height [m] it belongs to, temperature, mean_temperature [K],
    surface_height [m]. Pressure at the surface goes before that at sea level.
    stamps : (t,) datetime64[s], ends of the steps; step, gap : timedelta64[s]. Steps between two
    fields that are further apart than `gap` are NaN.
    """
    height = np.full(count, np.nan)
    for one in _fields_of(records, "surface_height"):
        height = np.where(np.isfinite(one.values[-1]), one.values[-1], height)
    series = {
        name: _on_steps(_fields_of(records, name), count, stamps, step, gap)
        for name in ("surface_pressure", "msl_pressure", "temperature", "mean_temperature")
    }
    at_surface = np.isfinite(series["surface_pressure"]) & np.isfinite(height)
    values = {
        "pressure": np.where(at_surface, series["surface_pressure"], series["msl_pressure"]),
        "pressure_height": np.where(at_surface, height, 0.0),
        "temperature": series["temperature"],
        "mean_temperature": series["mean_temperature"],
        "surface_height": np.broadcast_to(height, at_surface.shape).copy(),
    }
    return xr.Dataset({name: (("time", "place"), array) for name, array in values.items()})


def _fields_of(records: list[GridRecords], quantity: str) -> list[GridField]:
    return [one for file in records for one in file.fields if one.quantity == quantity]


def _on_steps(fields: list[GridField], count: int, stamps, step, gap):
    """Means (t, n) over the steps of fields at moments; of two at one moment the last counts."""
    if not fields:
        return np.full((len(stamps), count), np.nan)
    merged: dict[np.datetime64, np.ndarray] = {}
    for one in fields:
        for moment, row in zip(one.time, one.values, strict=True):
            if np.isnat(moment):
                continue
            before = merged.get(moment, row)
            merged[moment] = np.where(np.isfinite(row), row, before)
    if not merged:
        return np.full((len(stamps), count), np.nan)
    moments = np.array(sorted(merged))
    values = np.array([merged[moment] for moment in moments])
    parts = (np.arange(PARTS_OF_A_STEP) + 0.5) / PARTS_OF_A_STEP
    offsets = (parts * step.astype("timedelta64[s]").astype(float)).astype("timedelta64[s]")
    wanted = (np.asarray(stamps)[:, None] - step + offsets).ravel()
    found = _between(moments, values, wanted, gap)
    return found.reshape(len(stamps), PARTS_OF_A_STEP, count).mean(axis=1)


def _between(moments, values, wanted, gap):
    """Values (w, n) at the wanted moments, linear between the two fields around each."""
    after = np.searchsorted(moments, wanted)  # the first field at or after
    exact = (after < len(moments)) & (moments[np.minimum(after, len(moments) - 1)] == wanted)
    before = np.where(exact, after, after - 1)
    inside = (before >= 0) & (after < len(moments))
    before, after = np.clip(before, 0, None), np.minimum(after, len(moments) - 1)
    apart = (moments[after] - moments[before]).astype("timedelta64[s]").astype(float)
    inside &= apart <= gap.astype("timedelta64[s]").astype(float)
    since = (wanted - moments[before]).astype("timedelta64[s]").astype(float)
    share = np.where(apart > 0, since / np.where(apart > 0, apart, 1.0), 0.0)[:, None]
    found = values[before] * (1.0 - share) + values[after] * share
    return np.where(inside[:, None], found, np.nan)
