"""Grids of cells of any size and shape, read from CF files made here."""

import numpy as np
import pyproj
import pytest
import rasterio
import shapely
import xarray as xr
from rasterio.transform import from_bounds

from fieldgen.errors import GridError
from fieldgen.ground.cells import CellGrid, corners_of_nodes, nodes_between
from fieldgen.ground.grid import Grid, grid_of, read_grid, uneven_cells
from fieldgen.ground.overlay import equal_area, overlap
from fieldgen.ground.terrain import read_terrain

UTM = "EPSG:32626"
TO_DEGREES = pyproj.Transformer.from_crs(UTM, "EPSG:4326", always_xy=True)
ROTATED = {
    "grid_mapping_name": "rotated_latitude_longitude", "grid_north_pole_latitude": 42.6,
    "grid_north_pole_longitude": 151.0,
}  # fmt: skip
X_EDGES = 330000 + 1000.0 * np.array([0, 1, 3, 6, 10, 15, 21])
Y_EDGES = 5230000 + 1000.0 * np.array([0, 4, 7, 9, 10, 13])


def projected(x, y, crs=UTM, unit="m", bounds=None) -> xr.Dataset:
    """A file with x and y in a projection."""
    names = {"x": "projection_x_coordinate", "y": "projection_y_coordinate"}
    dataset = xr.Dataset({"crs": ((), 0, pyproj.CRS(crs).to_cf())})
    for index, (axis, values) in enumerate((("x", x), ("y", y))):
        about = {"standard_name": names[axis], "units": unit}
        if bounds is not None:
            about["bounds"] = f"{axis}_edges"
            dataset[f"{axis}_edges"] = ((axis, "two"), bounds[index])
        dataset = dataset.assign_coords({axis: (axis, values, about)})
    return dataset


def listed(longitude, latitude, bounds=None) -> xr.Dataset:
    """A file that lists longitude and latitude of each cell."""
    dataset = xr.Dataset()
    for index, (name, values, unit) in enumerate(
        (("longitude", longitude, "degrees_east"), ("latitude", latitude, "degrees_north"))
    ):
        about = {"standard_name": name, "units": unit}
        if bounds is not None:
            about["bounds"] = f"{name}_corners"
            dataset[f"{name}_corners"] = (("j", "i", "four"), bounds[index])
        dataset = dataset.assign_coords({name[:3]: (("j", "i"), values, about)})
    return dataset


def rotated(size=0.04) -> xr.Dataset:
    """A file of 7 x 11 cells about the middle of a rotated system; size [degrees] of a cell."""
    about = {axis: {"standard_name": f"grid_{name}", "units": "degrees"}
             for axis, name in (("x", "longitude"), ("y", "latitude"))}  # fmt: skip
    x, y = size * np.arange(-5, 6), size * np.arange(-3, 4)
    dataset = xr.Dataset({"pole": ((), 0, ROTATED)})
    return dataset.assign_coords({"x": ("x", x, about["x"]), "y": ("y", y, about["y"])})


def pairs(edges):
    return np.stack([edges[:-1], edges[1:]], axis=1)


def turned(angle=25.0, shape=(9, 11), size=2000.0, middle=(350000.0, 5250000.0)):
    """Nodes x, y (ny + 1, nx + 1) [m] of a turned, slightly bent net about a place."""
    rows, columns = np.meshgrid(*(np.arange(n + 1) - n / 2 for n in shape), indexing="ij")
    x, y = size * columns, size * rows + 30.0 * columns**2
    turn = np.radians(angle)
    return (
        middle[0] + x * np.cos(turn) - y * np.sin(turn),
        middle[1] + x * np.sin(turn) + y * np.cos(turn),
    )


def middles(nodes):
    return 0.25 * (nodes[:-1, :-1] + nodes[:-1, 1:] + nodes[1:, :-1] + nodes[1:, 1:])


