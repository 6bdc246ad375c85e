"""The chain, and all that reads its folder, on a model's own grid."""

import csv
from dataclasses import replace

import numpy as np
import pyproj
import pytest
import shapely
import xarray as xr

import fieldgen
from fieldgen.areas.day import open_days
from fieldgen.areas.series import find_overlaps
from fieldgen.cli import main
from fieldgen.comparing.field_reader import open_fields
from fieldgen.fields import FIELD_FLAGS
from fieldgen.products.even_picture import on_even_grid
from fieldgen.readers.areas import read_areas
from tests.ground.test_cells import listed, projected, turned_degrees
from tests.scene import SETTINGS, terrain_height, write_scene

EVEN = SETTINGS.replace("spacing = 5000", "spacing = 4000")
_GRID = SETTINGS[SETTINGS.index("crs =") : SETTINGS.index("[stations]")]
LIKE = SETTINGS.replace(_GRID, 'like = "model.nc"\n')
TO_DEGREES = pyproj.Transformer.from_crs("EPSG:32626", "EPSG:4326", always_xy=True)
X_EDGES = np.array([321.0, 330, 336, 341, 345, 348, 351, 355, 360, 367, 379]) * 1e3
Y_EDGES = np.array([221.0, 233, 241, 247, 251, 255, 262, 278]) * 1e3 + 5e6


def vapour(height, hour):
    return 20.0 * np.exp(-height / 1800.0)


def uneven():
    """A file with uneven axes and their bounds."""
    bounds = [np.stack([edges[:-1], edges[1:]], axis=1) for edges in (X_EDGES, Y_EDGES)]
    return projected(*(part.mean(axis=1) for part in bounds), bounds=bounds)


def turned():
    centres, corners = turned_degrees(shape=(14, 17))
    return listed(*centres, corners)


MODELS = {"uneven": uneven, "turned": turned}


@pytest.fixture(scope="module", params=MODELS)
def folder(request, tmp_path_factory):
    """Products of a scene on a model's grid."""
    folder = tmp_path_factory.mktemp(request.param)
    MODELS[request.param]().to_netcdf(folder / "model.nc")
    settings = LIKE.replace('maps = "none"', 'maps = "latest"')
    path = write_scene(folder, settings=settings, water_vapour=vapour)
    assert main(["make", str(path), "--out", str(folder / "out"), "--jobs", "1"]) == 0
    return folder


@pytest.fixture
def fields(folder):
    return xr.load_dataset(folder / "out/fields/pwv_20260301.nc")


def test_an_even_grid_by_its_cells_gives_the_same_field(tmp_path):
    """Round trip: the even grid itself, listed as longitudes and latitudes of cells and corners.

    0.02 kg m-2: two steps of packing. Sides of cells are straight in degrees and not on the map, a
    difference of less than a metre.
    """
    plain = fieldgen.make_fields(
        fieldgen.read_network(write_scene(tmp_path, settings=EVEN, water_vapour=vapour))
    )
    x, y = (edges - 2000.0 for edges in np.meshgrid(
        np.append(plain.x.values, plain.x.values[-1] + 4000.0),
        np.append(plain.y.values, plain.y.values[-1] + 4000.0),
    ))  # fmt: skip
    corners = [
        np.stack([part[:-1, :-1], part[:-1, 1:], part[1:, 1:], part[1:, :-1]], axis=-1)
        for part in TO_DEGREES.transform(x, y)
    ]
    centres = TO_DEGREES.transform(*np.meshgrid(plain.x.values, plain.y.values))
    listed(*centres, corners).to_netcdf(tmp_path / "model.nc")
    path = write_scene(tmp_path, settings=LIKE, water_vapour=vapour)
    again = fieldgen.make_fields(fieldgen.read_network(path))
    np.testing.assert_allclose(again.terrain, plain.terrain, atol=1.0)
    for name in ("pwv", "pwv_sigma", "pwv_at_reference"):
        np.testing.assert_allclose(again[name], plain[name], atol=0.0201)
    assert np.ptp(plain.pwv.values) > 5.0
    assert (again.flag.values == plain.flag.values).mean() > 0.99


