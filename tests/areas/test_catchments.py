"""`fieldgen catchments` as a user meets it, on a small scene."""

import csv
import json

import numpy as np
import pytest
import shapely
import xarray as xr

from fieldgen.areas.day import open_days
from fieldgen.areas.series import area_series
from fieldgen.cli import main
from fieldgen.readers.areas import read_areas
from tests.scene import SETTINGS
from tests.scoring.days import noisy_scene

IN_DEGREES = (
    SETTINGS.replace("EPSG:32626", "EPSG:4326").replace("320000", "-29.3")
    .replace("5220000", "47.2").replace("380000", "-28.7").replace("5280000", "47.6")
    .replace("5000", "0.05")
)  # fmt: skip

HALF_OFF = shapely.box(374000, 5240000, 386000, 5250000)
"""Half of it lies east of the scene's grid."""

INSIDE = shapely.box(333000, 5233000, 352000, 5247000)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """Products of a scene of eight hours, and areas.geojson with two areas."""
    folder = tmp_path_factory.mktemp("scene")
    settings = noisy_scene(folder)
    assert main(["make", str(settings), "--out", str(folder / "out"), "--jobs", "1"]) == 0
    features = [
        {"type": "Feature", "properties": {"name": name}, "geometry": shapely.geometry.mapping(one)}
        for name, one in (("Alder", INSIDE), ("Birch, east", HALF_OFF))
    ]
    crs = {"type": "name", "properties": {"name": "urn:ogc:def:crs:EPSG::32626"}}
    text = json.dumps({"type": "FeatureCollection", "crs": crs, "features": features})
    (folder / "areas.geojson").write_text(text)
    return folder


def run(folder, *more):
    """Exit status of the command."""
    areas = ["--areas", str(folder / "areas.geojson")]
    return main(["catchments", str(folder / "out"), *areas, *more])


def rows(path):
    """Rows of a CSV file by the header, read to RFC 4180."""
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file, strict=True))


def test_catchments_writes_both_files_alike(folder, capsys):
    """Round trip: the table and the NetCDF file hold the same figures; names with commas too."""
    assert run(folder) == 0
    assert "3 files written" in capsys.readouterr().out
    table = rows(folder / "out/catchments/areas_1h.csv")
    with xr.open_dataset(folder / "out/catchments/areas_1h.nc") as series:
        assert series.attrs["featureType"] == "timeSeries"
        assert series.catchment_name.values.tolist() == ["Alder", "Birch, east"]
        for name, column in (("pwv", "pwv_kg_m-2"), ("volume_sigma", "volume_sigma_million_m3")):
            theirs = np.array([float(row[column]) for row in table]).reshape(2, 8)
            np.testing.assert_allclose(series[name], theirs, atol=1e-4)
        stamps = [f"{one}Z" for one in series.time.values.astype("datetime64[s]").tolist()]
    assert [row["end"].replace("T", " ") for row in table[:8]] == stamps
    assert table[8]["area"] == "Birch, east"


def test_catchments_gives_means_by_the_cells_overlap(folder):
    """Second derivation: cells of 5 km, weighted by intersection in the grid's own projection.

    0.002 kg m-2: the projection's scale changes by 1e-5 across the area. The volume is that of the
    whole area; half of it lies off the grid."""
    assert run(folder) == 0
    first, *_, other = rows(folder / "out/catchments/areas_1h.csv")
    with xr.open_dataset(folder / "out/fields/pwv_20260301.nc") as fields:
        boxes = shapely.box(
            fields.x_bnds.values[None, :, 0], fields.y_bnds.values[:, None, 0],
            fields.x_bnds.values[None, :, 1], fields.y_bnds.values[:, None, 1],
        )  # fmt: skip
        size = shapely.area(shapely.intersection(boxes, INSIDE))
        mean = (fields.pwv.values[0] * size).sum() / size.sum()
    assert float(first["pwv_kg_m-2"]) == pytest.approx(mean, abs=2e-3)
    assert float(first["coverage"]) == 1.0
    assert float(other["coverage"]) == pytest.approx(0.5, abs=1e-3)
    million = float(other["pwv_kg_m-2"]) * HALF_OFF.area / 1e9
    assert float(other["volume_million_m3"]) == pytest.approx(million, rel=2e-3)


def test_a_cell_as_an_area_has_the_cell_s_error_bar(folder):
    """Round trip: the kriging set up again from the station file gives the field's own error bar,
    hours with gaps too. 0.006 kg m-2: it is packed in steps of 0.01."""
    (day,) = open_days(folder / "out")
    for cell in (0, 30, 65, 77, 143):
        found = np.sqrt(np.diag(day.error_covariance(np.array([cell]), np.ones((8, 1)))))
        np.testing.assert_allclose(found, day.hourly("pwv_sigma")[:, cell], atol=6e-3)


