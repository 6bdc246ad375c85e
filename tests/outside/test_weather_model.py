"""Pressure from a real weather analysis and from climatology, against real fields and reports."""

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from fieldgen.readers.weather_grids import read_weather_grid, weather_on_steps
from fieldgen.station.climatology import climate
from fieldgen.station.surface_air import GridWeather, Sites, Weather, surface_air
from tests.open_data import require
from tests.outside.test_surface_pressure import HOURS, REGIONS, read_reports

pytest.importorskip("eccodes", reason="the analysis is GRIB, which eccodes decodes")

INNER = slice(4, -4)
"""Cells of the analysis that are looked at, away from its edges."""

TIME = np.array(["2018-09-17T00"], "datetime64[s]")


@pytest.fixture(scope="module")
def grib():
    """NAM analysis of 2018-09-17 00 UTC."""
    (path,) = require("analysis").iterdir()
    return path


@pytest.fixture(scope="module")
def analysis(grib, tmp_path_factory):
    """Its fields (ny, nx), south row first, decoded by the tests' own script."""
    decoded = tmp_path_factory.mktemp("decoded") / "fields.npz"
    script = Path(__file__).with_name("decode_grib.py")
    subprocess.run([sys.executable, script, grib, decoded, "sp", "orog", "prmsl", "2t"], check=True)
    with np.load(decoded) as fields:
        return dict(fields)


def places_of(analysis, rows=INNER, columns=INNER, draw=None):
    """Cells as places, and which they are."""
    inside = np.zeros(analysis["sp"].shape, bool)
    inside[rows, columns] = True
    index = np.flatnonzero(inside)
    if draw is not None:
        index = np.random.default_rng(1).choice(index, draw, replace=False)
    longitude = (analysis["longitude"].ravel()[index] + 180) % 360 - 180
    return Sites(
        longitude, analysis["latitude"].ravel()[index], analysis["orog"].ravel()[index]
    ), index


def says(records, sites: Sites, quantities) -> GridWeather:
    """What records say at the moment of the analysis, some quantities alone."""
    fields = [one for one in records.fields if one.quantity in quantities]
    for one in fields:  # one moment: let it last, so that a step fits into it
        assert len(one.time) == 1
    lasting = [
        one._replace(time=np.repeat(one.time, 2) + np.array([0, 3600], "timedelta64[s]"),
                     values=np.repeat(one.values, 2, axis=0))
        for one in fields
    ]  # fmt: skip
    hour = np.timedelta64(3600, "s")
    found = weather_on_steps(
        [type(records)(records.file, lasting)], len(sites.height), TIME + hour, hour, 6 * hour
    )
    return GridWeather(*(found[name].values for name in GridWeather._fields))


def air_at(sites: Sites, grid: GridWeather):
    nothing = Sites(np.zeros(0), np.zeros(0), np.zeros(0))
    return surface_air(
        Weather(*(np.zeros((1, 0)) for _ in range(3))), nothing, sites,
        np.full(len(sites.height), -1), barometer_sigma=0.3, sources=["grid"], grid=grid,
    )  # fmt: skip


def test_the_reader_finds_the_cells_own_values(grib, analysis):
    """Another library's answer: eccodes's values of a Lambert grid at its own cells."""
    sites, index = places_of(analysis, draw=200)
    records = read_weather_grid(
        grib, name="nam", longitude=sites.longitude, latitude=sites.latitude
    )
    found = {one.quantity: one.values[0] for one in records.fields}
    for name, expected, tolerance in (
        ("surface_pressure", analysis["sp"] / 100.0, 0.05),
        ("surface_height", analysis["orog"], 0.5),
        ("temperature", analysis["2t"], 0.02),
        ("msl_pressure", analysis["prmsl"] / 100.0, 0.05),
    ):
        np.testing.assert_allclose(found[name], expected.ravel()[index], atol=tolerance)


def test_sea_level_pressure_comes_up_to_the_ground(grib, analysis):
    """Second derivation: sea-level pressure brought up to the model's ground, which lists its own
    surface pressure. Above 1 km the model's way down is another one than ours up, 4 hPa so;
    the error bar of the way covers it."""
    sites, index = places_of(analysis, draw=1500)
    records = read_weather_grid(
        grib, name="nam", longitude=sites.longitude, latitude=sites.latitude
    )
    air = air_at(sites, says(records, sites, ("msl_pressure", "temperature", "surface_height")))
    error = air.pressure[0] - analysis["sp"].ravel()[index] / 100.0
    deviation = np.sqrt(np.mean((error / air.pressure_sigma[0]) ** 2))
    low = sites.height < 1000.0
    rms = np.sqrt(np.mean(error**2))
    print(f"sea level to ground: {len(error)} cells, RMS {rms:.2f} hPa, below 1 km "
          f" {np.sqrt(np.mean(error[low]**2)):.2f}, SD {deviation:.2f}")  # fmt: skip
    assert np.sqrt(np.mean(error[low] ** 2)) < 1.0
    assert deviation < 1.2


