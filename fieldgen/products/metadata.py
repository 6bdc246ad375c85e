"""Attributes that every product shares, after CF and ACDD, as one table apart from the code."""

from __future__ import annotations

from datetime import UTC, datetime
from importlib.metadata import version

import numpy as np

from fieldgen.settings import NetworkTable

CONVENTIONS = "CF-1.11, ACDD-1.3"

CAUTION = (
    "Not a warning product. Decisions belong to the national weather and hydrological services."
)

KEYWORDS = "EARTH SCIENCE > ATMOSPHERE > ATMOSPHERIC WATER VAPOR > PRECIPITABLE WATER"

TIME_ENCODING = {
    "units": "seconds since 1970-01-01 00:00:00",
    "calendar": "standard",
    "dtype": "int64",
    "_FillValue": None,
}
"""One encoding for times and their bounds; CF wants both in the same units."""


def fieldgen_version() -> str:
    """Version of the installed package."""
    return version("fieldgen")


def global_attributes(
    *, title: str, summary: str, network: NetworkTable, product_id: str, time, bounds
) -> dict:
    """Global attributes of a product.

    time (t,) datetime64: stamps, ends of their steps; bounds: west, south, east, north [degrees]
    """
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    step = np.timedelta64(int(network.time_step.total_seconds()), "s")
    start, end = time[0] - step, time[-1]
    return {
        "Conventions": CONVENTIONS,
        "title": f"{network.name}: {title}",
        "summary": summary,
        "comment": CAUTION,
        "keywords": KEYWORDS,
        "keywords_vocabulary": "GCMD Science Keywords",
        "id": product_id,
        "naming_authority": "fieldgen",
        "project": network.name,
        "source": "ground-based GNSS zenith delays and surface weather",
        "processing_level": "made from station means of each time step",
        "history": f"{now} fieldgen {fieldgen_version()}",
        "fieldgen_version": fieldgen_version(),
        "date_created": now,
        "standard_name_vocabulary": "CF Standard Name Table v93",
        **_who_made_it(network),
        **geospatial_attributes(bounds),
        "time_coverage_start": format_time(start),
        "time_coverage_end": format_time(end),
        "time_coverage_duration": format_duration(end - start),
        "time_coverage_resolution": format_duration(step),
    }


def _who_made_it(network: NetworkTable) -> dict:
    """Creator and publisher; what the settings leave out is left out."""
    institution = network.institution or network.name
    contact = {"name": institution, "url": network.url, "email": network.email}
    roles = {
        f"{role}_{key}": value
        for role in ("creator", "publisher")
        for key, value in contact.items()
        if value
    }
    return {"institution": institution, "license": network.license, **roles}


def geospatial_attributes(bounds) -> dict:
    west, south, east, north = (round(float(edge), 5) for edge in bounds)
    return {
        "geospatial_lon_min": west,
        "geospatial_lon_max": east,
        "geospatial_lat_min": south,
        "geospatial_lat_max": north,
        "geospatial_lon_units": "degrees_east",
        "geospatial_lat_units": "degrees_north",
        "geospatial_bounds": f"POLYGON (({west} {south}, {west} {north}, {east} {north}, "
        f"{east} {south}, {west} {south}))",
        "geospatial_bounds_crs": "OGC:CRS84",
    }


def format_duration(duration: np.timedelta64) -> str:
    """ISO 8601 duration, to the minute."""
    return f"PT{int(duration / np.timedelta64(1, 'm'))}M"


def format_time(time) -> str:
    """ISO 8601 text of a datetime64, to the second, UTC."""
    return f"{np.datetime_as_string(time, unit='s')}Z"


def flag_attributes(bits: dict[str, int], dtype) -> dict:
    """CF attributes of a bit mask."""
    return {
        "flag_masks": np.array(list(bits.values()), dtype),
        "flag_meanings": " ".join(bits),
    }


def time_coordinates(time, step) -> dict:
    """Time (t,) and its bounds (t, 2) as xarray wants coordinates; steps end at their stamps."""
    attributes = {
        "standard_name": "time",
        "long_name": "end of the averaging interval, UTC",
        "bounds": "time_bnds",
        "axis": "T",
        "units_metadata": "leap_seconds: none",
    }
    start = time - np.timedelta64(int(step.total_seconds()), "s")
    return {
        "time": ("time", time, attributes, TIME_ENCODING),
        "time_bnds": (("time", "bounds"), np.stack([start, time], axis=1), {}, TIME_ENCODING),
    }