def test_an_exponential_atmosphere_is_found_in_the_mean_of_each_cell(folder, fields):
    """Analytic: 20 exp(-h / 1800 m), its mean over many points of each cell of the true hill."""
    network = fieldgen.read_network(folder / "network.toml")
    grid, side = network.grid, 40
    x, y = grid.points(slice(None), side)
    to_utm = pyproj.Transformer.from_crs(grid.crs, "EPSG:32626", always_xy=True)
    expected = vapour(terrain_height(*to_utm.transform(x, y)), 0).mean(axis=(0, 1))
    extrapolated = fields.flag.values[0] & FIELD_FLAGS["extrapolated_in_height"] > 0
    error = (fields.pwv.values[0] / expected - 1.0)[~extrapolated]
    assert len(error) > 60
    assert np.abs(error).max() < 0.04
    assert np.median(np.abs(error)) < 0.01


def test_the_file_tells_its_cells_by_cf_attributes_alone(folder, fields):
    """Round trip: coordinates and corners of the model, found through attributes by nothing but
    CF's rules; bounds that enclose the coordinates."""
    with xr.open_dataset(folder / "model.nc") as model:
        model.load()
    pwv = fields["pwv"]
    crs = pyproj.CRS.from_cf(fields[pwv.attrs["grid_mapping"]].attrs)
    pairs = (("longitude", "lon"), ("latitude", "lat"))
    if "x" in model.coords:
        assert crs == pyproj.CRS("EPSG:32626")
        pairs = (("projection_x_coordinate", "x"), ("projection_y_coordinate", "y"))
    else:
        assert crs == pyproj.CRS("EPSG:4326")
    for name, source in pairs:
        (found,) = [
            one for one in pwv.coords.values() if one.attrs.get("standard_name") == name
        ]  # fmt: skip
        np.testing.assert_array_equal(found.values, model[source].values)
        bounds = fields[found.attrs["bounds"]]
        assert bounds.dims[:-1] == found.dims
        np.testing.assert_array_equal(bounds, model[model[source].attrs["bounds"]])
        assert found.attrs["units"] == model[source].attrs["units"]
        assert (bounds.min(axis=-1) <= found).all()


def test_stations_find_their_cell(folder):
    """A second derivation: shapely's polygon of each cell around a place, and the four cells that
    `compare` takes for it are that cell and its neighbours; places off the grid are off it."""
    (file,) = open_fields([folder / "out/fields/pwv_20260301.nc"])
    draw = np.random.default_rng(3)
    longitude, latitude = draw.uniform(-29.4, -28.6, 300), draw.uniform(47.1, 47.7, 300)
    corners, inside = file.corners(longitude, latitude)
    x, y = file.cells.locate(longitude, latitude)
    polygons = shapely.polygons(np.stack(file.cell_corners, axis=-1).reshape(-1, 4, 2))
    place, cell = shapely.STRtree(polygons).query(shapely.points(x, y), predicate="intersects")
    np.testing.assert_array_equal(np.unique(place), np.flatnonzero(inside))
    assert 50 < inside.sum() < 280
    row, column = np.unravel_index(cell, file.terrain.shape)
    assert (np.abs(corners.row[:, place] - row).min(axis=0) == 0).all()
    assert (np.abs(corners.column[:, place] - column).min(axis=0) == 0).all()
    np.testing.assert_allclose(corners.weight.sum(axis=0), 1.0)


def test_compare_finds_the_atmosphere_between_cells(folder, tmp_path, capsys):
    """Analytic: observations of the atmosphere itself, at places within the grid: RMSE 0.1 kg m-2,
    what a scale height fitted to 12 stations leaves."""
    rows = ["time,longitude,latitude,height,value,sigma"]
    for longitude, latitude in ((-29.0, 47.39), (-29.05, 47.35), (-28.95, 47.42)):
        for height in (300.0, 900.0):
            value = vapour(height, 0)
            rows.append(f"2026-03-01T02:30:00Z,{longitude},{latitude},{height},{value:.4f},0.1")
    (tmp_path / "table.csv").write_text("\n".join(rows) + "\n")
    file = str(folder / "out/fields/pwv_20260301.nc")
    out = ["--out", str(tmp_path / "compared")]
    assert main(["compare", file, "--with", str(tmp_path / "table.csv"), *out]) == 0
    with (tmp_path / "compared/compare.csv").open() as table:
        found = list(csv.DictReader(line for line in table if not line.startswith("#")))
    assert len(found) == 6
    error = [float(row["observed"]) - float(row["field"]) for row in found]
    assert np.abs(error).max() < 0.3


