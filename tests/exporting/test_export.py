"""Exported files, reopened by other libraries."""

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pyproj
import pytest
import rasterio
import xarray as xr

from fieldgen.cli import main
from fieldgen.commands import export as command
from fieldgen.exporting import files
from tests.scene import SETTINGS, write_scene

IN_DEGREES = (
    SETTINGS.replace("EPSG:32626", "EPSG:4326").replace("320000", "-29.3")
    .replace("5220000", "47.2").replace("380000", "-28.7").replace("5280000", "47.6")
    .replace("5000", "0.05")
)  # fmt: skip


@pytest.fixture(scope="module", params=["EPSG:32626", "EPSG:4326"])
def folder(request, tmp_path_factory):
    """Products of a scene of six hours, in UTM and in degrees; one cell of one hour is missing."""
    folder = tmp_path_factory.mktemp("scene")
    settings = SETTINGS if request.param == "EPSG:32626" else IN_DEGREES
    path = write_scene(folder, settings=settings)
    assert main(["make", str(path), "--out", str(folder / "out"), "--jobs", "1"]) == 0
    fields = folder / "out/fields/pwv_20260301.nc"
    dataset = xr.load_dataset(fields)
    dataset.pwv[2, 3, 4] = np.nan
    dataset.to_netcdf(fields)
    return folder / "out"


@pytest.fixture(scope="module")
def fields(folder):
    return xr.load_dataset(folder / "fields/pwv_20260301.nc")


def to_degrees(raster, row, column):
    """Longitude and latitude of a pixel's centre, by GDAL's georeference."""
    change = pyproj.Transformer.from_crs(raster.crs.to_wkt(), "EPSG:4326", always_xy=True)
    return change.transform(*raster.xy(row, column))


def test_geotiff_is_what_gdal_reads(folder, fields):
    """Another library: GDAL through rasterio; values, missing cell, place, way up, times, unit."""
    assert main(["export", str(folder), "--format", "geotiff", "--variable", "pwv_sigma"]) == 0
    assert main(["export", str(folder), "--format", "geotiff"]) == 0
    with rasterio.open(folder / "geotiff/pwv_20260301.tif") as raster:
        assert (raster.driver, raster.count, raster.nodata) == ("GTiff", 6, -9999.0)
        assert raster.crs.to_epsg() == (32626 if "y_bnds" in fields and fields.y[0] > 90 else 4326)
        values = raster.read(masked=True)
        assert raster.units == ("kg m-2",) * 6
        assert raster.descriptions[2] == "2026-03-01T03:00:00Z"
        tags = raster.tags(3)
        assert (tags["time_start"], tags["time_end"]) == (
            "2026-03-01T02:00:00Z", "2026-03-01T03:00:00Z"
        )  # fmt: skip
        assert "Not a warning product" in raster.tags()["comment"]
        rows = len(fields.y)
        for row, column in ((0, 0), (2, 5)):
            place = to_degrees(raster, rows - 1 - row, column)
            assert place == pytest.approx(degrees_of(fields, row, column), abs=1e-7)
    np.testing.assert_array_equal(values.filled(np.nan)[:, ::-1], fields.pwv.values)
    assert values.mask.sum() == 1
    with rasterio.open(folder / "geotiff/pwv_sigma_20260301.tif") as raster:
        np.testing.assert_array_equal(raster.read(1)[::-1], fields.pwv_sigma.values[0])


def degrees_of(fields, row, column):
    """Longitude and latitude of a cell, as the field file tells them."""
    if "longitude" not in fields:
        return float(fields.x[column]), float(fields.y[row])
    return float(fields.longitude[row, column]), float(fields.latitude[row, column])


