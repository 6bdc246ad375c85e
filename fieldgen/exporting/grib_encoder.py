"""A NumPy file -> GRIB messages, in a process that loads nothing but eccodes.

Arguments: the job (.npz: keys of the grid as JSON, values (k, cells), bounds (k, 2) in seconds) and
the file to write.
"""

from __future__ import annotations

import json
import sys
from datetime import UTC, datetime

import numpy as np

PRODUCT = {
    "centre": 255, "significanceOfReferenceTime": 3, "typeOfProcessedData": 0,
    "productDefinitionTemplateNumber": 8, "parameterCategory": 1, "parameterNumber": 64,
    "typeOfGeneratingProcess": 8, "typeOfFirstFixedSurface": 1, "typeOfSecondFixedSurface": 8,
    "typeOfStatisticalProcessing": 0, "indicatorOfUnitForTimeRange": 13,
}  # fmt: skip
"""Observation, mean over a time of seconds, from the ground to the top of the atmosphere."""

MISSING = 9999.0


def main(job: str, path: str) -> None:
    """Write a message for each step."""
    import eccodes

    content = np.load(job)
    grid = json.loads(str(content["keys"]))
    with open(path, "wb") as file:
        for values, bounds in zip(content["values"], content["bounds"], strict=True):
            message = eccodes.codes_grib_new_from_samples("GRIB2")
            for key, value in {**grid, **PRODUCT, **_times(bounds)}.items():
                eccodes.codes_set(message, key, value)
            eccodes.codes_set(message, "bitmapPresent", 1)
            eccodes.codes_set(message, "missingValue", MISSING)
            eccodes.codes_set(message, "bitsPerValue", 16)
            eccodes.codes_set(message, "decimalScaleFactor", 2)
            numbers = np.nan_to_num(values.astype(float), nan=MISSING)
            eccodes.codes_set_values(message, numbers)
            eccodes.codes_write(message, file)
            eccodes.codes_release(message)


def _times(bounds) -> dict:
    """Keys of the start, which is the reference time, and the end of a step."""
    start, end = (datetime.fromtimestamp(int(one), UTC) for one in bounds)
    return {
        "dataDate": int(start.strftime("%Y%m%d")), "dataTime": int(start.strftime("%H%M")),
        "forecastTime": 0, "lengthOfTimeRange": int(bounds[1] - bounds[0]),
        "yearOfEndOfOverallTimeInterval": end.year, "monthOfEndOfOverallTimeInterval": end.month,
        "dayOfEndOfOverallTimeInterval": end.day, "hourOfEndOfOverallTimeInterval": end.hour,
        "minuteOfEndOfOverallTimeInterval": end.minute,
        "secondOfEndOfOverallTimeInterval": end.second,
    }  # fmt: skip


if __name__ == "__main__":
    main(*sys.argv[1:])
