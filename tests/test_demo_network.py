"""The demo network against itself and against textbook physics, without fieldgen."""

import json
import sys
import tomllib
from pathlib import Path

import numpy as np
import pytest
import rasterio
import xarray as xr
from pyproj import Transformer
from scipy.ndimage import maximum_filter
from shapely import transform
from shapely.geometry import box, shape

DEMO = Path(__file__).parents[1] / "demo_network"
GAS_CONSTANT_VAPOUR = 461.5  # [J kg-1 K-1]


@pytest.fixture(scope="module")
def generator():
    """The demo's own modules, reachable as they are for its script."""
    sys.path.insert(0, str(DEMO))
    yield
    sys.path.remove(str(DEMO))


@pytest.fixture(scope="module")
def settings():
    return tomllib.loads((DEMO / "network.toml").read_text())


@pytest.fixture(scope="module")
def stations():
    with xr.open_dataset(DEMO / "truth" / "stations_truth.nc") as dataset:
        return dataset.load()


def features(name):
    """Names and projected geometries of a GeoJSON file."""
    to_grid = Transformer.from_crs("EPSG:4326", "EPSG:32626", always_xy=True)
    collection = json.loads((DEMO / f"{name}.geojson").read_text())
    return {
        feature["properties"]["name"]: transform(
            shape(feature["geometry"]), lambda places: np.column_stack(to_grid.transform(*places.T))
        )
        for feature in collection["features"]
    }


def hydrostatic_delay(pressure, latitude, height):
    """Saastamoinen 1972, Davis et al. 1985 [m]."""
    return 0.0022768 * pressure / (1 - 0.00266 * np.cos(2 * np.radians(latitude)) - 2.8e-7 * height)


def wet_delay(water_vapour, mean_temperature):
    """Askne & Nordius 1987 with the constants of Thayer 1974 (k2' 16.5 K/hPa) [m]."""
    return 1e-8 * GAS_CONSTANT_VAPOUR * (16.5 + 3.776e5 / mean_temperature) * water_vapour


def test_truth_delay_is_hydrostatic_plus_wet(stations):
    """Second derivation: surface formulas against integration; both are good to about 1 mm."""
    hydrostatic = hydrostatic_delay(
        stations.pressure, stations.latitude, stations.orthometric_height
    )
    difference = stations.ztd - hydrostatic - wet_delay(stations.pwv, stations.tm)
    assert float(abs(difference).max()) < 0.002


def test_truth_delay_betrays_pressure_of_another_height(stations):
    """Negative control: pressure at the ellipsoid's height, 57 m up, must not pass."""
    hydrostatic = hydrostatic_delay(
        stations.pressure - 57 * 0.12, stations.latitude, stations.orthometric_height
    )
    difference = stations.ztd - hydrostatic - wet_delay(stations.pwv, stations.tm)
    assert float(abs(difference).min()) > 0.010


def test_integration_of_standard_atmosphere_gives_saastamoinen(generator):
    """Published number: dry ICAO standard atmosphere at 45 degrees, 2.307 m.

    The tolerance allows for the mean gravity in the published coefficient.
    """
    from generator import air

    level = air.LEVELS[:, None].astype(float)
    temperature = np.maximum(288.15 - 0.0065 * level, 216.65)
    dry, latitude = np.zeros_like(level), np.array([45.0])
    pressure = air.hydrostatic_pressure(level, temperature, dry, latitude, np.array([1013.25]))
    delay = air.zenith_delay_above(level, pressure, temperature, dry, latitude)
    assert delay[0, 0] == pytest.approx(0.0022768 * 1013.25, abs=0.002)
    assert pressure[level[:, 0] == 11_100, 0] == pytest.approx(222.8, abs=1)


def test_vapour_never_exceeds_saturation(stations):
    """WMO-No. 8 saturation over water; 1 % for the difference between saturation formulas."""
    celsius = stations.temperature - 273.15
    saturation = 6.112 * np.exp(17.62 * celsius / (243.12 + celsius))
    assert float((stations.vapour_pressure / saturation).max()) < 1.01


def test_island_is_mountainous():
    with rasterio.open(DEMO / "terrain.tif") as raster:
        height = raster.read(1)
    summits = (height == maximum_filter(height, 21)) & (height > 2000)
    assert summits.sum() >= 4
    assert (height == 0).mean() > 0.3


def test_terrain_reaches_beyond_the_grid(settings):
    grid = settings["grid"]
    with rasterio.open(DEMO / settings["terrain"]["file"]) as raster:
        bounds = raster.bounds
        assert raster.crs.to_string() == grid["crs"]
    assert bounds.left < grid["west"] and bounds.right > grid["east"]
    assert bounds.bottom < grid["south"] and bounds.top > grid["north"]


@pytest.mark.parametrize("name", ["coast", "rivers", "catchments"])
def test_map_lines_are_valid_and_inside_the_grid(name, settings):
    grid = settings["grid"]
    region = box(grid["west"], grid["south"], grid["east"], grid["north"])
    found = features(name)
    assert len(found) >= {"coast": 1, "rivers": 5, "catchments": 3}[name]
    assert all(geometry.is_valid and region.contains(geometry) for geometry in found.values())


