"""Maps of an hour, tested by single pixels and extents."""

import socket

import matplotlib
import numpy as np
import pytest
import shapely

from fieldgen.products import look
from fieldgen.products.maps import write_maps
from fieldgen.products.maps.cells import enlarge_cells, make_colour_map
from tests.products.maps.invented import (
    hex_bytes,
    make_island,
    make_painter,
    make_stations,
    pixel_of_cell,
)


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
