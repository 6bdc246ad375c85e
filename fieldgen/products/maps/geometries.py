"""Coasts and rivers from GeoJSON, cut to the region of a map."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import shapely
from shapely.geometry import shape as build_geometry

from fieldgen.errors import InputError
from fieldgen.input_files import check_is_file

LINE_STEP = 0.05  # longest straight piece of a coast or river [degrees]


def read_geometries(path: Path) -> list[shapely.Geometry]:
    """Geometries of a GeoJSON file, such as a coast or rivers.

    The file holds a FeatureCollection, a Feature or a bare geometry in longitude and latitude
    [degrees]; features without a geometry are left out.
    Raises InputError if the file is missing or is not GeoJSON.
    """
    try:
        check_is_file(path)
        document = json.loads(Path(path).read_text(encoding="utf-8"))
        return [check_position(build_geometry(part)) for part in list_geometries(document)]
    except OSError as error:
        raise InputError(
            f"{path}: the file cannot be read ({error.strerror}). Check the path."
        ) from error
    except (
        ValueError,
        TypeError,
        LookupError,
        AttributeError,
        RecursionError,
        shapely.errors.ShapelyError,
    ) as error:
        raise InputError(
            f"{path}: the content is not GeoJSON, expected a FeatureCollection, a Feature or "
            "a geometry in longitude and latitude. Convert the file to GeoJSON first."
        ) from error


def check_position(geometry: shapely.Geometry) -> shapely.Geometry:
    """The geometry; ValueError if it leaves what can be longitude and latitude [degrees]."""
    longitude, latitude = shapely.get_coordinates(geometry).T
    if not ((np.abs(longitude) <= 720.0).all() and (np.abs(latitude) <= 90.0).all()):
        raise ValueError("expected longitude and latitude")
    return geometry


def list_geometries(document: dict) -> list[dict]:
    """The geometry members of a GeoJSON document that are not null."""
    features = document.get("features", [document])
    found = [part["geometry"] if part["type"] == "Feature" else part for part in features]
    return [geometry for geometry in found if geometry]


def clip_outlines(geometries, region) -> list[shapely.Geometry]:
    """Lines, and the outlines of areas, in and a little around a region.

    geometries : shapely geometries in longitude and latitude, counted from any meridian [degrees]
    region : west, east, south, north [degrees]
    Areas are outlined before they are cut, so that the cut leaves no line.
    """
    parts = shapely.force_2d(shapely.get_parts(np.array(list(geometries), dtype=object)))
    areas = shapely.get_dimensions(parts) == 2
    parts[areas] = shapely.boundary(parts[areas])
    lines = shapely.get_parts(shapely.intersection(parts, window_around(region)))
    lines = lines[(shapely.get_dimensions(lines) == 1) & ~shapely.is_empty(lines)]
    return list(shapely.segmentize(lines, LINE_STEP))


def window_around(region) -> shapely.MultiPolygon:
    """A region and a tenth more, at its longitudes and those a turn to either side."""
    west, east, south, north = region
    margin = 0.1 * max(east - west, north - south)
    return shapely.MultiPolygon(
        [
            shapely.box(west - margin + turn, south - margin, east + margin + turn, north + margin)
            for turn in (-360, 0, 360)
        ]
    )