def turned_degrees(**about):
    """Centres and corners in degrees of the turned net."""
    nodes = turned(**about)
    centres = TO_DEGREES.transform(*(middles(part) for part in nodes))
    return centres, [corners_of_nodes(part) for part in TO_DEGREES.transform(*nodes)]


def write_terrain(folder, height, size=250.0):
    """terrain.tif in UTM: height(x, y) at the centres of pixels."""
    west, south, east, north = 320000, 5220000, 380000, 5280000
    x = np.arange(west + size / 2, east, size)
    y = np.arange(north - size / 2, south, -size)
    profile = {
        "driver": "GTiff", "width": len(x), "height": len(y), "count": 1, "dtype": "float32",
        "crs": UTM, "transform": from_bounds(west, south, east, north, len(x), len(y)),
    }  # fmt: skip
    with rasterio.open(folder / "terrain.tif", "w", **profile) as raster:
        raster.write(height(*np.meshgrid(x, y)).astype(np.float32), 1)
    return folder / "terrain.tif"


def hills(x, y):
    return 600.0 + 300.0 * np.sin(x / 1500.0) * np.cos(y / 1100.0) + 0.01 * (x - 350000)


def test_uneven_axes_have_the_bounds_of_the_file_or_those_halfway(tmp_path):
    """Analytic: cells of 1 to 6 km by their bounds; without them, halfway, by hand; north first."""
    x, y = X_EDGES[:-1] + np.diff(X_EDGES) / 2, Y_EDGES[:-1] + np.diff(Y_EDGES) / 2
    given = projected(
        x / 1000, y[::-1] / 1000, unit="km",
        bounds=(pairs(X_EDGES) / 1000, pairs(Y_EDGES)[::-1, ::-1] / 1000),
    )  # fmt: skip
    given.to_netcdf(tmp_path / "model.nc")
    grid = read_grid(tmp_path / "model.nc")
    assert isinstance(grid, CellGrid)
    assert grid.shape == (5, 6)
    assert grid.crs == pyproj.CRS(UTM)
    np.testing.assert_allclose(grid.axis_bounds[0], pairs(X_EDGES))
    np.testing.assert_allclose(grid.axis_bounds[1], pairs(Y_EDGES))
    assert grid.x[0].tolist() == pytest.approx(x.tolist())
    halfway = grid_of(projected([0.0, 1.0, 3.0, 7.0], [0.0, 1.0, 2.0]), "here")
    assert halfway.axis_bounds[0].tolist() == [[-0.5, 0.5], [0.5, 2], [2, 5], [5, 9]]


def test_even_axes_stay_an_even_grid():
    """A limit: with bounds halfway, or none, the grid is the even one; with others it is not."""
    x = np.arange(4.0)
    assert isinstance(grid_of(projected(x, x), "here"), Grid)
    edges = pairs(np.arange(5.0) - 0.5)
    assert isinstance(grid_of(projected(x, x, bounds=(edges, edges)), "here"), Grid)
    narrow = np.stack([x - 0.2, x + 0.2], axis=1)
    assert isinstance(grid_of(projected(x, x, bounds=(narrow, edges)), "here"), CellGrid)


def test_a_rotated_grid_lies_where_proj_puts_it():
    """Another library: PROJ's rotated pole; and its cells cover what they should, by geodesics.

    1e-3: 0.2 degrees of a great circle, sides straight in the rotated system.
    """
    dataset = rotated(0.2)
    grid = grid_of(dataset, "here")
    back = pyproj.Transformer.from_crs("EPSG:4326", pyproj.CRS.from_cf(ROTATED), always_xy=True)
    np.testing.assert_allclose(
        back.transform(*grid.longitude_latitude), (grid.x, grid.y), atol=1e-9
    )
    assert grid.longitude_latitude[1][3, 5] == pytest.approx(47.4, abs=1e-6)
    assert grid.longitude_latitude[0][3, 5] == pytest.approx(-29.0, abs=1e-6)
    to_degrees = pyproj.Transformer.from_crs(grid.crs, "EPSG:4326", always_xy=True)
    corners = to_degrees.transform(grid.corner_x[3, 5], grid.corner_y[3, 5])
    area = abs(pyproj.Geod(ellps="WGS84").polygon_area_perimeter(*corners)[0])
    assert area == pytest.approx((0.2 * 111.2e3) ** 2, rel=5e-3)
    with pytest.raises(GridError, match="expected one that fits grid_longitude"):
        grid_of(dataset.drop_vars("pole"), "here")


