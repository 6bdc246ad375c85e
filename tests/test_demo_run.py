"""End to end on the demo network, against the true fields its atmosphere was integrated to.

The truth comes from the demo's own generator, which shares no formula with fieldgen.
"""

import json
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import fieldgen
from fieldgen.fields import FIELD_FLAGS

DEMO = Path(__file__).parents[1] / "demo_network"


@pytest.fixture(scope="module")
def network():
    """The demo, read once."""
    return fieldgen.read_network(DEMO / "network.toml")


@pytest.fixture(scope="module")
def fields(network):
    """All 72 hours."""
    return fieldgen.make_fields(network)


@pytest.fixture(scope="module")
def truth():
    """True water vapour (time, y, x), south row first like the fields."""
    with xr.open_dataset(DEMO / "truth/pwv_truth.nc") as dataset:
        return dataset.load()["pwv"].sortby("y")


def on_land(fields):
    return (fields.flag.values & FIELD_FLAGS["sea"]) == 0


def rmse(error):
    return float(np.sqrt(np.mean(error**2)))


def test_truth_and_fields_share_the_hours_and_cells(fields, truth):
    """Round trip: what follows compares like with like."""
    assert (truth.time.values == fields.time.values).all()
    np.testing.assert_allclose(truth.x, fields.x)
    np.testing.assert_allclose(truth.y, fields.y)


def test_fields_are_right_over_land(fields, truth):
    """Analytic atmosphere: RMSE at most 1.0 kg m-2 over land, bias at most 0.4."""
    error = (fields.pwv.values - truth.values)[on_land(fields)]
    assert rmse(error) <= 1.0
    assert abs(error.mean()) <= 0.4


def test_error_bars_are_honest_over_land(fields, truth):
    """Analytic atmosphere: standardised errors with an SD between 0.8 and 1.25."""
    land = on_land(fields)
    standardised = ((fields.pwv.values - truth.values) / fields.pwv_sigma.values)[land]
    assert 0.8 <= rmse(standardised) <= 1.25


def test_height_handling_is_worth_it(network, fields, truth):
    """Negative control: the same kriging without reduction is at least twice as bad."""
    flat = network.settings.heights.model_copy(update={"scale_height": 1e9, "prior_sigma": 1.0})
    network.settings = (settings := network.settings).model_copy(update={"heights": flat})
    period = "2026-09-09T00:00", "2026-09-09T12:00"
    without = fieldgen.make_fields(network, *period)
    network.settings = settings
    land = on_land(without)
    same = truth.sel(time=without.time).values
    with_heights = fields.pwv.sel(time=without.time).values
    assert rmse((without.pwv.values - same)[land]) > 2.0 * rmse((with_heights - same)[land])


def test_planted_faults_are_found(network, fields):
    """Planted: the station listed 82 m too high is not used; the gross errors are rejected."""
    from fieldgen.day_maker import DayMaker
    from fieldgen.period import Piece
    from fieldgen.station.screening import STATION_FLAGS

    faults = json.loads((DEMO / "truth/faults.json").read_text())
    day = DayMaker(network).analyse(Piece("20260909", 24, 48))
    stations = day.stations
    wrong = stations.sel(station=faults["wrong_height"]["station"])
    assert ((wrong.flag.values & STATION_FLAGS["condemned"]) > 0).all()
    assert any(faults["wrong_height"]["station"] in text for text in network.report.warnings)
    spiky = faults["gross_errors"]["station"]
    rejected = network.report.rejections.counts
    assert rejected[f"station {spiky}", "spike within the step"] >= 8
    good = stations.drop_sel(station=[wrong.station.item(), spiky])
    has_value = np.isfinite(good.pwv.values)
    assert (good.flag.values[has_value] != 0).mean() < 0.005


def test_receivers_on_one_pillar_do_no_harm(fields):
    """A limit: the pair 10 m apart leaves the field around it smooth and finite."""
    assert np.isfinite(fields.pwv.values).all()
    assert float(fields.pwv_sigma.min()) > 0.0