def test_a_coarser_model_comes_to_the_ground_it_does_not_know(analysis, tmp_path):
    """Second derivation: every second cell, 160 km apart, predicts the surface pressure of those
    between, up to 1 km above or below its own ground."""
    coarse = {name: field[::2, ::2] for name, field in analysis.items()}
    dims = ("y", "x")
    dataset = xr.Dataset(
        {
            "p": (dims, coarse["sp"], {"standard_name": "surface_air_pressure", "units": "Pa"}),
            "h": (dims, coarse["orog"], {"standard_name": "surface_altitude", "units": "m"}),
            "t": (dims, coarse["2t"], {"standard_name": "air_temperature", "units": "K"}),
        },
        {
            "lat": (dims, coarse["latitude"], {"standard_name": "latitude"}),
            "lon": (dims, coarse["longitude"], {"standard_name": "longitude"}),
            "time": ((), TIME[0].astype("datetime64[ns]"), {"standard_name": "time"}),
        },
    )
    dataset.to_netcdf(tmp_path / "coarse.nc")
    between = slice(5, -4, 2)
    sites, index = places_of(analysis, between, between)
    records = read_weather_grid(
        tmp_path / "coarse.nc", name="coarse", longitude=sites.longitude, latitude=sites.latitude
    )
    names = ("surface_pressure", "temperature", "surface_height")
    grid = says(records, sites, names)
    air = air_at(sites, grid)
    error = air.pressure[0] - analysis["sp"].ravel()[index] / 100.0
    way = sites.height - grid.surface_height[0]
    deviation = np.sqrt(np.mean((error / air.pressure_sigma[0]) ** 2))
    print(f"coarse model: {len(error)} cells, {way.min():.0f} to {way.max():.0f} m from its "
          f"ground, RMS {np.sqrt(np.mean(error**2)):.2f} hPa, SD {deviation:.2f}")  # fmt: skip
    assert np.abs(way).max() > 500.0
    assert np.sqrt(np.mean(error**2)) < 1.2
    assert deviation < 1.1


def test_a_coarser_model_at_its_own_ground_fails(analysis):
    """Negative control: neighbouring cells' pressures as they are, the heights left out."""
    p, h = analysis["sp"] / 100.0, analysis["orog"]
    error = p[4:-4, 4:-4] - (p[4:-4, 3:-5] + p[4:-4, 5:-3]) / 2.0
    assert np.sqrt(np.mean(error**2)) > 4.0
    assert np.abs(h[4:-4, 4:-4] - h[4:-4, 3:-5]).max() > 500.0


def test_climatology_of_sea_level_pressure_against_the_analysis(analysis):
    """Second derivation: a continent's sea-level pressure of one day and its season's average."""
    sites, index = places_of(analysis)
    average = climate(TIME, sites.latitude, np.zeros(len(index)))
    error = average.pressure[0] - analysis["prmsl"].ravel()[index] / 100.0
    deviation = np.sqrt(np.mean((error / np.hypot(average.synoptic_sigma, 1.5)) ** 2))
    print(f"climatology, analysis: {len(error)} cells, RMS {np.sqrt(np.mean(error**2)):.2f} hPa, "
          f"SD {deviation:.2f}")  # fmt: skip
    assert 0.2 < deviation < 1.3


@pytest.mark.parametrize("hour", HOURS)
@pytest.mark.parametrize("name", REGIONS)
def test_climatology_of_pressure_against_real_reports(name, hour):
    """Second derivation: barometers of one day of March 1995, up to 2.3 km; what they share is the
    day's weather, what they do not share stays within its own sigma."""
    pytest.importorskip("metpy", reason="MetPy turns altimeter settings into pressures")
    reports = read_reports(hour, REGIONS[name].box)
    nothing = Sites(np.zeros(0), np.zeros(0), np.zeros(0))
    air = surface_air(
        Weather(*(np.zeros((1, 0)) for _ in range(3))), nothing, reports.sites,
        np.full(len(reports.sites.height), -1), barometer_sigma=0.3, sources=["climatology"],
        time=np.array([f"1995-03-18T{hour:02d}"], "datetime64[s]"),
    )  # fmt: skip
    error = (air.pressure - reports.weather.pressure)[0]
    error = error[np.abs(error) < 40.0]  # impossible reports
    rms, common = np.sqrt(np.mean(error**2)), np.median(error)
    deviation = rms / np.sqrt(np.mean(air.pressure_sigma**2))
    print(f"climatology, {name} {hour:02d} UTC: {len(error)} reports, RMS {rms:.2f} hPa, common "
          f"{common:+.2f}, rest {np.std(error):.2f}, SD {deviation:.2f}")  # fmt: skip
    assert deviation < 1.6
