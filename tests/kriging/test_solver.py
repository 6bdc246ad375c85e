"""The engine against solving each hour anew."""

import numpy as np
import pytest

from fieldgen.kriging.covariance import Covariance
from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.pykrige_engine import krige_with_pykrige
from fieldgen.kriging.solver import Kriging, krige_hours

COVARIANCE = Covariance("exponential", 9.0, 150.0, 0.4)


def scene(drift: str, stations: int = 30, targets: int = 60, seed: int = 1):
    """Stations, their error variances and targets."""
    draw = np.random.default_rng(seed)

    def places(count):
        return -28.2 + draw.uniform(-1.3, 1.3, count), 47.8 + draw.uniform(-0.8, 0.8, count)

    station, target = places(stations), places(targets)
    maker = PlaceMaker(*station, drift)
    error_variance = draw.uniform(0.2, 1.0, stations)
    return maker.places(*station), error_variance, maker.places(*target)


def krige_anew(covariance, stations, error_variance, targets, values):
    """Second derivation: the bordered kriging system of the present stations alone."""
    present = np.isfinite(values)
    position, drift = stations.positions[present], stations.drift[present]
    apart = np.linalg.norm(position[:, None] - position[None], axis=2)
    matrix = covariance.partial_sill * np.exp(-3.0 * apart / covariance.range)
    matrix += np.diag(covariance.nugget + error_variance[present])
    count, functions = drift.shape
    system = np.block([[matrix, drift], [drift.T, np.zeros((functions, functions))]])
    away = np.linalg.norm(position[:, None] - targets.positions[None], axis=2)
    to_targets = covariance.partial_sill * np.exp(-3.0 * away / covariance.range)
    right = np.vstack([to_targets, targets.drift.T])
    solution = np.linalg.solve(system, right)
    field = values[present] @ solution[:count]
    variance = covariance.partial_sill + covariance.nugget - np.sum(solution * right, axis=0)
    return field, variance


@pytest.mark.parametrize("drift", ["constant", "linear"])
@pytest.mark.parametrize("share", [0.0, 0.1, 0.5], ids=["whole", "few gaps", "many gaps"])
def test_krige_hours_equals_solving_each_hour_anew(drift, share):
    """A second derivation, to 1e-8 in double precision."""
    stations, error_variance, targets = scene(drift)
    draw = np.random.default_rng(7)
    values = draw.normal(20.0, 3.0, (8, 30))
    values[draw.random(values.shape) < share] = np.nan
    kriging = Kriging(COVARIANCE, stations, error_variance)
    gaps = [kriging.gaps(np.isnan(row)) for row in values]
    field, variance = krige_hours(kriging, targets, values, gaps, np.float64)
    for hour, row in enumerate(values):
        expected = krige_anew(COVARIANCE, stations, error_variance, targets, row)
        np.testing.assert_allclose(field[hour], expected[0], atol=1e-8)
        np.testing.assert_allclose(variance[hour], expected[1], atol=1e-8)


def test_krige_hours_honours_an_error_variance_of_one_hour():
    """A second derivation: the excess belongs on the diagonal of that hour alone."""
    stations, error_variance, targets = scene("constant")
    draw = np.random.default_rng(3)
    values = draw.normal(20.0, 3.0, 30)
    values[[2, 9]] = np.nan
    excess = np.where(draw.random(30) < 0.2, 4.0, 0.0)
    assert excess.any()
    kriging = Kriging(COVARIANCE, stations, error_variance)
    gaps = kriging.gaps(np.isnan(values), excess)
    field, variance = krige_hours(kriging, targets, values[None], [gaps], np.float64)
    expected = krige_anew(COVARIANCE, stations, error_variance + excess, targets, values)
    np.testing.assert_allclose(field[0], expected[0], atol=1e-8)
    np.testing.assert_allclose(variance[0], expected[1], atol=1e-8)


def test_single_precision_stays_within_the_written_step():
    """A limit: the files hold steps of 0.01 kg m-2, single precision must not show in them."""
    stations, error_variance, targets = scene("linear")
    values = np.random.default_rng(5).normal(40.0, 5.0, (3, 30))
    values[1, :5] = np.nan
    kriging = Kriging(COVARIANCE, stations, error_variance)
    gaps = [kriging.gaps(np.isnan(row)) for row in values]
    single, _ = krige_hours(kriging, targets, values, gaps)
    double, _ = krige_hours(kriging, targets, values, gaps, np.float64)
    assert np.abs(single - double).max() < 1e-3


@pytest.mark.parametrize("drift", ["constant", "linear"])
def test_leave_one_out_equals_removing_the_station(drift):
    """A second derivation: each station removed, the rest solved anew, gaps present too."""
    stations, error_variance, _ = scene(drift)
    values = np.random.default_rng(2).normal(20.0, 3.0, 30)
    values[[4, 11, 12]] = np.nan
    kriging = Kriging(COVARIANCE, stations, error_variance)
    residual, sigma = kriging.leave_one_out(values, kriging.gaps(np.isnan(values)))
    assert np.isnan(residual[[4, 11, 12]]).all()
    for index in (0, 5, 29):
        without = values.copy()
        without[index] = np.nan
        here = stations[[index]]
        field, variance = krige_anew(COVARIANCE, stations, error_variance, here, without)
        assert residual[index] == pytest.approx(values[index] - field[0], abs=1e-9)
        assert sigma[index] ** 2 == pytest.approx(variance[0] + error_variance[index], abs=1e-9)


@pytest.mark.parametrize("drift", ["constant", "linear"])
def test_pykrige_engine_agrees_with_equal_error_variances(drift):
    """Another library: PyKrige 3-D kriging, nugget = field's nugget + error variance."""
    stations, _, targets = scene(drift)
    values = np.random.default_rng(4).normal(20.0, 3.0, (2, 30))
    values[1, [3, 8]] = np.nan
    kriging = Kriging(COVARIANCE, stations, np.full(30, 0.5))
    gaps = [kriging.gaps(np.isnan(row)) for row in values]
    ours = krige_hours(kriging, targets, values, gaps, np.float64)
    theirs = krige_with_pykrige(kriging, targets, values, np.float64)
    np.testing.assert_allclose(ours[0], theirs[0], atol=1e-6)
    np.testing.assert_allclose(ours[1], theirs[1], atol=1e-6)


def test_stations_at_one_place_share_the_weight():
    """A limit: two receivers on one pillar, each with its own error, count by their errors."""
    maker = PlaceMaker(np.array([-28.0, -28.0, -27.0]), np.array([47.5, 47.5, 48.0]))
    stations = maker.places(np.array([-28.0, -28.0, -27.0]), np.array([47.5, 47.5, 48.0]))
    covariance = Covariance("exponential", 9.0, 150.0, 0.0)
    kriging = Kriging(covariance, stations, np.array([0.1, 0.4, 0.2]))
    weights = kriging.weights(maker.places(np.array([-28.0]), np.array([47.5])), np.float64)
    assert weights.values[0] == pytest.approx(4.0 * weights.values[1])


def test_linear_drift_needs_stations_off_one_line():
    """A limit: on a line the plane is not determined, so the drift falls back to a constant."""
    longitude = np.linspace(-29.0, -27.0, 6)
    assert PlaceMaker(longitude, np.full(6, 47.5), "linear").drift == "constant"
    assert PlaceMaker(longitude, np.linspace(47, 48, 6) ** 2 % 1 + 47, "linear").drift == "linear"
