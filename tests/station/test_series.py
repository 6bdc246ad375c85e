"""Tests of a series: what is taken away, and what must stay."""

import numpy as np
import pytest

from fieldgen.station.series import (
    above_saturation,
    formal_error_too_large,
    frozen,
    frozen_pressure,
    jumps,
    saturated_column,
)


def test_formal_error_uses_the_limit_and_the_stations_own_history():
    """Analytic: 9 mm passes a limit of 10 mm but not 2.5 times a median of 2 mm."""
    sigma = np.full((7, 2), [0.002, 0.005])
    sigma[3] = [0.009, 0.009]
    sigma[4, 1] = 0.011
    found = formal_error_too_large(sigma, 0.010, 2.5)
    assert (
        found.tolist()
        == [[False, False]] * 3 + [[True, False], [False, True]] + [[False, False]] * 2
    )


def test_formal_error_without_any_says_nothing():
    """A limit: a file without formal errors loses nothing."""
    assert not formal_error_too_large(np.full((5, 1), np.nan), 0.01, 2.5).any()


def test_jumps_take_the_spike_and_leave_the_front():
    """Negative control: a step of 12 kg m-2 is a front and stays, a lone value of +12 goes."""
    series = np.full((12, 2), 20.0)
    series[6:, 0] += 12.0
    series[6, 1] += 12.0
    found = jumps(series, 8.0)
    assert not found[:, 0].any()
    assert np.flatnonzero(found[:, 1]).tolist() == [6]


def test_jumps_allow_for_an_hour_in_which_all_stations_change():
    """Negative control: +9 in all stations for one hour is weather, in one of ten a spike."""
    series = np.full((12, 10), 20.0)
    series[6, 3] += 9.0
    assert np.argwhere(jumps(series, 8.0)).tolist() == [[6, 3]]
    series[6] = 29.0 - np.linspace(0, 2, 10)
    assert not jumps(series, 8.0).any()


def test_frozen_marks_repetitions_and_no_short_ones():
    """Analytic: eight equal values, of which seven repeat; four are chance; a gap ends a run."""
    series = np.random.default_rng(1).normal(size=(30, 3))
    series[10:18, 0] = 2.4
    series[5:9, 1] = 2.4
    series[10:18, 2] = 2.4
    series[14, 2] = np.nan
    found = frozen(series, 6)
    assert np.argwhere(found).tolist() == [[step, 0] for step in range(11, 18)]


def test_frozen_pressure_does_not_judge_a_coarse_barometer():
    """Negative control: whole hectopascals repeat themselves in quiet weather."""
    fine = np.round(1010.0 + np.linspace(0, 4, 40), 2)[:, None] + [0.0, 3.0]
    fine[20:36, 0] = fine[20, 0]
    found = frozen_pressure(fine, 12)
    assert found[:, 0].sum() == 15
    assert not found[:, 1].any()
    assert not frozen_pressure(fine[:, :1], 12)[21:36].any()  # alone, nobody says that air moved
    coarse = np.repeat([1010.0, 1011.0, 1012.0], 14)[:40, None] + [0.0, 0.0]
    coarse[:, 1] = 1000.0 + np.linspace(0, 4, 40)
    assert not frozen_pressure(coarse, 12).any()


@pytest.mark.parametrize(("celsius", "density"), [(0.0, 4.85e-3), (20.0, 17.3e-3)])
def test_saturated_column_is_density_times_a_scale_height(celsius, density):
    """A second derivation: saturated air dries out upwards with some 1.6 to 3 km, a little more
    because the column stands on 700 hPa; density at the foot [kg m-3] from WMO-No. 8."""
    column = float(saturated_column(celsius + 273.15))
    assert 1600.0 * density < column < 3700.0 * density


def test_above_saturation_needs_a_thermometer():
    """Negative control: 16 kg m-2 at -20 C cannot be, 16 at +10 C can; an assumed temperature says
    nothing."""
    cold, mild = np.array([[253.15]]), np.array([[283.15]])
    value, sure, guess = np.array([[16.0]]), np.array([[0.8]]), np.array([[5.5]])
    assert above_saturation(value, cold, sure).all()
    assert not above_saturation(value, mild, sure).any()
    assert not above_saturation(value, cold, guess).any()
