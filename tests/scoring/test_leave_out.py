"""Leaving stations out against solving anew without them."""

from dataclasses import replace

import numpy as np
import pytest

from fieldgen.analysis import MINIMUM_STATIONS
from fieldgen.kriging.covariance import Covariance
from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.solver import Kriging, krige_hours
from fieldgen.scoring.leave_out import leave_out, nearest_blocks, predict
from tests.scoring.days import analysed_day, noisy_scene

COVARIANCE = Covariance("exponential", 9.0, 150.0, 0.4, 0.6, 0.3)


def scene(drift: str, count: int = 24):
    """Kriging of places up to 2 km high, an hour's values with gaps, and excess variances."""
    draw = np.random.default_rng(11)
    longitude = -28.2 + draw.uniform(-1.3, 1.3, count)
    latitude = 47.8 + draw.uniform(-0.8, 0.8, count)
    maker = PlaceMaker(longitude, latitude, drift)
    places = maker.places(longitude, latitude, draw.uniform(-0.5, 1.5, count))
    kriging = Kriging(COVARIANCE, places, draw.uniform(0.2, 1.0, count))
    values = draw.normal(20.0, 3.0, count)
    values[[3, 8, 9]] = np.nan
    excess = np.where(draw.random(count) < 0.2, 3.0, 0.0)
    assert excess.any()
    return kriging, values, excess


def anew(kriging, values, excess, block):
    """Second derivation: kriging of the stations outside the block alone, at its first place."""
    rest = np.flatnonzero(np.isfinite(values) & ~np.isin(np.arange(len(values)), block))
    own = kriging.error_variance + excess
    smaller = Kriging(kriging.covariance, kriging.stations[rest], own[rest])
    gaps = [smaller.gaps(np.zeros(len(rest), bool))]
    target = kriging.stations[block[:1]]
    field, variance = krige_hours(smaller, target, values[rest][None], gaps, np.float64)
    return values[block[0]] - field[0, 0], variance[0, 0] + own[block[0]]


@pytest.mark.parametrize("drift", ["constant", "linear"])
@pytest.mark.parametrize("size", [1, 2, 5])
def test_leave_out_equals_solving_without_the_block(drift, size):
    """A second derivation, to 1e-7: gaps, excess variances and members that are missing count."""
    kriging, values, excess = scene(drift)
    blocks = nearest_blocks(kriging.stations.positions, size)
    gaps = kriging.gaps(np.isnan(values), excess)
    residual, variance = leave_out(kriging, gaps, values[:, None], blocks)
    for index, block in enumerate(blocks):
        if np.isnan(values[index]):
            assert np.isnan(residual[index, 0])
            assert np.isnan(variance[index])
            continue
        expected = anew(kriging, values, excess, block)
        assert residual[index, 0] == pytest.approx(expected[0], abs=1e-7)
        assert variance[index] == pytest.approx(expected[1], abs=1e-7)


def test_leave_out_of_a_block_differs_from_leaving_one_out():
    """Negative control: what the test above tells apart really differs."""
    kriging, values, excess = scene("constant")
    gaps = kriging.gaps(np.isnan(values), excess)
    one, many = (
        leave_out(kriging, gaps, values[:, None], nearest_blocks(kriging.stations.positions, size))
        for size in (1, 5)
    )
    assert np.nanmean(np.abs(one[0] - many[0])) > 0.1
    assert (many[1] >= one[1] - 1e-9)[np.isfinite(one[1])].all()


def test_leave_out_needs_five_others():
    """A limit: with fewer stations left than a field needs, nothing is predicted."""
    kriging, values, _ = scene("constant")
    values[8:] = np.nan
    present = np.isfinite(values)
    gaps = kriging.gaps(~present)
    blocks = nearest_blocks(kriging.stations.positions, 4)
    residual, _ = leave_out(kriging, gaps, values[:, None], blocks)
    left = present.sum() - present[blocks].sum(axis=1)
    assert (np.isfinite(residual[:, 0]) == (present & (left >= MINIMUM_STATIONS))).all()
    assert (left[present] < MINIMUM_STATIONS).any()
    assert (left[present] >= MINIMUM_STATIONS).any()


