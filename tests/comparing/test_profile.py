"""Water vapour of soundings."""

import numpy as np
import pytest

from fieldgen.comparing.profile import Profile, specific_humidity


def test_specific_humidity_agrees_with_metpy():
    """Another library's answer: MetPy's specific humidity from dew point, its own formula for
    saturation; 0.1 %."""
    calc = pytest.importorskip("metpy.calc")
    from metpy.units import units

    from fieldgen.station.heights import saturation_vapour_pressure

    expected = calc.specific_humidity_from_dewpoint(850.0 * units.hPa, 285.0 * units.K).magnitude
    found = specific_humidity(saturation_vapour_pressure(285.0), 850.0)
    assert found == pytest.approx(float(expected), rel=1e-3)


def test_water_vapour_agrees_with_metpy():
    """Another library's answer: MetPy integrates the mixing ratio, here turned into specific
    humidity first; 0.3 % of 25 kg m-2 for 150 levels."""
    calc = pytest.importorskip("metpy.calc")
    from metpy.units import units

    from fieldgen.station.heights import saturation_vapour_pressure

    pressure = np.geomspace(1000.0, 200.0, 150)
    dewpoint = 285.0 - 70.0 * np.log10(1000.0 / pressure)
    humidity = specific_humidity(saturation_vapour_pressure(dewpoint), pressure)
    mixing_excess = np.average(1.0 / (1.0 - humidity), weights=humidity)
    metres = calc.precipitable_water(pressure * units.hPa, dewpoint * units.K).to("m").magnitude
    height = 7500.0 * np.log(1000.0 / pressure)
    found = Profile(pressure, height, humidity).water_vapour_above(0.0)
    assert found == pytest.approx(1000.0 * metres / mixing_excess, rel=3e-3)


def exponential_profile(step: float = 50.0) -> Profile:
    """Constant temperature, q = 10 g/kg falling to 1/e with 2 km; pressure with 8 km."""
    height = np.arange(100.0, 16000.0, step)
    return Profile(1000.0 * np.exp(-height / 8000.0), height, 0.010 * np.exp(-height / 2000.0))


@pytest.mark.parametrize("height", [100.0, 137.0, 1200.0])
def test_water_vapour_above_is_the_integral(height):
    """Analytic: q p0 / (g 8000) exp(-h (1/2000 + 1/8000)) / (1/2000 + 1/8000), to 0.05 %."""
    decay = 1 / 2000.0 + 1 / 8000.0
    expected = 0.010 * 1e5 / (9.80665 * 8000.0) * np.exp(-height * decay) / decay
    assert exponential_profile().water_vapour_above(height) == pytest.approx(expected, rel=5e-4)


def test_water_vapour_above_starts_between_levels():
    """A limit: between two levels the value lies between theirs, and falls with height."""
    profile = exponential_profile(step=500.0)
    heights = [600.0, 700.0, 850.0, 1099.0, 1100.0]
    values = [profile.water_vapour_above(height) for height in heights]
    assert (np.diff(values) < 0.0).all()


def test_coarse_layers_come_out_a_few_per_cent_moist():
    """A recorded limit that the docstring names: standard levels against fine ones, 2 to 8 %."""
    fine = exponential_profile()
    pressure = np.array([fine.pressure[0], 925.0, 850.0, 700.0, 500.0, 400.0, 300.0, 200.0, 150.0])
    height = np.interp(-pressure, -fine.pressure, fine.height)
    humidity = np.interp(height, fine.height, fine.humidity)
    coarse = Profile(pressure, height, humidity).water_vapour_above(100.0)
    assert 1.02 < coarse / fine.water_vapour_above(100.0) < 1.08
