"""Files that say what really was; the product never reads them."""

import numpy as np
import rasterio
import xarray as xr

from generator.map_lines import terrain_transform
from generator.setting import CRS, HOURS, SPACING, START, cell_centres

COMPRESSED = {"zlib": True, "complevel": 6, "shuffle": True}
PACKED = {**COMPRESSED, "dtype": "int16", "scale_factor": 0.01, "_FillValue": -32768}
TIME = {"units": f"hours since {str(START).replace('T', ' ')}", "dtype": "int32"}
QUANTITIES = {  # unit and meaning
    "ztd": ("m", "zenith total delay at the antenna"),
    "pwv": ("kg m-2", "precipitable water vapour above the antenna"),
    "pressure": ("hPa", "air pressure at the antenna"),
    "temperature": ("K", "air temperature at the antenna"),
    "vapour_pressure": ("hPa", "vapour pressure at the antenna"),
    "tm": ("K", "weighted mean temperature above the antenna"),
}


def hour_stamps():
    """End of each hour."""
    return START + np.arange(1, HOURS + 1) * np.timedelta64(1, "h")


def write_terrain(path, height):
    """GeoTIFF of orthometric heights in whole metres, north row first, sea 0."""
    profile = {
        "driver": "GTiff",
        "dtype": "int16",
        "count": 1,
        "crs": CRS,
        "transform": terrain_transform(),
        "height": height.shape[0],
        "width": height.shape[1],
        "compress": "deflate",
        "predictor": 2,
    }
    with rasterio.open(path, "w", **profile) as raster:
        raster.write(np.flipud(height).round().astype("int16"), 1)


def write_water_vapour(path, water_vapour):
    """Hourly truth on the grid."""
    easting, northing = cell_centres(SPACING)
    attributes = {
        "standard_name": "atmosphere_mass_content_of_water_vapor",
        "units": "kg m-2",
        "long_name": "precipitable water vapour, mean of the cell and of the hour up to the stamp",
    }
    dataset = xr.Dataset(
        {"pwv": (("time", "y", "x"), water_vapour, attributes)},
        {"time": hour_stamps(), "y": northing, "x": easting},
        {"title": "Invented truth of the demo network", "crs": CRS},
    )
    chunks = {"chunksizes": (24, *water_vapour.shape[1:])}
    dataset.to_netcdf(path, encoding={"pwv": {**PACKED, **chunks}, "time": TIME})


def write_station_air(path, sites, hourly):
    """Hourly truth at the stations, with the heights that they really have."""
    longitude, latitude = sites.position
    quantities = {
        name: (
            ("time", "station"),
            hourly[name],
            {"units": unit, "long_name": f"{meaning}, mean of the hour"},
        )
        for name, (unit, meaning) in QUANTITIES.items()
    }
    places = {
        "longitude": ("station", longitude, {"units": "degrees_east"}),
        "latitude": ("station", latitude, {"units": "degrees_north"}),
        "orthometric_height": ("station", sites.orthometric_height, {"units": "m"}),
        "ellipsoidal_height": ("station", sites.ellipsoidal_height, {"units": "m"}),
    }
    coordinates = {"time": hour_stamps(), "station": sites.identifier, **places}
    dataset = xr.Dataset(quantities, coordinates, {"title": "Invented truth at the demo stations"})
    encoding = {
        name: {**COMPRESSED, "dtype": "float32" if name != "ztd" else "float64"}
        for name in quantities
    }
    dataset.to_netcdf(path, encoding={**encoding, "time": TIME})


MODEL = {  # unit, CF standard name, meaning, step of packing, offset
    "surface_pressure": (
        "hPa",
        "surface_air_pressure",
        "pressure at the model's surface",
        0.02,
        850,
    ),
    "temperature": ("K", "air_temperature", "temperature 2 m above the model's surface", 0.01, 280),
    "tm": ("K", "", "mean temperature of the atmosphere weighted by water vapour", 0.01, 280),
    "surface_height": ("m", "surface_altitude", "height of the model's surface", 0.1, 0),
}


def write_model_weather(path, states, moments, longitude, latitude):
    """Gridded weather as models give it: CF NetCDF on longitude and latitude."""
    variables, encoding = {}, {"time": {**TIME, "dtype": "int32"}}
    for name, (unit, standard_name, meaning, step, offset) in MODEL.items():
        dims = ("time", "latitude", "longitude")[-states[name].ndim :]
        attributes = {"units": unit, "long_name": meaning}
        if standard_name:
            attributes["standard_name"] = standard_name
        variables[name] = (dims, states[name], attributes)
        packing = {"scale_factor": step, "add_offset": float(offset), "_FillValue": -32768}
        encoding[name] = {**COMPRESSED, "dtype": "int16", **packing}
    axes = {
        "time": ("time", moments, {"standard_name": "time"}),
        "latitude": (
            "latitude", latitude, {"standard_name": "latitude", "units": "degrees_north"}
        ),
        "longitude": (
            "longitude", longitude, {"standard_name": "longitude", "units": "degrees_east"}
        ),
    }  # fmt: skip
    title = {"title": "Invented weather model of the demo network", "Conventions": "CF-1.8"}
    xr.Dataset(variables, axes, title).to_netcdf(path, encoding=encoding)
