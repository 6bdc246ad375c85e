"""Plainer methods against loops that do the same by hand."""

import numpy as np
import pytest

from fieldgen.scoring.leave_out import nearest_blocks, predict
from fieldgen.scoring.plain_methods import METHODS, SAME_PLACE
from tests.scoring.days import analysed_day, noisy_scene


@pytest.fixture(scope="module")
def day(tmp_path_factory):
    """An analysed day with gaps."""
    return analysed_day(noisy_scene(tmp_path_factory.mktemp("scene")))


def by_hand(day, blocks, combine):
    """Second derivation: hour by hour, the others' values lifted with 2 km to the station."""
    position, height = day.window.places.positions, day.window.height
    error = np.full(day.window.pwv.shape, np.nan)
    for hour, trusted in enumerate(np.isfinite(day.model.values)):
        for block in blocks:
            station = block[0]
            others = np.flatnonzero(trusted & ~np.isin(np.arange(len(trusted)), block))
            apart = np.linalg.norm(position[others] - position[station], axis=1)
            lifted = day.window.pwv[hour, others] * np.exp(
                (height[others] - height[station]) / 2000.0
            )
            if trusted[station]:
                error[hour, station] = combine(lifted, apart) - day.window.pwv[hour, station]
    return error


@pytest.mark.parametrize("size", [1, 5])
@pytest.mark.parametrize(
    ("name", "combine"),
    [("nearest station, 2 km", lambda values, apart: values[apart.argmin()]),
     ("inverse distance squared, 2 km",
      lambda values, apart: np.average(values, weights=np.maximum(apart, SAME_PLACE) ** -2.0))],
    ids=["nearest", "inverse distance"],
)  # fmt: skip
def test_methods_by_distance_equal_a_loop(day, name, combine, size):
    """A second derivation, gaps included."""
    blocks = nearest_blocks(day.window.places.positions, size)
    found = METHODS[name](day)(blocks)
    np.testing.assert_allclose(found, by_hand(day, blocks, combine), atol=1e-9)
    assert np.isnan(found).any()


def test_an_atmosphere_of_2_km_suits_every_method_but_the_one_without_heights(tmp_path):
    """Analytic atmosphere: 20 kg m-2 with a scale height of 2 km has no error but rounding; kriging
    without heights, the negative control, is off by more than 1 kg m-2 on a hill."""
    day = analysed_day(noisy_scene(tmp_path, gaps=0.0))
    exact = 20.0 * np.exp(-day.window.height / 2000.0)
    day.window.pwv[:] = exact
    day.model.values[:] = exact / np.exp(
        -(day.window.height - day.window.reference_height) / 2000.0
    )
    blocks = nearest_blocks(day.window.places.positions, 1)
    errors = {name: np.abs(make(day)(blocks)).max() for name, make in METHODS.items()}
    assert errors.pop("kriging without heights") > 1.0
    assert len(errors) == 3
    assert max(errors.values()) < 1e-6


def test_all_methods_are_scored_on_the_fields_own_values(day):
    """Round trip: wherever the field is predicted, so is every plainer method."""
    blocks = nearest_blocks(day.window.places.positions, 5)
    known = np.isfinite(predict(day, blocks).error)
    assert known.any()
    for name, make in METHODS.items():
        assert np.isfinite(make(day)(blocks)[known]).all(), name
