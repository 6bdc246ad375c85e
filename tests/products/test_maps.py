"""Hourly maps: tested by artists, extents and single pixels; the networks are invented."""

import itertools
import json
import socket
import subprocess
import sys
import time

import matplotlib
import numpy as np
import pyproj
import pytest
import shapely
import xarray as xr
from matplotlib.contour import ContourSet
from PIL import Image

from fieldgen.errors import InputError, OutputError
from fieldgen.products import look
from fieldgen.products.maps import (
    MapPainter,
    clean_name,
    clip_outlines,
    enlarge_cells,
    format_facts,
    format_hour,
    make_colour_map,
    place_values,
    read_geometries,
    read_hour_bounds,
    write_maps,
    write_picture,
)
from fieldgen.products.metadata import CAUTION

UTM = "EPSG:32637"
HOUR = np.timedelta64(1, "h")
FLAGS = {
    "flag_masks": np.array([1, 2, 4, 8, 16], dtype=np.uint8),
    "flag_meanings": "extrapolated_in_height far_from_stations too_few_stations "
    "sigma_above_5_kg_m2 sea",
}


def make_island(rows=94, columns=104, hours=2, crs=UTM, cell=1000.0, corner=(430e3, 3990e3)):
    """A field dataset over an island of two mountains, moist in the south and by day."""
    x = corner[0] + cell * (np.arange(columns) + 0.5)
    y = corner[1] + cell * (np.arange(rows) + 0.5)
    u, v = np.meshgrid(np.linspace(-1, 1, columns), np.linspace(-1, 1, rows))
    shore = u**2 + v**2 + 0.12 * np.sin(5 * np.arctan2(v, u)) + 0.05 * np.sin(17 * u - 11 * v)
    ridges = 900 + 500 * np.sin(9 * u + 4 * v) * np.cos(6 * v - 2 * u)
    ridges += 260 * np.abs(np.sin(31 * u - 13 * v)) + 180 * np.sin(23 * v + 41 * u)
    peaks = 1900 * np.exp(-((u - 0.3) ** 2 + (v + 0.1) ** 2) / 0.04)
    terrain = np.clip((ridges + peaks) * np.clip(1.1 * (0.72 - shore), 0, 1), 0, None)
    sea = shore >= 0.72
    hour = np.datetime64("2026-09-14T01:00", "ns") + np.arange(hours) * HOUR
    phase = 2 * np.pi * np.arange(hours)[:, None, None] / 24
    pwv = (27 - 5 * v + 4 * np.sin(3 * u + 2 * phase) - 3 * np.cos(phase)) * np.exp(-terrain / 2200)
    flag = (
        16 * sea
        + 1 * (terrain > 1100)
        + 2 * (u**2 + v**2 > 1.3)
        + 8 * ((u + 0.9) ** 2 + (v - 0.8) ** 2 < 0.12)
    )
    flag = np.broadcast_to(flag, pwv.shape).astype(np.uint8)
    reference = pyproj.CRS(crs)
    fields = xr.Dataset(
        {
            "pwv": (("time", "y", "x"), pwv),
            "flag": (("time", "y", "x"), flag.copy(), FLAGS),
            "time_bnds": (("time", "bounds"), np.stack([hour - HOUR, hour], axis=1)),
            "terrain": (("y", "x"), terrain),
            "scale_height": ("time", np.full(hours, 2140.0)),
            "station_count": ("time", np.full(hours, 38)),
            "crs": ((), 0, {"crs_wkt": reference.to_wkt()}),
        },
        coords={"time": ("time", hour, {"bounds": "time_bnds"}), "y": y, "x": x},
        attrs={"fieldgen_version": "0.1.0"},
    )
    if reference.is_geographic:
        return fields
    longitude, latitude = pyproj.Transformer.from_crs(
        reference, "EPSG:4326", always_xy=True
    ).transform(*np.meshgrid(x, y))
    return fields.assign_coords(longitude=(("y", "x"), longitude), latitude=(("y", "x"), latitude))


