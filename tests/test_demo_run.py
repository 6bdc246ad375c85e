"""End to end on the demo network, against the true fields its atmosphere was integrated to.

The truth comes from the demo's own generator, which shares no formula with fieldgen.
"""

import json
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from scipy.stats import norm

import fieldgen
from fieldgen.cli import main
from fieldgen.day_maker import DayMaker
from fieldgen.fields import FIELD_FLAGS
from fieldgen.period import Piece

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
    """Analytic atmosphere: RMSE at most 0.8 kg m-2 over land, bias at most 0.2."""
    error = (fields.pwv.values - truth.values)[on_land(fields)]
    assert rmse(error) <= 0.8
    assert abs(error.mean()) <= 0.2


def coverage(standardised, level):
    """Share of errors within the central interval of a probability."""
    return float(np.mean(np.abs(standardised) < norm.ppf(0.5 + level / 2)))


@pytest.mark.parametrize("part", ["land", "above 1000 m"])
def test_error_bars_are_honest(fields, truth, part):
    """Analytic atmosphere: SD of standardised errors 0.9 to 1.1, 68 % bars cover 64 to 74 %, 95 %
    bars 93 to 97.5 %, over all land and in the mountains apart; the upper ends allow for the three
    days, which are few."""
    inside = on_land(fields)
    if part == "above 1000 m":
        inside &= fields.terrain.values > 1000.0
    standardised = ((fields.pwv.values - truth.values) / fields.pwv_sigma.values)[inside]
    assert 0.9 <= rmse(standardised) <= 1.1
    assert 0.64 <= coverage(standardised, 0.68) <= 0.74
    assert 0.93 <= coverage(standardised, 0.95) <= 0.975


def test_error_bars_far_from_stations_are_not_too_short(fields, truth):
    """Analytic atmosphere: the flagged far cells, nearly all at sea. Their bars are long (SD 0.72
    on these three days): extrapolation is not the place to be bold."""
    far = (fields.flag.values & FIELD_FLAGS["far_from_stations"]) > 0
    standardised = ((fields.pwv.values - truth.values) / fields.pwv_sigma.values)[far]
    assert 0.65 <= rmse(standardised) <= 1.1
    assert coverage(standardised, 0.95) >= 0.93


def test_leave_one_out_errors_are_as_large_as_they_say(network):
    """A second derivation: each station against the others, standardised errors with SD 0.9-1.1."""
    standardised = []
    for first in (0, 24, 48):
        day = DayMaker(network).analyse(Piece("a day", first, first + 24, slice(0, 24))).stations
        used = (day.flag.values == 0) & np.isfinite(day.residual.values)
        standardised.append((day.residual.values / day.residual_sigma.values)[used])
    assert 0.9 <= rmse(np.concatenate(standardised)) <= 1.1


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
    from fieldgen.station.screening import STATION_FLAGS

    faults = json.loads((DEMO / "truth/faults.json").read_text())
    day = DayMaker(network).analyse(Piece("20260909", 24, 48, slice(0, 24)))
    stations = day.stations
    wrong = stations.sel(station=faults["wrong_height"]["station"])
    assert ((wrong.flag.values & STATION_FLAGS["condemned"]) > 0).all()
    assert any(faults["wrong_height"]["station"] in text for text in network.report.warnings)
    spiky = faults["gross_errors"]["station"]
    rejected = network.report.rejections.counts
    assert rejected[f"station {spiky}", "spike within the hour"] >= 8
    good = stations.drop_sel(station=[wrong.station.item(), spiky])
    has_value = np.isfinite(good.pwv.values)
    assert (good.flag.values[has_value] != 0).mean() < 0.005


def test_receivers_on_one_pillar_do_no_harm(fields):
    """A limit: the pair 10 m apart leaves the field around it smooth and finite."""
    assert np.isfinite(fields.pwv.values).all()
    assert float(fields.pwv_sigma.min()) > 0.0


def test_the_command_of_the_readme_makes_three_hours(tmp_path, capsys):
    """Round trip: fields, stations, three maps and a readable run.json, whatever was rejected."""
    period = ["--start", "2026-09-09T12:00", "--end", "2026-09-09T15:00"]
    status = main(
        ["make", str(DEMO / "network.toml"), *period, "--out", str(tmp_path), "--jobs", "1"]
    )
    assert status == 0
    assert len(list((tmp_path / "maps").glob("pwv_*.png"))) == 3
    report = json.loads((tmp_path / "run.json").read_text())
    assert report["summary"]["steps_made"] == 24
    assert "RMSE" in capsys.readouterr().out
