"""Delay to water vapour against published numbers and against integrated atmospheres."""

import numpy as np
import pytest
from scipy.integrate import cumulative_trapezoid

from fieldgen.constants import REFRACTIVITY
from fieldgen.station.delay import conversion_factor, hydrostatic_delay
from fieldgen.station.heights import pressure_at_height

from .profiles import normal_gravity
from .published import figure

ambiance = pytest.importorskip("ambiance", reason="the standard atmosphere comes from ambiance")

K1 = 77.604e-2
"""Thayer 1974 [K Pa-1]: the value that 0.0022768 m/hPa embeds."""

GAS_CONSTANT = 287.05287
"""Of dry air in the ICAO standard atmosphere [J kg-1 K-1]."""

HEIGHT = np.arange(0.0, 80001.0, 10.0)

COEFFICIENT_SIGMA = 2.4e-3
"""Published uncertainty of the coefficient [mm hPa-1], Davis et al. 1985."""


def integrated_delay(density, top_pressure, top_gravity, start):
    """Hydrostatic delay [mm] above HEIGHT[start]; density [kg m-3], pressure [Pa]."""
    column = np.trapezoid(density[start:], HEIGHT[start:]) + top_pressure / top_gravity
    return 1e3 * 1e-6 * K1 * GAS_CONSTANT * column


@pytest.mark.parametrize("height", [0, 500, 1000, 3000, 5000])
def test_hydrostatic_delay_is_integral_of_standard_atmosphere(height):
    """Another library: ambiance's ICAO atmosphere (Doc 7488, 1993), its own gravity, 0 to 80 km.

    0.1 mm: the standard gravity of 9.80665 belongs to latitude 45.5, which moves 2307 mm by that.
    """
    air = ambiance.Atmosphere(HEIGHT)
    start = height // 10
    delay = integrated_delay(air.density, air.pressure[-1], air.grav_accel[-1], start)
    ours = 1e3 * hydrostatic_delay(air.pressure[start] / 100, 45.0, height)
    assert ours == pytest.approx(delay, abs=0.1)


@pytest.mark.parametrize("latitude", [0, 30, 45, 60, 90])
@pytest.mark.parametrize("height", [0, 2000, 4000])
def test_hydrostatic_delay_follows_latitude_and_height(latitude, height):
    """Second derivation: ambiance's temperatures in hydrostatic balance with GRS 80 gravity.

    0.3 mm of 2300: an eighth of the published uncertainty of the coefficient; without the factor
    of gravity the poles and the equator would be 6 mm off.
    """
    temperature = ambiance.Atmosphere(HEIGHT).temperature
    gravity = normal_gravity(latitude, HEIGHT)
    pressure = 101325 * np.exp(
        -cumulative_trapezoid(gravity / (GAS_CONSTANT * temperature), HEIGHT, initial=0)
    )
    start = height // 10
    density = pressure / (GAS_CONSTANT * temperature)
    delay = integrated_delay(density, pressure[-1], gravity[-1], start)
    ours = 1e3 * hydrostatic_delay(pressure[start] / 100, latitude, height)
    assert ours == pytest.approx(delay, abs=0.3)


def test_hydrostatic_delay_of_pressure_at_another_height_fails():
    """Negative control: pressure for the ellipsoidal height, 45 m off, must fail the integral.

    45 m are 5 hPa and 1.8 kg m-2 (derived from 0.12 hPa and 0.043 kg m-2 a metre near sea level).
    """
    air = ambiance.Atmosphere(HEIGHT)
    delay = integrated_delay(air.density, air.pressure[-1], air.grav_accel[-1], 0)
    right = air.pressure[0] / 100
    wrong = pressure_at_height(right, 0.0, 45.0, 288.0)
    error = delay - 1e3 * hydrostatic_delay(wrong, 45.0, 0.0)
    factor = conversion_factor(275.0, REFRACTIVITY["bevis1994"])
    assert right - wrong == pytest.approx(5.0, abs=0.5)
    assert 1e-3 * error * factor == pytest.approx(1.8, abs=0.15)
    assert abs(error) > 1013 * COEFFICIENT_SIGMA


def test_hydrostatic_delay_of_the_standard_atmosphere():
    """Published number: 2.307 m for 1013.25 hPa at 45 degrees (memory)."""
    value, tolerance, _ = figure("zhd_standard_45")
    assert 1e3 * hydrostatic_delay(1013.25, 45.0, 0.0) == pytest.approx(value, abs=tolerance)


def test_hydrostatic_delay_of_the_sinex_sample():
    """Published number: the sample file of the SINEX_TRO 2.00 format."""
    value, tolerance, _ = figure("zhd_sinex_sample")
    assert 1e3 * hydrostatic_delay(951.92, 49.914, 592.7) == pytest.approx(value, abs=tolerance)


def test_conversion_factor_of_the_sinex_sample():
    """Published number: the sample file of the SINEX_TRO 2.00 format."""
    value, tolerance, _ = figure("pwv_sinex_sample")
    ours = 0.1674 * conversion_factor(285.7, REFRACTIVITY["bevis1994"])
    assert ours == pytest.approx(value, abs=tolerance)


@pytest.mark.parametrize("name", REFRACTIVITY)
def test_k2_reduced_of_each_set(name):
    """Published number: k2' as the literature quotes it for each set of k1, k2, k3."""
    value, tolerance, _ = figure(f"k2_reduced_{name}")
    assert REFRACTIVITY[name].k2_reduced == pytest.approx(value, abs=tolerance)


@pytest.mark.parametrize(
    ("mean_temperature", "factor"), [(255, 145.6), (265, 151.2), (275, 156.8), (290, 165.2)]
)
def test_conversion_factor_by_mean_temperature(mean_temperature, factor):
    """Second derivation: 1e6 / (Rv (k2' + k3/Tm)) by hand with 461.5, 22.1 and 373900."""
    ours = conversion_factor(mean_temperature, REFRACTIVITY["bevis1994"])
    assert ours == pytest.approx(factor, abs=0.05)


@pytest.mark.parametrize("mean_temperature", [255, 275, 290])
def test_conversion_factor_differs_little_between_sets(mean_temperature):
    """Published number: the choice of constants moves water vapour by up to 0.6 %."""
    factors = [conversion_factor(mean_temperature, each) for each in REFRACTIVITY.values()]
    assert 0.004 < max(factors) / min(factors) - 1 < 0.0065


def test_delay_obeys_rules_of_thumb():
    """Published number: common practice, no source, each a rounded figure.

    About 6.5 mm of wet delay are 1 mm of water vapour, Pi is about 0.15, 1 K of Tm is 0.36 %, the
    hydrostatic part is about 90 % of a delay of 2.46 m, which light takes 8.2 ns for.
    """
    factors = conversion_factor(np.array([265.0, 275.0, 276.0]), REFRACTIVITY["bevis1994"])
    assert 1e3 / factors[:2] == pytest.approx(6.5, abs=0.15)
    assert factors[:2] / 1e3 == pytest.approx(0.15, abs=0.01)
    assert factors[2] / factors[1] - 1 == pytest.approx(0.0036, abs=0.0002)
    total = 8.2e-9 * 299792458.0
    assert total == pytest.approx(2.46, abs=0.005)
    assert hydrostatic_delay(1000.0, 40.0, 100.0) / total == pytest.approx(0.9, abs=0.05)
