"""Parameters recovered from fields of known parameters, and what happens with too little data."""

import numpy as np
import pytest

from fieldgen.kriging.covariance import Covariance, distances
from fieldgen.kriging.fitting import (
    AUTO,
    EXPECTED,
    RestrictedLikelihood,
    ScaleHeight,
    fit_covariance,
    fit_scale_height,
    usual_covariance,
)
from fieldgen.kriging.places import PlaceMaker
from fieldgen.kriging.solver import Kriging


def network(count: int, seed: int = 1, relief: float = 0.0):
    """Places of stations spread over 200 km, and up to `relief` [km] above the reference height."""
    draw = np.random.default_rng(seed)
    longitude, latitude = -28.2 + draw.uniform(-1.3, 1.3, count), draw.uniform(47.0, 48.6, count)
    lift = draw.uniform(-0.3 * relief, relief, count)
    return PlaceMaker(longitude, latitude).places(longitude, latitude, lift)


def simulate(covariance: Covariance, stations, error_variance: float, hours: int, seed: int = 2):
    """Values (hours, n) drawn from the covariance about a mean of 20 kg m-2."""
    apart = distances(stations.positions, stations.positions)
    matrix = covariance.between(apart, stations.lift, stations.lift)
    np.fill_diagonal(matrix, covariance.at(stations.lift) + error_variance)
    draw = np.random.default_rng(seed).normal(size=(hours, len(matrix)))
    return 20.0 + draw @ np.linalg.cholesky(matrix).T


@pytest.mark.parametrize("model", ["exponential", "spherical", "gaussian"])
def test_fit_covariance_recovers_what_the_field_was_drawn_from(model):
    """Analytic: the mean of six networks of 60 stations and 16 hours.

    One fit scatters by 15 to 20 % in the range and the sill, so their mean by a good 8 %; 25 % is
    three standard errors.
    """
    truth = Covariance(model, 6.0, 120.0, 0.6)
    found = []
    for seed in range(6):
        stations = network(60, seed)
        values = simulate(truth, stations, 0.4, 16, seed)
        fit = fit_covariance(values, np.full(60, 0.4), stations, model, profile=False)
        assert fit.fitted
        found.append(fit.covariance[1:4])
    partial_sill, range_, nugget = np.mean(found, axis=0)
    assert partial_sill == pytest.approx(6.0, rel=0.25)
    assert range_ == pytest.approx(120.0, rel=0.25)
    assert nugget == pytest.approx(0.6, abs=0.25)


def test_fit_covariance_tells_the_profile_from_the_field():
    """Analytic: with relief of 2 km the sills of slope and curvature come back within a factor of
    two, their sampling spread with 16 hours; without relief they stay as expected."""
    truth = Covariance("exponential", 6.0, 120.0, 0.3, 1.5, 0.8)
    stations = network(60, relief=2.0)
    values = simulate(truth, stations, 0.4, 48)
    fit = fit_covariance(values, np.full(60, 0.4), stations, "exponential").covariance
    assert 0.5 < fit.slope_sill / truth.slope_sill < 2.0
    assert 0.5 < fit.curvature_sill / truth.curvature_sill < 2.0
    flat = network(60)
    fit = fit_covariance(values, np.full(60, 0.4), flat, "exponential").covariance
    assert fit.slope_sill == pytest.approx(EXPECTED["slope_sill"].usual, rel=0.01)


def test_auto_takes_the_model_that_the_field_was_drawn_from():
    """Analytic: a Gaussian field without nugget looks like no other."""
    stations = network(60)
    values = simulate(Covariance("gaussian", 6.0, 120.0, 0.05), stations, 0.2, 16)
    fit = fit_covariance(values, np.full(60, 0.2), stations, AUTO, profile=False)
    assert fit.covariance.model == "gaussian"


def patterns(stations, hours: int = 3):
    """Values with gaps of their own in every hour."""
    values = simulate(Covariance("exponential", 6.0, 120.0, 0.6), stations, 0.4, hours)
    values[1, :4] = values[2, 7] = np.nan
    return values


def test_likelihood_is_that_of_each_hour_alone():
    """A second derivation: the textbook restricted likelihood of the stations that are present."""
    stations = network(20, relief=1.5)
    values = patterns(stations)
    likelihood = RestrictedLikelihood(values, np.full(20, 0.4), stations, "exponential", True)
    covariance = Covariance("exponential", 3.0, 90.0, 0.2, 0.7, 0.3)
    parameters = np.log(covariance[1:])
    expected = 0.0
    for row in values:
        present = np.isfinite(row)
        here = stations[present]
        apart = distances(here.positions, here.positions)
        matrix = covariance.between(apart, here.lift, here.lift)
        np.fill_diagonal(matrix, covariance.at(here.lift) + 0.4)
        inverse = np.linalg.inv(matrix)
        information = here.drift.T @ inverse @ here.drift
        beta = np.linalg.solve(information, here.drift.T @ inverse @ row[present])
        rest = row[present] - here.drift @ beta
        expected += 0.5 * (
            np.linalg.slogdet(matrix)[1] + np.linalg.slogdet(information)[1] + rest @ inverse @ rest
        )
    usual, spread = np.array([one[:2] for one in EXPECTED.values()]).T
    expected += 0.5 * np.sum(((parameters - np.log(usual)) / spread) ** 2)
    assert likelihood.objective(parameters)[0] == pytest.approx(expected, rel=1e-10)


