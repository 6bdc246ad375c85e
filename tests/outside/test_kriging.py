"""Kriging against R gstat, PyKrige and Gaussian processes of scikit-learn."""

import numpy as np
import pytest
from pykrige import variogram_models
from pykrige.ok3d import OrdinaryKriging3D
from pykrige.uk3d import UniversalKriging3D
from scipy.optimize import brentq
from sklearn.gaussian_process import GaussianProcessRegressor
from sklearn.gaussian_process.kernels import RBF, ConstantKernel, Matern

from fieldgen.kriging.covariance import MODELS, Covariance
from fieldgen.kriging.places import PlaceMaker, Places
from fieldgen.kriging.solver import Kriging, krige_hours

from .published import table

PRINTED = 2e-8
"""gstat's values are printed to eight decimals; its variances to nine."""

GSTAT_MODELS = {
    "sph": (Covariance("spherical", 0.59, 0.897, 0.05), 0.0, "constant"),
    "err": (Covariance("spherical", 0.59, 0.897, 0.0), 0.05, "constant"),
    "exp": (Covariance("exponential", 0.65, 3 * 0.450, 0.05), 0.0, "constant"),
    "uk": (Covariance("exponential", 0.65, 3 * 0.450, 0.05), 0.0, "linear"),
}
"""Covariance [1, km, 1], error variance and drift of the columns of meuse_gstat.csv. gstat's
exponential parameter is a third of the range."""


PYKRIGE_MODELS = ("exponential", "gaussian", "spherical")
"""Models that PyKrige has, too."""

MATERN32_AT_RANGE = brentq(lambda a: (1 + a) * np.exp(-a) - 0.05, 1, 10)
"""Where the Matern model of smoothness 3/2 has fallen to 5 %, which is where our range lies."""

KERNELS = {
    "exponential": lambda reach: Matern(reach / 3, nu=0.5),
    "matern32": lambda reach: Matern(reach * np.sqrt(3) / MATERN32_AT_RANGE, nu=1.5),
    "gaussian": lambda reach: RBF(reach / (1.75 * np.sqrt(2))),
}
"""scikit-learn's kernels of unit variance by our name, from our range [km]."""


def meuse_places(rows, drift="constant"):
    """Places of a plane, metres made kilometres; the drift's origin does not matter."""
    x, y = rows.x.to_numpy() / 1000, rows.y.to_numpy() / 1000
    columns = [np.ones(len(x))] + [x - 180, y - 331] * (drift == "linear")
    level = np.zeros(len(x))
    return Places(np.stack([x, y, level], axis=1), np.stack(columns, axis=1), level)


def meuse_kriging(covariance, error_variance, drift):
    """Kriging from the 155 samples, and the logarithms of zinc there."""
    samples = table("meuse_gstat_loo")
    errors = np.full(len(samples), error_variance)
    return Kriging(covariance, meuse_places(samples, drift), errors), samples.log_zinc.to_numpy()


@pytest.mark.parametrize("column", GSTAT_MODELS)
def test_kriging_agrees_with_gstat(column):
    """Published number: R gstat 2.1-0 on the Meuse data, 24 nodes, values and variances."""
    kriging, values = meuse_kriging(*GSTAT_MODELS[column])
    nodes = table("meuse_gstat")
    weights = kriging.weights(meuse_places(nodes, GSTAT_MODELS[column][2]), np.float64)
    np.testing.assert_allclose(values @ weights.values, nodes[column], atol=PRINTED)
    np.testing.assert_allclose(weights.variance, nodes[f"{column}_var"], atol=PRINTED)


def test_leave_one_out_agrees_with_gstat():
    """Published number: R gstat 2.1-0, krige.cv of the 155 samples, one left out at a time."""
    kriging, values = meuse_kriging(*GSTAT_MODELS["sph"])
    samples = table("meuse_gstat_loo")
    residual, sigma = kriging.leave_one_out(values, kriging.gaps(np.isnan(values)))
    np.testing.assert_allclose(values - residual, samples.loo_pred, atol=PRINTED)
    np.testing.assert_allclose(sigma**2, samples.loo_var, atol=PRINTED)
    assert np.sqrt(np.mean(residual**2)) == pytest.approx(0.39175, abs=5e-6)
    assert np.std(residual / sigma, ddof=1) == pytest.approx(0.91, abs=1e-5)