def test_grib_is_what_eccodes_decodes(folder, fields, tmp_path):
    """Another library: eccodes in a process of its own; number, unit, times, values, places.

    0.005 kg m-2 is half a step of the packing. eccodes knows no places in transverse Mercator;
    `test_grib_is_what_gdal_places` looks at them.
    """
    pytest.importorskip("eccodes")
    assert main(["export", str(folder), "--format", "grib2", "--end", "2026-03-01T04:00"]) == 0
    decoder = Path(__file__).with_name("decode_grib.py")
    out = tmp_path / "decoded.npz"
    source = folder / "grib2/pwv_20260301.grib2"
    subprocess.run([sys.executable, decoder, source, out], check=True)
    decoded = np.load(out)
    about = json.loads(str(decoded["about"]))
    assert len(about) == 4
    third = about[2]
    numbers = [third[key] for key in ("discipline", "parameterCategory", "parameterNumber")]
    assert numbers == [0, 1, 64]
    assert third["units"] == "kg m**-2"
    assert (third["dataDate"], third["dataTime"]) == (20260301, 200)
    assert (third["validityDate"], third["validityTime"]) == (20260301, 300)
    assert (third["typeOfStatisticalProcessing"], third["lengthOfTimeRange"]) == (0, 3600)
    values = decoded["values"].reshape(4, *fields.pwv.shape[1:])
    expected = fields.pwv.values[:4]
    np.testing.assert_allclose(values, np.nan_to_num(expected, nan=-1.0), atol=5.1e-3)
    assert (values == -1.0).sum() == 1
    if third["gridType"] == "regular_ll":
        latitude = decoded["latitudes"].reshape(values.shape)[0]
        longitude = decoded["longitudes"].reshape(values.shape)[0]
        np.testing.assert_allclose(latitude[:, 0], fields.y, atol=1e-6)
        np.testing.assert_allclose(longitude[0] - 360.0, fields.x, atol=1e-6)


def test_grib_is_what_gdal_places(folder, fields):
    """Another library: GDAL's GRIB driver, which shares no code with eccodes, places the cells.

    1e-5 degrees, a metre: GRIB tells the spacing in cm and the scale in single precision.
    """
    pytest.importorskip("eccodes")
    assert main(["export", str(folder), "--format", "grib2"]) == 0
    with rasterio.open(folder / "grib2/pwv_20260301.grib2") as raster:
        rows = len(fields.y)
        for row, column in ((0, 0), (2, 5)):
            longitude, latitude = to_degrees(raster, rows - 1 - row, column)
            place = (longitude + 180.0) % 360.0 - 180.0, latitude
            assert place == pytest.approx(degrees_of(fields, row, column), abs=1e-5)
            value = raster.read(1)[rows - 1 - row, column]
            assert value == pytest.approx(float(fields.pwv[0, row, column]), abs=5.1e-3)


BAD = {
    "no folder": (["nowhere", "--format", "geotiff"], "holds no fields"),
    "no number": (["{out}", "--format", "grib2", "--variable", "pwv_sigma"], "expected pwv"),
    "no step": (["{out}", "--format", "geotiff", "--start", "2027-01-01"], "within the period"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_one_clear_line(folder, capsys, case):
    """Negative control."""
    arguments, expected = BAD[case]
    arguments = [one.format(out=folder) for one in arguments]
    assert main(["export", *arguments, "--out", str(folder / "none")]) == 1
    error = capsys.readouterr().err.strip()
    assert expected in error
    assert "\n" not in error


def test_a_projection_without_template_is_refused(folder, fields):
    """Negative control: polar stereographic has no template here; the message says what to do."""
    from fieldgen.comparing.field_reader import FieldFile
    from fieldgen.errors import GridError
    from fieldgen.exporting.grib import grid_keys

    other = fields.copy()
    other.crs.attrs["crs_wkt"] = pyproj.CRS.from_epsg(3995).to_wkt()
    with pytest.raises(GridError, match="Export GeoTIFF"):
        grid_keys(FieldFile(Path("pwv.nc"), other))


def test_the_help_names_what_can_be_exported():
    """Round trip: the command's lists against those of the code."""
    assert tuple(files.FORMATS) == command.FORMATS
    assert files.VARIABLES == command.VARIABLES
