"""Pressure at the antenna from an analytic atmosphere with known answer."""

import numpy as np
import pytest

from fieldgen.station.heights import pressure_at_height, virtual_temperature
from fieldgen.station.surface_air import (
    PRESSURE_SOURCES,
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
