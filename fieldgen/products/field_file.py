"""The fields of a day as a CF NetCDF file."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.ground.cells import CellGrid
from fieldgen.ground.grid import Grid
from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import (
    flag_attributes,
    global_attributes,
    time_coordinates,
)
from fieldgen.quantities import MISSING, PACKED_STEP, QUANTITIES
from fieldgen.settings import NetworkTable

PACKED = {"scale_factor": np.float32(PACKED_STEP), "_FillValue": np.int16(MISSING)}
"""How packed water vapour is to be read."""

COMPRESSION = {"zlib": True, "complevel": 1, "shuffle": True}

_SUMMARY = (
    "Precipitable water vapour on a grid. Zenith delays of ground-based GNSS stations are "
    "converted to water vapour, reduced to a common reference height with an exponential scale "
    "height, kriged, and brought back to the terrain."
)


def packed_dataset(
    *,
    grid: Grid | CellGrid,
    terrain_height,
    terrain_sd,
    time,
    fields,
    flag_bits,
    network: NetworkTable,
    reference_height,
    processing,
) -> xr.Dataset:
    """Dataset of packed fields with all CF attributes; dimensions time, y, x.

    terrain_height, terrain_sd (ny, nx) [m]: mean, and within the cells; time (t,) datetime64;
    fields: packed pwv, sigma, at_reference, and flag (t, ny, nx), scale_height and its sigma,
    station_count and the parts of the common error (t,); processing: text that says how it was made
    """
    space = ("time", "y", "x")
    dataset = xr.Dataset(
        {
            "pwv": (space, fields.pwv, _pwv_attributes()),
            "pwv_sigma": (space, fields.sigma, QUANTITIES["pwv_sigma"].attributes() | PACKED),
            "pwv_at_reference": (
                space, fields.at_reference, _reference_attributes(reference_height)
            ),
            "flag": (space, fields.flag, _flag_attributes(flag_bits)),
            "terrain": (("y", "x"), terrain_height, _terrain_attributes("terrain", "mean")),
            "terrain_sd": (
                ("y", "x"), terrain_sd, _terrain_attributes("terrain_sd", "standard_deviation")
            ),
            "scale_height": (
                "time",
                fields.scale_height,
                QUANTITIES["scale_height"].attributes()
                | {"ancillary_variables": "scale_height_sigma"},
            ),
            "scale_height_sigma": (
                "time",
                fields.scale_height_sigma,
                QUANTITIES["scale_height_sigma"].attributes(),
            ),
            "station_count": (
                "time", fields.station_count, QUANTITIES["station_count"].attributes()
            ),
            "common_sigma": ("time", fields.common_sigma, QUANTITIES["common_sigma"].attributes()),
            "common_relative_sigma": (
                "time",
                fields.common_relative_sigma,
                QUANTITIES["common_relative_sigma"].attributes(),
            ),
            "crs": ((), np.int32(0), grid.crs.to_cf()),
        },
        coords=time_coordinates(time, network.time_step) | _cell_coordinates(grid),
        attrs=global_attributes(
            title="precipitable water vapour",
            summary=_SUMMARY,
            network=network,
            product_id=f"pwv_{np.datetime_as_string(time[0], unit='m')}",
            time=time,
            bounds=_geographic_bounds(grid),
        ),
    )  # fmt: skip
    dataset = dataset.reset_coords([name for name in dataset.coords if name.endswith("_bnds")])
    dataset.attrs["processing"] = processing
    for name in ("pwv", "pwv_sigma", "pwv_at_reference", "flag", "terrain", "terrain_sd"):
        dataset[name].attrs["grid_mapping"] = "crs"
    _set_encoding(dataset)
    return dataset


def unpack_fields(dataset: xr.Dataset) -> xr.Dataset:
    """The same with water vapour as numbers [kg m-2], NaN where missing, as from an opened file."""
    return xr.decode_cf(dataset, decode_times=False)


def write_fields(dataset: xr.Dataset, path: Path) -> None:
    """Write a dataset of `packed_dataset`, compressed, whole or not at all."""
    with whole_file(path) as temporary:
        dataset.to_netcdf(temporary, engine="netcdf4")


def _pwv_attributes() -> dict:
    return (
        QUANTITIES["pwv"].attributes()
        | PACKED
        | {
            "ancillary_variables": "pwv_sigma flag",
            "cell_methods": "time: mean area: mean",
            "comment": "1 kg m-2 is 1 mm of liquid water. The standard error counts what all cells "
            "share, sqrt(common_sigma^2 + (common_relative_sigma pwv)^2), too.",
        }
    )


def _reference_attributes(reference_height: float) -> dict:
    quantity = QUANTITIES["pwv_at_reference"]
    return (
        quantity.attributes()
        | PACKED
        | {
            "cell_methods": "time: mean",
            "reference_height": float(reference_height),
            "comment": f"Above {reference_height:g} m everywhere: moist and dry air masses show "
            "without the mountains' imprint.",
        }
    )


def _flag_attributes(bits: dict[str, int]) -> dict:
    return {
        "long_name": "quality of precipitable water vapour",
        "standard_name": "quality_flag",
        **flag_attributes(bits, np.int8),
    }


def _terrain_attributes(name: str, method: str) -> dict:
    return QUANTITIES[name].attributes() | {"cell_methods": f"area: {method}"}


def _cell_coordinates(grid: Grid | CellGrid) -> dict:
    """Coordinates and bounds of the cells: along x and y, or the corners of each."""
    if not grid.is_even and not grid.along_axes:
        return _coordinates_of_places(grid)
    x, y = _axis_attributes(grid)
    centres = (grid.x, grid.y) if grid.is_even else (grid.x[0], grid.y[:, 0])
    bounds = grid.axis_bounds
    coordinates = {
        "y": ("y", centres[1], y),
        "x": ("x", centres[0], x),
        "y_bnds": (("y", "bounds"), bounds[1]),
        "x_bnds": (("x", "bounds"), bounds[0]),
    }
    if grid.is_projected or grid.crs.is_derived:
        longitude, latitude = grid.longitude_latitude
        for name, values in (("latitude", latitude), ("longitude", longitude)):
            coordinates[name] = (("y", "x"), values, QUANTITIES[name].attributes())
    return coordinates


def _coordinates_of_places(grid: CellGrid) -> dict:
    """Longitude and latitude (y, x) of each cell, and of its four corners; rows and columns."""
    coordinates = {}
    for axis, what, count in zip("yx", ("row", "column"), grid.shape, strict=True):
        about = {"long_name": f"{what} of the model's grid", "units": "1", "axis": axis.upper(),
                 "coverage_content_type": "coordinate"}  # fmt: skip
        coordinates[axis] = (axis, np.arange(count, dtype=np.int32), about)
    for name, centre, corner in (
        ("latitude", grid.y, grid.corner_y), ("longitude", grid.x, grid.corner_x)
    ):  # fmt: skip
        attributes = QUANTITIES[name].attributes() | {"bounds": f"{name}_bnds"}
        coordinates[name] = (("y", "x"), centre, attributes)
        coordinates[f"{name}_bnds"] = (("y", "x", "corners"), corner)
    return coordinates


def _axis_attributes(grid: Grid | CellGrid) -> tuple[dict, dict]:
    x = {"bounds": "x_bnds", "axis": "X"}
    y = {"bounds": "y_bnds", "axis": "Y"}
    if grid.crs.is_derived and not grid.is_projected:
        for axis, name in ((x, "longitude"), (y, "latitude")):
            axis["standard_name"] = f"grid_{name}"
            axis["long_name"] = f"{name} in the rotated system"
            axis["units"] = "degrees"
        return x, y
    if not grid.is_projected:
        return x | QUANTITIES["longitude"].attributes(), y | QUANTITIES["latitude"].attributes()
    unit = grid.crs.axis_info[0].unit_name
    unit = "m" if unit in ("metre", "meter") else unit
    for axis, letter in ((x, "x"), (y, "y")):
        axis["standard_name"] = f"projection_{letter}_coordinate"
        axis["long_name"] = f"{letter} coordinate of the cell's centre"
        axis["units"] = unit
    return x, y


def _geographic_bounds(grid: Grid | CellGrid):
    longitude, latitude = grid.longitude_latitude
    return longitude.min(), latitude.min(), longitude.max(), latitude.max()


def _set_encoding(dataset: xr.Dataset) -> None:
    chunks = {"chunksizes": (1, dataset.sizes["y"], dataset.sizes["x"])}
    for name in ("pwv", "pwv_sigma", "pwv_at_reference", "flag"):
        dataset[name].encoding = {**COMPRESSION, **chunks}
    for name in ("terrain", "terrain_sd"):
        dataset[name].encoding = {"dtype": "float32", "_FillValue": None, **COMPRESSION}
    for name in ("scale_height", "scale_height_sigma"):
        dataset[name].encoding = {"dtype": "float32", "_FillValue": np.float32(-9999.0)}
    for name in ("common_sigma", "common_relative_sigma"):
        dataset[name].encoding = {"dtype": "float32", "_FillValue": None}
    dataset["station_count"].encoding = {"dtype": "int16", "_FillValue": None}
    for name in ("x", "y", "x_bnds", "y_bnds"):
        if name in dataset.variables:
            dataset[name].encoding = {"_FillValue": None}
    for name in ("latitude", "longitude", "latitude_bnds", "longitude_bnds"):
        if name in dataset.variables:
            dataset[name].encoding = {"dtype": "float64", "_FillValue": None, **COMPRESSION}
