"""Fields of a GRIB file -> a NumPy file, in a process of its own: decoders crash beside rasterio.

    python -m fieldgen.readers.grib_decoder GRIB OUTPUT.npz WEST SOUTH EAST NORTH

Writes the surface fields that fieldgen uses, cut to a box of degrees: `fields`, a JSON list of the
name, valid time and grid of each, and their values and points.
"""

from __future__ import annotations

import json
import sys

import numpy as np

SHORT_NAMES = {
    "sp": "surface_pressure", "msl": "msl_pressure", "prmsl": "msl_pressure",
    "2t": "temperature", "orog": "surface_height",
    "z": "surface_geopotential",
}  # fmt: skip
"""Names of eccodes by what they are here. `z`, and `sp`, count at the surface alone."""

UNITS = {
    "surface_pressure": "Pa", "msl_pressure": "Pa", "temperature": "K", "surface_height": "m",
    "surface_geopotential": "m2 s-2",
}  # fmt: skip
"""Units of these fields in GRIB, which fixes them."""

SURFACES = ("surface", "meanSea", "heightAboveGround")


def decode(path: str, box: tuple[float, float, float, float]) -> dict[str, np.ndarray]:
    """Arrays of the output file; box: west, south, east, north, west < east [degrees]."""
    import eccodes

    fields, arrays = [], {}
    with open(path, "rb") as file:
        while (message := eccodes.codes_grib_new_from_file(file)) is not None:
            field = _describe(eccodes, message)
            if field is not None:
                grid = field["grid"]
                if f"keep_{grid}" not in arrays:
                    arrays |= _points(eccodes, message, grid, box)
                eccodes.codes_set(message, "missingValue", 1e20)
                values = eccodes.codes_get_values(message)[arrays[f"keep_{grid}"]]
                arrays[f"values_{len(fields)}"] = np.where(values > 1e19, np.nan, values)
                fields.append(field)
            eccodes.codes_release(message)
    return arrays | {"fields": np.array(json.dumps(fields))}


def _describe(eccodes, message) -> dict | None:
    """What a message holds; None where fieldgen has no use for it."""

    def get(key, default=None):
        return (
            eccodes.codes_get(message, key) if eccodes.codes_is_defined(message, key) else default
        )

    name = SHORT_NAMES.get(get("shortName"))
    usable = get("typeOfLevel") in SURFACES and get("stepType", "instant") == "instant"
    if name is None or not usable or get("perturbationNumber", 0) > 0:
        return None
    return {
        "quantity": name,
        "time": _moment(get("validityDate"), get("validityTime")),
        "base": _moment(get("dataDate"), get("dataTime")),
        "grid": str(get("md5GridSection")),
    }


def _moment(date: int, time: int) -> str:
    """ISO 8601 text of YYYYMMDD and HHMM."""
    text = f"{date:08d}"
    return f"{text[:4]}-{text[4:6]}-{text[6:]}T{time // 100:02d}:{time % 100:02d}"


def _points(eccodes, message, grid: str, box) -> dict[str, np.ndarray]:
    """Longitude, latitude and index of the points of a grid that lie in the box."""
    west, south, east, north = box
    latitude = eccodes.codes_get_array(message, "latitudes")
    longitude = west + (eccodes.codes_get_array(message, "longitudes") - west) % 360.0
    inside = (latitude >= south) & (latitude <= north) & (longitude <= east)
    keep = np.flatnonzero(inside)
    return {
        f"keep_{grid}": keep,
        f"latitude_{grid}": latitude[keep],
        f"longitude_{grid}": longitude[keep],
    }


if __name__ == "__main__":
    np.savez(sys.argv[2], **decode(sys.argv[1], tuple(map(float, sys.argv[3:7]))))