def make_stations(fields, cells):
    """A station dataset with stations in the middle of cells (row, column), all used."""
    row, column = np.transpose(cells)
    if "longitude" in fields:
        longitude, latitude = fields["longitude"].values, fields["latitude"].values
    else:
        longitude, latitude = np.meshgrid(fields["x"].values, fields["y"].values)
    pwv = fields["pwv"].values[:, row, column].T.copy()
    return xr.Dataset(
        {
            "pwv": (("station", "time"), pwv),
            "flag": (("station", "time"), np.zeros(pwv.shape, dtype=np.uint8)),
        },
        coords={
            "time": fields["time"],
            "longitude": ("station", longitude[row, column]),
            "latitude": ("station", latitude[row, column]),
        },
    )


def make_painter(fields, **options):
    return MapPainter(fields, **{"network_name": "Ostrana", "limits": (5, 40), **options})


def words_of(figure):
    return [text.get_text() for text in figure.texts]


GRIDS = {
    "projected": {"rows": 12, "columns": 16},
    "geographic": {
        "rows": 12, "columns": 16, "crs": "EPSG:4326", "cell": 0.25, "corner": (178.0, -20.0),
    },
}  # fmt: skip


@pytest.fixture(params=GRIDS.values(), ids=GRIDS.keys())
def small(request):
    return make_island(**request.param)


@pytest.fixture(scope="module")
def island():
    return make_island()


@pytest.fixture(scope="module")
def painter(island):
    return make_painter(island)


def pixel_of_cell(picture, shape, row, column):
    """The pixel in the middle of a cell counted from the south-west corner."""
    width, height = picture.size
    across = int((column + 0.5) / shape[1] * width)
    down = int((shape[0] - row - 0.5) / shape[0] * height)
    return picture.getpixel((across, down))


def test_paint_field_puts_north_east_cell_in_north_east_corner(small):
    """Analytic: one moist cell in a dry field; the mirrored corner must stay dry."""
    painter = make_painter(small)
    pwv = np.full((12, 16), 5.0)
    pwv[-1, -1] = 40.0
    picture = painter.paint_field(pwv, np.full(pwv.shape, 16, dtype=np.uint8))
    width, height = picture.size
    assert picture.getpixel((width - 2, 1)) == hex_bytes(look.PWV_COLOURS[-1])
    for corner in [(1, 1), (1, height - 2), (width - 2, height - 2)]:
        assert picture.getpixel(corner) == hex_bytes(look.PWV_COLOURS[0])


def test_station_dot_lies_on_the_cell_of_its_position(small):
    """Second derivation: longitude and latitude through the projection, cells by counting."""
    painter = make_painter(small)
    marks = painter.place_stations(make_stations(small, [(11, 15), (2, 3)]))
    left, bottom, width, height = painter.layout.map_box
    on_page = painter.axes.transData.transform(marks.positions)
    for (row, column), (across, up) in zip([(11, 15), (2, 3)], on_page, strict=True):
        assert across == pytest.approx(left + (column + 0.5) / 16 * width, abs=0.5)
        assert up == pytest.approx(bottom + (row + 0.5) / 12 * height, abs=0.5)


def test_map_fills_its_box_with_the_outer_edges_of_the_cells(island, painter):
    west, east, south, north = painter.axes.get_extent(painter.grid.projection)
    assert (west, east) == pytest.approx((430e3, 534e3))
    assert (south, north) == pytest.approx((3990e3, 4084e3))
    left, bottom, width, height = painter.layout.map_box
    assert painter.axes.bbox.bounds == pytest.approx((left, bottom, width, height))
    assert width / height == pytest.approx(104 / 94, rel=2 / height)


def test_geographic_map_shows_a_degree_north_longer_than_one_east():
    """Analytic: at 60 degrees a degree of longitude is half as long as one of latitude."""
    fields = make_island(rows=10, columns=20, crs="EPSG:4326", cell=0.1, corner=(10.0, 59.5))
    _, _, width, height = make_painter(fields).layout.map_box
    assert width / height == pytest.approx(1.0, abs=0.01)


def test_painted_sea_has_the_colours_of_the_bar(island, painter):
    colours, norm = make_colour_map(), painter.norm
    picture = painter.paint_field(island["pwv"].values[0], np.full((94, 104), 16, np.uint8))
    for row, column in [(2, 50), (90, 5), (50, 1)]:
        expected = 255 * np.array(colours(norm(island["pwv"].values[0, row, column])))[:3]
        found = pixel_of_cell(picture, (94, 104), row, column)
        assert found == pytest.approx(expected, abs=0.51)


