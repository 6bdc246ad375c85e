"""Places to look up at, and the land that the air feels under them."""

from dataclasses import dataclass

import numpy as np
from scipy.ndimage import gaussian_filter, map_coordinates

from generator.setting import CENTRE, TERRAIN_MARGIN, TERRAIN_SPACING, cell_centres, geographic

AIR_FEELS = 7_000  # smoothing of the land that the flow and the daily course follow [m]


@dataclass
class Columns:
    """One entry a column in each array."""

    east: np.ndarray  # from the grid's centre [km]
    north: np.ndarray
    latitude: np.ndarray
    land: np.ndarray  # smoothed height of the land [km]
    landness: np.ndarray  # 0 at sea to 1 inland
    slope_east: np.ndarray  # slope of the smoothed land, rise over run
    slope_north: np.ndarray

    def astype(self, dtype):
        """The same columns in another precision."""
        return Columns(**{name: values.astype(dtype) for name, values in vars(self).items()})


def columns_over(height, easting, northing):
    """Columns above points [m] of the terrain."""
    smooth = gaussian_filter(height, AIR_FEELS / TERRAIN_SPACING)
    slope_north, slope_east = np.gradient(smooth, TERRAIN_SPACING)
    landness = gaussian_filter((height > 0).astype(float), AIR_FEELS / TERRAIN_SPACING)
    land = (
        terrain_at(raster, easting, northing)
        for raster in (smooth / 1000, landness, slope_east, slope_north)
    )
    latitude = geographic(easting, northing)[1]
    return Columns((easting - CENTRE[0]) / 1000, (northing - CENTRE[1]) / 1000, latitude, *land)


def terrain_at(raster, easting, northing):
    """Bilinear value of a raster on the terrain's cells."""
    first_easting, first_northing = (
        axis[0] for axis in cell_centres(TERRAIN_SPACING, TERRAIN_MARGIN)
    )
    places = np.stack([northing - first_northing, easting - first_easting]) / TERRAIN_SPACING
    return map_coordinates(raster, places, order=1, mode="nearest")
