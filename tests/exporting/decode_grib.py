"""GRIB messages -> a NumPy file, in a process of its own: decoders of GRIB crash beside rasterio.

Arguments: GRIB file, output (.npz).
"""

from __future__ import annotations

import json
import sys

import eccodes
import numpy as np

KEYS = (
    "discipline", "parameterCategory", "parameterNumber", "units", "dataDate", "dataTime",
    "validityDate", "validityTime", "lengthOfTimeRange", "typeOfStatisticalProcessing", "gridType",
    "typeOfFirstFixedSurface", "shortName", "Ni", "Nj",
)  # fmt: skip


def main(path: str, out: str) -> None:
    about, found = [], {"values": [], "latitudes": [], "longitudes": []}
    with open(path, "rb") as file:
        while (message := eccodes.codes_grib_new_from_file(file)) is not None:
            about.append({key: eccodes.codes_get(message, key) for key in KEYS})
            eccodes.codes_set(message, "missingValue", -1.0)
            found["values"].append(eccodes.codes_get_array(message, "values"))
            if about[-1]["gridType"] == "regular_ll":
                for key in ("latitudes", "longitudes"):
                    found[key].append(eccodes.codes_get_array(message, key))
            eccodes.codes_release(message)
    np.savez(out, about=json.dumps(about), **found)


if __name__ == "__main__":
    main(*sys.argv[1:])