def test_paint_field_gives_a_value_the_same_colour_in_all_hours(island, painter):
    moist, dry = island["pwv"].values.copy()
    moist[:], dry[:] = 38.0, 6.0
    moist[0, 0] = dry[0, 0] = 20.0
    flag = np.full(moist.shape, 16, dtype=np.uint8)
    first, second = painter.paint_field(moist, flag), painter.paint_field(dry, flag)
    assert pixel_of_cell(first, moist.shape, 0, 0) == pixel_of_cell(second, moist.shape, 0, 0)
    assert pixel_of_cell(first, moist.shape, 50, 50) != pixel_of_cell(second, moist.shape, 50, 50)


def test_paint_field_hatches_flagged_cells_only(island, painter):
    """Negative control: the same field without flags differs in all flagged cells, no others."""
    pwv = island["pwv"].values[0].copy()
    pwv[40:50, 40:50] = np.nan
    flag = np.zeros(pwv.shape, dtype=np.uint8)
    flag[30:45, 35:45] |= 1
    flag[60:70, 60:75] |= 2
    flag[5:9, 5:9] |= 16
    plain = np.asarray(painter.paint_field(pwv, np.zeros_like(flag)))
    hatched = np.asarray(painter.paint_field(pwv, flag))
    inked = (plain != hatched).any(axis=-1)
    expected = (flag & 3 != 0) & np.isfinite(pwv)
    allowed = enlarge_cells(expected, inked.shape)
    assert not inked[~allowed].any()
    assert 0.1 < inked[allowed].mean() < 0.4
    across = enlarge_cells(np.arange(pwv.size).reshape(pwv.shape), inked.shape)
    assert set(np.unique(across[inked])) == set(np.flatnonzero(expected))


def test_paint_field_greys_missing_cells(island, painter):
    pwv = island["pwv"].values[0].copy()
    pwv[10, 20] = np.nan
    picture = painter.paint_field(pwv, island["flag"].values[0])
    assert pixel_of_cell(picture, pwv.shape, 10, 20) == hex_bytes(look.MISSING_COLOUR)
    assert pixel_of_cell(picture, pwv.shape, 10, 21) != hex_bytes(look.MISSING_COLOUR)


def test_enlarge_cells_turns_the_south_row_down():
    pixels = enlarge_cells(np.array([[1, 2], [3, 4]]), (4, 2))
    np.testing.assert_array_equal(pixels, [[3, 4], [3, 4], [1, 2], [1, 2]])


def test_shade_relief_lights_slopes_to_the_north_west(painter):
    """Analytic: a pyramid; its north-west face is bright, its south-east face dark."""
    x, y = np.meshgrid(np.arange(-20, 21), np.arange(-20, 21))
    terrain = 2500 - 100.0 * np.maximum(abs(x), abs(y)) - abs(x + y)
    fields = make_island(rows=41, columns=41, cell=500.0)
    fields["terrain"].values[:] = terrain
    fields["flag"].values[:] = 0
    relief = make_painter(fields).relief
    assert relief[30, 12] > 1 > relief[12, 30]
    assert relief.mean() == pytest.approx(1)
    assert abs(relief - 1).max() == pytest.approx(look.RELIEF_STRENGTH)


def test_shade_relief_leaves_sea_and_level_land_alone(island, painter):
    sea = island["flag"].values[0] & 16 != 0
    assert (painter.relief[sea] == 1).all()
    assert painter.relief[~sea].std() > 0
    level = make_island(rows=8, columns=9)
    level["terrain"].values[:] = 300.0
    level["flag"].values[:] = 0
    assert (make_painter(level).relief == 1).all()


def lightness_and_hue(colours):
    """CIELAB (colour, 3) of sRGB (colour, 3), by the definition of IEC 61966-2-1 and CIE 15."""
    linear = linear_light(colours)
    matrix = [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]
    ratio = linear @ np.transpose(matrix) / [0.9505, 1.0, 1.089]
    cube = np.where(ratio > (6 / 29) ** 3, np.cbrt(ratio), ratio / (3 * (6 / 29) ** 2) + 4 / 29)
    x, y, z = cube.T
    return np.transpose([116 * y - 16, 500 * (x - y), 200 * (y - z)])


def linear_light(colours):
    return np.where(colours <= 0.04045, colours / 12.92, ((colours + 0.055) / 1.055) ** 2.4)


