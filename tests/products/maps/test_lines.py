"""Coast and region of a map."""

import numpy as np
import pyproj
import shapely
from matplotlib.contour import ContourSet

from tests.products.maps.invented import UTM, make_island, make_painter


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