def test_likelihood_gradient_is_that_of_the_likelihood():
    """A second derivation: central differences of the objective itself."""
    stations = network(20, relief=1.5)
    likelihood = RestrictedLikelihood(
        patterns(stations), np.full(20, 0.4), stations, "exponential", True
    )
    at = np.log([3.0, 90.0, 0.2, 0.7, 0.3])
    _, gradient = likelihood.objective(at)
    for index in range(len(at)):
        step = np.zeros(len(at))
        step[index] = 1e-5
        slope = (likelihood.objective(at + step)[0] - likelihood.objective(at - step)[0]) / 2e-5
        assert gradient[index] == pytest.approx(slope, rel=1e-4, abs=1e-6)


def test_fit_covariance_falls_back_and_says_so():
    """A limit: seven stations cannot tell a range from a sill."""
    stations = network(7)
    fit = fit_covariance(np.full((5, 7), 20.0), np.full(7, 0.4), stations, "exponential")
    assert not fit.fitted
    assert "usual covariance" in fit.note
    assert fit.covariance == usual_covariance("exponential")


def test_fallback_covariance_matches_published_delay_differences():
    """Published number: Emardson et al. 2003, 2.5 sqrt(L) mm of delay over L km, 10 to 100 km.

    0.157 kg m-2 per mm; within 30 % of the standard deviation, the spread between seasons.
    """
    covariance = usual_covariance("exponential", profile=False)
    for length in (10.0, 30.0, 100.0):
        ours = np.sqrt(2.0 * (covariance.at(0.0) - covariance.between(length, 0.0, 0.0)))
        assert ours == pytest.approx(0.157 * 2.5 * np.sqrt(length), rel=0.3)


def test_fit_scale_height_finds_the_exponential():
    """Analytic: a noise-free exponential of 1700 m under a weak prior."""
    stations = network(25)
    height = np.random.default_rng(3).uniform(0.0, 2000.0, 25)
    kriging = Kriging(Covariance("exponential", 1.0, 100.0, 0.01), stations, np.full(25, 0.01))
    water_vapour = 20.0 * np.exp(-(height - 500.0) / 1700.0)
    gaps = kriging.gaps(np.zeros(25, bool))
    found = fit_scale_height(kriging, gaps, water_vapour, height, 20.0, ScaleHeight(2000.0, 1e4))
    assert found.value == pytest.approx(1700.0, rel=1e-3)
    assert 0.0 < found.sigma < 100.0


def test_fit_scale_height_is_not_misled_by_a_moist_side():
    """A negative control: high stations all on the moist side; least squares without covariance
    is off by more than twice as much."""
    draw = np.random.default_rng(8)
    longitude, latitude = draw.uniform(-29.5, -27.0, 40), draw.uniform(47.0, 48.6, 40)
    maker = PlaceMaker(longitude, latitude)
    stations = maker.places(longitude, latitude)
    east = (longitude + 28.25) / 1.25
    height = np.clip(600.0 + 500.0 * east + draw.normal(0, 250.0, 40), 0, None)
    water_vapour = (20.0 + 5.0 * east) * np.exp(-height / 2000.0)
    kriging = Kriging(Covariance("exponential", 20.0, 400.0, 0.05), stations, np.full(40, 0.05))
    gaps = kriging.gaps(np.zeros(40, bool))
    found = fit_scale_height(kriging, gaps, water_vapour, height, 20.0, ScaleHeight(2000.0, 1e5))
    plain = -1.0 / np.polyfit(height, np.log(water_vapour), 1)[0]
    assert abs(found.value - 2000.0) < 0.5 * abs(plain - 2000.0)


def test_fit_scale_height_keeps_the_prior_without_relief():
    """A limit: all stations at one height say nothing about the profile."""
    stations = network(12)
    kriging = Kriging(Covariance("exponential", 4.0, 100.0, 0.1), stations, np.full(12, 0.3))
    gaps = kriging.gaps(np.zeros(12, bool))
    values = np.random.default_rng(5).normal(20.0, 2.0, 12)
    prior = ScaleHeight(2000.0, 400.0)
    found = fit_scale_height(kriging, gaps, values, np.full(12, 100.0), 20.0, prior)
    assert found.value == pytest.approx(prior.value)
    assert found.sigma == pytest.approx(prior.sigma)