@pytest.mark.parametrize("order", [(0, 1, 2, 3), (2, 3, 0, 1), (3, 2, 1, 0), (1, 0, 3, 2)], ids=str)
def test_listed_cells_have_the_corners_of_the_file_in_any_order(order):
    """Round trip: whichever corner comes first, and whichever way round, the cells are the same."""
    centres, corners = turned_degrees()
    grid = grid_of(listed(*centres, [part[..., order] for part in corners]), "here")
    np.testing.assert_array_equal(grid.corner_x, corners[0])
    np.testing.assert_array_equal(grid.corner_y, corners[1])
    assert grid.longitude_latitude[1] == pytest.approx(centres[1])


def test_listed_cells_without_corners_meet_halfway():
    """A second derivation: nodes of the net itself, from its centres alone; 20 m of 2 km: the net
    is bent. Longitudes from 0 to 360 are the same grid."""
    centres, corners = turned_degrees()
    grid = grid_of(listed(*centres), "here")
    assert np.abs(grid.corner_x - corners[0]).max() < 20.0 / 75e3
    assert np.abs(grid.corner_y - corners[1]).max() < 20.0 / 111e3
    other = grid_of(listed(centres[0] % 360.0, centres[1]), "here")
    place = [-29.0, -20.0], [47.39, 47.39]
    assert grid.contains(*place).tolist() == other.contains(*place).tolist() == [True, False]
    np.testing.assert_allclose(nodes_between(np.add.outer([0.0, 1], [0.0, 10])),
                               np.add.outer([-0.5, 0.5, 1.5], [-5, 5, 15]))  # fmt: skip


def test_longitudes_across_the_date_line_are_continuous():
    """A limit: a grid from 179 E to 179 W, and one across the prime meridian from 0 to 360."""
    longitude, latitude = np.meshgrid(np.linspace(-1.0, 1.0, 9), np.linspace(10.0, 11.0, 5))
    for middle, wrapped in (
        (180.0, (longitude + 360.0) % 360.0 - 180.0), (0.0, longitude % 360.0)
    ):  # fmt: skip
        grid = grid_of(listed(wrapped, latitude), "here")
        assert np.ptp(grid.corner_x) == pytest.approx(2.25)
        inside = grid.contains([middle + 0.9, middle - 0.9, middle + 2.0], [10.5, 10.5, 10.5])
        assert inside.tolist() == [True, True, False]


@pytest.mark.parametrize("kind", ["uneven", "turned"])
def test_terrain_is_the_mean_over_each_cell(tmp_path, kind):
    """A second derivation: thousands of random points a cell of the formula itself, by shapely.

    8 m: the noise of the random mean (150 m SD over the root of 3000) times three. The centre
    alone, the negative control, is off by over 50 m.
    """
    if kind == "uneven":
        x, y = (edges[:-1] + np.diff(edges) / 2 for edges in (X_EDGES, Y_EDGES))
        grid = grid_of(projected(x, y, bounds=(pairs(X_EDGES), pairs(Y_EDGES))), "here")
    else:
        centres, corners = turned_degrees()
        grid = grid_of(listed(*centres, corners), "here")
    terrain = read_terrain(write_terrain(tmp_path, hills), grid)
    assert terrain.points.shape == (16, *grid.shape)
    draw = np.random.default_rng(1)
    to_utm = pyproj.Transformer.from_crs(grid.crs, UTM, always_xy=True)
    expected, centre = np.empty(grid.shape), np.empty(grid.shape)
    factor = np.empty(grid.shape)
    for cell in np.ndindex(grid.shape):
        corners = np.stack([grid.corner_x[cell], grid.corner_y[cell]], axis=1)
        low, high = corners.min(axis=0), corners.max(axis=0)
        x, y = draw.uniform(low, high, (6400, 2)).T
        held = shapely.contains_xy(shapely.Polygon(corners), x, y)
        heights = hills(*to_utm.transform(x[held], y[held]))
        expected[cell], factor[cell] = heights.mean(), np.exp(-heights / 2000.0).mean()
        centre[cell] = hills(*to_utm.transform(grid.x[cell], grid.y[cell]))
    print(np.abs(terrain.mean - expected).max(), np.abs(centre - expected).max())
    assert np.abs(terrain.mean - expected).max() < 8.0
    assert np.abs(centre - expected).max() > 50.0
    mine = np.exp(-terrain.points / 2000.0).mean(axis=0)
    np.testing.assert_allclose(mine, factor, rtol=0.004)


