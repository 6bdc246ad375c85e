"""Coast, rivers and catchments of the terrain, as features in longitude and latitude."""

import numpy as np
from rasterio.features import shapes
from rasterio.transform import from_origin
from shapely import LineString, coverage_simplify, transform
from shapely.geometry import mapping, shape
from shapely.ops import unary_union

from generator.drainage import drained_area, fill_hollows, outlets, receivers
from generator.setting import TERRAIN_MARGIN, TERRAIN_SPACING, cell_centres, geographic

ISLAND_NAME = "Quendrava"
RIVER_NAMES = [
    "Ostrevane",
    "Kelluvir",
    "Marnoque",
    "Drezhal",
    "Tivonne",
    "Brulgane",
    "Vesquil",
    "Hadrune",
]
CATCHMENTS = 5
RIVER_STARTS = 25  # a river is drawn from where this area drains through it [km2]
TRIBUTARY_STARTS = (
    260  # a side branch is drawn as its own river if it drains more than this at its mouth [km2]
)
TOLERANCE = 250  # simplification of outlines [m]


def terrain_transform():
    """Affine transform of the terrain raster, north row first."""
    easting, northing = cell_centres(TERRAIN_SPACING, TERRAIN_MARGIN)
    half = TERRAIN_SPACING / 2
    return from_origin(easting[0] - half, northing[-1] + half, TERRAIN_SPACING, TERRAIN_SPACING)


def coast(height):
    """One polygon for each island, the largest first and named."""
    (land,) = _outlines((height > 0).astype("int32")).values()
    parts = sorted(_parts(land), key=lambda part: -part.area)
    names = [ISLAND_NAME] + [f"{ISLAND_NAME} islet {number}" for number in range(1, len(parts))]
    return [
        _feature(part, name, f"island-{number}")
        for number, (part, name) in enumerate(zip(parts, names, strict=True), 1)
    ]


def rivers(height):
    """The rivers that drain most land, each from its source to the sea or the river it joins."""
    target, area = _drainage(height)
    lines = [
        LineString(np.column_stack(_positions(course, height.shape)))
        for course in _courses(target, area)
    ]
    return [
        _feature(line.simplify(200), name, f"river-{number}")
        for number, (line, name) in enumerate(zip(lines, RIVER_NAMES, strict=False), 1)
    ]


def catchments(height):
    """The land that drains to each of the largest river mouths, named after the river."""
    target, area = _drainage(height)
    mouths = _mouths(target, area)[:CATCHMENTS]
    passes = _descent(target, mouths)
    label = sum(number * (passes == mouth) for number, mouth in enumerate(mouths, 1))
    outlines = _outlines(label.reshape(height.shape).astype("int32"))
    return [
        _feature(outlines[number], RIVER_NAMES[number - 1], f"catchment-{number}")
        for number in sorted(outlines)
    ]


def _drainage(height):
    """Receiver of each cell, and the area that drains through it [km2]."""
    sea = height <= 0
    target = receivers(
        fill_hollows(height, sea), sea
    )  # whole metres leave level ground that has to drain somewhere
    return target, drained_area(target, (TERRAIN_SPACING / 1000) ** 2)


def _mouths(target, area):
    """Last land cell of each river, the largest first."""
    sea = target == np.arange(target.size)
    last = np.flatnonzero(~sea & sea[target])
    return last[np.argsort(-area[last], kind="stable")]


def _descent(target, stops):
    """The stop that each cell's water passes, or the sea cell it ends in."""
    closed = target.copy()
    closed[stops] = stops
    return outlets(closed)


def _courses(target, area):
    """Main stems, then large tributaries: source first, the cell it flows into last."""
    donors = _donors(target, area)
    starts = list(_mouths(target, area)[: CATCHMENTS + 1])
    while starts:
        course, branches = _upstream(starts.pop(0), donors, area)
        starts += branches
        yield [*course[::-1], target[course[0]]]


def _donors(target, area):
    """Cells that flow into each cell and carry a river."""
    donors = {}
    for cell in np.flatnonzero((area >= RIVER_STARTS) & (target != np.arange(target.size))):
        donors.setdefault(target[cell], []).append(cell)
    return donors


def _upstream(cell, donors, area):
    """The course up from a cell along the larger branch, and the large branches left aside."""
    course, branches = [cell], []
    while cell in donors:
        cell, *others = sorted(donors[cell], key=lambda donor: -area[donor])
        branches += [other for other in others if area[other] >= TRIBUTARY_STARTS]
        course.append(cell)
    return course, branches


def _positions(cells, raster_shape):
    """Easting and northing of raster cells [m]."""
    easting, northing = cell_centres(TERRAIN_SPACING, TERRAIN_MARGIN)
    row, column = np.unravel_index(cells, raster_shape)
    return easting[column], northing[row]


def _outlines(label):
    """Simplified outline of each positive label; neighbours keep a common boundary."""
    pieces = {}
    for geometry, value in shapes(
        np.flipud(label), mask=np.flipud(label) > 0, transform=terrain_transform()
    ):
        pieces.setdefault(int(value), []).append(shape(geometry))
    numbers = sorted(pieces)
    simple = coverage_simplify([unary_union(pieces[number]) for number in numbers], TOLERANCE)
    return dict(zip(numbers, simple, strict=True))


def _parts(geometry):
    """Polygons of a polygon or multipolygon."""
    return list(getattr(geometry, "geoms", [geometry]))


def _feature(geometry, name, identifier):
    """GeoJSON feature in longitude and latitude, rounded to about 10 m."""
    lonlat = transform(geometry, lambda places: np.round(np.column_stack(geographic(*places.T)), 4))
    return {
        "type": "Feature",
        "properties": {"name": name, "id": identifier},
        "geometry": mapping(lonlat),
    }