def test_kriging_with_another_range_fails():
    """Negative control: gstat's exponential parameter taken for the range must not agree."""
    kriging, values = meuse_kriging(Covariance("exponential", 0.65, 0.450, 0.05), 0.0, "constant")
    nodes = table("meuse_gstat")
    weights = kriging.weights(meuse_places(nodes), np.float64)
    assert np.abs(values @ weights.values - nodes.exp).max() > 0.1
    assert np.abs(weights.variance - nodes.exp_var).max() > 0.1


@pytest.mark.parametrize("model", PYKRIGE_MODELS)
def test_covariance_is_defined_as_pykrige_defines_it(model):
    """Another library: PyKrige's variogram models; covariance = sill - variogram, at every lag."""
    covariance, level = Covariance(model, 7.0, 120.0, 0.6), np.zeros(6)
    distance = np.array([1.0, 30.0, 60.0, 119.0, 121.0, 400.0])
    variogram = getattr(variogram_models, f"{model}_variogram_model")
    theirs = 7.6 - variogram([7.0, 120.0, 0.6], distance)
    between = covariance.between(distance[None], np.zeros(1), level)[0]
    np.testing.assert_allclose(between, theirs, atol=1e-12)
    np.testing.assert_allclose(covariance.at(level), 7.6)


@pytest.fixture(scope="module")
def network():
    """60 stations over 300 km in mid-latitudes and 40 other places, with values of three hours."""
    draw = np.random.default_rng(5)
    longitude, latitude = draw.uniform(8, 12, 100), draw.uniform(46, 48.7, 100)
    values = 15 + 3 * np.sin(longitude) + draw.normal(0, 1, (3, 100))
    return longitude, latitude, values[:, :60]


def krige_with_pykrige(covariance, error_variance, stations, values, targets):
    """Values and variances at the targets by PyKrige in three dimensions.

    OrdinaryKriging3D, or UniversalKriging3D with the drift as `specified`; the error variance, one
    for all stations, joins the nugget and then leaves the variance.
    """
    data = (*stations.positions.T, values)
    options = {
        "variogram_model": covariance.model,
        "variogram_parameters": {
            "psill": covariance.partial_sill,
            "range": covariance.range,
            "nugget": covariance.nugget + error_variance,
        },
    }
    where = ("points", *targets.positions.T)
    drift = [list(places.drift[:, 1:].T) for places in (stations, targets)]
    if not drift[0]:
        field, variance = OrdinaryKriging3D(*data, **options).execute(*where)
    else:
        options |= {"drift_terms": ["specified"], "specified_drift": drift[0]}
        solver = UniversalKriging3D(*data, **options)
        field, variance = solver.execute(*where, specified_drift_arrays=drift[1])
    return field, variance - error_variance


@pytest.mark.parametrize("drift", ["constant", "linear"])
@pytest.mark.parametrize("model", PYKRIGE_MODELS)
def test_kriging_agrees_with_pykrige(network, model, drift):
    """Another library: PyKrige, nugget 0.5 of the field plus 0.8 of errors.

    1e-6: rounding, the Gaussian model being the worst conditioned.
    """
    longitude, latitude, values = network
    maker = PlaceMaker(longitude[:60], latitude[:60], drift)
    stations = maker.places(longitude[:60], latitude[:60])
    targets = maker.places(longitude[60:], latitude[60:])
    covariance = Covariance(model, 6.0, 150.0, 0.5)
    weights = Kriging(covariance, stations, np.full(60, 0.8)).weights(targets, np.float64)
    field, variance = krige_with_pykrige(covariance, 0.8, stations, values[0], targets)
    np.testing.assert_allclose(values[0] @ weights.values, field, atol=1e-6)
    np.testing.assert_allclose(weights.variance, variance, atol=1e-6)


@pytest.mark.parametrize("drift", ["constant", "linear"])
def test_krige_hours_with_gaps_agrees_with_pykrige(network, drift):
    """Another library: the gap identity against PyKrige solved anew from the stations present.

    None, three, and 25 of 60 stations are missing; 1e-6: rounding.
    """
    longitude, latitude, values = network
    values = values.copy()
    values[1, [3, 17, 40]] = np.nan
    values[2, 20:45] = np.nan
    maker = PlaceMaker(longitude[:60], latitude[:60], drift)
    stations = maker.places(longitude[:60], latitude[:60])
    targets = maker.places(longitude[60:], latitude[60:])
    covariance = Covariance("exponential", 6.0, 150.0, 0.5)
    kriging = Kriging(covariance, stations, np.full(60, 0.8))
    gaps = [kriging.gaps(np.isnan(row)) for row in values]
    field, variance = krige_hours(kriging, targets, values, gaps, np.float64)
    for hour, row in enumerate(values):
        there = np.isfinite(row)
        theirs = krige_with_pykrige(covariance, 0.8, stations[there], row[there], targets)
        np.testing.assert_allclose(field[hour], theirs[0], atol=1e-6)
        np.testing.assert_allclose(variance[hour], theirs[1], atol=1e-6)