def test_rivers_run_downhill_to_the_sea_or_a_river():
    """Heights at the vertices: whole metres, so a river may seem to rise by 1 m."""
    with rasterio.open(DEMO / "terrain.tif") as raster:
        heights = {
            name: np.array([value[0] for value in raster.sample(line.coords)], float)
            for name, line in features("rivers").items()
        }
    for name, course in heights.items():
        assert np.diff(course).max() <= 1, name
        assert course[0] - course[-1] > 50, name
    assert sum(course[-1] == 0 for course in heights.values()) >= 5


def test_catchments_do_not_overlap():
    outlines = list(features("catchments").values())
    for number, outline in enumerate(outlines):
        assert all(
            outline.intersection(other).area < 1e-3 * outline.area for other in outlines[:number]
        )


def test_grid_truth_agrees_with_stations_on_flat_ground(stations):
    """Second derivation: cells against points; 1 kg m-2 for what varies within a cell."""
    with xr.open_dataset(DEMO / "truth" / "pwv_truth.nc") as dataset:
        grid = dataset.pwv.load()
    low = stations.sel(station=stations.orthometric_height < 60)
    to_grid = Transformer.from_crs("EPSG:4326", "EPSG:32626", always_xy=True)
    easting, northing = to_grid.transform(low.longitude.values, low.latitude.values)
    cells = grid.interp(x=("station", easting), y=("station", northing))
    assert float(np.sqrt(((cells - low.pwv.values) ** 2).mean())) < 1.0


def test_listed_height_is_wrong_at_one_station_only(stations):
    faults = json.loads((DEMO / "truth" / "faults.json").read_text())
    rows = [line.split(",") for line in (DEMO / "stations.csv").read_text().splitlines()[1:]]
    listed = {row[0]: float(row[3]) for row in rows}
    true = dict(zip(stations.station.values, stations.ellipsoidal_height.values, strict=True))
    wrong = {
        station: height - true[station]
        for station, height in listed.items()
        if abs(height - true[station]) > 0.01
    }
    planted = faults["wrong_height"]
    assert wrong == {planted["station"]: pytest.approx(planted["listed_minus_true_m"], abs=0.01)}


def test_delay_files_agree_on_where_a_station_is():
    """Round trip: X, Y, Z against longitude, latitude and height, to the printed digits."""
    to_geographic = Transformer.from_crs("EPSG:4978", "EPSG:4979", always_xy=True)
    lines = (DEMO / "delays" / "quendrava_2026251.tro").read_text().splitlines()
    identities = block(lines, "SITE/ID")
    coordinates = block(lines, "SITE/COORDINATES")
    assert len(identities) == len(coordinates) >= 40
    for identity, coordinate in zip(identities, coordinates, strict=True):
        x, y, z = map(float, coordinate[51:90].split())
        longitude, latitude, height = to_geographic.transform(x, y, z)
        assert longitude % 360 == pytest.approx(float(identity[49:59]), abs=1e-6)
        assert latitude == pytest.approx(float(identity[60:70]), abs=1e-6)
        assert height == pytest.approx(float(identity[71:80]), abs=0.01)
        assert height - float(identity[81:90]) == pytest.approx(57.3, abs=0.5)


def block(lines, name):
    """Data lines of a SINEX_TRO block."""
    inside = lines[lines.index(f"+{name}") + 1 : lines.index(f"-{name}")]
    return [line for line in inside if line.startswith(" ")]


def test_maps_and_delays_come_out_the_same_again(generator, tmp_path):
    """Recorded value, by `python demo_network/make_demo.py`; 0.15 mm for rounding elsewhere."""
    import make_demo
    from generator import formats, map_lines
    from generator.stations import receivers_on
    from generator.weather import Weather

    height = committed_terrain()
    formats.write_features(tmp_path / "rivers.geojson", map_lines.rivers(height))
    assert (tmp_path / "rivers.geojson").read_text() == (DEMO / "rivers.geojson").read_text()
    (tmp_path / "truth").mkdir()
    make_demo.make_delays(tmp_path, Weather(), height, receivers_on(height))
    assert (tmp_path / "stations.csv").read_text() == (DEMO / "stations.csv").read_text()
    again, committed = (
        block(next((folder / "delays").glob("*251.tro")).read_text().splitlines(), "TROP/SOLUTION")
        for folder in (tmp_path, DEMO)
    )
    assert [line[:25] for line in again] == [line[:25] for line in committed]
    np.testing.assert_allclose(
        *([float(line[26:33]) for line in lines] for lines in (again, committed)), atol=0.15
    )


def test_grid_truth_comes_out_the_same_again(generator):
    """Recorded value, by `python demo_network/make_demo.py`, to the packing of 0.01 kg m-2."""
    from generator import truth
    from generator.weather import Weather

    water_vapour = truth.grid_water_vapour(Weather(), committed_terrain(), hours=1)
    with xr.open_dataset(DEMO / "truth" / "pwv_truth.nc") as dataset:
        np.testing.assert_allclose(water_vapour[0], dataset.pwv[0], atol=0.006)


def committed_terrain():
    """The terrain as the generator holds it, south row first."""
    with rasterio.open(DEMO / "terrain.tif") as raster:
        return np.flipud(raster.read(1)).astype(float)
