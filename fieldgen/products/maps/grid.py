"""What a map needs to know of the grid of a field dataset."""

from __future__ import annotations

from dataclasses import dataclass

import cartopy.crs as ccrs
import numpy as np
import pyproj
import xarray as xr

EARTH_DEGREE = 111_195.0  # length of a degree on a sphere of 6371 km [m]


@dataclass(frozen=True)
class MapGrid:
    """Projection, edges, terrain and sea of a grid.

    Projected positions are in the units of the grid's coordinate system, or for a geographic grid
    in degrees east of its middle.
    """

    projection: ccrs.Projection
    extent: tuple  # west, east, south, north edge in the projection
    region: tuple  # west, east, south, north [degrees]
    unit: tuple  # length of a unit of the projection in x and in y [m]
    terrain: np.ndarray  # (y, x) [m]
    sea: np.ndarray  # (y, x) bool

    @property
    def size(self) -> tuple[float, float]:
        """Width and height [m]."""
        west, east, south, north = self.extent
        return (east - west) * self.unit[0], (north - south) * self.unit[1]

    def project(self, longitude, latitude) -> np.ndarray:
        """Positions (point, 2) in the projection from arrays (point) [degrees]."""
        return self.projection.transform_points(ccrs.PlateCarree(), longitude, latitude)[:, :2]


def read_map_grid(fields: xr.Dataset, sea_bit: int) -> MapGrid:
    """The grid of a field dataset; cells without terrain count as sea."""
    crs = pyproj.CRS.from_wkt(fields["crs"].attrs["crs_wkt"])
    frame = geographic_frame(fields) if crs.is_geographic else projected_frame(fields, crs)
    terrain = fields["terrain"].values
    sea = fields["flag"].isel(time=0).values & sea_bit != 0
    return MapGrid(**frame, terrain=terrain, sea=sea | np.isnan(terrain))


def geographic_frame(fields: xr.Dataset) -> dict:
    """Projection, extent, region and unit of a grid in longitude and latitude."""
    west, east, south, north = region = read_edges(fields)
    middle = (west + east) / 2
    return {
        "projection": ccrs.PlateCarree(central_longitude=middle),
        "extent": (west - middle, east - middle, south, north),
        "region": region,
        "unit": (EARTH_DEGREE * np.cos(np.radians((south + north) / 2)), EARTH_DEGREE),
    }


def projected_frame(fields: xr.Dataset, crs: pyproj.CRS) -> dict:
    """Projection, extent, region and unit of a grid in a projected coordinate system.

    The projection is bounded a little outside the grid, wherever else its own area of use lies.
    """
    west, east, south, north = extent = read_edges(fields)
    margin = 0.02 * max(east - west, north - south)
    projection = ccrs.Projection(crs)
    projection.bounds = (west - margin, east + margin, south - margin, north + margin)
    projection.threshold = margin / 20
    longitude, latitude = fields["longitude"].values, fields["latitude"].values
    middle = longitude[longitude.shape[0] // 2, longitude.shape[1] // 2]
    longitude = middle + (longitude - middle + 180) % 360 - 180
    return {
        "projection": projection,
        "extent": extent,
        "region": (longitude.min(), longitude.max(), latitude.min(), latitude.max()),
        "unit": (crs.axis_info[0].unit_conversion_factor,) * 2,
    }


def read_edges(fields: xr.Dataset) -> tuple[float, float, float, float]:
    """Outer edges of the cells: west, east, south, north, in the units of x and y."""
    x, y = fields["x"].values, fields["y"].values
    half_x, half_y = (x[1] - x[0]) / 2, (y[1] - y[0]) / 2
    edges = x[0] - half_x, x[-1] + half_x, y[0] - half_y, y[-1] + half_y
    return tuple(float(edge) for edge in edges)
