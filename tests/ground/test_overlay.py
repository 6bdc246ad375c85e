"""Cells under an area."""

import numpy as np
import pyproj
import pytest
import shapely

from fieldgen.ground.overlay import corners_between, equal_area, overlap


def cells(count=10, size=100.0):
    """Corners of count x count cells from the origin."""
    edges = size * np.arange(count + 1)
    bounds = np.stack([edges[:-1], edges[1:]], axis=1)
    return corners_between(bounds, bounds)


def test_overlap_cuts_cells_exactly():
    """A second derivation: half of one cell, all of the next, by hand; south row first."""
    found = overlap(*cells(), shapely.box(50, 200, 200, 300))
    assert found.cells.tolist() == [20, 21]
    assert found.size.tolist() == [5000.0, 10000.0]
    assert found.area == 15000.0


def test_overlap_of_a_ring_agrees_with_points():
    """A second derivation: a ring with a hole, against 400 points a cell; 1.5 % of a cell."""
    ring = (
        shapely.Point(480, 510).buffer(400, 64).difference(shapely.Point(480, 510).buffer(150, 64))
    )
    found = overlap(*cells(), ring)
    assert found.size.sum() == pytest.approx(ring.area, rel=1e-12)
    fine = np.arange(2.5, 1000, 5.0)
    inside = shapely.contains_xy(ring, *np.meshgrid(fine, fine))
    counted = 25.0 * inside.reshape(10, 20, 10, 20).sum(axis=(1, 3)).ravel()
    size = np.zeros(100)
    size[found.cells] = found.size
    np.testing.assert_allclose(size, counted, atol=0.015 * 1e4)


def test_overlap_off_the_grid_is_empty_and_keeps_its_area():
    """A limit."""
    found = overlap(*cells(), shapely.box(5000, 5000, 6000, 6000))
    assert len(found.cells) == 0
    assert found.area == 1e6


def test_equal_area_keeps_the_size_of_a_degree():
    """Another library: the geodesic area of PROJ for a cell of one degree. 1e-6: straight edges."""
    plane = equal_area(10.0, 60.0)
    change = pyproj.Transformer.from_crs("EPSG:4326", plane, always_xy=True)
    box = shapely.segmentize(shapely.box(9, 60, 10, 61), 0.01)
    area = shapely.transform(box, change.transform, interleaved=False).area
    theirs = abs(pyproj.Geod(ellps="WGS84").geometry_area_perimeter(box)[0])
    assert area == pytest.approx(theirs, rel=1e-6)
