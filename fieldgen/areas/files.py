"""Series of areas as files: a CSV table, and CF NetCDF with the outlines."""

from __future__ import annotations

import csv
import io
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import shapely
import xarray as xr

from fieldgen.areas.series import AreaSeries
from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import (
    TIME_ENCODING,
    fieldgen_version,
    format_duration,
    format_time,
    geospatial_attributes,
)
from fieldgen.quantities import QUANTITIES

COLUMNS = (
    "start", "end", "area", "pwv_kg_m-2", "pwv_sigma_kg_m-2", "volume_million_m3",
    "volume_sigma_million_m3", "coverage", "steps",
)  # fmt: skip

VOLUME_UNIT = "1e6 m3"

SUMMARY = (
    "Precipitable water vapour above areas, mean over the cells of a field weighted by what of "
    "each lies in the area. The standard error is that of block kriging, with the error of the "
    "scale height and what all stations share."
)

_FILL = -9999.0


def write_series(series: AreaSeries, about: dict, stem: Path) -> list[Path]:
    """Write <stem>.csv and <stem>.nc; returns their paths.

    about : global attributes of the fields. Raises OutputError.
    """
    paths = [stem.with_name(f"{stem.name}.{suffix}") for suffix in ("csv", "nc")]
    with whole_file(paths[0]) as temporary:
        temporary.write_text(format_table(series), encoding="utf-8", newline="")
    with whole_file(paths[1]) as temporary:
        series_dataset(series, about).to_netcdf(temporary, engine="netcdf4")
    return paths


def format_table(series: AreaSeries) -> str:
    """CSV after RFC 4180, a row for each area and interval; units stand in the header."""
    buffer = io.StringIO()
    table = csv.writer(buffer)
    table.writerow(COLUMNS)
    columns = (
        series.pwv, series.sigma, series.volume, series.volume_sigma, series.coverage
    )  # fmt: skip
    for area, name in enumerate(series.areas.names):
        for row, (start, end) in enumerate(series.bounds):
            numbers = (column[area, row] for column in columns)
            texts = ("" if np.isnan(number) else f"{number:.4f}" for number in numbers)
            steps = series.steps[area, row]
            table.writerow([format_time(start), format_time(end), name, *texts, steps])
    return buffer.getvalue()


def series_dataset(series: AreaSeries, about: dict) -> xr.Dataset:
    """Dataset of time series (catchment, time) with the outlines as CF geometries.

    about : global attributes of the fields
    """
    outlines = series.areas.in_degrees()
    inside = shapely.point_on_surface(outlines)
    dataset = xr.Dataset(coords=_coordinates(series, inside))
    for name, values, attributes in _variables(series):
        dataset[name] = (("catchment", "time"), values, attributes | {"geometry": "outline"})
        dataset[name].encoding = {"dtype": "float32", "_FillValue": _FILL, "zlib": True}
    dataset["steps"].encoding = {"dtype": "int16", "_FillValue": None}
    dataset["area"] = (
        "catchment", series.size,
        {"long_name": "size of the area", "standard_name": "cell_area", "units": "m2",
         "coverage_content_type": "auxiliaryInformation", "geometry": "outline"},
    )  # fmt: skip
    dataset["area"].encoding = {"_FillValue": None}
    _add_outlines(dataset, outlines)
    dataset = dataset.reset_coords("time_bnds")
    dataset.attrs = _attributes(series, about, outlines)
    return dataset


def _variables(series: AreaSeries):
    """Name, values (catchment, time) and attributes of each variable."""
    methods = {"cell_methods": "time: mean area: mean"}
    quality = {"coverage_content_type": "qualityInformation"}
    physical = {"coverage_content_type": "physicalMeasurement"}
    volume = "volume of the water vapour above the area, as liquid water"
    return (
        ("pwv", series.pwv, QUANTITIES["pwv"].attributes() | methods
         | {"ancillary_variables": "pwv_sigma coverage steps",
            "comment": "1 kg m-2 is 1 mm of liquid water. A mean over the usable cells."}),
        ("pwv_sigma", series.sigma, QUANTITIES["pwv_sigma"].attributes()),
        ("volume", series.volume, physical
         | {"long_name": volume, "units": VOLUME_UNIT, "ancillary_variables": "volume_sigma",
            "comment": "pwv times area: what lies off the grid counts like the rest."}),
        ("volume_sigma", series.volume_sigma, quality
         | {"long_name": f"standard error of the {volume}", "units": VOLUME_UNIT}),
        ("coverage", series.coverage, quality
         | {"long_name": "share of the area with usable cells", "units": "1"}),
        ("steps", series.steps, quality
         | {"long_name": "number of steps of the mean", "units": "1",
            "standard_name": "number_of_observations"}),
    )  # fmt: skip


