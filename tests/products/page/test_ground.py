"""What lies under and over the colours of the page."""

import json

import numpy as np
import pytest

from fieldgen.products import look
from fieldgen.products.maps.grid import read_map_grid
from fieldgen.products.page.ground import draw_graticule, paint_relief, read_outlines, to_metres
from tests.products.maps.invented import GRIDS, make_island

SEA = 16


def grid_of(**options):
    return read_map_grid(make_island(**options), SEA)


@pytest.mark.parametrize("options", GRIDS.values(), ids=GRIDS)
def test_to_metres_puts_the_edges_half_a_size_from_the_middle(options):
    """Limit: both axes in metres, also of a grid in degrees."""
    grid = grid_of(**options)
    west, east, south, north = grid.extent
    corners = to_metres(grid, np.array([[west, south], [east, north]]))
    np.testing.assert_allclose(corners, [[-size / 2 for size in grid.size],
                                         [size / 2 for size in grid.size]])  # fmt: skip


def test_relief_changes_brightness_by_no_more_than_the_maps_do():
    """Second derivation: the alpha laid over a grey of 50 %, and none over the sea."""
    grid = grid_of()
    pixels = paint_relief(grid)
    alpha = (pixels >> 24) / 255
    white = (pixels & 0xFF) / 255
    brightness = 0.5 * (1 - alpha) + white * alpha
    assert np.abs(brightness / 0.5 - 1).max() <= look.RELIEF_STRENGTH + 0.5 / 255
    assert brightness.min() < 0.49 < 0.51 < brightness.max()
    assert (alpha[grid.sea] == 0).all()


def test_without_lines_the_coast_is_the_outline_of_the_sea(tmp_path):
    """Limit: it parts land from sea, and rivers and catchments are absent."""
    grid = grid_of()
    outlines = read_outlines(tmp_path, grid)
    assert outlines["rivers"] == outlines["catchments"] == []
    points = np.concatenate(outlines["coast"])
    half = np.array(grid.size) / 2
    cells = ((points + half) / (2 * half) * grid.sea.shape[::-1]).astype(int)
    around = [grid.sea[row - 1 : row + 2, column - 1 : column + 2] for column, row in cells]
    assert all(near.any() and not near.all() for near in around)


def test_lines_of_the_folder_lie_where_they_are(tmp_path):
    """Second derivation: a river between the centres of two cells."""
    fields = make_island()
    grid = read_map_grid(fields, SEA)
    cells = [(20, 30), (60, 70)]
    ends = [
        [fields[name].values[cell].item() for name in ("longitude", "latitude")] for cell in cells
    ]
    (tmp_path / "lines").mkdir()
    (tmp_path / "lines/rivers.geojson").write_text(
        json.dumps({"type": "LineString", "coordinates": ends})
    )
    (river,) = read_outlines(tmp_path, grid)["rivers"]
    expected = [
        [fields["x"].values[column] - fields["x"].values.mean(),
         fields["y"].values[row] - fields["y"].values.mean()]
        for row, column in cells
    ]  # fmt: skip
    np.testing.assert_allclose(river[[0, -1]], expected, atol=1)


@pytest.mark.parametrize("options", GRIDS.values(), ids=GRIDS)
def test_graticule_is_labelled_on_the_edges(options):
    """Limit: labels stand on the left and lower edge, and east turns to west at 180 degrees."""
    grid = grid_of(**options)
    lines, labels = draw_graticule(grid)
    width, height = (size / 2 for size in grid.size)
    assert lines and labels
    for x, y, _ in labels:
        assert x == pytest.approx(-width) or y == pytest.approx(-height)
        assert -width <= x + 1 and -height <= y + 1
    texts = " ".join(text for *_, text in labels)
    if grid.region[1] > 180:
        assert "180" in texts
        assert "°W" in texts
    else:
        assert "°N" in texts
