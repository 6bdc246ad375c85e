"""Weather grids of every kind of grid, against fields whose value is known everywhere."""

import subprocess
import sys

import numpy as np
import pyproj
import pytest
import xarray as xr

from fieldgen.errors import InputError
from fieldgen.readers import weather_grids
from fieldgen.readers.weather_grids import read_weather_grid, weather_on_steps

LONGITUDE = np.array([-28.31, -27.94, -27.02])
LATITUDE = np.array([47.12, 48.04, 47.66])
TIMES = np.array(["2026-03-01T00", "2026-03-01T03", "2026-03-01T06"], "datetime64[ns]")
HOUR = np.timedelta64(3600, "s")


def temperature(x, y):
    """Linear in the coordinates of the grid [K], so that bilinear interpolation is exact."""
    return 285.0 + 0.15 * np.asarray(x) - 0.2 * np.asarray(y)


def attributes(standard_name="", units="", **others):
    named = {"standard_name": standard_name} if standard_name else {}
    return named | ({"units": units} if units else {}) | others


NORTH, EAST = attributes("latitude", "degrees_north"), attributes("longitude", "degrees_east")


def write(path, dims, shape_coordinates, values, *, name="air_temperature", units="K", **more):
    """NetCDF of one variable, the same at all of TIMES; `values` on `dims`."""
    variable = xr.Variable(
        ("time", *dims), np.broadcast_to(values, (len(TIMES), *np.shape(values))),
        attributes(name, units, **more.pop("attrs", {})),
    )  # fmt: skip
    time = xr.Variable("time", TIMES, {"standard_name": "time"})
    coordinates = {"time": time, **shape_coordinates}
    xr.Dataset({"field": variable, **more}, coordinates).to_netcdf(path)
    return path


def read(path, longitude=LONGITUDE, latitude=LATITUDE):
    return read_weather_grid(path, name="grid.nc", longitude=longitude, latitude=latitude)


def degrees_grid(path, **keywords):
    """Half-degree latitudes from the north and longitudes of 0 to 360, longitude first."""
    x, y = np.arange(330.0, 335.1, 0.5), np.arange(50.0, 45.9, -0.5)
    values = temperature(x[:, None] - 360, y[None, :])
    return write(
        path, ("lon", "lat"), {"lat": ("lat", y, NORTH), "lon": ("lon", x, EAST)}, values,
        **keywords,
    )  # fmt: skip


PER_UNIT = {"km": 0.01, "m": 1e-5, "degrees": 1.0}
"""What the coordinates of a grid are multiplied with before `temperature` takes them."""


def mapped_grid(path, crs, names, spacing, units, centre=(-27.7, 47.6)):
    """Write a grid in a CRS, x and y in `units`; returns what it holds at the places."""
    to_grid = pyproj.Transformer.from_crs("EPSG:4326", crs, always_xy=True)
    metres = 1000.0 if units == "km" else 1.0
    x, y = (
        part / metres + spacing * np.arange(-15, 16) for part in to_grid.transform(*centre)
    )  # fmt: skip
    values = temperature(*(part * PER_UNIT[units] for part in np.meshgrid(x, y)))
    coordinates = {
        "y": ("y", y, attributes(names[1], units)), "x": ("x", x, attributes(names[0], units)),
    }  # fmt: skip
    mapping = xr.Variable((), np.int32(0), pyproj.CRS(crs).to_cf())
    write(path, ("y", "x"), coordinates, values, crs=mapping, attrs={"grid_mapping": "crs"})
    at = to_grid.transform(LONGITUDE, LATITUDE)
    return temperature(*(part / metres * PER_UNIT[units] for part in at))


def test_latitudes_and_longitudes_any_way_round(tmp_path):
    """Analytic: rows from the north, longitudes to 360, columns first; bilinear is exact."""
    (field,) = read(degrees_grid(tmp_path / "a.nc")).fields
    expected = temperature(LONGITUDE, LATITUDE)
    np.testing.assert_allclose(field.values, np.tile(expected, (3, 1)), atol=1e-9)


