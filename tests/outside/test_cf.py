"""Files of a run on the demo network, read and judged by others."""

import itertools
import json
import re
import shutil
import subprocess
import tomllib
from datetime import UTC, datetime
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import rasterio
import shapely
import xarray as xr
from rasterio import warp
from rasterio.transform import rowcol

from fieldgen import read_network
from fieldgen.chain import make
from fieldgen.cli import main
from tests.ground.test_cells import listed, projected, rotated, turned_degrees
from tests.scene import write_scene
from tests.test_model_grid import LIKE

checker = pytest.importorskip("compliance_checker.runner", reason="compliance-checker judges")

DEMO = Path(__file__).parents[2] / "demo_network"
START, END = "2026-09-08T00:00Z", "2026-09-09T00:00Z"

NO_STANDARD_NAME = {
    "ztd", "zhd", "zwd", "ztd_sigma", "mean_temperature", "scale_height", "residual",
    "residual_sigma", "common_sigma", "common_relative_sigma", "scale_height_sigma",
    "error_variance", "variance_factor", "volume", "volume_sigma", "coverage",
}  # fmt: skip
"""Variables for whose quantity the CF table has no name; ACDD recommends one for all."""

OF_GEOMETRIES = {"outline", "node_count", "part_node_count", "interior_ring"}
"""Variables that only say how CF geometries are stored; they have neither quantity nor unit."""

NOT_TOLD = {
    "acknowledgment/acknowledgement", "creator_url", "creator_email", "publisher_url",
    "publisher_email", "geospatial_vertical_min", "geospatial_vertical_max",
    "geospatial_vertical_positive", "geospatial_bounds_vertical_crs",
}  # fmt: skip
"""ACDD recommends these; no network has told fieldgen of people and addresses, and a column of the
atmosphere has no vertical extent."""


@pytest.fixture(scope="module")
def files(tmp_path_factory) -> dict[str, Path]:
    """Field and station file of three hours of the demo network."""
    network = read_network(DEMO / "network.toml")
    products = network.settings.products.model_copy(update={"maps": "none"})
    network.settings = network.settings.model_copy(update={"products": products})
    folder = tmp_path_factory.mktemp("run")
    make(network, folder, start=START, end=END)
    (fields,), (stations,) = (list((folder / kind).iterdir()) for kind in ("fields", "stations"))
    status = main(["catchments", str(folder), "--start", "2026-09-08T20:00"])
    assert status == 0
    assert main(["daily", str(folder)]) == 0
    period = ["--start", "2026-09-08T20:00", "--end", "2026-09-08T22:00"]
    more = ["--count", "3", "--out", str(folder)]
    assert main(["draws", str(DEMO / "network.toml"), *period, *more]) == 0
    return {
        "fields": fields,
        "stations": stations,
        "areas": folder / "catchments/catchments_1h.nc",
        "daily": folder / "daily/daily_20260908.nc",
        "draws": folder / "draws/draws_20260908.nc",
    }


@pytest.fixture(scope="module", params=["axes", "listed", "rotated"])
def model_files(request, tmp_path_factory) -> list[Path]:
    """Field, daily and draws file of a scene on a model's grid: uneven axes, places, rotated."""
    folder = tmp_path_factory.mktemp(request.param)
    x, y = [322e3, 330e3, 342e3, 362e3, 376e3], [5224e3, 5240e3, 5252e3, 5272e3]
    if request.param == "axes":
        model = projected(x, y)
    elif request.param == "listed":
        model = listed(*turned_degrees()[0])
    else:
        model = rotated()
    model.to_netcdf(folder / "model.nc")
    path = write_scene(folder, settings=LIKE)
    assert main(["make", str(path), "--out", str(folder / "out"), "--jobs", "1"]) == 0
    assert main(["daily", str(folder / "out")]) == 0
    assert main(["draws", str(path), "--count", "3", "--out", str(folder / "out")]) == 0
    return sorted(
        file for kind in ("fields", "daily", "draws") for file in (folder / "out" / kind).iterdir()
    )


ROWS_AND_COLUMNS = (
    "latitude variable 'y' should define valid units for latitude",
    "longitude variable 'x' should define valid units for longitude",
)
"""The checker takes every axis X or Y that is not of a projection for longitude or latitude; those
of CF's own example 5.2, beside two-dimensional longitude and latitude, are neither."""


@pytest.mark.parametrize("standard", ["cf:1.11", "acdd:1.3"])
def test_files_on_a_model_grid_have_no_finding(model_files, tmp_path, standard):
    """Another library: compliance-checker, strict, on fields, daily fields and draws."""
    assert len(model_files) == 3
    for path in model_files:
        findings = judge(path, standard, tmp_path)
        assert len(findings) > 15
        unfulfilled = [one for one in findings if one["value"][0] < one["value"][1]]
        if standard == "cf:1.11":
            found = [message for one in unfulfilled for message in one["msgs"]]
            assert not [one for one in found if one not in ROWS_AND_COLUMNS]
            continue
        for one in (one for one in unfulfilled if one["weight"] == 3):
            assert one["msgs"] == ["standard_name"]
            assert re.search(r'variable "(\w+)"', one["name"])[1] in NO_STANDARD_NAME


