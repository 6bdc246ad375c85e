"""The one table of quantities: unit, CF standard name, long name and plausible limits.

Readers check against the limits, products take their attributes from here.
"""

from __future__ import annotations

from typing import NamedTuple

PACKED_STEP = 0.01
"""Step of packed water vapour [kg m-2], a hundredth of what the best user asks for."""

MISSING = -32768
"""Packed value that stands for a missing one."""


class Quantity(NamedTuple):
    """What a variable is. `standard_name` is empty where CF has none; `content` is ACDD's type."""

    unit: str
    standard_name: str
    long_name: str
    low: float = float("-inf")
    high: float = float("inf")
    content: str = "physicalMeasurement"

    def attributes(self) -> dict[str, str]:
        """CF attributes of a variable that holds this quantity."""
        attributes = {"long_name": self.long_name, "units": self.unit}
        attributes["coverage_content_type"] = self.content
        if self.standard_name:
            attributes["standard_name"] = self.standard_name
        return attributes


_WATER_VAPOUR = "atmosphere_mass_content_of_water_vapor"

QUANTITIES = {
    "ztd": Quantity("m", "", "zenith total delay", 1.0, 3.0),
    "ztd_sigma": Quantity("m", "", "formal standard error of the zenith total delay", 0.0, 0.1),
    "zhd": Quantity("m", "", "zenith hydrostatic delay"),
    "zwd": Quantity("m", "", "zenith wet delay"),
    "pressure": Quantity("hPa", "air_pressure", "air pressure at the antenna", 400.0, 1100.0),
    "temperature": Quantity("K", "air_temperature", "air temperature", 180.0, 340.0),
    "relative_humidity": Quantity("%", "relative_humidity", "relative humidity", 0.0, 105.0),
    "mean_temperature": Quantity(
        "K", "", "mean temperature of the atmosphere weighted by water vapour"
    ),
    "pwv": Quantity("kg m-2", _WATER_VAPOUR, "precipitable water vapour", -3.0, 100.0),
    "pwv_sigma": Quantity(
        "kg m-2",
        f"{_WATER_VAPOUR} standard_error",
        "standard error of precipitable water vapour",
        content="qualityInformation",
    ),
    "residual": Quantity(
        "kg m-2",
        "",
        "station's water vapour less what the other stations say",
        content="qualityInformation",
    ),
    "residual_sigma": Quantity(
        "kg m-2", "", "standard error of the residual", content="qualityInformation"
    ),
    "error_variance": Quantity(
        "kg2 m-4",
        "",
        "error variance of a value used, at the reference height, as kriging takes it",
        content="qualityInformation",
    ),
    "variance_factor": Quantity(
        "1",
        "",
        "variance of the hour's kriging errors over that of the day's covariance",
        content="qualityInformation",
    ),
    "common_sigma": Quantity(
        "kg m-2",
        "",
        "standard error that all cells of an hour share: constants and orbits",
        content="qualityInformation",
    ),
    "common_relative_sigma": Quantity(
        "1",
        "",
        "standard error that all cells of an hour share, relative: mean temperature",
        content="qualityInformation",
    ),
    "pwv_at_reference": Quantity(
        "kg m-2", _WATER_VAPOUR, "precipitable water vapour above the reference height"
    ),
    "terrain": Quantity(
        "m",
        "surface_altitude",
        "mean height of the terrain in the cell",
        content="auxiliaryInformation",
    ),
    "terrain_sd": Quantity(
        "m",
        "surface_altitude",
        "standard deviation of the terrain's height within the cell",
        content="auxiliaryInformation",
    ),
    "scale_height": Quantity("m", "", "scale height of precipitable water vapour"),
    "scale_height_sigma": Quantity(
        "m", "", "standard error of the scale height", content="qualityInformation"
    ),
    "station_count": Quantity(
        "1",
        "number_of_observations",
        "number of stations the field is kriged from",
        content="qualityInformation",
    ),
    "ellipsoidal_height": Quantity(
        "m", "height_above_reference_ellipsoid", "height of the antenna above the ellipsoid"
    ),
    "orthometric_height": Quantity("m", "altitude", "height of the antenna above the geoid"),
    "longitude": Quantity("degrees_east", "longitude", "longitude", -180.0, 360.0, "coordinate"),
    "latitude": Quantity("degrees_north", "latitude", "latitude", -90.0, 90.0, "coordinate"),
}
