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
