"""Fields as GeoTIFF: a file a day, a band a step, north up."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import rasterio
from rasterio.transform import from_bounds

from fieldgen.comparing.field_reader import FieldFile
from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import CAUTION, format_time

NODATA = -9999.0


def write_geotiff(fields: FieldFile, variable: str, steps, path: Path) -> None:
    """Write steps (k,) of a variable as 32-bit numbers in its own unit; missing is -9999.

    Each band is described by the end of its step, and tagged with both ends and the unit. Raises
    OutputError.
    """
    dataset = fields.dataset
    values = dataset[variable].values[steps].astype(np.float32)[:, ::-1]
    x, y = dataset.x_bnds.values, dataset.y_bnds.values
    count, height, width = values.shape
    profile = {
        "driver": "GTiff", "dtype": "float32", "count": count, "height": height, "width": width,
        "crs": fields.crs.to_wkt(), "nodata": NODATA,
        "transform": from_bounds(x.min(), y.min(), x.max(), y.max(), width, height),
        "compress": "deflate", "predictor": 3, "interleave": "band",
    }  # fmt: skip
    about = {key: dataset.attrs[key] for key in ("title", "institution", "license", "history")}
    with whole_file(path) as temporary, rasterio.open(temporary, "w", **profile) as raster:
        raster.write(np.nan_to_num(values, nan=NODATA))
        raster.update_tags(**about, comment=CAUTION, AREA_OR_POINT="Area")
        raster.units = [dataset[variable].attrs.get("units", "1")] * count
        for band, (start, end) in enumerate(fields.steps.T[steps], 1):
            raster.set_band_description(band, format_time(end))
            raster.update_tags(
                band,
                time_start=format_time(start),
                time_end=format_time(end),
                long_name=dataset[variable].attrs["long_name"],
            )
