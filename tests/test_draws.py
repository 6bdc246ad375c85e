"""Equally likely fields: their moments are those that the field files tell."""

import numpy as np
import pytest
import xarray as xr

from fieldgen.areas.day import open_days
from fieldgen.cli import main
from fieldgen.draws import Drawer
from fieldgen.errors import InputError
from fieldgen.readers.network import read_network
from tests.scoring.days import noisy_scene

COUNT = 400


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """Products and 400 draws of eight hours of a scene with gaps and relief."""
    folder = tmp_path_factory.mktemp("scene")
    settings, out = str(noisy_scene(folder)), ["--out", str(folder / "out")]
    assert main(["make", settings, *out, "--jobs", "1"]) == 0
    assert main(["draws", settings, *out, "--count", str(COUNT)]) == 0
    return folder


@pytest.fixture(scope="module")
def day(folder):
    (day,) = open_days(folder / "out")
    return day


@pytest.fixture(scope="module")
def error(folder, day):
    """Draws less the field (draws, 8, cells)."""
    with xr.open_dataset(folder / "out/draws/draws_20260301.nc") as draws:
        assert draws.pwv.dims == ("realization", "time", "y", "x")
        assert draws.pwv.attrs["units"] == "kg m-2"
        assert draws.realization.attrs["standard_name"] == "realization"
        values = draws.pwv.values.reshape(COUNT, 8, -1).astype(float)
    return values - day.hourly("pwv")


def test_draws_scatter_about_the_field_as_its_error_bar_says(error, day):
    """Second derivation: mean and SD of 400 draws against the file's pwv and pwv_sigma.

    A mean is known to sigma / 20, an SD to 3.5 %; 4.5 of them, for 1152 values. Over all cells and
    hours the SD is right within 4 %: draws share what all cells share.
    """
    sigma = day.hourly("pwv_sigma")
    assert np.abs(error.mean(axis=0) / sigma * np.sqrt(COUNT)).max() < 4.5
    ratio = error.std(axis=0) / sigma
    assert np.abs(ratio - 1.0).max() < 4.5 * 0.0354
    assert ratio.mean() == pytest.approx(1.0, abs=0.04)


def test_draws_vary_together_as_block_kriging_says(error, day):
    """Second derivation: the covariance of hours of a mean over cells, and of a difference of two
    cells, of the draws and by `error_covariance`, which shares no code for it.

    15 % of the largest: two standard errors of a variance from 400 draws are 14 %.
    """
    block, pair = np.flatnonzero(np.arange(144) % 5 == 2), np.array([40, 41])
    for cells, shares in ((block, np.full(len(block), 1 / len(block))), (pair, [1.0, -1.0])):
        shares = np.asarray(shares)
        expected = day.error_covariance(cells, np.tile(shares, (8, 1)))
        found = np.cov((error[:, :, cells] @ shares).T)
        np.testing.assert_allclose(found, expected, atol=0.15 * expected.max())
        mean = (error[:, :, cells] @ shares).mean(axis=1)
        assert mean.std() == pytest.approx(np.sqrt(expected.mean()), rel=0.12)


def test_draws_are_the_same_for_the_same_seed(folder):
    """Round trip, and a negative control: another seed draws others."""
    network = read_network(folder / "network.toml")
    from fieldgen.chain import pieces_of

    (piece,) = pieces_of(network, None, None)
    one, again, other = (Drawer(network, 3, seed).draw_day(piece).pwv.values for seed in (5, 5, 6))
    np.testing.assert_array_equal(one, again)
    assert (one != other).mean() > 0.9


def test_draws_that_are_too_many_are_an_error(folder):
    """Negative control."""
    network = read_network(folder / "network.toml")
    with pytest.raises(InputError, match="Ask for fewer draws"):
        Drawer(network, 10_000_000, 1)


def test_draws_share_what_all_stations_share(folder, monkeypatch):
    """Second derivation: with a shared error, of the same seed, the draws differ by one number for
    the constants and one in proportion to the field, the same in all hours.

    0.02 kg m-2: both are packed. 0.2: four standard errors of an SD from 200 draws.
    """
    from fieldgen.chain import pieces_of
    from fieldgen.day_maker import DayMaker

    network = read_network(folder / "network.toml")
    (piece,) = pieces_of(network, None, None)
    without = Drawer(network, 200, 3).draw_day(piece).pwv.values * 0.01
    compute = DayMaker.compute

    def with_shared_error(maker, piece):
        day, fields = compute(maker, piece)
        day.stations["common_sigma"][:] = 0.5
        day.stations["common_relative_sigma"][:] = 0.03
        return day, fields

    monkeypatch.setattr(DayMaker, "compute", with_shared_error)
    more = (Drawer(network, 200, 3).draw_day(piece).pwv.values * 0.01 - without).reshape(200, -1)
    _, fields = compute(DayMaker(network), piece)
    pwv = fields.pwv.ravel() * 0.01
    functions = np.stack([np.ones(len(pwv)), pwv], axis=1)
    numbers, *_ = np.linalg.lstsq(functions, more.T, rcond=None)
    np.testing.assert_allclose(functions @ numbers, more.T, atol=0.02)
    assert numbers.std(axis=1) == pytest.approx([0.5, 0.03], rel=0.2)
