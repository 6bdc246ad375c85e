"""Cells as pixels, and the relief."""

import numpy as np
import pytest

from fieldgen.products import look
from fieldgen.products.maps.cells import enlarge_cells
from tests.products.maps.invented import make_island, make_painter


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
