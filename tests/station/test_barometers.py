"""Barometers against each other, in an analytic atmosphere with known answer."""

from pathlib import Path

import numpy as np
import pytest

from fieldgen.readers.network import read_network
from fieldgen.retrieval import retrieve_water_vapour
from fieldgen.station.barometers import barometer_bias, screen_barometers, screen_thermometers
from fieldgen.station.surface_air import Sites
from tests.station.test_surface_air import dry_weather, sites

DEMO = Path(__file__).parents[2] / "demo_network"


def test_screen_barometers_finds_the_wrong_height_and_only_that():
    """Negative control: a barometer listed 80 m too high reads 9.5 hPa off; the others stay."""
    barometers = sites([10.0, 200.0, 500.0, 900.0, 40.0, 1500.0, 300.0])
    weather = dry_weather(barometers)
    listed = barometers._replace(height=barometers.height + np.array([0, 0, 80.0, 0, 0, 0, 0]))
    rejected, residual = screen_barometers(weather, listed, 0.3, 4.0)
    assert rejected[:, 2].all()
    assert rejected.sum() == 3
    assert residual[0, 2] == pytest.approx(9.5, abs=1.0)
    assert not screen_barometers(weather, barometers, 0.3, 4.0)[0].any()


def test_screen_barometers_leaves_a_gradient_alone():
    """Negative control: 3.9 hPa over 100 km is a storm, and every barometer tells the truth."""
    draw = np.random.default_rng(3)
    longitude, latitude = draw.uniform(-34, -24, 15), draw.uniform(44, 52, 15)
    barometers = Sites(longitude, latitude, np.full(15, 20.0))
    weather = dry_weather(barometers)
    slope = 3.9 * (latitude - 48.0) * 111.0 / 100.0
    weather = weather._replace(pressure=weather.pressure + slope)
    assert np.ptp(slope) > 25.0
    assert not screen_barometers(weather, barometers, 0.3, 4.0)[0].any()


@pytest.mark.parametrize(("error", "rejected"), [(2.0, False), (20.0, True)])
def test_screen_barometers_allows_for_the_way_up(error, rejected):
    """Negative control: 2000 m above the others, 2 hPa is what an inversion does, 20 hPa is not,
    whatever the limit."""
    barometers = sites([10.0, 20.0, 30.0, 15.0, 25.0, 40.0, 2000.0])
    weather = dry_weather(barometers)
    weather.pressure[:, -1] += error
    found, _ = screen_barometers(weather, barometers, 0.3, 1.0)
    assert found[:, -1].all() == rejected
    assert not found[:, :-1].any()


def test_barometer_bias_reports_a_drift_early_and_rejects_it_in_time():
    """Analytic: one of nine barometers is off by 0.3 hPa a day; 0.3 hPa promised by each."""
    barometers = sites([10.0, 20.0, 50.0, 90.0, 40.0, 15.0, 30.0, 25.0, 60.0])
    weather = dry_weather(barometers, hours=48)
    told = {}
    for day in range(12):
        drifting = weather._replace(pressure=weather.pressure.copy())
        drifting.pressure[:, 4] += 0.3 * day
        bias = barometer_bias(drifting, barometers, 0.3)
        assert not np.delete(bias.rejected | bias.doubtful, 4).any()
        told[day] = "rejected" if bias.rejected[4] else "doubtful" if bias.doubtful[4] else ""
    assert told[0] == told[1] == ""
    assert "doubtful" in told.values()
    assert told[11] == "rejected"
    print(told)


def test_barometer_bias_of_two_says_nothing():
    """A limit: with two barometers nobody knows which is wrong."""
    barometers = sites([10.0, 20.0])
    weather = dry_weather(barometers, hours=48)
    weather.pressure[:, 0] += 10.0
    assert not barometer_bias(weather, barometers, 0.3).rejected.any()


@pytest.mark.parametrize("error", [-20.0, 20.0])
def test_screen_thermometers_finds_the_wrong_one_and_only_that(error):
    """Negative control: 20 K off at one of seven; 5 K, which a valley does, is left alone."""
    barometers = sites([10.0, 200.0, 500.0, 900.0, 40.0, 1500.0, 300.0])
    weather = dry_weather(barometers)
    assert not screen_thermometers(weather, barometers).any()
    weather.temperature[:, 4] += error
    rejected = screen_thermometers(weather, barometers)
    assert rejected[:, 4].all()
    assert rejected.sum() == len(rejected)
    weather.temperature[:, 4] -= error - np.sign(error) * 5.0
    assert not screen_thermometers(weather, barometers).any()


def test_a_wrong_thermometer_does_not_change_its_neighbours():
    """Negative control on the demo: 20 K off at one site move no other station by 0.1 kg m-2."""
    network = read_network(DEMO / "network.toml")
    right = retrieve_water_vapour(network, slice(0, 6))
    network.weather["temperature"][:, 0] += 20.0
    wrong = retrieve_water_vapour(network, slice(0, 6))
    assert wrong.thermometer_rejected.values[:, 0].all()
    away = np.abs(wrong.pwv.values - right.pwv.values)
    assert np.nanmax(away) < 0.3
    assert np.nanmedian(away) < 0.01
