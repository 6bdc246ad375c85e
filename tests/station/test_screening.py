"""What is taken away, and what must stay."""

import numpy as np

from fieldgen.kriging.covariance import Covariance
from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.solver import Kriging
from fieldgen.station.screening import (
    biased_station,
    disagreements,
    formal_error_too_large,
    jumps,
    often_gone,
)


def kriging(count: int = 20) -> Kriging:
    draw = np.random.default_rng(1)
    place = draw.uniform(-29.0, -27.0, count), draw.uniform(47.0, 48.5, count)
    stations = PlaceMaker(*place).places(*place)
    return Kriging(Covariance("exponential", 4.0, 300.0, 0.1), stations, np.full(count, 0.4))


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


def test_disagreements_take_the_bad_station_and_not_its_neighbours():
    """Analytic: one station 12 kg m-2 off in a constant field."""
    one = kriging()
    values = np.full(20, 20.0)
    values[7] += 12.0
    limits = {"ratio": 3.0, "difference": 2.5, "minimum": 5}
    assert np.flatnonzero(disagreements(one, values, np.zeros(20), **limits)).tolist() == [7]


def test_disagreements_leave_a_gradient_alone():
    """Negative control: a moist side of 10 kg m-2 across the region is weather."""
    one = kriging()
    values = 20.0 + 5.0 * (one.stations.positions[:, 1] - one.stations.positions[:, 1].mean()) / 60
    limits = {"ratio": 4.0, "difference": 2.5, "minimum": 5}
    assert np.ptp(values) > 8.0
    assert not disagreements(one, values, np.zeros(20), **limits).any()


def test_biased_station_is_the_worst_one():
    """Analytic: two stations are off, the worse is named first; a short series is not judged."""
    residual = np.zeros((12, 4)) + [0.3, 3.5, -4.5, 9.0]
    residual[5:, 3] = np.nan
    sigma = np.ones((12, 4))
    assert biased_station(residual, sigma, ratio=2.0, difference=2.5) == 2
    residual[:, 1:3] = 1.0
    assert biased_station(residual, sigma, ratio=2.0, difference=2.5) is None


def test_often_gone_needs_enough_hours():
    """A limit: five tested hours condemn nobody."""
    gone, tested = np.ones((8, 2), bool), np.ones((8, 2), bool)
    tested[5:, 1] = gone[5:, 1] = False
    assert often_gone(gone, tested, 0.5).tolist() == [True, False]
