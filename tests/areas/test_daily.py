"""Mean and maximum fields of a day."""

import numpy as np
import pytest
import xarray as xr

from fieldgen.areas.day import open_days
from fieldgen.cli import main
from tests.scoring.days import noisy_scene


@pytest.fixture(scope="module")
def day(tmp_path_factory):
    """A scene of eight hours with gaps, and its daily file."""
    folder = tmp_path_factory.mktemp("scene")
    out = folder / "out"
    assert main(["make", str(noisy_scene(folder)), "--out", str(out), "--jobs", "1"]) == 0
    assert main(["daily", str(out)]) == 0
    (day,) = open_days(out)
    return day, xr.load_dataset(out / "daily/daily_20260301.nc")


def test_daily_fields_are_the_mean_and_the_largest_hour(day):
    """Second derivation by xarray, from the field file alone; 0.0051: packing."""
    day, daily = day
    pwv = day.fields.dataset.pwv
    np.testing.assert_allclose(daily.pwv_mean[0], pwv.mean("time"), atol=5.1e-3)
    np.testing.assert_allclose(daily.pwv_maximum[0], pwv.max("time"), atol=1e-4)
    which = pwv.argmax("time")
    expected = day.fields.dataset.pwv_sigma.isel(time=which)
    np.testing.assert_allclose(daily.pwv_maximum_sigma[0], expected, atol=1e-4)
    assert daily.pwv_mean.attrs["cell_methods"] == "time: mean area: mean"
    assert daily.pwv_maximum.attrs["cell_methods"] == "area: mean time: maximum"
    assert daily.time_bnds.values[0, 0] == np.datetime64("2026-03-01T00:00")
    assert daily.time.values[0] == daily.time_bnds.values[0, 1] == pwv.time.values[-1]


def test_daily_sigma_is_that_of_block_kriging(day):
    """Second derivation: `error_covariance` of a cell by itself, meaned over the hours.

    Packing costs 0.01 kg m-2. Where gaps change the weights, as in every hour here, errors of hours
    resemble each other less than the daily field takes them to: its bar is up to 6 % long.
    """
    day, daily = day
    sigma = daily.pwv_mean_sigma.values.ravel()
    for cell in (0, 41, 66, 77, 130):
        covariance = day.error_covariance(np.array([cell]), np.ones((8, 1)))
        expected = np.sqrt(covariance.mean())
        assert expected - 0.011 < sigma[cell] < 1.06 * expected + 0.011
