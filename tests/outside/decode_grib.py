"""GRIB fields -> a NumPy file, in a process of its own: decoders of GRIB crash beside rasterio.

Arguments: GRIB file, output (.npz), then the short names of the fields at the surface or of the
whole column.
"""

from __future__ import annotations

import sys

import eccodes
import numpy as np


def read_fields(path: str, wanted: list[str]) -> dict[str, np.ndarray]:
    """Fields (ny, nx), south row first, by short name, with latitude and longitude [degrees]."""
    fields = {}
    with open(path, "rb") as file:
        while (message := eccodes.codes_grib_new_from_file(file)) is not None:
            name = eccodes.codes_get(message, "shortName")
            if name in wanted:
                shape = eccodes.codes_get(message, "Ny"), eccodes.codes_get(message, "Nx")
                for key, array in (("values", name), ("latitudes", "latitude"),
                                   ("longitudes", "longitude")):  # fmt: skip
                    fields[array] = eccodes.codes_get_array(message, key).reshape(shape)
            eccodes.codes_release(message)
    return fields


if __name__ == "__main__":
    np.savez(sys.argv[2], **read_fields(sys.argv[1], sys.argv[3:]))
