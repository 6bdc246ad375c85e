"""Water vapour as GRIB edition 2: a file a day, a message a step.

Discipline 0, category 1, number 64, total column integrated water vapour [kg m-2]; a mean over the
step (template 4.8) from the ground to the top of the atmosphere. Encoded by eccodes in a process of
its own: its libraries crash beside those of rasterio.
"""

from __future__ import annotations

import importlib.util
import json
import subprocess
import sys
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np

from fieldgen.comparing.field_reader import FieldFile
from fieldgen.errors import GridError, InputError, OutputError
from fieldgen.products.atomic import whole_file

VARIABLES = ("pwv",)
"""What GRIB has a number for."""

_SOUTH_ROW_FIRST = 64
_WGS84 = 5
_MICRO = 1_000_000
_CENTI = 100


def write_grib(fields: FieldFile, variable: str, steps, path: Path) -> None:
    """Write steps (k,) of water vapour, in steps of 0.01 kg m-2; missing cells in a bitmap.

    Raises InputError without eccodes or for another variable, GridError for a projection that has
    no template here, OutputError.
    """
    check_possible(variable)
    keys = grid_keys(fields)
    with whole_file(path) as temporary, TemporaryDirectory() as folder:
        job = Path(folder) / "job.npz"
        values = fields.dataset[variable].values[steps].reshape(len(steps), -1)
        np.savez(job, keys=json.dumps(keys), values=values, bounds=_seconds(fields, steps))
        command = [sys.executable, "-m", "fieldgen.exporting.grib_encoder", job, temporary]
        done = subprocess.run(command, capture_output=True, text=True)
        if done.returncode:
            reason = (done.stderr.strip().splitlines() or ["it crashed"])[-1]
            raise OutputError(f"{path}: cannot be encoded as GRIB: {reason}.")


def check_possible(variable: str) -> None:
    """Raise InputError if eccodes is missing, or GRIB has no number for the variable."""
    if variable not in VARIABLES:
        raise InputError(f"--variable: is {variable}, expected pwv, which GRIB has a number for.")
    if importlib.util.find_spec("eccodes") is None:
        raise InputError("GRIB needs the library eccodes: pip install 'fieldgen[grib]'.")


def _seconds(fields: FieldFile, steps):
    """Start and end (k, 2) of the steps, seconds since 1970."""
    return fields.steps.T[steps].astype("datetime64[s]").astype(np.int64)


def grid_keys(fields: FieldFile) -> dict:
    """Keys of GRIB's grid section: longitude and latitude, or transverse Mercator."""
    dataset = fields.dataset
    crs = fields.crs
    x, y = dataset.x.values, dataset.y.values
    shape = {"Ni": len(x), "Nj": len(y), "scanningMode": _SOUTH_ROW_FIRST}
    steps = float(np.diff(x).mean()), float(np.diff(y).mean())
    if not crs.is_projected:
        return {
            "gridType": "regular_ll", **shape,
            "longitudeOfFirstGridPointInDegrees": float(x[0]) % 360.0,
            "latitudeOfFirstGridPointInDegrees": float(y[0]),
            "longitudeOfLastGridPointInDegrees": float(x[-1]) % 360.0,
            "latitudeOfLastGridPointInDegrees": float(y[-1]),
            "iDirectionIncrementInDegrees": steps[0], "jDirectionIncrementInDegrees": steps[1],
        }  # fmt: skip
    about = crs.to_cf()
    if about.get("grid_mapping_name") != "transverse_mercator":
        raise GridError(
            f"{fields.path}: its grid is in {crs.name}; GRIB files are written in longitude and "
            "latitude or in transverse Mercator, such as UTM. Export GeoTIFF."
        )
    return {
        "gridType": "transverse_mercator", **shape, "shapeOfTheEarth": _WGS84,
        "latitudeOfReferencePoint": round(about["latitude_of_projection_origin"] * _MICRO),
        "longitudeOfReferencePoint": round(about["longitude_of_central_meridian"] % 360.0 * _MICRO),
        "scaleFactorAtReferencePoint": about["scale_factor_at_central_meridian"],
        "XR": round(about["false_easting"] * _CENTI), "YR": round(about["false_northing"] * _CENTI),
        "Di": round(steps[0] * _CENTI), "Dj": round(steps[1] * _CENTI),
        "X1": round(x[0] * _CENTI), "Y1": round(y[0] * _CENTI),
        "X2": round(x[-1] * _CENTI), "Y2": round(y[-1] * _CENTI),
    }  # fmt: skip