def test_leave_out_says_nothing_where_the_rest_does_not_determine_the_drift():
    """A limit: a plane cannot be told from stations on one meridian."""
    longitude = np.array([-28.0] * 6 + [-27.0])
    latitude = np.linspace(47.0, 48.5, 7)
    maker = PlaceMaker(longitude, latitude, "linear")
    assert maker.drift == "linear"
    kriging = Kriging(COVARIANCE, maker.places(longitude, latitude), np.full(7, 0.5))
    gaps = kriging.gaps(np.zeros(7, bool))
    residual, _ = leave_out(kriging, gaps, np.arange(7.0)[:, None], np.arange(7)[:, None])
    assert np.isnan(residual[6, 0])
    assert np.isfinite(residual[:6, 0]).all()


def test_nearest_blocks_start_with_the_station_and_leave_one_outside():
    """A second derivation: stations on a line; two at one place are in each other's block."""
    positions = np.array([[0.0, 0, 0], [1.0, 0, 0], [1.0, 0, 0], [5.0, 0, 0]])
    blocks = nearest_blocks(positions, 2)
    assert blocks[:, 0].tolist() == [0, 1, 2, 3]
    assert blocks[1:3, 1].tolist() == [2, 1]
    assert nearest_blocks(positions, 9).shape == (4, 3)


@pytest.fixture(scope="module")
def day(tmp_path_factory):
    """An analysed day with gaps."""
    return analysed_day(noisy_scene(tmp_path_factory.mktemp("scene")))


def alone(day):
    return np.arange(len(day.window.index))[:, None]


def test_predict_agrees_with_the_station_files_residual(day):
    """Round trip: minus the residual that the analysis reports for the values used."""
    used = day.stations.isel(station=day.window.index)
    expected = np.where(used.flag.values == 0, -used.residual.values, np.nan)
    np.testing.assert_allclose(predict(day, alone(day)).error, expected, atol=1e-9)
    assert np.isfinite(expected).mean() > 0.7


def test_predict_sigma_is_that_of_kriging_without_the_other_parts(day):
    """A limit: a scale height without error leaves what the analysis tells of the values used."""
    sure = np.zeros_like(day.model.scale_height)
    plain = replace(day.model, scale_height_sigma=sure)
    found = predict(replace(day, model=plain), alone(day)).sigma
    used = day.stations.isel(station=day.window.index)
    expected = np.where(used.flag.values == 0, used.residual_sigma.values, np.nan)
    np.testing.assert_allclose(found, expected, rtol=1e-9)


def test_predict_sigma_counts_factor_own_error_and_scale_height(day):
    """A second derivation: the three parts of one value, from kriging without the station."""
    hour, model, window = 2, day.model, day.window
    values = model.values[hour]
    station = int(np.argmax(np.where(np.isfinite(values), window.height, -np.inf)))
    rest = np.flatnonzero(np.isfinite(values) & (np.arange(len(values)) != station))
    own = model.kriging.error_variance + model.excess[hour]
    smaller = Kriging(model.kriging.covariance, window.places[rest], own[rest])
    weights = smaller.weights(window.places[[station]], np.float64)
    scale, factor = model.scale_height[hour], model.variance_factor[hour]
    lift = np.exp(-(window.height[station] - window.reference_height) / scale)
    way = window.height[station] - window.height[rest] @ weights.values[:, 0]
    assert abs(way) > 50.0
    predicted = values[rest] @ weights.values[:, 0] * lift
    by_height = predicted * way * model.scale_height_sigma[hour] / scale**2
    expected = np.sqrt((weights.variance[0] * factor + own[station]) * lift**2 + by_height**2)
    assert predict(day, alone(day)).sigma[hour, station] == pytest.approx(expected, rel=1e-6)
