"""Block kriging against R gstat, the textbook system, and integration written out."""

import numpy as np
import pytest

from fieldgen.kriging import block
from fieldgen.kriging.block import block_covariances, block_error_covariance, block_weights
from fieldgen.kriging.covariance import Covariance
from fieldgen.kriging.error_in_time import correlation_in_time
from fieldgen.kriging.places import PlaceMaker, Places
from fieldgen.kriging.solver import Kriging
from tests.outside.published import table


def flat(x, y):
    """Places of a plane [km]."""
    level = np.zeros(len(x))
    return Places(np.stack([x, y, level], axis=1), np.ones((len(x), 1)), level)


def test_block_kriging_agrees_with_gstat():
    """Published number: R gstat 2.1-0 on the Meuse data, ordinary block kriging of 400 m squares.

    With gstat's 4 x 4 Gauss points, and its nugget, which a block of points is free of: at the
    stations it is an error variance. 2e-8: the printed digits.
    """
    samples, nodes = table("meuse_gstat_loo"), table("meuse_gstat")
    stations = flat(samples.x.to_numpy() / 1000, samples.y.to_numpy() / 1000)
    nugget = np.full(len(samples), 0.05)
    kriging = Kriging(Covariance("spherical", 0.59, 0.897, 0.0), stations, nugget)
    gaps, excess = [kriging.gaps(np.zeros(len(samples), bool))], np.zeros((1, len(samples)))
    places, weight = np.polynomial.legendre.leggauss(4)
    shares = np.outer(weight, weight).reshape(1, -1) / 4
    for node in nodes.itertuples():
        x, y = np.meshgrid(node.x / 1000 + 0.2 * places, node.y / 1000 + 0.2 * places)
        cells = flat(x.ravel(), y.ravel())
        weights = block_weights(
            kriging, gaps, block_covariances(kriging, cells, shares), cells, shares
        )
        errors = block_error_covariance(kriging, gaps, excess, cells, shares)
        value = samples.log_zinc.to_numpy() @ weights[:, 0]
        assert value == pytest.approx(node.block400, abs=2e-8)
        assert errors[0, 0] == pytest.approx(node.block400_var, abs=2e-8)


@pytest.fixture(scope="module")
def network():
    """25 stations and 60 cells with relief, three hours: none missing, two missing, one worse."""
    draw = np.random.default_rng(3)
    longitude, latitude = draw.uniform(8, 9.5, 85), draw.uniform(46, 47, 85)
    lift = draw.uniform(-0.5, 1.5, 85)
    maker = PlaceMaker(longitude[:25], latitude[:25], "linear")
    covariance = Covariance("matern32", 6.0, 150.0, 0.5, slope_sill=0.8, curvature_sill=0.2)
    places = maker.places(longitude, latitude, lift)
    errors = draw.uniform(0.2, 1.5, 25)
    missing, excess = np.zeros((3, 25), bool), np.zeros((3, 25))
    missing[1, [2, 9]], excess[2, 4] = True, 5.0
    shares = draw.uniform(0.0, 1.0, (3, 60))
    shares /= shares.sum(axis=1, keepdims=True)
    return covariance, places, errors, missing, excess, shares


def solved_by_hand(covariance, places, errors, missing, excess, shares):
    """Covariance of block errors between hours: the system of Lagrange for each hour, then the
    errors as a linear map of the joint vector of cells, stations and noise."""
    apart = np.linalg.norm(places.positions[:, None] - places.positions, axis=2)
    scaled = 4.7438645 * apart / covariance.range
    u = places.lift
    full = (covariance.partial_sill + covariance.slope_sill * np.outer(u, u)) * (
        (1 + scaled) * np.exp(-scaled)
    )
    full += covariance.curvature_sill * np.outer(u**2, u**2) + covariance.nugget * np.eye(85)
    maps = []
    for hour in range(3):
        there = np.flatnonzero(~missing[hour])
        noise = errors + excess[hour]
        functions = places.drift[there]
        zero = np.zeros((3, 3))
        within = full[np.ix_(there, there)] + np.diag(noise[there])
        system = np.block([[within, functions], [functions.T, zero]])
        right = np.append(full[there, 25:] @ shares[hour], places.drift[25:].T @ shares[hour])
        weights = np.zeros(25)
        weights[there] = np.linalg.solve(system, right)[: len(there)]
        maps.append(np.concatenate([-weights, shares[hour], -weights * np.sqrt(noise)]))
    maps = np.stack(maps)
    joint = np.block([[full, np.zeros((85, 25))], [np.zeros((25, 85)), np.eye(25)]])
    return maps @ joint @ maps.T


def test_block_errors_agree_with_the_lagrange_system(network):
    """Second derivation: written out for cells, stations and noise together. 1e-9: rounding."""
    covariance, places, errors, missing, excess, shares = network
    kriging = Kriging(covariance, places[:25], errors)
    gaps = [kriging.gaps(*pair) for pair in zip(missing, excess, strict=True)]
    found = block_error_covariance(kriging, gaps, excess, places[25:], shares)
    np.testing.assert_allclose(found, solved_by_hand(*network), atol=1e-9)


def test_a_block_of_one_cell_has_the_cell_s_variance(network):
    """A limit: the kriging variance of the cell itself, with its nugget."""
    covariance, places, errors, _, excess, _ = network
    kriging = Kriging(covariance, places[:25], errors)
    gaps = [kriging.gaps(np.zeros(25, bool))]
    weights = kriging.weights(places[25:], np.float64)
    for cell in (0, 31):
        cells = places[25:][[cell]]
        found = block_error_covariance(kriging, gaps, excess[:1], cells, np.ones((1, 1)))
        assert found[0, 0] == pytest.approx(weights.variance[cell], abs=1e-9)


def test_a_large_block_is_thinned_without_harm(network, monkeypatch):
    """Second derivation: all cells against a sample of a quarter of them, 3 % of the variance."""
    covariance, _, errors, _, excess, _ = network
    draw = np.random.default_rng(8)
    maker = PlaceMaker(np.array([8.0, 9.5, 9.0]), np.array([46.0, 46.5, 47.0]))
    stations = maker.places(draw.uniform(8, 9.5, 25), draw.uniform(46, 47, 25))
    kriging = Kriging(covariance, stations, errors)
    x, y = (
        one.ravel() for one in np.meshgrid(np.linspace(8.2, 9, 50), np.linspace(46.2, 46.7, 40))
    )
    cells, shares = maker.places(x, y, 0.2), np.full((1, 2000), 1 / 2000)
    gaps = [kriging.gaps(np.zeros(25, bool))]
    whole = block_error_covariance(kriging, gaps, excess[:1], cells, shares)
    monkeypatch.setattr(block, "CELLS_OF_A_BLOCK", 500)
    thinned = block_error_covariance(kriging, gaps, excess[:1], cells, shares)
    assert thinned[0, 0] != whole[0, 0]
    assert thinned[0, 0] == pytest.approx(whole[0, 0], rel=0.03)


def test_correlation_in_time_is_one_now_and_falls():
    """A limit, and the figures that its text gives."""
    time = np.datetime64("2026-09-08T00:00", "s") + np.arange(24) * np.timedelta64(3600, "s")
    found = correlation_in_time(time)
    np.testing.assert_allclose(np.diag(found), 1.0)
    assert (np.diff(found[0]) < 0).all()
    assert found[0, [1, 3, 6, 12]] == pytest.approx([0.73, 0.58, 0.53, 0.47], abs=6e-3)
    assert np.linalg.eigvalsh(found).min() > 0.0
