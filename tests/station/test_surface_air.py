"""Pressure at the antenna from an analytic atmosphere with known answer."""

import numpy as np
import pytest

from fieldgen.station.heights import pressure_at_height, virtual_temperature
from fieldgen.station.surface_air import (
    PRESSURE_SOURCES,
    GridWeather,
    Sites,
    Weather,
    own_barometer,
    surface_air,
)

LAPSE = 0.0065


def temperature(height):
    return 288.15 - LAPSE * np.asarray(height)


def pressure(height, sea_level=1013.25):
    """Analytic: dry hydrostatic pressure under a constant lapse rate (ICAO, Doc 7488)."""
    return sea_level * (temperature(height) / 288.15) ** (9.80665 / (287.05 * LAPSE))


def sites(height, seed=1):
    draw = np.random.default_rng(seed)
    count = len(height)
    return Sites(draw.uniform(-29, -27, count), draw.uniform(47, 48.5, count), np.array(height))


def dry_weather(barometers: Sites, hours: int = 3) -> Weather:
    shape = (hours, len(barometers.height))
    return Weather(
        np.broadcast_to(pressure(barometers.height), shape).copy(),
        np.broadcast_to(temperature(barometers.height), shape).copy(),
        np.zeros(shape),
    )


def test_pressure_at_height_follows_the_standard_atmosphere():
    """Analytic: 1500 m up with the layer's mean temperature, to 0.25 hPa."""
    layer = (temperature(0) + temperature(1500)) / 2
    assert pressure_at_height(1013.25, 0.0, 1500.0, layer) == pytest.approx(
        pressure(1500.0), abs=0.25
    )


def test_virtual_temperature_of_dry_air_is_the_temperature():
    """A limit."""
    assert virtual_temperature(285.0, 0.0, 1000.0) == 285.0


@pytest.mark.parametrize("source", ["own", "neighbours"])
def test_surface_air_finds_the_pressure_at_the_antenna(source):
    """Analytic: antennas up to 1600 m, barometers elsewhere or 20 m below, within their sigma."""
    barometers = sites([10.0, 200.0, 500.0, 900.0, 40.0, 1500.0, 300.0])
    antennas = sites([30.0, 220.0, 1600.0]) if source == "neighbours" else Sites(
        barometers.longitude[:3], barometers.latitude[:3], barometers.height[:3] + 20.0
    )  # fmt: skip
    own = own_barometer(antennas, barometers, 1.0)
    air = surface_air(
        dry_weather(barometers), barometers, antennas, own,
        barometer_sigma=0.3, sources=["own", "neighbours"],
    )  # fmt: skip
    expected = np.full(3, PRESSURE_SOURCES[source])
    if source == "neighbours":
        expected[own >= 0] = PRESSURE_SOURCES["own"]
    assert (air.source == expected).all()
    error = np.abs(air.pressure - pressure(antennas.height))
    assert (error < 2.0 * air.pressure_sigma).all()
    assert (error < 0.8).all()
    np.testing.assert_allclose(air.temperature[0], temperature(antennas.height), atol=0.5)


def test_uncertainty_grows_with_the_way_up():
    """A limit: the higher the antenna above all barometers, the larger the error bar."""
    barometers = sites([10.0, 30.0, 20.0, 40.0, 15.0, 25.0])
    antennas = Sites(
        barometers.longitude[:2] + 0.05, barometers.latitude[:2], np.array([30.0, 2000.0])
    )
    air = surface_air(
        dry_weather(barometers), barometers, antennas, np.full(2, -1),
        barometer_sigma=0.3, sources=["neighbours"],
    )  # fmt: skip
    low, high = air.pressure_sigma[0]
    assert low < 0.7
    assert high > 1.5


def test_without_weather_there_is_no_pressure():
    """A limit: nothing is invented."""
    none = Sites(np.zeros(0), np.zeros(0), np.zeros(0))
    empty = np.zeros((2, 0))
    air = surface_air(
        Weather(empty, empty, empty), none, sites([100.0]), np.array([-1]),
        barometer_sigma=0.3, sources=["own", "neighbours"],
    )  # fmt: skip
    assert np.isnan(air.pressure).all()
    assert (air.source == 0).all()


