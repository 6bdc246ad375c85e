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
    means = step_means(np.zeros(4, int), epochs, np.array([1.0, 3.0, 10.0, 20.0]), grid, 1)
    assert means[:, 0].tolist() == [2.0, 15.0]


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
    means = step_means(np.array([0, 0, 1]), epochs, np.array([np.nan, 4.0, 5.0]), grid, 2)
    expected = [[4.0, np.nan], [np.nan, np.nan], [np.nan, 5.0]]
    np.testing.assert_array_equal(means, expected)


def test_spikes_need_a_majority():
    """Analytic: the one of four that is off goes; of two that differ, neither does."""
    epochs = times("00:15:00", "00:30:00", "00:45:00", "01:00:00", "01:15:00", "01:30:00")
    values = np.array([2.40, 2.41, 2.60, 2.40, 2.40, 2.60])
    found = spikes(np.zeros(6, int), epochs, values, HOUR, 0.03)
    assert np.flatnonzero(found).tolist() == [2]


def test_spikes_do_not_mix_stations():
    """Negative control: two stations 0.3 m apart at the same epochs."""
    epochs = np.tile(times("00:15:00", "00:30:00", "00:45:00"), 2)
    values = np.repeat([2.4, 2.1], 3)
    assert not spikes(np.repeat([0, 1], 3), epochs, values, HOUR, 0.03).any()


@pytest.mark.parametrize("count", [1000])
def test_step_means_equal_a_plain_loop(count):
    """A second derivation."""
    draw = np.random.default_rng(1)
    epochs = np.datetime64("2026-03-01", "s") + draw.integers(1, 86400, count).astype("m8[s]")
    column, values = draw.integers(0, 3, count), draw.normal(size=count)
    grid = TimeGrid.around(epochs, HOUR)
    means = step_means(column, epochs, values, grid, 3)
    for row, stamp in enumerate(grid.stamps):
        for station in range(3):
            mine = (column == station) & (epochs > stamp - HOUR) & (epochs <= stamp)
            if mine.any():
                assert means[row, station] == pytest.approx(values[mine].mean())