def hex_bytes(colour):
    return tuple(int(colour[place : place + 2], 16) for place in (1, 3, 5))


RAMP = np.array([hex_bytes(colour) for colour in look.PWV_COLOURS]) / 255
# Machado, Oliveira and Fernandes (2009), severity 1.
SIGHT = {
    "full": np.eye(3),
    "protanopia": [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ],
    "deuteranopia": [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ],
}


def seen_colours(colours, sight):
    linear = np.clip(linear_light(np.asarray(colours)) @ np.transpose(SIGHT[sight]), 0, 1)
    coded = 1.055 * linear ** (1 / 2.4) - 0.055
    return lightness_and_hue(np.where(linear <= 0.0031308, 12.92 * linear, coded))


def test_colours_darken_in_even_steps():
    """Second derivation: CIELAB; steps alike within 5 %, the printed digits of the colours."""
    ramp = lightness_and_hue(RAMP)
    steps = np.linalg.norm(np.diff(ramp, axis=0), axis=1)
    assert steps == pytest.approx(np.full(12, steps.mean()), rel=0.05)
    assert (np.diff(ramp[:, 0]) < -4).all()


@pytest.mark.parametrize("sight", SIGHT)
def test_colours_stay_apart_in_all_kinds_of_sight(sight):
    """Published matrices; a distance of 2.3 in CIELAB is just noticeable."""
    ramp = seen_colours(RAMP, sight)
    assert (np.linalg.norm(np.diff(ramp, axis=0), axis=1) > 2 * 2.3).all()
    grey = seen_colours([np.array(hex_bytes(look.MISSING_COLOUR)) / 255], sight)
    assert (np.linalg.norm(ramp - grey, axis=1) > 5 * 2.3).all()


@pytest.mark.parametrize("side", [-1, 1])
def test_relief_moves_a_colour_by_less_than_a_step(side):
    shaded = np.clip(RAMP * (1 + side * look.RELIEF_STRENGTH), 0, 1)
    ramp = lightness_and_hue(RAMP)
    moved = np.linalg.norm(lightness_and_hue(shaded) - ramp, axis=1)
    assert moved.max() < np.linalg.norm(np.diff(ramp, axis=0), axis=1).min()


def test_look_loads_no_drawing_library():
    code = "import sys, fieldgen.products.look; print('matplotlib' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"


def test_show_fills_used_stations_and_crosses_out_the_others(island, painter):
    stations = make_stations(island, [(20, 30), (50, 50), (70, 60), (40, 70)])
    marks = painter.place_stations(stations)
    pwv, flag = np.array([10.0, 20.0, np.nan, 30.0]), np.array([0, 0, 0, 4])
    marks.show(pwv, flag, painter.colours, painter.norm)
    np.testing.assert_allclose(marks.dots.get_offsets(), marks.positions[:2])
    np.testing.assert_allclose(marks.crosses.get_offsets(), marks.positions[2:])
    expected = painter.colours(painter.norm([10.0, 20.0]))
    np.testing.assert_allclose(marks.dots.get_facecolors(), expected)
    assert len(marks.values.get_paths()) == len(marks.halos.get_paths()) == 2
    np.testing.assert_allclose(marks.values.get_offsets()[1], marks.places[1])


def test_place_values_keeps_values_off_dots_and_one_another():
    """Second derivation: all boxes compared in pairs, for a crowd with too little room."""
    crowd = np.random.default_rng(5).uniform(0, 300, (60, 2))
    places = place_values(crowd, (0, 0, 300, 300))
    assert 10 < len(places) < 60
    half = np.array([11, 7.5])
    boxes = [np.concatenate([place - half, place + half]) for place in places.values()]
    assert all(box.min() >= 0 and box.max() <= 300 for box in boxes)
    boxes += [np.r_[dot - 8, dot + 8] for dot in crowd]
    for one, other in itertools.product(boxes[: len(places)], boxes):
        overlap = np.minimum(one[2:], other[2:]) - np.maximum(one[:2], other[:2])
        assert one is other or overlap.min() <= 1e-9


def test_place_values_leaves_out_stations_beyond_the_map():
    assert list(place_values(np.array([[50.0, 50], [-20, 50], [50, 120]]), (0, 0, 100, 100))) == [0]


