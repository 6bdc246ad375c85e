"""Fields of a folder in another format."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

import numpy as np

from fieldgen.comparing.field_reader import FieldFile, open_fields
from fieldgen.errors import InputError
from fieldgen.exporting.geotiff import write_geotiff
from fieldgen.exporting.grib import write_grib

VARIABLES = ("pwv", "pwv_sigma", "pwv_at_reference", "flag")


class Format(NamedTuple):
    """How a format is written, and how its files end."""

    write: Callable[[FieldFile, str, np.ndarray, Path], None]
    suffix: str


FORMATS = {"geotiff": Format(write_geotiff, "tif"), "grib2": Format(write_grib, "grib2")}


def export_fields(
    folder: Path, form: str, variable: str, out: Path, start=None, end=None
) -> list[Path]:
    """Write a variable of all days of a folder as <out>/<variable>_YYYYMMDD.<suffix>.

    start, end : datetime64; steps between them, by default all. Raises InputError if there are
    none, and what the format raises.
    """
    paths = sorted((folder / "fields").glob("pwv_*.nc"))
    if not paths:
        raise InputError(
            f"{folder}: holds no fields/pwv_*.nc, expected the folder of `fieldgen make`."
        )
    written = []
    for fields in open_fields(paths):
        fields.check_even(form)
        first, last = fields.steps
        kept = np.ones(len(first), bool)
        kept &= True if start is None else first >= start
        kept &= True if end is None else last <= end
        if kept.any():
            name = fields.path.stem.replace("pwv_", f"{variable}_")
            written.append(out / f"{name}.{FORMATS[form].suffix}")
            FORMATS[form].write(fields, variable, np.flatnonzero(kept), written[-1])
    if not written:
        raise InputError(f"{folder}: no step of its fields lies within the period.")
    return written
