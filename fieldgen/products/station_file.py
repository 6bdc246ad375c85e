"""The stations of a day as a CF time-series file."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import (
    flag_attributes,
    global_attributes,
    time_coordinates,
)
from fieldgen.quantities import QUANTITIES
from fieldgen.settings import NetworkTable

_SERIES = {
    "ztd": "float64", "zhd": "float64", "zwd": "float64", "pressure": "float32",
    "mean_temperature": "float32", "pwv": "float32", "pwv_sigma": "float32", "residual": "float32",
    "residual_sigma": "float32", "error_variance": "float32",
}  # fmt: skip
"""Series of the file that stand in the table of quantities, with the type they are stored in."""

_PLACES = ("longitude", "latitude", "ellipsoidal_height", "orthometric_height")

_FILL = -9999.0


def station_dataset(
    stations: xr.Dataset, *, network: NetworkTable, flag_bits, pressure_sources, kriging: dict
) -> xr.Dataset:
    """Dataset of a day's stations with all CF attributes; dimensions station, time.

    stations : of `analysis.Day`, dimensions time, station
    kriging : parameters that, with the error variances and the variance factor, the error of
        kriging anywhere follows from; they are attributes of a variable of that name
    """
    time = stations.time.values
    turned = stations.drop_dims("site").transpose("station", "time")
    dataset = xr.Dataset(coords=_coordinates(turned, time, network.time_step))
    for name, dtype in _SERIES.items():
        dataset[name] = (("station", "time"), turned[name].values, QUANTITIES[name].attributes())
        dataset[name].encoding = {"dtype": dtype, "_FillValue": _FILL, "zlib": True}
    dataset["pwv"].attrs |= {"ancillary_variables": "pwv_sigma flag", "cell_methods": "time: mean"}
    _add_codes(dataset, turned, flag_bits, pressure_sources)
    _add_kriging(dataset, turned, kriging)
    dataset = dataset.reset_coords("time_bnds")
    dataset.attrs = _attributes(turned, network, time)
    return dataset


def write_stations(dataset: xr.Dataset, path: Path) -> None:
    """Write a dataset of `station_dataset`, whole or not at all."""
    with whole_file(path) as temporary:
        dataset.to_netcdf(temporary, engine="netcdf4")


def _coordinates(stations: xr.Dataset, time, step) -> dict:
    names = {
        "station_id": (stations.station.values, {
            "cf_role": "timeseries_id", "long_name": "station identifier"
        }),
        "station_name": (stations.name.values, {"long_name": "station name"}),
    }  # fmt: skip
    coordinates = {
        name: ("station", values.astype(object), attributes)
        for name, (values, attributes) in names.items()
    }
    for name in _PLACES:
        coordinates[name] = ("station", stations[name].values, QUANTITIES[name].attributes())
    coordinates["orthometric_height"][2].update(axis="Z", positive="up")
    coordinates |= time_coordinates(time, step)
    return xr.Coordinates(
        {name: xr.Variable(*parts) for name, parts in coordinates.items()}, indexes={}
    )


def _add_codes(dataset: xr.Dataset, stations: xr.Dataset, flag_bits, pressure_sources) -> None:
    dataset["pressure_source"] = (
        ("station", "time"), stations.pressure_source.values.astype(np.int8),
        {
            "long_name": "source of the pressure at the antenna",
            "flag_values": np.array(list(pressure_sources.values()), np.int8),
            "flag_meanings": " ".join(pressure_sources),
        },
    )  # fmt: skip
    dataset["flag"] = (
        ("station", "time"), stations.flag.values.astype(np.int16),
        {
            "long_name": "why the value is not used; zero where it is",
            "standard_name": "quality_flag", **flag_attributes(flag_bits, np.int16),
        },
    )  # fmt: skip
    for name in ("pressure_source", "flag"):
        dataset[name].encoding = {"zlib": True, "_FillValue": None}


def _add_kriging(dataset: xr.Dataset, stations: xr.Dataset, kriging: dict) -> None:
    attributes = QUANTITIES["variance_factor"].attributes()
    dataset["variance_factor"] = ("time", stations.variance_factor.values, attributes)
    dataset["variance_factor"].encoding = {"dtype": "float32", "_FillValue": _FILL}
    dataset["kriging"] = ((), np.int32(0), {
        "long_name": "covariance of water vapour at the reference height; sills and nugget in "
        "kg2 m-4, by km2 and km4 of height; range, where it has fallen to 5 %, in km",
        **kriging,
    })  # fmt: skip


def _attributes(stations: xr.Dataset, network: NetworkTable, time) -> dict:
    longitude, latitude = stations.longitude.values, stations.latitude.values
    attributes = global_attributes(
        title="delays and water vapour at the stations",
        summary="Zenith delays, surface pressure and precipitable water vapour of the "
        "stations, with the reasons why a value is not used in the fields.",
        network=network,
        product_id=f"stations_{np.datetime_as_string(time[0], unit='m')}",
        time=time,
        bounds=(longitude.min(), latitude.min(), longitude.max(), latitude.max()),
    )
    heights = stations.orthometric_height.values
    return attributes | {
        "featureType": "timeSeries",
        "geospatial_vertical_min": float(heights.min()),
        "geospatial_vertical_max": float(heights.max()),
        "geospatial_vertical_units": "m",
        "geospatial_vertical_positive": "up",
    }