def judge(path: Path, standard: str, folder: Path) -> list[dict]:
    """Findings of a standard at its strictest: name, messages and weight, 3 being an error."""
    checker.CheckSuite.load_all_available_checkers()
    report = folder / "report.json"
    checker.ComplianceChecker.run_checker(
        str(path), [standard], 0, "strict", output_filename=str(report), output_format="json"
    )
    return json.loads(report.read_text())[standard]["all_priorities"]


def complaints(findings: list[dict], weight: int) -> list[str]:
    """Messages of the findings of a weight that are not wholly fulfilled."""
    return [
        message
        for finding in findings
        if finding["weight"] == weight and finding["value"][0] < finding["value"][1]
        for message in finding["msgs"]
    ]


CHECKER_IS_WRONG = (
    r"Parent variable '\w+' does not include geometry dimension 'node' used in geometry .*",
    "part_node_count variable part_node_count must have the same single dimension as interior ring "
    "variable interior_ring",
)
"""Of polygons with several nodes each, CF 7.5 wants the dimension of node_count, not of the nodes,
in the data (its example 7.14); the second message comes from the number of parts, not of
dimensions. `test_catchments_writes_outlines_that_cf_xarray_reads` looks at the same variables."""


@pytest.mark.parametrize("kind", ["fields", "stations", "areas", "daily", "draws"])
def test_make_writes_files_without_a_cf_finding(files, tmp_path, kind):
    """Another library: compliance-checker, cf:1.11, strict: no error, warning or suggestion."""
    findings = judge(files[kind], "cf:1.11", tmp_path)
    assert len(findings) > 20
    found = [message for weight in (3, 2, 1) for message in complaints(findings, weight)]
    known = CHECKER_IS_WRONG if kind == "areas" else ()
    assert not [one for one in found if not any(re.fullmatch(rule, one) for rule in known)]


def test_catchments_writes_outlines_that_cf_xarray_reads(files):
    """Another library: cf-xarray makes polygons of the CF geometries; they are those of the input.

    1e-9 square degrees: the file's own vertices, up to rounding.
    """
    geometry = pytest.importorskip("cf_xarray.geometry")
    collection = json.loads((DEMO / "catchments.geojson").read_text())
    with xr.open_dataset(files["areas"]) as areas:
        outlines = geometry.cf_to_shapely(areas, container="outline").values
        names = areas.catchment_name.values.tolist()
    for name, outline, feature in zip(names, outlines, collection["features"], strict=True):
        assert feature["properties"]["name"] == name
        assert outline.symmetric_difference(shapely.geometry.shape(feature["geometry"])).area < 1e-9


@pytest.mark.parametrize("kind", ["fields", "stations", "areas", "daily", "draws"])
def test_make_writes_files_that_acdd_approves(files, tmp_path, kind):
    """Another library: compliance-checker, acdd:1.3, strict.

    Of what ACDD highly recommends only standard names are missing, and only where CF has none.
    What it merely recommends or suggests and the files lack is listed in NOT_TOLD.
    """
    findings = judge(files[kind], "acdd:1.3", tmp_path)
    assert len(findings) > 15
    unfulfilled = [one for one in findings if one["value"][0] < one["value"][1]]
    for one in (one for one in unfulfilled if one["weight"] == 3):
        variable = re.search(r'variable "(\w+)"', one["name"])[1]
        if variable not in OF_GEOMETRIES:
            assert one["msgs"] == ["standard_name"]
            assert variable in NO_STANDARD_NAME
    recommended = complaints(findings, 2)
    if kind == "daily":  # its only stamp ends the day, a day after time_coverage_start, rightly
        recommended = [one for one in recommended if "mismatch between time_coverage_st" not in one]
    assert {message.removesuffix(" not present") for message in recommended} <= NOT_TOLD


def test_judge_sees_a_broken_file(files, tmp_path):
    """Negative control: units and flag masks that are wrong must not pass the same check."""
    broken = tmp_path / "broken.nc"
    shutil.copyfile(files["fields"], broken)
    with netCDF4.Dataset(broken, "a") as dataset:
        dataset["pwv"].units = "hPa"
        dataset["flag"].delncattr("flag_meanings")
    assert len(complaints(judge(broken, "cf:1.11", tmp_path), 3)) >= 2


@pytest.fixture(scope="module")
def station(files) -> tuple[str, float, float]:
    """The first station of the network, in degrees."""
    with xr.open_dataset(files["stations"]) as stations:
        return float(stations.longitude[0]), float(stations.latitude[0])


