"""Figures of merit against their definitions."""

import warnings

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm

from fieldgen.scoring.figures import (
    LEVELS,
    bias_standard_error,
    figures,
    gaussian_crps,
    reliability,
)


@pytest.mark.parametrize("error", [-2.0, 0.0, 0.3])
@pytest.mark.parametrize("sigma", [0.5, 1.7])
def test_gaussian_crps_is_the_integral_of_squared_differences(error, sigma):
    """A second derivation: the definition, integrated to 1e-6."""

    def squared(place):
        return (norm.cdf(place, error, sigma) - (place >= 0.0)) ** 2

    expected = quad(squared, -30.0, 0.0)[0] + quad(squared, 0.0, 30.0)[0]
    assert gaussian_crps(np.array(error), sigma) == pytest.approx(expected, abs=1e-6)


def test_figures_by_hand():
    """A second derivation: four errors on paper, and a missing one that does not count."""
    error = np.array([1.0, -1.0, 3.0, np.nan, 1.0])
    found = figures(error, np.array([1.0, 2.0, 1.0, 1.0, 2.0]))
    assert found.count == 4
    assert found.bias == pytest.approx(1.0)
    assert found.rmse == pytest.approx(np.sqrt(3.0))
    assert found.mae == pytest.approx(1.5)
    assert found.mean_sigma == pytest.approx(1.5)
    assert found.standardised_sd == pytest.approx(np.sqrt((1 + 0.25 + 9 + 0.25) / 4))
    assert found.coverage_68 == 0.5  # 1 sigma is above the 0.994 of 68 %
    assert found.coverage_95 == 0.75


def test_figures_of_nothing_are_empty():
    """A limit, without a warning."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        found = figures(np.full(3, np.nan), np.ones(3))
    assert found.count == 0
    assert np.isnan(found[1:]).all()
    assert reliability(np.full(3, np.nan), np.ones(3)) == []


def test_reliability_tells_honest_error_bars_from_small_ones():
    """Analytic: Gaussian errors meet every level to 0.015 (three SD of 10 000 draws); halved error
    bars, the negative control, do not."""
    draw = np.random.default_rng(2)
    sigma = draw.uniform(0.5, 3.0, 10_000)
    error = draw.normal(0.0, sigma)
    nominal, observed = np.array(reliability(error, sigma)).T
    assert tuple(nominal) == LEVELS
    np.testing.assert_allclose(observed, nominal, atol=0.015)
    assert reliability(error, sigma / 2.0)[-1][1] < 0.85
    assert figures(error, sigma).standardised_sd == pytest.approx(1.0, abs=0.03)


def test_bias_standard_error_counts_the_memory():
    """Analytic: means of autoregressive series spread as the standard error says, to 20 %; taken
    as independent values, the negative control, they would spread by less than half of that."""
    draw = np.random.default_rng(3)
    noise = draw.normal(size=(400, 2000))
    series = np.empty_like(noise)
    series[0] = noise[0]
    for step in range(1, len(noise)):
        series[step] = 0.7 * series[step - 1] + np.sqrt(1 - 0.7**2) * noise[step]
    series[draw.random(series.shape) < 0.1] = np.nan
    spread = np.nanmean(series, axis=0).std()
    told = np.median([bias_standard_error(column) for column in series.T])
    assert told == pytest.approx(spread, rel=0.2)
    white = np.median(np.nanstd(series, axis=0) / np.sqrt(np.isfinite(series).sum(axis=0)))
    assert white < 0.5 * spread


def test_bias_standard_error_needs_six_steps():
    """A limit; and a constant series has no spread."""
    assert np.isnan(bias_standard_error(np.array([1.0, 2.0, np.nan, 3.0, 1.0, 2.0])))
    assert bias_standard_error(np.ones(8)) == 0.0
