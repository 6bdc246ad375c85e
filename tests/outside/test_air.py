"""Air at the surface against MetPy and the guide of the WMO."""

import numpy as np
import pytest

from fieldgen.station.heights import (
    layer_mean,
    pressure_at_height,
    saturation_vapour_pressure,
    virtual_temperature,
)

from .published import figure

calc = pytest.importorskip("metpy.calc", reason="air is compared with MetPy")
units = pytest.importorskip("metpy.units").units


def test_saturation_vapour_pressure_of_the_guide():
    """Published number: WMO-No. 8, Annex 4.B, at 20 degrees C."""
    value, tolerance, _ = figure("saturation_pressure_20c")
    assert saturation_vapour_pressure(293.15) == pytest.approx(value, abs=tolerance)


def test_saturation_vapour_pressure_near_the_steam_tables():
    """Published number: IAPWS at 20 degrees C, to what the guide's formula can do."""
    value, tolerance, _ = figure("saturation_pressure_20c_iapws")
    assert saturation_vapour_pressure(293.15) == pytest.approx(value, abs=tolerance)


@pytest.mark.parametrize("celsius", [-30, -10, 0, 10, 20, 30, 40])
def test_saturation_vapour_pressure_agrees_with_metpy(celsius):
    """Another library: metpy.calc.saturation_vapor_pressure over liquid (Ambaum 2020).

    0.5 %: two empirical formulas; virtual temperature needs no better than 10 %.
    """
    theirs = calc.saturation_vapor_pressure(celsius * units.degC).to("hPa").magnitude
    assert saturation_vapour_pressure(celsius + 273.15) == pytest.approx(theirs, rel=0.005)


@pytest.mark.parametrize(
    ("temperature", "humidity", "pressure"),
    [(303.15, 90, 1005), (293.15, 50, 1013.25), (283.15, 100, 780), (263.15, 80, 650)],
)
def test_virtual_temperature_agrees_with_metpy(temperature, humidity, pressure):
    """Another library: MetPy's mixing ratio from relative humidity, then its virtual temperature.

    0.005 K: a thousandth of the 5 K that vapour adds to warm moist air, from MetPy's saturation
    pressure, which is 0.1 % lower.
    """
    warm, thick = temperature * units.K, pressure * units.hPa
    ratio = calc.mixing_ratio_from_relative_humidity(thick, warm, humidity * units.percent)
    theirs = calc.virtual_temperature(warm, ratio).to("K").magnitude
    ours = virtual_temperature(temperature, humidity, pressure)
    assert ours == pytest.approx(theirs, abs=0.005)


@pytest.mark.parametrize("height", [-50.0, 45.0, 500.0, 1500.0, 3000.0])
def test_pressure_at_height_agrees_with_standard_atmosphere(height):
    """Another library: metpy.calc.height_to_pressure_std, 288 K, 6.5 K/km, 1013.25 hPa.

    The layer's arithmetic stands for its harmonic mean temperature, which costs
    ln(P1/P2) (dT/T)^2 / 12 of the pressure, 0.11 hPa at 3000 m; a tenth and 0.001 hPa are allowed.
    """
    theirs = calc.height_to_pressure_std(height * units.m).to("hPa").magnitude
    mean = layer_mean(288.0, 0.0, height)
    ours = pressure_at_height(1013.25, 0.0, height, mean)
    expected = theirs * abs(np.log(1013.25 / theirs)) * (0.0065 * height / mean) ** 2 / 12
    assert ours - theirs == pytest.approx(expected, abs=0.1 * expected + 0.001)


@pytest.mark.parametrize("top", [990.0, 900.0, 700.0])
def test_pressure_at_height_undoes_metpy_thickness(top):
    """Another library: metpy.calc.thickness_hydrostatic of an isothermal moist layer.

    MetPy's Rd is 287.047, ours 287.05, and its epsilon 0.62196, ours 0.622: 2e-5 of the thickness.
    """
    pressure = np.geomspace(1000.0, top, 400)
    temperature, ratio = 285.0, 0.008
    thickness = calc.thickness_hydrostatic(
        pressure * units.hPa,
        np.full(400, temperature) * units.K,
        mixing_ratio=np.full(400, ratio) * units("kg/kg"),
    )
    virtual = temperature * (1 + ratio / 0.622) / (1 + ratio)
    ours = pressure_at_height(1000.0, 0.0, thickness.to("m").magnitude, virtual)
    assert ours == pytest.approx(top, rel=2e-5)


def test_pressure_at_height_without_vapour_fails():
    """Negative control: temperature for virtual temperature, 4 K in the tropics, must be seen."""
    dry, moist = 302.15, virtual_temperature(302.15, 85, 1010)
    assert moist - dry > 3.5
    apart = pressure_at_height(1010, 0, 1000, moist) - pressure_at_height(1010, 0, 1000, dry)
    assert apart > 1.0
