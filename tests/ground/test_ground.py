"""Grid, terrain and geoid on scenes small enough to check by hand."""

import numpy as np
import pytest
import rasterio
import xarray as xr
from rasterio.transform import from_bounds

from fieldgen.errors import GridError, InputError
from fieldgen.ground.geoid import undulation
from fieldgen.ground.grid import Grid, read_grid
from fieldgen.ground.terrain import read_raster_at, read_terrain


def grid(spacing=1000.0) -> Grid:
    return Grid.between("EPSG:32626", 500000, 5200000, 504000, 5202000, spacing)


def write_raster(path, values, bounds, crs="EPSG:32626", nodata=None):
    profile = {
        "driver": "GTiff", "height": values.shape[0], "width": values.shape[1], "count": 1,
        "dtype": values.dtype, "crs": crs, "nodata": nodata,
        "transform": from_bounds(*bounds, values.shape[1], values.shape[0]),
    }  # fmt: skip
    with rasterio.open(path, "w", **profile) as raster:
        raster.write(values, 1)
    return path


def test_grid_cells_lie_between_the_edges():
    """Analytic: 4 x 2 cells of 1 km, south row first."""
    one = grid()
    assert one.shape == (2, 4)
    assert one.x.tolist() == [500500, 501500, 502500, 503500]
    assert one.y.tolist() == [5200500, 5201500]
    assert one.bounds == (500000, 5200000, 504000, 5202000)
    longitude, _ = one.longitude_latitude
    assert longitude[0, 0] == pytest.approx(-27.0, abs=0.01)  # EPSG:32626's central meridian


def test_grid_rejects_an_unknown_crs():
    """Negative control."""
    with pytest.raises(GridError, match="grid.crs"):
        Grid.between("EPSG:0", 0, 0, 1, 1, 1)


def test_terrain_points_are_the_pixels_of_each_cell(tmp_path):
    """Analytic: 500 m pixels numbered from the north-west; each 1 km cell holds its own four."""
    values = np.arange(32, dtype=np.float32).reshape(4, 8) + 1.0
    path = write_raster(tmp_path / "t.tif", values, (500000, 5200000, 504000, 5202000))
    terrain = read_terrain(path, grid())
    assert terrain.points.shape == (4, 2, 4)
    assert sorted(terrain.points[:, 0, 0]) == [17.0, 18.0, 25.0, 26.0]  # the south-west cell
    assert terrain.mean[1, 3] == np.mean([7.0, 8.0, 15.0, 16.0])


def test_terrain_gaps_are_sea(tmp_path):
    """A limit: nodata counts as sea, a coastal cell does not."""
    values = np.full((4, 8), -9999.0, np.float32)
    values[0, 0] = 50.0
    bounds = (500000, 5200000, 504000, 5202000)
    path = write_raster(tmp_path / "t.tif", values, bounds, nodata=-9999)
    terrain = read_terrain(path, grid())
    assert terrain.is_sea.sum() == 7
    assert not terrain.is_sea[1, 0]
    assert terrain.mean.min() == 0.0


def test_the_bottom_of_the_sea_is_at_sea_level(tmp_path):
    """Negative control: bathymetry of -2500 m would make air hundreds of kg m-2 moist; land below
    the sea needs `lowest_land`."""
    values = np.full((4, 8), -2500.0, np.float32)
    values[:, 4:] = -300.0
    path = write_raster(tmp_path / "t.tif", values, (500000, 5200000, 504000, 5202000))
    assert (read_terrain(path, grid()).points == 0.0).all()
    below = read_terrain(path, grid(), lowest_land=-450.0)
    assert below.mean[0].tolist() == [0.0, 0.0, -300.0, -300.0]
    assert below.is_sea[0].tolist() == [True, True, False, False]


def test_terrain_in_another_crs_and_coarser_than_the_grid(tmp_path):
    """A limit: a tilted plane in degrees is found again in projected cells, to 1 m."""
    bounds = (-27.2, 46.8, -26.8, 47.2)
    longitude = np.linspace(-27.2 + 0.01, -26.8 - 0.01, 20)
    values = np.tile((longitude + 28.0) * 1000.0, (20, 1)).astype(np.float32)
    path = write_raster(tmp_path / "t.tif", values, bounds, crs="EPSG:4326")
    terrain = read_terrain(path, grid())
    expected = (grid().longitude_latitude[0] + 28.0) * 1000.0
    np.testing.assert_allclose(terrain.mean, expected, atol=1.0)


def test_terrain_must_cover_the_grid(tmp_path):
    """Negative control: half the grid is outside."""
    path = write_raster(
        tmp_path / "t.tif", np.ones((4, 4), np.float32), (500000, 5200000, 502000, 5202000)
    )
    with pytest.raises(GridError, match="does not cover the grid"):
        read_terrain(path, grid())


@pytest.mark.parametrize("content", [b"", b"not a raster"], ids=["empty", "text"])
def test_unreadable_terrain_is_named(tmp_path, content):
    """Negative control."""
    path = tmp_path / "t.tif"
    path.write_bytes(content)
    with pytest.raises(InputError, match="t.tif"):
        read_terrain(path, grid())


def test_raster_at_points_is_bilinear_and_nan_outside(tmp_path):
    """Analytic: between two pixel centres the value is the mean of both."""
    values = np.array([[0.0, 10.0], [0.0, 10.0]], np.float32)
    path = write_raster(tmp_path / "t.tif", values, (-28.0, 47.0, -26.0, 49.0), crs="EPSG:4326")
    found = read_raster_at(path, np.array([-27.0, -27.5, 0.0]), np.array([48.0, 48.0, 0.0]), "test")
    assert found[:2].tolist() == [5.0, 0.0]
    assert np.isnan(found[2])


def test_undulation_is_a_number_or_a_grid_that_covers(tmp_path):
    """Analytic; and a place off the grid is an error, not a guess."""
    assert undulation(57.3, np.zeros(3), np.zeros(3)).tolist() == [57.3] * 3
    path = write_raster(
        tmp_path / "g.tif", np.full((4, 4), 55.0, np.float32), (-28, 47, -26, 49), crs="EPSG:4326"
    )
    assert undulation(path, np.array([-27.0]), np.array([48.0])) == pytest.approx(55.0)
    hole = np.full((4, 4), -9999.0, np.float32)
    path_of_hole = write_raster(
        tmp_path / "h.tif", hole, (-28, 47, -26, 49), crs="EPSG:4326", nodata=-9999
    )
    with pytest.raises(InputError, match="does not cover"):
        undulation(path_of_hole, np.array([-27.0]), np.array([48.0]))
    with pytest.raises(InputError, match="does not cover"):
        undulation(path, np.array([10.0]), np.array([48.0]))


def test_grid_like_a_file_has_its_cells_and_crs(tmp_path):
    """Round trip: a grid written by CF conventions, north row first, comes back south row first."""
    one = grid()
    dataset = xr.Dataset(
        {"crs": ((), 0, one.crs.to_cf())},
        coords={
            "x": ("x", one.x, {"standard_name": "projection_x_coordinate", "units": "m"}),
            "y": ("y", one.y[::-1], {"standard_name": "projection_y_coordinate", "units": "m"}),
        },
    )
    dataset.to_netcdf(tmp_path / "model.nc")
    back = read_grid(tmp_path / "model.nc")
    assert back.x.tolist() == one.x.tolist()
    assert back.y.tolist() == one.y.tolist()
    assert back.crs == one.crs