def test_a_global_grid_has_no_edge_at_the_date_line(tmp_path):
    """Analytic: places on both sides of 180 degrees, a field that is smooth there."""
    x, y = np.arange(0.0, 360.0, 1.0), np.arange(-90.0, 91.0, 1.0)
    values = 285.0 + 0 * x[None, :] - 0.5 * y[:, None] + 5.0 * np.cos(np.radians(x))[None, :]
    coordinates = {"lat": ("lat", y, NORTH), "lon": ("lon", x, EAST)}
    path = write(tmp_path / "a.nc", ("lat", "lon"), coordinates, values)
    longitude, latitude = np.array([179.7, -179.4, 180.0]), np.array([10.2, 10.9, 11.5])
    (field,) = read(path, longitude, latitude).fields
    expected = 285.0 - 0.5 * latitude + 5.0 * np.cos(np.radians(longitude))
    np.testing.assert_allclose(field.values[0], expected, atol=1e-3)


@pytest.mark.parametrize(
    ("crs", "names", "spacing", "units"),
    [
        ("+proj=lcc +lat_1=45 +lat_2=50 +lat_0=47 +lon_0=-28 +R=6371229",
         ("projection_x_coordinate", "projection_y_coordinate"), 20.0, "km"),
        ("EPSG:32626", ("projection_x_coordinate", "projection_y_coordinate"), 20000.0, "m"),
        ("+proj=ob_tran +o_proj=longlat +o_lon_p=0 +o_lat_p=43 +lon_0=-28",
         ("grid_longitude", "grid_latitude"), 0.2, "degrees"),
    ],
    ids=["lambert-km", "utm", "rotated-pole"],
)  # fmt: skip
def test_projected_grids_with_a_grid_mapping(tmp_path, crs, names, spacing, units):
    """Analytic: linear in the projection's coordinates, which PROJ gives for the places."""
    expected = mapped_grid(tmp_path / "a.nc", crs, names, spacing, units)
    (field,) = read(tmp_path / "a.nc").fields
    np.testing.assert_allclose(field.values[1], expected, atol=1e-6)


@pytest.mark.parametrize("turned", [False, True])
def test_two_dimensional_coordinates(tmp_path, turned):
    """Analytic: a grid turned by 30 degrees that only lists its longitudes and latitudes.

    0.01 K: triangles of 15 km in a plane, and a field that is linear in degrees.
    """
    steps = 0.15 * np.arange(-20, 21)
    east, north = np.meshgrid(steps, steps)
    x = -27.7 + 1.5 * (0.866 * east - 0.5 * north)
    y = 47.6 + 0.5 * east + 0.866 * north
    dims = ("rows", "columns")
    coordinates = {"lat": (dims, y, NORTH), "lon": (dims, x, EAST)}
    values = temperature(x, y)
    if turned:
        write(tmp_path / "a.nc", dims[::-1], coordinates, values.T)
    else:
        write(tmp_path / "a.nc", dims, coordinates, values)
    (field,) = read(tmp_path / "a.nc").fields
    np.testing.assert_allclose(field.values[2], temperature(LONGITUDE, LATITUDE), atol=0.01)


def test_surface_pressure_is_linear_in_its_logarithm(tmp_path):
    """Analytic: an isothermal atmosphere over a slope of 2 km between two cells; half way up it the
    pressure is 20 hPa below the mean of the two."""
    x, y = np.arange(-30.0, -25.0), np.arange(45.0, 51.0)
    coordinates = {"lat": ("lat", y, NORTH), "lon": ("lon", x, EAST)}
    slope = 1000.0 * np.exp(-2000.0 * (x + 30.0) / 8000.0)
    values = np.broadcast_to(slope, (len(y), len(x)))
    path = write(
        tmp_path / "a.nc", ("lat", "lon"), coordinates, values,
        name="surface_air_pressure", units="hPa",
    )  # fmt: skip
    (field,) = read(path, np.full(3, -28.5), LATITUDE).fields
    np.testing.assert_allclose(field.values, 1000.0 * np.exp(-3000.0 / 8000.0), rtol=1e-6)


def test_places_outside_the_grid_have_no_value(tmp_path):
    """A limit: nothing is extrapolated, a place beyond the last cell's centre is NaN."""
    (field,) = read(
        degrees_grid(tmp_path / "a.nc"), np.array([-28.0, -20.0, -28.0]), np.array([47.0, 47.0, 60])
    ).fields
    assert np.isfinite(field.values).tolist() == [[True, False, False]] * 3


