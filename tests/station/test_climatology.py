"""Average pressure and temperature against the published tables and what follows from them."""

import numpy as np
import pytest

from fieldgen.station.climatology import climate

DAY_28 = np.array(["2026-01-28T00"], "datetime64[s]")
DAY_211 = np.array(["2026-07-30T00"], "datetime64[s]")

PUBLISHED = {15: (1013.25, 299.65, 0.0, 0.0), 30: (1017.25, 294.15, -3.75, 7.0),
             45: (1015.75, 283.15, -2.25, 11.0), 60: (1011.75, 272.15, -1.75, 15.0),
             75: (1013.00, 263.65, -0.50, 14.5)}  # fmt: skip
"""UNB3 and RTCA DO-229 appendix A.4.2.4: average pressure and temperature, their amplitudes."""


@pytest.mark.parametrize("latitude", PUBLISHED)
def test_the_coldest_day_is_average_less_amplitude(latitude):
    """Published number: at sea level, day 28 of the north and day 211 of the south."""
    pressure, temperature, by_pressure, by_temperature = PUBLISHED[latitude]
    for day, signed in ((DAY_28, latitude), (DAY_211, -latitude)):
        found = climate(day, np.array([signed]), np.array([0.0]))
        assert found.pressure[0, 0] == pytest.approx(pressure - by_pressure, abs=1e-9)
        assert found.temperature[0, 0] == pytest.approx(temperature - by_temperature, abs=1e-9)


def test_july_is_warm_in_the_north_and_cold_in_the_south():
    """Negative control: the hemispheres the other way round."""
    found = climate(DAY_211, np.array([45.0, -45.0]), np.zeros(2))
    assert found.temperature[0, 0] > 293.0
    assert found.temperature[0, 1] < 273.0


def test_latitudes_between_are_linear_and_the_poles_are_the_last():
    """A limit."""
    found = climate(DAY_28, np.array([30.0, 37.5, 45.0, 75.0, 90.0, 0.0, 15.0]), np.zeros(7))
    pressure = found.pressure[0]
    assert pressure[1] == pytest.approx((pressure[0] + pressure[2]) / 2)
    assert pressure[3] == pressure[4]
    assert pressure[5] == pressure[6]


def test_pressure_falls_hydrostatically():
    """Second derivation: dP/dh = -g P / (Rd T) by differences, at 1500 m."""
    low, high = (climate(DAY_28, np.array([45.0]), np.array([h])) for h in (1499.5, 1500.5))
    slope = (high.pressure - low.pressure)[0, 0]
    middle = climate(DAY_28, np.array([45.0]), np.array([1500.0]))
    expected = -9.80665 * middle.pressure[0, 0] / (287.05 * middle.temperature[0, 0])
    assert slope == pytest.approx(expected, rel=1e-4)