def _coordinates(series: AreaSeries, inside) -> xr.Coordinates:
    time = {
        "standard_name": "time", "long_name": "end of the averaging interval, UTC", "axis": "T",
        "bounds": "time_bnds", "units_metadata": "leap_seconds: none",
    }  # fmt: skip
    names = np.array(series.areas.names, object)
    role = {"cf_role": "timeseries_id", "long_name": "name of the area"}
    nodes = {"nodes": "node_"}
    parts = {
        "time": ("time", series.bounds[:, 1], time, TIME_ENCODING),
        "time_bnds": (("time", "bounds"), series.bounds, {}, TIME_ENCODING),
        "catchment_name": ("catchment", names, role),
    }
    for name, values in (("longitude", shapely.get_x(inside)), ("latitude", shapely.get_y(inside))):
        attributes = QUANTITIES[name].attributes()
        attributes["long_name"] = f"{name} of a point within the area"
        attributes["nodes"] = nodes["nodes"] + name
        parts[name] = ("catchment", values, attributes, {"_FillValue": None})
    return xr.Coordinates({name: xr.Variable(*part) for name, part in parts.items()}, indexes={})


def _add_outlines(dataset: xr.Dataset, outlines) -> None:
    """Outlines as CF 1.8 polygons: exterior rings anticlockwise, interior ones clockwise."""
    rings, inner, of_ring, counts = [], [], [], []
    for outline in outlines:
        before = len(rings)
        for polygon in shapely.get_parts(outline):
            polygon = shapely.geometry.polygon.orient(polygon)
            rings += [polygon.exterior, *polygon.interiors]
            inner += [0] + [1] * len(polygon.interiors)
        of_ring += [shapely.get_num_coordinates(ring) for ring in rings[before:]]
        counts.append(sum(of_ring[before:]))
    x, y = shapely.get_coordinates(rings).T
    dataset["outline"] = ((), np.int32(0), {
        "long_name": "outlines of the areas", "geometry_type": "polygon",
        "node_coordinates": "node_longitude node_latitude", "node_count": "node_count",
        "part_node_count": "part_node_count", "interior_ring": "interior_ring",
    })  # fmt: skip
    for name, values, dimension in (
        ("node_count", counts, "catchment"), ("part_node_count", of_ring, "part"),
        ("interior_ring", inner, "part"),
    ):  # fmt: skip
        dataset[name] = (dimension, np.array(values, np.int32))
        dataset[name].attrs["long_name"] = f"{name.replace('_', ' ')} of the outlines"
    for name, values, axis in (("longitude", x, "X"), ("latitude", y, "Y")):
        attributes = QUANTITIES[name].attributes() | {"axis": axis}
        dataset[f"node_{name}"] = ("node", values, attributes)
        dataset[f"node_{name}"].encoding = {"_FillValue": None}


def _attributes(series: AreaSeries, about: dict, outlines) -> dict:
    """Global attributes: those of the fields, and what is different."""
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    start, end = series.bounds[0, 0], series.bounds[-1, 1]
    west, south, east, north = shapely.total_bounds(outlines)
    return about | {
        "title": f"{about['project']}: precipitable water vapour of areas",
        "summary": SUMMARY,
        "id": f"pwv_areas_{np.datetime_as_string(end, unit='m')}",
        "featureType": "timeSeries",
        "history": f"{about['history']}\n{now} fieldgen {fieldgen_version()} catchments",
        "date_created": now,
        **geospatial_attributes((west, south, east, north)),
        "time_coverage_start": format_time(start),
        "time_coverage_end": format_time(end),
        "time_coverage_duration": format_duration(end - start),
        "time_coverage_resolution": format_duration(series.bounds[0, 1] - start),
    }