UNITS = {
    "hPa": ("surface_air_pressure", "hPa", 950.0, 950.0),
    "Pa": ("surface_air_pressure", "Pa", 95000.0, 950.0),
    "Celsius": ("air_temperature", "degC", 12.0, 285.15),
    "geopotential": ("surface_geopotential", "m2 s-2", 9806.65, 1000.0),
    "sea level": ("air_pressure_at_mean_sea_level", "Pa", 101325.0, 1013.25),
}


@pytest.mark.parametrize(("name", "units", "value", "expected"), UNITS.values(), ids=UNITS)
def test_units_are_brought_to_ours(tmp_path, name, units, value, expected):
    """Round trip of one number by each standard name and unit."""
    x, y = np.arange(-30.0, -25.0), np.arange(45.0, 51.0)
    coordinates = {"lat": ("lat", y, NORTH), "lon": ("lon", x, EAST)}
    values = np.full((len(y), len(x)), value)
    write(tmp_path / "a.nc", ("lat", "lon"), coordinates, values, name=name, units=units)
    (field,) = read(tmp_path / "a.nc").fields
    np.testing.assert_allclose(field.values, expected)


def test_an_unknown_unit_is_said(tmp_path):
    """Negative control."""
    with pytest.raises(InputError, match=r"grid.nc, field: units is 'degF', expected K, degC"):
        read(degrees_grid(tmp_path / "a.nc", units="degF"))


@pytest.mark.parametrize(
    ("value", "attrs", "used"),
    [
        (2.0, attributes("height", "m"), True),
        (100.0, attributes("height", "m"), False),
        (850.0, attributes("air_pressure", "hPa"), False),
    ],
    ids=["2 m", "100 m", "850 hPa"],
)
def test_air_temperature_counts_at_the_ground_only(tmp_path, value, attrs, used):
    """Negative control: the temperature of a level aloft has the same standard name."""
    path = degrees_grid(tmp_path / "a.nc")
    with xr.open_dataset(path) as opened:
        level = xr.Variable((), value, attrs)
        opened.load().assign_coords(level=level).to_netcdf(tmp_path / "b.nc")
    if used:
        assert len(read(tmp_path / "b.nc").fields) == 1
    else:
        with pytest.raises(InputError, match="holds no surface field that is known"):
            read(tmp_path / "b.nc")


def test_impossible_values_are_counted_and_not_used(tmp_path):
    """Negative control: a field of zeros."""
    path = degrees_grid(tmp_path / "a.nc")
    with xr.open_dataset(path) as opened:
        zeros = opened.load()
        zeros["field"][1] = 0.0
        zeros.to_netcdf(tmp_path / "b.nc")
    records = read(tmp_path / "b.nc")
    assert np.isnan(records.fields[0].values[1]).all()
    assert dict(records.rejections.counts) == {("grid.nc", "temperature outside 180 to 340"): 3}


@pytest.mark.parametrize("content", [b"CDF\x01 and no more", b"\x89HDF\r\n", b"GRIB", b"text"])
def test_files_that_cannot_be_read_are_said(tmp_path, content):
    """Negative control: beginnings of files, and a file of another kind."""
    (tmp_path / "a.nc").write_bytes(content)
    with pytest.raises(InputError, match="^grid.nc: "):
        read(tmp_path / "a.nc")


GRIB = """
import sys, numpy as np, eccodes
message = eccodes.codes_grib_new_from_samples("regular_ll_sfc_grib2")
keys = {"Ni": 11, "Nj": 9, "latitudeOfFirstGridPointInDegrees": 50.0,
        "latitudeOfLastGridPointInDegrees": 46.0, "longitudeOfFirstGridPointInDegrees": 330.0,
        "longitudeOfLastGridPointInDegrees": 335.0, "iDirectionIncrementInDegrees": 0.5,
        "jDirectionIncrementInDegrees": 0.5, "dataDate": 20260301, "bitsPerValue": 24}
for key, value in keys.items():
    eccodes.codes_set(message, key, value)
lat, lon = np.meshgrid(np.arange(50, 45.9, -0.5), np.arange(330, 335.1, 0.5), indexing="ij")
linear = 0.15 * (lon - 360) - 0.2 * lat
with open(sys.argv[1], "wb") as file:
    for name, values in (("sp", 1e5 * np.exp(linear / 1000)), ("orog", 600 + linear),
                         ("2t", 285 + linear)):
        for hour in (0, 3):
            eccodes.codes_set(message, "shortName", name)
            eccodes.codes_set(message, "dataTime", 100 * hour)
            eccodes.codes_set_values(message, values.ravel())
            eccodes.codes_write(message, file)
"""


