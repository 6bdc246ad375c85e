"""Means over steps that end at their stamps."""

import numpy as np
import pytest

from fieldgen.readers.time_grid import TimeGrid, spikes, step_means

HOUR = np.timedelta64(3600, "s")


def times(*texts):
    return np.array([f"2026-03-01T{text}" for text in texts], "datetime64[s]")


def test_the_hour_ends_at_its_stamp():
    """Analytic: 13:00:00 belongs to the hour stamped 13:00, 13:00:01 to 14:00."""
    epochs = times("12:15:00", "13:00:00", "13:00:01", "14:00:00")
    grid = TimeGrid.around(epochs, HOUR)
    assert grid.stamps.tolist() == times("13:00:00", "14:00:00").tolist()
    means = step_means(epochs, np.array([1.0, 3.0, 10.0, 20.0]), grid)
    assert means.tolist() == [2.0, 15.0]


def test_a_first_record_on_the_edge_makes_no_step():
    """A limit: midnight alone would give the day before one record of its last hour."""
    grid = TimeGrid.around(times("00:00:00", "00:45:00"), HOUR)
    assert grid.stamps.tolist() == times("01:00:00").tolist()


@pytest.mark.parametrize("epochs", [["13:00:00"], ["13:00:00", "14:00:00", "15:00:00"]])
def test_records_once_a_step_each_make_their_step(epochs):
    """A limit: hourly values on the hour, be it a single one."""
    assert TimeGrid.around(times(*epochs), HOUR).stamps.tolist() == times(*epochs).tolist()


def test_missing_values_and_empty_steps_are_nan():
    """A limit."""
    epochs = times("00:30:00", "00:45:00", "02:30:00")
    grid = TimeGrid.around(epochs, HOUR)
    means = step_means(epochs, np.array([np.nan, 4.0, 5.0]), grid)
    np.testing.assert_array_equal(means, [4.0, np.nan, 5.0])


def test_spikes_need_a_majority():
    """Analytic: the one of four that is off goes; of two that differ, neither does."""
    epochs = times("00:15:00", "00:30:00", "00:45:00", "01:00:00", "01:15:00", "01:30:00")
    values = np.array([2.40, 2.41, 2.60, 2.40, 2.40, 2.60])
    found = spikes(epochs, values, HOUR, 0.03)
    assert np.flatnonzero(found).tolist() == [2]


@pytest.mark.parametrize("count", [1000])
def test_step_means_equal_a_plain_loop(count):
    """A second derivation."""
    draw = np.random.default_rng(1)
    epochs = np.datetime64("2026-03-01", "s") + draw.integers(1, 86400, count).astype("m8[s]")
    values = draw.normal(size=count)
    grid = TimeGrid.around(epochs, HOUR)
    means = step_means(epochs, values, grid)
    for row, stamp in enumerate(grid.stamps):
        mine = (epochs > stamp - HOUR) & (epochs <= stamp)
        assert means[row] == pytest.approx(values[mine].mean())