def test_terrain_gaps_and_steep_raster_count_as_they_should(tmp_path):
    """A limit: of a raster with 20 pixels along a cell, each pixel counts: a lone tower of one
    pixel shows in the mean. And NaN is sea."""

    def tower(x, y):
        height = np.where((np.abs(x - 345050) < 50) & (np.abs(y - 5241050) < 50), 6400.0, 100.0)
        return np.where(y < 5236000, np.nan, height)

    x = np.array([342000.0, 346000.0, 351000.0])
    grid = grid_of(projected(x, np.array([5234000.0, 5242000.0, 5249000.0])), "here")
    terrain = read_terrain(write_terrain(tmp_path, tower, size=100.0), grid)
    assert (terrain.mean[0] < 100.0).all()
    cell = 4500.0 * 7500.0 / 100.0**2
    assert terrain.mean[1, 1] == pytest.approx(100.0 + 6300.0 / cell, abs=2.0)
    assert terrain.mean[1, 1] > 100.5


def test_terrain_must_cover_all_cells(tmp_path):
    """Negative control."""
    centres, corners = turned_degrees(middle=(375000.0, 5250000.0))
    grid = grid_of(listed(*centres, corners), "here")
    with pytest.raises(GridError, match="does not cover the grid"):
        read_terrain(write_terrain(tmp_path, hills), grid)


def test_fraction_finds_places_between_centres():
    """Round trip: places made from known rows and columns, also half a cell beyond the centres."""
    centres, corners = turned_degrees()
    grid = grid_of(listed(*centres, corners), "here")
    draw = np.random.default_rng(2)
    row, column = draw.uniform(-0.45, 8.45, 200), draw.uniform(-0.45, 10.45, 200)
    low = np.clip(row.astype(int), 0, 7), np.clip(column.astype(int), 0, 9)
    up, right = row - low[0], column - low[1]
    place = [
        (1 - up) * ((1 - right) * part[low] + right * part[low[0], low[1] + 1])
        + up * ((1 - right) * part[low[0] + 1, low[1]] + right * part[low[0] + 1, low[1] + 1])
        for part in (grid.x, grid.y)
    ]
    found = grid.fraction(*place)
    np.testing.assert_allclose(found[0], row, atol=1e-5)
    np.testing.assert_allclose(found[1], column, atol=1e-5)


def test_cells_fill_an_area_without_gaps():
    """A second derivation: the cells under a circle make up its whole area."""
    centres, corners = turned_degrees()
    grid = grid_of(listed(*centres, corners), "here")
    plane = equal_area(-29.0, 47.39)
    change = pyproj.Transformer.from_crs(grid.crs, plane, always_xy=True)
    circle = shapely.Point(change.transform(-29.0, 47.39)).buffer(6000.0)
    found = overlap(*change.transform(grid.corner_x, grid.corner_y), circle)
    assert found.size.sum() == pytest.approx(circle.area, rel=1e-9)