@pytest.fixture
def grib(tmp_path):
    """Surface pressure, orography and 2 m temperature, linear in degrees, at two hours."""
    pytest.importorskip("eccodes", reason="writes the GRIB file")
    path = tmp_path / "a.grib2"
    subprocess.run([sys.executable, "-c", GRIB, path], check=True)
    return path


def test_grib_fields_come_to_the_places(grib):
    """Analytic: written by eccodes, linear in degrees, so that bilinear is exact."""
    records = read(grib)
    linear = 0.15 * LONGITUDE - 0.2 * LATITUDE
    expected = {"surface_pressure": 1000.0 * np.exp(linear / 1000.0),
                "surface_height": 600.0 + linear, "temperature": 285.0 + linear}  # fmt: skip
    found = {}
    for field in records.fields:
        np.testing.assert_allclose(field.values[0], expected[field.quantity], atol=1e-3)
        found.setdefault(field.quantity, []).append(field.time[0])
    assert set(found) == set(expected)
    hours = [np.datetime64("2026-03-01T00", "s"), np.datetime64("2026-03-01T03", "s")]
    assert found["temperature"] == hours
    assert np.isnat(found["surface_height"]).all()


def test_grib_without_a_decoder_says_what_to_install(grib, monkeypatch):
    """Negative control: eccodes taken away."""
    monkeypatch.setattr(weather_grids.importlib.util, "find_spec", lambda name: None)
    with pytest.raises(InputError, match=r"pip install 'fieldgen\[grib\]'"):
        read(grib)


def steps(path, count, gap_hours=6, hours=8):
    stamps = TIMES[0].astype("datetime64[s]") + HOUR * np.arange(0, hours)
    return weather_on_steps([read(path)], count, stamps, HOUR, gap_hours * HOUR)


def test_time_is_linear_between_fields_and_ends_with_them(tmp_path):
    """Analytic: a field that rises by 3 K in 3 hours; an hour's mean lies half an hour back."""
    path = degrees_grid(tmp_path / "a.nc")
    with xr.open_dataset(path) as opened:
        rising = opened.load()
        rising["field"] = rising.field + xr.DataArray([0.0, 3.0, 3.0], dims="time")
        rising.to_netcdf(tmp_path / "b.nc")
    found = steps(tmp_path / "b.nc", 3).temperature.values - temperature(LONGITUDE, LATITUDE)
    expected = [np.nan, 0.5, 1.5, 2.5, 3.0, 3.0, 3.0, np.nan]
    np.testing.assert_allclose(found, np.tile(expected, (3, 1)).T, atol=1e-9)


def test_time_gaps_stay_gaps(tmp_path):
    """A limit: fields 3 hours apart do not serve where 2 hours are allowed."""
    found = steps(degrees_grid(tmp_path / "a.nc"), 3, gap_hours=2)
    assert np.isnan(found.temperature.values).all()


def test_pressure_at_the_surface_goes_before_that_at_sea_level(tmp_path):
    """A limit: without a height of the model's surface its pressure is of no use."""
    x, y = np.arange(-30.0, -25.0), np.arange(45.0, 51.0)
    coordinates = {"lat": ("lat", y, NORTH), "lon": ("lon", x, EAST)}
    records = []
    for index, (name, value, units) in enumerate(
        [("surface_air_pressure", 950.0, "hPa"), ("air_pressure_at_mean_sea_level", 1015.0, "hPa"),
         ("surface_altitude", 555.0, "m")]
    ):  # fmt: skip
        path = tmp_path / f"{index}.nc"
        values = np.full((len(y), len(x)), value)
        records.append(
            read(write(path, ("lat", "lon"), coordinates, values, name=name, units=units))
        )
    stamps = TIMES[0].astype("datetime64[s]") + HOUR * np.arange(1, 4)
    both = weather_on_steps(records, 3, stamps, HOUR, 6 * HOUR)
    np.testing.assert_allclose(both.pressure, 950.0)
    np.testing.assert_allclose(both.pressure_height, 555.0)
    without = weather_on_steps(records[:2], 3, stamps, HOUR, 6 * HOUR)
    np.testing.assert_allclose(without.pressure, 1015.0)
    np.testing.assert_allclose(without.pressure_height, 0.0)