def test_areas_lie_right_on_a_grid_in_degrees(folder, tmp_path):
    """Second derivation: the same scene on a grid in longitude and latitude gives the same mean,
    within 0.3 kg m-2, what cells of 4 km make of a hill, and a like error bar; the area's size is
    that of its outline in UTM, whose scale is 0.9996."""
    settings = noisy_scene(tmp_path, settings=IN_DEGREES)
    assert main(["make", str(settings), "--out", str(tmp_path / "out"), "--jobs", "1"]) == 0
    areas = read_areas(folder / "areas.geojson")
    here, there = (area_series(open_days(one / "out"), areas, "step") for one in (folder, tmp_path))
    assert here.size[0] == pytest.approx(INSIDE.area, rel=1e-3)
    assert there.size == pytest.approx(here.size, rel=1e-6)
    np.testing.assert_allclose(there.pwv[0], here.pwv[0], atol=0.3)
    np.testing.assert_allclose(there.sigma[0], here.sigma[0], rtol=0.1)


def test_the_mean_of_a_day_needs_most_of_its_steps(folder, tmp_path):
    """A limit: 8 steps of 8 make a mean, whose error lies between that of independent steps and
    that of one step; with three steps missing there is none, and the steps are told."""
    (day,) = open_days(folder / "out")
    areas = read_areas(folder / "areas.geojson")
    hourly, daily = area_series([day], areas, "step"), area_series([day], areas, "day")
    np.testing.assert_allclose(daily.pwv[:, 0], hourly.pwv.mean(axis=1), atol=1e-9)
    assert daily.steps.tolist() == [[8], [8]]
    assert (daily.sigma[:, 0] < hourly.sigma.mean(axis=1)).all()
    assert (daily.sigma[:, 0] > 1.2 * hourly.sigma.mean(axis=1) / np.sqrt(8)).all()
    day.fields.dataset.pwv.load()[:3] = np.nan
    daily = area_series([day], areas, "day")
    assert np.isnan(daily.pwv).all()
    assert daily.steps.tolist() == [[5], [5]]


def test_an_area_of_nothing_usable_is_blank(folder):
    """A limit: an area off the grid beside one on it."""
    far = json.loads((folder / "areas.geojson").read_text())
    far["features"][1]["geometry"] = shapely.geometry.mapping(shapely.box(0, 0, 9000, 9000))
    (folder / "far.geojson").write_text(json.dumps(far))
    assert main(["catchments", str(folder / "out"), "--areas", str(folder / "far.geojson")]) == 0
    last = rows(folder / "out/catchments/far_1h.csv")[-1]
    assert (last["pwv_kg_m-2"], last["coverage"], last["steps"]) == ("", "0.0000", "0")


BAD = {
    "no folder": (["nowhere"], "holds no fields"),
    "no areas": (["{out}", "--areas", "none.geojson"], "none.geojson: cannot be read"),
    "odd step": (["{out}", "--areas", "{areas}", "--every", "3h"], "--every: is 3:00:00"),
    "off period": (["{out}", "--areas", "{areas}", "--start", "2027-01-01"], "within the period"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_one_clear_line(folder, capsys, case):
    """Negative control: exit status 1, one line that names what to mend."""
    arguments, expected = BAD[case]
    places = {"out": folder / "out", "areas": folder / "areas.geojson"}
    if case == "no folder":
        arguments = [*arguments, "--areas", "{areas}"]
    status = main(["catchments", *(one.format(**places) for one in arguments)])
    assert status == 1
    error = capsys.readouterr().err.strip()
    assert expected in error
    assert "\n" not in error


def test_a_folder_of_an_older_version_is_told_so(folder, tmp_path, capsys):
    """Negative control: a station file without error variances."""
    import shutil

    shutil.copytree(folder / "out", tmp_path / "out")
    path = tmp_path / "out/stations/stations_20260301.nc"
    stations = xr.load_dataset(path).drop_vars("error_variance")
    stations.to_netcdf(path)
    arguments = ["--areas", str(folder / "areas.geojson")]
    assert main(["catchments", str(tmp_path / "out"), *arguments]) == 1
    assert "error_variance is missing" in capsys.readouterr().err
    path.unlink()
    assert main(["catchments", str(tmp_path / "out"), *arguments]) == 1
    assert "cannot be read: No such file" in capsys.readouterr().err
