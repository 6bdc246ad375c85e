"""Areas, such as catchments, from a vector file: GeoJSON, GeoPackage, shapefile and others."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyproj
import shapely

from fieldgen.errors import InputError

NAME_FIELDS = ("name", "id")
"""Fields, in any case, that areas are named by if none is asked for; else they are numbered."""

LONGEST_EDGE = {True: 0.01, False: 1000.0}
"""Of an outline, before it is brought to another CRS [degrees, units of a projected CRS]: what is
straight in one is bent in the other."""

POLYGONS = (shapely.GeometryType.POLYGON, shapely.GeometryType.MULTIPOLYGON)


@dataclass(frozen=True)
class Areas:
    """Polygons with their names.

    outlines : (a,) of shapely, in `crs`, valid; x is east
    notes : what was mended or left out, a line each
    """

    names: list[str]
    outlines: np.ndarray
    crs: pyproj.CRS
    notes: list[str]

    def in_crs(self, crs) -> np.ndarray:
        """Outlines (a,) in another CRS, their edges bent as they are there."""
        edge = LONGEST_EDGE[self.crs.is_geographic]
        return self._transformed(shapely.segmentize(self.outlines, edge), crs)

    def in_degrees(self) -> np.ndarray:
        """Outlines (a,) in longitude and latitude, with the file's own vertices."""
        return self._transformed(self.outlines, "EPSG:4326")

    def _transformed(self, outlines, crs) -> np.ndarray:
        change = pyproj.Transformer.from_crs(self.crs, crs, always_xy=True)
        return shapely.transform(outlines, change.transform, interleaved=False)


def read_areas(path: Path, field: str | None = None) -> Areas:
    """Areas of a vector file; `field` holds their names.

    What is no polygon is left out with a note; outlines that cross themselves are mended. Raises
    InputError if the file cannot be read, names no CRS, lacks the field, or holds no polygon.
    """
    import pyogrio

    try:
        meta, _, geometries, columns = pyogrio.raw.read(path)
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError) as error:
        raise InputError(f"{path}: cannot be read as a vector file: {error}") from None
    if geometries is None or not len(geometries):
        raise InputError(f"{path}: holds no outlines, expected polygons.")
    if not meta["crs"]:
        raise InputError(f"{path}: names no CRS. Write one into it, or add its .prj file.")
    outlines = shapely.force_2d(shapely.from_wkb(geometries, on_invalid="ignore"))
    names = _names(path, dict(zip(meta["fields"], columns, strict=True)), len(outlines), field)
    return _checked(path, names, outlines, pyproj.CRS.from_user_input(meta["crs"]))


def _names(path: Path, columns: dict, count: int, field: str | None) -> list[str]:
    """Names, made different where two are the same."""
    known = {name.lower(): name for name in columns}
    wanted = [field] if field else [name for name in NAME_FIELDS if name in known]
    if field and field.lower() not in known:
        held = ", ".join(columns) or "none"
        raise InputError(f"{path}: field {field!r} is missing, expected one of: {held}.")
    values = columns[known[wanted[0].lower()]] if wanted else np.arange(1, count + 1)
    names, seen = [], {}
    for number, value in enumerate(values, 1):
        text = "" if value is None else str(value).strip()
        name = text or str(number)
        seen[name] = seen.get(name, 0) + 1
        names.append(name if seen[name] == 1 else f"{name} ({seen[name]})")
    return names


def _checked(path: Path, names: list[str], outlines, crs: pyproj.CRS) -> Areas:
    notes, kept = [], []
    for row, (name, outline) in enumerate(zip(names, outlines, strict=True)):
        if outline is None or outline.is_empty or shapely.get_type_id(outline) not in POLYGONS:
            kind = "nothing" if outline is None or outline.is_empty else outline.geom_type
            notes.append(f"{path}, feature {row + 1}, {name}: is {kind}, expected a polygon.")
            continue
        if not shapely.is_valid(outline):
            notes.append(f"{path}, feature {row + 1}, {name}: {shapely.is_valid_reason(outline)}.")
            outlines[row] = shapely.make_valid(outline, method="structure")
        kept.append(row)
    if not kept:
        raise InputError(f"{path}: holds no polygon; {notes[0]}")
    return Areas([names[row] for row in kept], outlines[kept], crs, notes)