def test_uneven_cells_is_none_for_even_fields():
    """A limit."""
    x = np.arange(4.0)
    assert uneven_cells(projected(x, x), "here") is None
    assert uneven_cells(projected(x**2, x), "here") is not None


def spoil(part, where, value):
    part = np.array(part)
    part[where] = value
    return part


def spoiled_files():
    x = np.array([0.0, 1.0, 3.0])
    (longitude, latitude), corners = turned_degrees()
    wide = np.array([[-0.5, 1.0], [0.5, 2], [2, 4]])
    apart = np.array([[-0.5, 0.5], [0.5, 2], [4, 5]])
    doubled = [np.repeat(part, 2, axis=0)[:9] for part in (longitude, latitude)]
    turned_over = [spoil(part, (3, 4), part[3, 4, [1, 0, 3, 2]]) for part in corners]
    centre = [part.mean(axis=-1, keepdims=True) for part in corners]
    swollen = [middle + 1.2 * (part - middle) for part, middle in zip(corners, centre, strict=True)]
    angle = np.radians(np.linspace(0.0, 500.0, 60))
    ring = [np.multiply.outer([1.0, 1.2, 1.4], wave(angle)) for wave in (np.cos, np.sin)]
    polar = np.meshgrid(np.arange(0.0, 90, 10), np.arange(80.0, 91, 2))
    return {
        "axis with a gap": (projected([0.0, np.nan, 3.0], x), "values that are missing"),
        "axis that turns": (projected([0.0, 2.0, 1.0], x), "not monotonic"),
        "axis twice the same": (projected([0.0, 1.0, 1.0], x), "not monotonic"),
        "axis of one": (projected([1.0], x), "has 1 values, expected at least 2"),
        "bounds that overlap": (projected(x, x, bounds=(wide, wide)), "overlap by 0.5"),
        "bounds elsewhere": (projected(x, x, bounds=(apart, apart)), "holds the coordinate"),
        "bounds of another shape": (projected(x, x, bounds=[wide[:, :1]] * 2), "has the shape"),
        "no grid mapping": (projected(x, x).drop_vars("crs"), "Add a grid_mapping"),
        "nothing": (xr.Dataset({"a": ("t", [1.0])}), "0 coordinates of a grid for longitude"),
        "place missing": (listed(spoil(longitude, (2, 2), np.nan), latitude), "1 of 99 cells"),
        "no degrees": (listed(longitude * 1e4, latitude * 1e4), "expected degrees"),
        "places twice": (listed(*doubled), "of no size"),
        "cell turned over": (listed(longitude, latitude, turned_over), "row 3, column 4"),
        "place moved": (listed(spoil(longitude, (4, 5), -28.0), latitude), "folded"),
        "cells too large": (listed(longitude, latitude, swollen), "cells overlap"),
        "net around itself": (listed(*ring), "cells overlap"),
        "across the pole": (listed(*polar), "expected at most 90"),
    }  # fmt: skip


@pytest.mark.parametrize("kind", spoiled_files())
def test_a_spoiled_grid_is_named(tmp_path, kind):
    """Negative control: each is a GridError that names the file and what is wrong."""
    dataset, message = spoiled_files()[kind]
    dataset.to_netcdf(tmp_path / "model.nc")
    with pytest.raises(GridError, match=message) as raised:
        read_grid(tmp_path / "model.nc")
    assert "model.nc" in str(raised.value)


def test_too_many_listed_cells_are_refused_unread(tmp_path):
    """Negative control: 25 million and a few, compressed to nothing."""
    shape = (5001, 5000)
    dataset = xr.Dataset()
    for name in ("longitude", "latitude"):
        about = {"standard_name": name}
        dataset[name] = (("j", "i"), np.zeros(shape, np.int8), about, {"zlib": True})
    dataset.to_netcdf(tmp_path / "model.nc")
    with pytest.raises(GridError, match="cells are 25005000, expected at most 25000000"):
        read_grid(tmp_path / "model.nc")
