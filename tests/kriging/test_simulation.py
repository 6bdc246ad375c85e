"""Random fields and lasting noise."""

import numpy as np
import pytest

from fieldgen.kriging import simulation
from fieldgen.kriging.covariance import Covariance, distances
from fieldgen.kriging.error_in_time import correlation_in_time
from fieldgen.kriging.simulation import LastingNoise, RandomField, earlier_neighbours


def points(count=600, seed=4):
    """Points of a square of 100 km, in random order."""
    draw = np.random.default_rng(seed)
    return np.column_stack([draw.uniform(0, 100, (count, 2)), np.zeros(count)])


@pytest.mark.parametrize(
    ("model", "reach"),
    [("exponential", 40.0), ("exponential", 500.0), ("matern32", 100.0), ("spherical", 60.0),
     ("gaussian", 80.0)],
)  # fmt: skip
def test_random_field_has_the_model_s_correlation(monkeypatch, model, reach):
    """Second derivation: the linear map from white noise, times itself, is the correlation.

    60 points are exact, 540 drawn from their neighbours; 0.035, and 0.06 for the spherical model,
    whose far points know nothing of each other: what Vecchia's approximation leaves. With the 600
    exact points of the program and 9800 cells it is 0.015 at most.
    """
    monkeypatch.setattr(simulation, "EXACT_POINTS", 60)
    places, covariance = points(), Covariance(model, 1.0, reach, 0.0)
    root = RandomField(covariance, places)(np.eye(len(places)))
    expected = covariance.correlation(distances(places, places))
    np.testing.assert_allclose(
        root @ root.T, expected, atol=0.06 if model == "spherical" else 0.035
    )


def test_random_field_of_few_points_is_exact():
    """A limit, with two points at one place."""
    places = points(50)
    places[7] = places[3]
    covariance = Covariance("exponential", 1.0, 40.0, 0.0)
    root = RandomField(covariance, places)(np.eye(50))
    expected = covariance.correlation(distances(places, places))
    np.testing.assert_allclose(root @ root.T, expected, atol=1e-5)


def test_earlier_neighbours_are_the_nearest_earlier_ones():
    """Second derivation: all distances, sorted; ordered points too, where few near ones are
    earlier."""
    for places in (points(300), points(300)[np.argsort(points(300)[:, 0])]):
        found = earlier_neighbours(places, 30, 10)
        apart = distances(places, places)
        for row, near in enumerate(found, 30):
            assert (near < row).all()
            best = np.sort(apart[row, :row])[:10]
            assert np.sort(apart[row, near]).sum() <= best.sum() * 1.5 + 1e-9


def test_lasting_noise_resembles_itself_as_it_should():
    """Second derivation: correlations of 40 000 numbers after 1 to 12 hours; 0.02: four standard
    errors."""
    noise, hour = LastingNoise((40_000,), np.random.default_rng(2)), np.timedelta64(1, "h")
    series = [noise.now]
    for _ in range(12):
        noise.advance(hour)
        series.append(noise.now)
    expected = correlation_in_time(np.arange(13) * hour)
    np.testing.assert_allclose(np.corrcoef(series), expected, atol=0.02)
    np.testing.assert_allclose(np.std(series, axis=1), 1.0, atol=0.02)