def gridded(antennas: Sites, model_height: float, *, at_sea_level: bool = False) -> GridWeather:
    """What a faultless weather model says whose ground lies at one height."""
    shape = (3, len(antennas.height))
    height = 0.0 if at_sea_level else model_height
    return GridWeather(
        np.full(shape, pressure(height)), np.full(shape, height),
        np.full(shape, temperature(model_height)), np.full(shape, model_height),
    )  # fmt: skip


TIME = np.array(["2026-04-28T06", "2026-04-28T07", "2026-04-28T08"], "datetime64[s]")
NONE = Sites(np.zeros(0), np.zeros(0), np.zeros(0))
NO_WEATHER = Weather(*(np.zeros((3, 0)) for _ in range(3)))


@pytest.mark.parametrize("at_sea_level", [False, True])
def test_grid_pressure_is_brought_from_the_models_ground(at_sea_level):
    """Analytic: antennas from 600 m below the model's ground to 900 m above it, within 0.8 hPa
    (the air between is taken as 70 % moist, and is dry); the
    error bar grows with the way from where the model's pressure belongs."""
    antennas = sites([0.0, 600.0, 1500.0])
    air = surface_air(
        NO_WEATHER, NONE, antennas, np.full(3, -1), barometer_sigma=0.3, sources=["grid"],
        grid=gridded(antennas, 600.0, at_sea_level=at_sea_level), grid_sigma=1.2,
    )  # fmt: skip
    np.testing.assert_allclose(air.pressure[0], pressure(antennas.height), atol=0.8)
    np.testing.assert_allclose(air.temperature[0], temperature(antennas.height), atol=1e-6)
    assert air.pressure_sigma[0, 0 if at_sea_level else 1] == pytest.approx(1.2, abs=1e-9)
    assert air.pressure_sigma[0].argmax() == 2
    assert (air.source == PRESSURE_SOURCES["grid"]).all()


def test_grid_pressure_at_the_models_height_would_be_wrong():
    """Negative control: the way from the model's ground left out costs 60 hPa."""
    antennas = sites([0.0, 100.0])
    says = gridded(antennas, 600.0)
    flat = says._replace(pressure_height=np.broadcast_to(antennas.height, (3, 2)))
    air = surface_air(
        NO_WEATHER, NONE, antennas, np.full(2, -1), barometer_sigma=0.3, sources=["grid"],
        grid=flat,
    )  # fmt: skip
    assert (np.abs(air.pressure - pressure(antennas.height)) > 50.0).all()


def test_a_source_less_sure_than_the_limit_steps_back():
    """A limit: barometers by the sea serve an antenna at 50 m, and leave one at 3000 m to the grid;
    without a grid they serve it all the same, for the climatology is less sure still."""
    barometers = sites([10.0, 30.0, 20.0, 40.0, 15.0, 25.0])
    antennas = Sites(
        barometers.longitude[:2] + 0.05, barometers.latitude[:2], np.array([50, 3000.0])
    )
    order = ["own", "neighbours", "grid", "climatology"]
    for grid, expected in ((gridded(antennas, 2800.0), "grid"), (None, "neighbours")):
        air = surface_air(
            dry_weather(barometers), barometers, antennas, np.full(2, -1), barometer_sigma=0.3,
            sources=order, time=TIME, grid=grid, sigma_limit=2.0,
        )  # fmt: skip
        assert (air.source[:, 0] == PRESSURE_SOURCES["neighbours"]).all()
        assert (air.source[:, 1] == PRESSURE_SOURCES[expected]).all()


def test_climatology_serves_where_nothing_else_does():
    """A limit: a large error bar, nearly all of it shared by every station."""
    antennas = sites([0.0, 500.0])
    air = surface_air(
        NO_WEATHER, NONE, antennas, np.full(2, -1), barometer_sigma=0.3,
        sources=["own", "neighbours", "grid", "climatology"], time=TIME,
    )  # fmt: skip
    assert (air.source == PRESSURE_SOURCES["climatology"]).all()
    assert (air.pressure_common_sigma > 7.0).all()
    assert (air.pressure_own_sigma < 2.5).all()
    assert air.temperature_sigma.max() < 10.0
