"""Mean and maximum fields of a day, with their standard errors.

The kriging error of each step is what the field's error bar holds beside the other parts. The
weights of a cell are taken to be alike in all steps, which makes the error bar of the mean a little
long (up to 6 %) where many stations come and go.
"""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.analysis import HEIGHT_ERROR
from fieldgen.areas.day import ProductDay
from fieldgen.areas.series import LEAST_SHARE_OF_DAY
from fieldgen.kriging.covariance import distances
from fieldgen.kriging.error_in_time import correlation_in_time
from fieldgen.products.atomic import whole_file
from fieldgen.products.field_file import COMPRESSION
from fieldgen.products.metadata import fieldgen_version, format_duration
from fieldgen.quantities import MISSING, PACKED_STEP, QUANTITIES

CELLS_AT_ONCE = 4096

COMMENTS = {
    "pwv_mean": "Of the steps of the day that have a value; missing where a quarter of them lack.",
    "pwv_mean_sigma": "Errors of steps resemble each other: kriging errors and that of the scale "
    "height as times pass, what all stations share for good.",
    "pwv_maximum": "The largest of the steps' means. Errors make the largest of several values too "
    "large, the smoothness of kriging too small.",
    "pwv_maximum_sigma": "The standard error of the step of the maximum.",
}

METHODS = {"pwv_mean": "time: mean area: mean", "pwv_maximum": "area: mean time: maximum"}

_KEPT = ("terrain", "terrain_sd")


def write_daily(day: ProductDay, path: Path) -> None:
    """Write the mean and the maximum of a day; raises OutputError."""
    with whole_file(path) as temporary:
        daily_dataset(day).to_netcdf(temporary, engine="netcdf4")


def daily_dataset(day: ProductDay) -> xr.Dataset:
    """Dataset of `pwv_mean`, `pwv_maximum` and their sigmas; dimensions time (one), y, x."""
    source = day.fields.dataset
    dataset = source[[*_KEPT, *day.fields.grid_variables]]
    for name in dataset.variables:
        dataset[name].encoding = {
            key: value for key, value in dataset[name].encoding.items() if key in ("dtype", "zlib")
        } | {"_FillValue": None}
    start, end = day.fields.steps[0, 0], day.fields.steps[1, -1]
    time = xr.Variable("time", [end], source.time.attrs, source.time.encoding)
    bounds = xr.Variable(("time", "bounds"), [[start, end]], {}, source.time.encoding)
    dataset = dataset.assign_coords(time=time).assign(time_bnds=bounds)
    for name, values in _fields(day).items():
        kind = "pwv_sigma" if name.endswith("sigma") else "pwv"
        attributes = QUANTITIES[kind].attributes() | {"comment": COMMENTS[name]}
        attributes["long_name"] += f", {name.split('_')[1]} of the day"
        attributes["grid_mapping"] = "crs"
        if name in METHODS:
            attributes |= {"cell_methods": METHODS[name], "ancillary_variables": f"{name}_sigma"}
        shape = (1, source.sizes["y"], source.sizes["x"])
        dataset[name] = (("time", "y", "x"), values.reshape(shape), attributes)
        dataset[name].encoding = {
            "dtype": "int16", "scale_factor": np.float32(PACKED_STEP),
            "_FillValue": np.int16(MISSING), **COMPRESSION,
        }  # fmt: skip
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    dataset.attrs = source.attrs | {
        "title": f"{source.attrs['project']}: water vapour of a day, mean and maximum",
        "id": source.attrs["id"].replace("pwv_", "pwv_daily_"),
        "history": f"{source.attrs['history']}\n{now} fieldgen {fieldgen_version()} daily",
        "date_created": now,
        "time_coverage_resolution": format_duration(end - start),
    }
    return dataset


def _fields(day: ProductDay) -> dict[str, np.ndarray]:
    """The four fields (cells,) [kg m-2], NaN where missing."""
    cells = day.fields.dataset.sizes["y"] * day.fields.dataset.sizes["x"]
    fields = {name: np.full(cells, np.nan) for name in COMMENTS}
    if day.model is None:
        return fields
    pwv, sigma = day.hourly("pwv").astype(float), day.hourly("pwv_sigma").astype(float)
    there = np.isfinite(pwv)
    enough = np.flatnonzero(there.sum(axis=0) >= LEAST_SHARE_OF_DAY * len(day.time))
    for rows in range(0, len(enough), CELLS_AT_ONCE):
        some = enough[rows : rows + CELLS_AT_ONCE]
        parts = _of_cells(day, some, pwv[:, some], sigma[:, some])
        for name, values in zip(COMMENTS, parts, strict=True):
            fields[name][some] = values
    return fields


def _of_cells(day: ProductDay, cells, pwv, sigma):
    """Mean and maximum of cells (m,) with their sigmas; pwv, sigma (t, m), NaN where missing."""
    there = np.isfinite(pwv)
    count = there.sum(axis=0)
    pwv, sigma = np.where(there, pwv, 0.0), np.where(there, sigma, 0.0)
    constant = np.where(there, day.hourly("common_sigma")[:, None], 0.0)
    relative = day.hourly("common_relative_sigma")[:, None] * pwv
    height = _height_error(day, cells, pwv)
    shared = np.square(constant) + np.square(relative) + np.square(height)
    kriging = np.sqrt(np.maximum(np.square(sigma) - shared, 0.0))
    time = day.time[day.model.hours]
    variance = np.einsum("tm,ts,sm->m", kriging, correlation_in_time(time), kriging, optimize=True)
    memory = correlation_in_time(time, HEIGHT_ERROR)
    variance += np.einsum("tm,ts,sm->m", height, memory, height, optimize=True)
    variance += np.square(constant.sum(axis=0)) + np.square(relative.sum(axis=0))
    highest = np.where(there, pwv, -np.inf).argmax(axis=0)
    of_highest = highest, np.arange(len(cells))
    return pwv.sum(axis=0) / count, np.sqrt(variance) / count, pwv[of_highest], sigma[of_highest]


def _height_error(day: ProductDay, cells, pwv):
    """Error (t, m) of cells for a scale height too large by its standard error."""
    model, places = day.model, day.places(cells)
    kriging = model.kriging
    apart = distances(kriging.stations.positions, places.positions)
    covariances = kriging.covariance.between(apart, kriging.stations.lift, places.lift)
    heights = np.where(model.present, model.heights, np.nan)
    filled = np.stack([kriging.fill(*pair) for pair in zip(model.gaps, heights, strict=True)])
    ground = day.fields.terrain.ravel()[cells]
    way = ground - kriging.field(filled, covariances, places)
    decay_sigma = day.hourly("scale_height_sigma") / np.square(day.hourly("scale_height"))
    return pwv * way * decay_sigma[:, None]