def test_every_model_is_compared():
    """Second derivation: each covariance stands in a list of PyKrige's or of scikit-learn's."""
    assert set(MODELS) == {*PYKRIGE_MODELS, *KERNELS}


@pytest.mark.parametrize("model", KERNELS)
def test_kriging_agrees_with_gaussian_process(network, model):
    """Another library: scikit-learn's GaussianProcessRegressor, every station with its own error.

    An unknown constant mean is a Gaussian process in the limit of a constant of infinite variance:
    ConstantKernel(1e5) is added, nothing is optimised or normalised; alpha is the field's nugget
    plus each error variance, and the nugget joins the variance of the prediction. Tolerance: the
    constant's variance is finite, which costs some (6/60)/1e5 of the values; and 1e5 in double
    precision leaves 1e-6 of the variance.
    """
    longitude, latitude, values = network
    errors = np.random.default_rng(2).uniform(0.2, 2.0, 60)
    maker = PlaceMaker(longitude[:60], latitude[:60])
    stations = maker.places(longitude[:60], latitude[:60])
    targets = maker.places(longitude[60:], latitude[60:])
    kriging = Kriging(Covariance(model, 6.0, 150.0, 0.5), stations, errors)
    weights = kriging.weights(targets, np.float64)
    kernel = ConstantKernel(1e5) + ConstantKernel(6.0) * KERNELS[model](150.0)
    process = GaussianProcessRegressor(kernel, alpha=0.5 + errors, optimizer=None)
    mean, sigma = process.fit(stations.positions, values[0]).predict(
        targets.positions, return_std=True
    )
    np.testing.assert_allclose(values[0] @ weights.values, mean, atol=1e-4)
    np.testing.assert_allclose(weights.variance, sigma**2 + 0.5, atol=1e-4)


@pytest.mark.parametrize("drift", ["constant", "linear"])
def test_kriging_with_relief_agrees_with_the_lagrange_system(network, drift):
    """Second derivation: the textbook system with Lagrange multipliers, solved for every target.

    The covariance is written out from its definition, with the terms of the height: (partial sill
    + slope sill h h') correlation + curvature sill h^2 h'^2. 1e-9: rounding.
    """
    longitude, latitude, values = network
    draw = np.random.default_rng(4)
    lift, errors = draw.uniform(-1, 2, 100), draw.uniform(0.2, 2.0, 60)
    maker = PlaceMaker(longitude[:60], latitude[:60], drift)
    stations = maker.places(longitude[:60], latitude[:60], lift[:60])
    targets = maker.places(longitude[60:], latitude[60:], lift[60:])
    covariance = Covariance("exponential", 6.0, 150.0, 0.5, slope_sill=0.8, curvature_sill=0.1)
    weights = Kriging(covariance, stations, errors).weights(targets, np.float64)

    everywhere = maker.places(longitude, latitude)
    apart = np.linalg.norm(everywhere.positions[:, None] - everywhere.positions, axis=2)
    full = (6.0 + 0.8 * np.outer(lift, lift)) * np.exp(-3 * apart / 150.0)
    full += 0.1 * np.outer(lift**2, lift**2) + 0.5 * np.eye(100)
    functions = everywhere.drift[:60]
    zero = np.zeros((functions.shape[1],) * 2)
    system = np.block([[full[:60, :60] + np.diag(errors), functions], [functions.T, zero]])
    right = np.vstack([full[:60, 60:], everywhere.drift[60:].T])
    solved = np.linalg.solve(system, right)
    variance = np.diag(full)[60:] - np.einsum("ij,ij->j", solved, right)
    np.testing.assert_allclose(values @ weights.values, values @ solved[:60], atol=1e-9)
    np.testing.assert_allclose(weights.variance, variance, atol=1e-9)