@pytest.fixture(scope="module")
def expected(files, station) -> float:
    """Water vapour of the last hour in the station's cell, by the file's longitude and latitude."""
    with xr.open_dataset(files["fields"]) as fields:
        away = np.hypot(
            (fields.longitude - station[0]) * np.cos(np.radians(station[1])),
            fields.latitude - station[1],
        )
        return float(fields.pwv[-1].values.flat[int(away.values.argmin())])


def test_make_writes_fields_that_gdal_places(files, station, expected):
    """Another library: GDAL's NetCDF driver through rasterio: the CRS, the edges, the cell."""
    settings = tomllib.loads((DEMO / "network.toml").read_text())["grid"]
    with rasterio.open(f"netcdf:{files['fields']}:pwv") as raster:
        assert raster.crs.to_epsg() == int(settings["crs"].removeprefix("EPSG:"))
        edges = [settings[side] for side in ("west", "south", "east", "north")]
        assert list(raster.bounds) == pytest.approx(edges, abs=0.01)
        place = warp.transform("EPSG:4326", raster.crs, [station[0]], [station[1]])
        last = raster.count
        (sample,) = raster.sample([(place[0][0], place[1][0])], indexes=last)
        value = sample[0] * raster.scales[last - 1] + raster.offsets[last - 1]
    assert last == 24
    assert value == pytest.approx(expected, abs=1e-4)


def test_make_writes_values_where_the_stations_are(files):
    """Second derivation: GDAL's value at each station is the station's, brought to the terrain.

    With a scale height of 2 km. 1 kg m-2 RMS: the standard errors of the stations are 0.8, of the
    hourly scale height over 200 m between antenna and cell 0.5. Rows exchanged give more than 2.
    """
    with xr.open_dataset(files["stations"]) as stations, xr.open_dataset(files["fields"]) as fields:
        last = stations.isel(time=-1).load()
        used = last.isel(station=np.flatnonzero(last.flag == 0))
        terrain = fields.terrain.values
    with rasterio.open(f"netcdf:{files['fields']}:pwv") as raster:
        x, y = warp.transform("EPSG:4326", raster.crs, used.longitude.values, used.latitude.values)
        inside = [raster.bounds.left < one < raster.bounds.right for one in x]
        packed = np.array(list(raster.sample(zip(x, y, strict=True), indexes=raster.count)))[:, 0]
        rows, columns = (np.array(part) for part in rowcol(raster.transform, x, y))
        value = packed * raster.scales[-1]
    ground = terrain[::-1][rows, columns]
    way = ground - used.orthometric_height.values
    difference = value - used.pwv.values * np.exp(-way / 2000.0)
    print(f"RMS {np.sqrt(np.mean(difference**2)):.2f} kg m-2 at {len(way)} stations")
    assert all(inside)
    assert len(way) > 25
    assert np.sqrt(np.mean(difference**2)) < 1.0


def test_make_writes_bounds_of_every_cell(files):
    """Second derivation: cells of the settings' spacing, side by side between the outer edges."""
    settings = tomllib.loads((DEMO / "network.toml").read_text())["grid"]
    with xr.open_dataset(files["fields"]) as fields:
        for name, low, high in (("x", "west", "east"), ("y", "south", "north")):
            edges = np.arange(settings[low], settings[high] + 1, settings["spacing"])
            bounds = fields[fields[name].attrs["bounds"]].values
            np.testing.assert_array_equal(bounds, np.stack([edges[:-1], edges[1:]], axis=1))
            np.testing.assert_array_equal(fields[name], bounds.mean(axis=1))


@pytest.mark.skipif(not shutil.which("ncdump"), reason="ncdump (netcdf-bin) is not there")
def test_make_writes_fields_that_ncdump_dates(files):
    """Another library: ncdump of the NetCDF C library tells the hours and their bounds."""
    command = ["ncdump", "-t", "-v", "time,time_bnds", str(files["fields"])]
    text = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    data = text.split("data:")[1]
    stamps, bounds = data.split("time_bnds")
    hours = [f"2026-09-08 {hour:02d}" for hour in range(1, 24)]
    assert re.findall(r'"([^"]+)"', stamps) == [*hours, "2026-09-09"]
    first = int(datetime(2026, 9, 8, tzinfo=UTC).timestamp())
    edges = [first + 3600 * hour for hour in range(25)]
    assert [int(edge) for edge in re.findall(r"\d+", bounds)] == [
        edge for step in itertools.pairwise(edges) for edge in step
    ]


@pytest.mark.skipif(not shutil.which("cdo"), reason="cdo is not there")
def test_make_writes_fields_that_cdo_reads(files, station, expected):
    """Another library: cdo finds the nearest cell and unpacks the last hour."""
    command = ["cdo", "-s", "outputf,%.4f,1", f"-remapnn,lon={station[0]}_lat={station[1]}"]
    command += ["-seltimestep,24", "-selname,pwv", str(files["fields"])]
    text = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    assert float(text) == pytest.approx(expected, abs=1e-3)