@pytest.mark.parametrize("name", ["Net $x^2$ & <b>bold</b> $", r"\alpha_{1} %s {0} #", "Ørø Ňet"])
def test_title_draws_names_literally(island, name):
    painter = make_painter(island, network_name=name)
    (text,) = [text for text in painter.figure.texts if text.get_text() == name]
    assert not text.get_parse_math()


def test_clean_name_leaves_one_line_without_control_characters():
    assert clean_name(" North\tcoast\r\n\x1b[31m\x00net\u202e ") == "North coast [31m net"


def test_title_of_any_length_stays_on_the_picture(island):
    painter = make_painter(island, network_name="A very long name " * 30)
    width, height = painter.layout.size
    for text in painter.figure.texts:
        left, bottom, right, top = text.get_window_extent().extents
        assert 0 <= left <= right <= width
        assert 0 <= bottom <= top <= height
    assert any(words.endswith("…") for words in words_of(painter.figure))


SHAPES = {"square": (60, 60), "wide": (10, 90), "tall": (90, 10), "two cells": (2, 2)}


@pytest.mark.parametrize("shape", SHAPES.values(), ids=SHAPES.keys())
def test_nothing_overlaps_or_leaves_the_picture(shape):
    fields = make_island(rows=shape[0], columns=shape[1])
    painter = make_painter(fields, limits=(0, 60))
    painter.draw_hour(fields.isel(time=0), *hour_of_stations(painter, fields))
    width, height = painter.layout.size
    left, bottom, across, up = painter.layout.map_box
    boxes = [text.get_window_extent().extents for text in painter.figure.texts]
    bar = painter.figure.axes[1]
    renderer = painter.figure.canvas.get_renderer()
    boxes += [bar.get_tightbbox(renderer).extents, (left, bottom, left + across, bottom + up)]
    for box in boxes:
        assert box[0] >= 0 and box[1] >= 0 and box[2] <= width and box[3] <= height
    for one, other in itertools.combinations(boxes, 2):
        assert min(one[2], other[2]) <= max(one[0], other[0]) or min(one[3], other[3]) <= max(
            one[1], other[1]
        )


def hour_of_stations(painter, fields):
    stations = make_stations(fields, [(0, 0), (1, 1)])
    return stations.isel(time=0), painter.place_stations(stations)


def test_base_tells_caution_version_and_unit(painter):
    words = words_of(painter.figure)
    assert {CAUTION, "fieldgen 0.1.0", "kg m⁻² (= mm)", "Ostrana"} <= set(words)
    assert {"beyond the stations' heights", "far from stations", look.MISSING_LABEL} <= set(words)


def test_colour_bar_shows_the_limits_of_the_run(painter):
    assert painter.figure.axes[1].get_ylim() == (5, 40)


def test_format_hour_ends_a_day_at_24():
    late = np.datetime64("2026-09-14T23:00")
    assert (
        format_hour(late, late + np.timedelta64(1, "h")) == "mean over 23:00–24:00 UTC, 2026-09-14"
    )


def test_read_hour_bounds_are_those_of_the_field(island):
    """Negative control: the stamp is the end of the hour, not its start."""
    field = island.isel(time=1)
    start, end = read_hour_bounds(field)
    assert (start, end) == (field["time"] - np.timedelta64(1, "h"), field["time"])


@pytest.mark.parametrize(
    ("count", "scale_height", "facts"),
    [(38, 2140.0, "38 stations used · scale height 2.1 km"), (1, np.nan, "1 station used")],
)
def test_format_facts(count, scale_height, facts):
    field = xr.Dataset({"station_count": count, "scale_height": scale_height})
    assert format_facts(field) == facts


def test_coast_of_sea_cells_runs_between_land_and_sea(painter, island):
    (coast,) = [a for a in painter.axes.collections if isinstance(a, ContourSet)]
    x, y = np.concatenate([path.vertices for path in coast.get_paths()]).T
    column, row = (x - 430e3) / 1000 - 0.5, (y - 3990e3) / 1000 - 0.5
    sea = island["flag"].values[0] & 16 != 0
    for across, up in zip(column, row, strict=True):
        ends = {
            sea[int(np.floor(up)), int(np.floor(across))],
            sea[round(up + 0.01), round(across + 0.01)],
        }
        ends |= {sea[int(np.ceil(up)), int(np.ceil(across))]}
        assert ends == {True, False}