def test_areas_are_made_of_the_cells_polygons(folder):
    """A second derivation: a box in degrees within the grid is covered wholly, its size by
    geodesics (1e-3: straight sides)."""
    box = "[[[-29.05,47.35],[-28.95,47.35],[-28.95,47.42],[-29.05,47.42],[-29.05,47.35]]]"
    areas = folder / "areas.geojson"
    areas.write_text(
        '{"type":"FeatureCollection","features":[{"type":"Feature","properties":{"name":"Box"},'
        f'"geometry":{{"type":"Polygon","coordinates":{box}}}}}]}}'
    )  # fmt: skip
    days = open_days(folder / "out")
    (found,) = find_overlaps(days[0], read_areas(areas, None))
    outline = shapely.box(-29.05, 47.35, -28.95, 47.42)
    size = abs(pyproj.Geod(ellps="WGS84").geometry_area_perimeter(outline)[0])
    assert found.area == pytest.approx(size, rel=1e-3)
    assert found.size.sum() == pytest.approx(found.area, rel=1e-6)
    assert main(["catchments", str(folder / "out"), "--areas", str(areas)]) == 0
    with xr.open_dataset(folder / "out/catchments/areas_1h.nc") as series:
        pwv = days[0].fields.dataset.pwv.values[:, *np.unravel_index(
            found.cells, days[0].fields.terrain.shape)]  # fmt: skip
        mean = (pwv * found.size).sum(axis=1) / found.size.sum()
        np.testing.assert_allclose(series.pwv.values[0], mean, rtol=1e-5)
        assert (series.coverage.values > 0.999).all()


def test_a_picture_shows_each_cell_where_it_is(folder, fields):
    """A second derivation: at cell centres the picture has the cell's value, off the grid none."""
    picture = on_even_grid(fields, "fields")
    cells = open_fields([folder / "out/fields/pwv_20260301.nc"])[0].cells
    x, y = cells.x, cells.y
    shown = picture.pwv.isel(time=2).sel(
        x=xr.DataArray(x.ravel()), y=xr.DataArray(y.ravel()), method="nearest"
    )
    same = shown.values == fields.pwv.values[2].ravel()
    assert same.mean() > 0.99
    inside = np.isfinite(picture.pwv.values[0])
    expected = shapely.contains_xy(cells.outline, *np.meshgrid(picture.x, picture.y))
    np.testing.assert_array_equal(inside, expected)
    assert picture.sizes["x"] * picture.sizes["y"] > 15_000
    assert on_even_grid(picture, "picture") is picture


@pytest.mark.parametrize("form", ["geotiff", "grib2"])
def test_export_says_that_it_needs_an_even_grid(folder, capsys, form):
    """Negative control: one line and exit status 1, no file."""
    assert main(["export", str(folder / "out"), "--format", form]) == 1
    assert "needs an evenly spaced grid" in capsys.readouterr().err
    assert not list((folder / "out").rglob("*.tif")) + list((folder / "out").rglob("*.grib2"))


def test_everything_else_runs(folder, capsys):
    """A limit: every other command on such a grid ends well and leaves its file."""
    out = folder / "out"
    assert (out / "maps/latest.png").is_file()
    network, period = str(folder / "network.toml"), ["--start", "2026-03-01T04:00"]
    commands = {
        "page.html": ["page", str(out)],
        "daily/daily_20260301.nc": ["daily", str(out)],
        "draws/draws_20260301.nc": ["draws", network, "--count", "2", "--out", str(out)],
        "public/film_landscape.gif": ["animate", str(out), "--format", "gif", *period],
        "public/sheet_2026-03.html": ["sheet", str(out), "--month", "2026-03"],
    }
    for name, command in commands.items():
        assert main(command) == 0, command
        assert (out / name).is_file()
    assert main(["check", network]) == 0
    assert "cells of " in capsys.readouterr().out
    assert main(["update", network, "--out", str(out), "--jobs", "1"]) == 0
    assert "0 days made, 1 unchanged" in capsys.readouterr().err


def test_update_sees_a_changed_corner(folder):
    """A limit: a grid whose corners move, and nothing else, is another grid."""
    before = fieldgen.read_network(folder / "network.toml").grid
    moved = before.corner_x + 1e-6
    assert replace(before, corner_x=moved).identity != before.identity
