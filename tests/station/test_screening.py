"""What is taken away, and what must stay."""

import numpy as np

from fieldgen.kriging.covariance import Covariance
from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.solver import Kriging
from fieldgen.station.screening import (
    Habit,
    amid_sharp_weather,
    biased_station,
    disagreements,
    habits,
    lasting_departure,
    level_shift,
    often_gone,
)

NO_HABIT = Habit(np.zeros(20), np.ones(20))


def kriging(count: int = 20) -> Kriging:
    draw = np.random.default_rng(1)
    place = draw.uniform(-29.0, -27.0, count), draw.uniform(47.0, 48.5, count)
    stations = PlaceMaker(*place).places(*place)
    return Kriging(Covariance("exponential", 4.0, 300.0, 0.1), stations, np.full(count, 0.4))


def test_disagreements_take_the_bad_station_and_not_its_neighbours():
    """Analytic: one station 12 kg m-2 off in a constant field."""
    one = kriging()
    values = np.full(20, 20.0)
    values[7] += 12.0
    limits = {"ratio": 3.0, "difference": 2.5, "minimum": 5}
    assert np.flatnonzero(
        disagreements(one, values, np.zeros(20), NO_HABIT, **limits)
    ).tolist() == [7]


def test_disagreements_leave_a_gradient_alone():
    """Negative control: a moist side of 10 kg m-2 across the region is weather."""
    one = kriging()
    values = 20.0 + 5.0 * (one.stations.positions[:, 1] - one.stations.positions[:, 1].mean()) / 60
    limits = {"ratio": 4.0, "difference": 2.5, "minimum": 5}
    assert np.ptp(values) > 8.0
    assert not disagreements(one, values, np.zeros(20), NO_HABIT, **limits).any()


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


def test_disagreements_know_what_is_usual_at_a_station():
    """Negative control: a station that always reads 4 kg m-2 more is judged from there."""
    one, values = kriging(), np.full(20, 20.0)
    values[7] += 4.0
    limits = {"ratio": 3.0, "difference": 2.5, "minimum": 5}
    usual = Habit(np.where(np.arange(20) == 7, 4.0, 0.0), np.ones(20))
    assert not disagreements(one, values, np.zeros(20), usual, **limits).any()
    values[7] += 4.0
    found = disagreements(one, values, np.zeros(20), usual, **limits)
    assert np.flatnonzero(found).tolist() == [7]


def test_disagreements_of_excused_values_do_not_count():
    """A limit."""
    one, values = kriging(), np.full(20, 20.0)
    values[7] += 12.0
    limits = {"ratio": 3.0, "difference": 2.5, "minimum": 5}
    excused = np.arange(20) == 7
    assert not disagreements(one, values, np.zeros(20), NO_HABIT, excused, **limits)[7]


def test_habits_are_not_moved_by_a_few_bad_hours():
    """Analytic: 40 of 48 residuals scatter about 1 with SD 0.5, eight are 20 off."""
    residual = 1.0 + 0.5 * np.random.default_rng(2).normal(size=(48, 1))
    residual[::6] += 20.0
    habit = habits(residual, np.full((48, 1), 0.5))
    assert abs(habit.usual[0] - 0.8) < 0.3  # a fifth of the weight is that of no bias
    assert 0.4 < habit.scale[0] < 0.8


def test_biased_station_knows_a_noisy_one():
    """Negative control: scatter of three sigma is a fault, of one is not."""
    draw = np.random.default_rng(3).normal(size=(24, 4))
    limits = {"ratio": 2.0, "difference": 2.0}
    assert biased_station(draw, np.ones((24, 4)), **limits) is None
    draw[:, 2] *= 4.0
    assert biased_station(draw, np.ones((24, 4)), **limits) == 2


def test_leave_pairs_out_is_kriging_without_both():
    """A second derivation: the same kriging set up anew without the two stations."""
    one = kriging()
    values = 20.0 + np.random.default_rng(4).normal(size=20)
    values[3] = np.nan
    gaps = one.gaps(np.isnan(values))
    partner = np.roll(np.arange(20), 1)
    residual, sigma = one.leave_pairs_out(values, gaps, partner)
    for station in (8, 4):  # the partner of 4 is missing
        rest = np.setdiff1d(np.arange(20), [station, partner[station], 3])
        small = Kriging(one.covariance, one.stations[rest], np.full(len(rest), 0.4))
        weights = small.weights(one.stations[[station]], np.float64)
        expected = values[station] - values[rest] @ weights.values[:, 0]
        np.testing.assert_allclose(residual[station], expected, atol=1e-9)
        np.testing.assert_allclose(sigma[station] ** 2, weights.variance[0] + 0.4, atol=1e-9)


def test_biased_station_sees_two_that_bear_each_other_out():
    """Negative control: two bad stations side by side hide from leaving out one alone."""
    residual, apart = np.full((24, 5), 0.2), np.full((24, 5), 0.2)
    residual[:, :2], apart[:, :2] = 1.5, 4.0
    sigma, nearest = np.ones((24, 5)), np.array([1, 0, 1, 4, 3])
    limits = {"ratio": 2.0, "difference": 2.5}
    assert biased_station(residual, sigma, **limits) is None
    assert biased_station(residual, sigma, **limits, pairs=(apart, sigma, nearest)) in (0, 1)
    apart[:, 1] = 0.2  # its partner is sound: a good station beside a bad one
    assert biased_station(residual, sigma, **limits, pairs=(apart, sigma, nearest)) is None


def test_level_shift_marks_the_side_that_is_off():
    """Analytic: 4 kg m-2 from step 30 of 48 on; a slow swing of 1 kg m-2 is no step."""
    draw = np.random.default_rng(5)
    residual = 0.7 * draw.normal(size=(48, 3)) + np.sin(np.arange(48) / 8.0)[:, None]
    assert not level_shift(residual, 2.2).any()
    residual[30:, 1] += 4.0
    found = level_shift(residual, 2.2)
    assert not found[:, [0, 2]].any()
    assert not found[:28, 1].any()
    assert found[32:, 1].all()


def test_lasting_departure_sees_what_no_single_hour_shows():
    """Negative control: 3 kg m-2 for four hours, three SD; the same for one hour is left alone."""
    draw = np.random.default_rng(6)
    residual = draw.normal(size=(48, 10)) * 0.6
    habit = Habit(np.zeros(10), np.ones(10))
    lone = residual.copy()
    lone[20, 4] = 3.0
    assert not lasting_departure(lone, habit, 2.2).any()
    residual[20:24, 4] = 3.0
    found = lasting_departure(residual, habit, 2.2)
    assert np.argwhere(found).tolist() == [[hour, 4] for hour in range(20, 24)]
    assert not lasting_departure(residual, habit, 2.2, found).any()


def test_amid_sharp_weather_knows_a_front_from_a_fault():
    """Analytic: 15 kg m-2 lower behind a front; stations at it are excused, a lone fault is not."""
    place = np.arange(12.0)
    apart = np.abs(np.subtract.outer(place, place))
    np.fill_diagonal(apart, np.inf)
    calm = np.full((5, 12), 30.0)
    calm[2, 6] += 10.0
    assert not amid_sharp_weather(calm, apart, 8.0, 2.0)[2, 6]
    front = np.where(place < np.arange(4, 9)[:, None], 15.0, 30.0)
    assert amid_sharp_weather(front, apart, 8.0, 2.0)[2, 4:8].all()
    front[2, 6] = 50.0
    assert not amid_sharp_weather(front, apart, 8.0, 2.0)[2, 6]