def test_coast_given_takes_the_place_of_the_sea_cells(island):
    """Second derivation: pyproj on the corners of a lake, which lie on the coast drawn."""
    lake = shapely.box(38.6, 36.3, 39.0, 36.6)
    painter = make_painter(island, coast=[lake])
    assert not [a for a in painter.axes.collections if isinstance(a, ContourSet)]
    coast = painter.axes.collections[0]
    vertices = np.concatenate(coast.get_segments())
    corners = pyproj.Transformer.from_crs("EPSG:4326", UTM, always_xy=True).transform(
        *lake.exterior.coords.xy
    )
    for corner in np.transpose(corners):
        assert np.linalg.norm(vertices - corner, axis=1).min() < 1.0


def test_region_of_a_projected_grid_runs_on_across_the_date_line():
    """Second derivation: 180 degrees east is 816 km east in UTM zone 60, by pyproj."""
    fields = make_island(rows=20, columns=20, crs="EPSG:32760", corner=(806e3, 8000e3))
    west, east, _, _ = make_painter(fields).grid.region
    assert 179.8 < west < 180 < east < 180.2


@pytest.mark.parametrize("turn", [0, 360], ids=["-180 to 180", "0 to 360"])
def test_clip_outlines_finds_lines_counted_from_any_meridian(turn):
    region = (178.0, 181.0, -20.0, -17.0)
    east = shapely.LineString([(-179.8 + turn, -18), (-179.2 + turn, -18)])
    far = shapely.LineString([(10, 50), (11, 50)])
    (line,) = clip_outlines([far, east, shapely.Point(179, -18)], region)
    assert line.length == pytest.approx(0.6)


def test_clip_outlines_of_an_area_leaves_no_line_along_the_cut():
    """Analytic: a land that covers the whole region has no coast in it."""
    assert clip_outlines([shapely.box(-50, -50, 50, 50)], (0, 1, 0, 1)) == []
    assert clip_outlines([], (0, 1, 0, 1)) == []


GEOJSON = {
    "collection": {
        "type": "FeatureCollection",
        "features": [
            {"type": "Feature", "geometry": {"type": "Point", "coordinates": [1, 2]}},
            {"type": "Feature", "geometry": None},
        ],
    },
    "feature": {"type": "Feature", "geometry": {"type": "Point", "coordinates": [1, 2]}},
    "geometry": {"type": "Point", "coordinates": [1, 2]},
}


@pytest.mark.parametrize("document", GEOJSON.values(), ids=GEOJSON.keys())
def test_read_geometries_reads_every_kind_of_document(tmp_path, document):
    path = tmp_path / "coast.geojson"
    path.write_text(json.dumps(document), encoding="utf-8")
    assert read_geometries(path) == [shapely.Point(1, 2)]


BROKEN = {
    "text": b"not json",
    "bytes": b"\xff\xfe\x00",
    "list": b"[1, 2]",
    "number": b"3",
    "other object": b'{"name": "coast"}',
    "no coordinates": b'{"type": "Point"}',
    "unknown type": b'{"type": "Blob", "coordinates": [1, 2]}',
    "words": b'{"type": "LineString", "coordinates": "north"}',
    "short line": b'{"type": "LineString", "coordinates": [[1, 2]]}',
    "feature list": b'{"type": "FeatureCollection", "features": 4}',
}


@pytest.mark.parametrize("content", BROKEN.values(), ids=BROKEN.keys())
def test_read_geometries_names_a_file_that_is_not_geojson(tmp_path, content):
    path = tmp_path / "coast.geojson"
    path.write_bytes(content)
    with pytest.raises(InputError, match=r"coast\.geojson: the content is not GeoJSON"):
        read_geometries(path)


def test_read_geometries_names_a_missing_file(tmp_path):
    with pytest.raises(InputError, match=r"coast\.geojson: the file cannot be read"):
        read_geometries(tmp_path / "coast.geojson")


def test_write_maps_leaves_one_picture_an_hour_and_the_newest(tmp_path, island, painter):
    folder = tmp_path / "new" / "maps"
    paths = write_maps(island, make_stations(island, [(40, 50), (60, 30)]), folder, painter)
    names = ["pwv_20260914T0100Z.png", "pwv_20260914T0200Z.png"]
    assert [path.name for path in paths] == names
    assert sorted(path.name for path in folder.iterdir()) == ["latest.png", *names]
    assert (folder / "latest.png").read_bytes() == paths[-1].read_bytes()
    with Image.open(paths[0]) as picture:
        assert (picture.format, picture.mode) == ("PNG", "RGB")
        assert picture.size == painter.layout.size


def test_write_maps_of_an_earlier_hour_keeps_latest(tmp_path, island, painter):
    stations = make_stations(island, [(40, 50)])
    newest = write_maps(island, stations, tmp_path, painter)[-1]
    write_maps(island.isel(time=[0]), stations, tmp_path, painter)
    assert (tmp_path / "latest.png").read_bytes() == newest.read_bytes()


def test_write_maps_does_not_depend_on_the_hours_before(tmp_path, island, painter):
    stations = make_stations(island, [(40, 50), (60, 30)])
    both = write_maps(island, stations, tmp_path / "both", painter)
    alone = write_maps(island.isel(time=[1]), stations, tmp_path / "alone", painter)
    assert both[1].read_bytes() == alone[0].read_bytes()
    assert both[0].read_bytes() != both[1].read_bytes()


def test_write_maps_crosses_out_all_stations_in_an_hour_they_lack(tmp_path, island, painter):
    stations = make_stations(island, [(40, 50), (60, 30)])
    with_all = write_maps(island, stations, tmp_path / "all", painter)
    rejected = stations.copy(deep=True)
    rejected["flag"].values[:, 1] = 1
    expected = write_maps(island, rejected, tmp_path / "rejected", painter)
    found = write_maps(island, stations.isel(time=[0]), tmp_path / "lacking", painter)
    assert found[0].read_bytes() == with_all[0].read_bytes()
    assert found[1].read_bytes() == expected[1].read_bytes() != with_all[1].read_bytes()


def test_write_maps_of_nothing_at_all_is_still_a_map(tmp_path, island, painter):
    empty = island.isel(time=[0]).copy(deep=True)
    empty["pwv"].values[:] = np.nan
    stations = make_stations(island, [(40, 50)]).isel(station=[])
    (path,) = write_maps(empty, stations, tmp_path, painter)
    with Image.open(path) as picture:
        column, row = painter.layout.map_corner
        assert picture.getpixel((column + 30, row + 30)) == hex_bytes(look.MISSING_COLOUR)


def test_write_picture_that_fails_leaves_the_old_file(tmp_path):
    path = tmp_path / "pwv.png"
    path.write_bytes(b"old")

    class Broken:
        def save(self, part, **_):
            part.write_bytes(b"half")
            raise OSError(28, "No space left on device")

    with pytest.raises(OutputError, match=r"pwv\.png: .*No space left"):
        write_picture(Broken(), path)
    assert [(file.name, file.read_bytes()) for file in tmp_path.iterdir()] == [("pwv.png", b"old")]


def test_maps_need_no_network(tmp_path, monkeypatch, small):
    def refuse(*_, **__):
        raise AssertionError("a map asked for the network")

    monkeypatch.setattr(socket, "socket", refuse)
    monkeypatch.setattr(socket, "create_connection", refuse)
    painter = make_painter(small, rivers=[shapely.LineString([(38.4, 36.1), (38.5, 36.2)])])
    assert write_maps(small, make_stations(small, [(5, 5)]), tmp_path, painter)


def test_drawing_ignores_the_settings_of_the_user(island, painter):
    with matplotlib.rc_context({"font.size": 30, "text.color": "red", "axes.linewidth": 9}):
        other = make_painter(island)
    assert np.array_equal(np.asarray(other.base), np.asarray(painter.base))


def test_a_day_of_maps_prints_its_time(tmp_path, capsys):
    """A measurement for the reader: printed, not compared."""
    fields = make_island(hours=24)
    cells = np.argwhere(fields["terrain"].values > 0)[:: 4000 // 40][:40]
    stations = make_stations(fields, cells)
    start = time.process_time()
    painter = make_painter(fields)
    base = time.process_time()
    paths = write_maps(fields, stations, tmp_path, painter)
    with capsys.disabled():
        print(f" base {base - start:.2f} s, 24 maps {time.process_time() - base:.2f} s ", end="")
    assert len(paths) == 24
    assert stations.sizes["station"] == 40
