"""A score from network to report, files and picture."""

import json

import numpy as np
import pandas as pd
import pytest

from fieldgen.errors import InputError
from fieldgen.products.metadata import CAUTION
from fieldgen.readers.network import read_network
from fieldgen.scoring.figures import figures
from fieldgen.scoring.files import write_score
from fieldgen.scoring.report import height_bands, hour_of_day, report_score
from fieldgen.scoring.summary import format_score
from fieldgen.scoring.trials import score_network
from tests.scoring.days import noisy_scene

BIASED, OFFSET = "ST03", 2.2


@pytest.fixture(scope="module")
def scored(tmp_path_factory):
    """Network and score; one station reads `OFFSET` more than it should, another 9 more."""
    folder = tmp_path_factory.mktemp("scene")
    path = noisy_scene(folder, hours=30, gaps=0.05)
    table = pd.read_csv(folder / "delays.csv")
    table.loc[table.station == BIASED, "pwv"] += OFFSET
    table.loc[table.station == "ST07", "pwv"] += 9.0
    table.to_csv(folder / "delays.csv", index=False)
    network = read_network(path)
    return network, score_network(network)


@pytest.fixture(scope="module")
def report(scored):
    """Report of the score."""
    return report_score(*scored)


def test_the_biased_station_is_named_with_size_and_side(report):
    """Analytic: the offset put in comes back, to 0.5 kg m-2, as the others saying less."""
    worst = report.worst[0]
    assert worst.id == BIASED
    assert worst.figures.bias == pytest.approx(-OFFSET, abs=0.5)
    assert worst.significance < -5.0
    assert worst.stands_off
    assert not report.worst[-1].stands_off
    (line,) = (line for line in format_score(report).splitlines() if f"station {BIASED}" in line)
    assert "more than the others say" in line


def test_rejected_values_are_counted_and_count_nowhere(report, scored):
    """Negative control: 9 kg m-2 of a condemned station are in no figure, but told."""
    condemned = {one.id: one for one in report.condemned}["ST07"]
    assert condemned.figures.count == 0
    assert condemned.rejected >= 25
    assert condemned.rejected_bias == pytest.approx(-9.0, abs=1.5)
    assert report.rejected["condemned"] == condemned.rejected
    assert "no_delay" not in report.rejected
    assert report.trials["each_station"].overall.rmse < 2.0
    _, score = scored
    error = score.trials["each_station"].error
    assert np.isnan(error[score.flag != 0]).all()


def test_groups_are_parts_of_the_whole(report):
    """A second derivation: counts add up, and the squares of the parts to that of the whole."""
    for trial in report.trials.values():
        total = trial.overall
        for groups in (trial.by_height, trial.by_position, trial.by_hour):
            assert sum(one.count for one in groups.values()) == total.count
            squares = sum(one.count * one.rmse**2 for one in groups.values())
            assert squares == pytest.approx(total.count * total.rmse**2)
    blocks = report.trials["blocks"]
    assert blocks.by_position["outside"].count > (
        report.trials["each_station"].by_position.get("outside", figures(*np.ones((2, 0)))).count
    )


def test_gain_is_the_share_of_rmse_saved(report):
    """A second derivation."""
    for trial in report.trials.values():
        for plain in trial.plain.values():
            assert plain.gain == pytest.approx(1.0 - trial.overall.rmse / plain.rmse)
    assert report.trials["each_station"].plain["kriging without heights"].gain > 0.0


def test_all_methods_are_scored_on_the_same_values(tmp_path):
    """Round trip: eight stations can be left out one by one, but not with four others."""
    score = score_network(read_network(noisy_scene(tmp_path, stations=8)))
    assert np.isfinite(score.trials["each_station"].error).any()
    assert np.isnan(score.trials["blocks"].error).all()
    for trial in score.trials.values():
        for error in trial.plain.values():
            np.testing.assert_array_equal(np.isfinite(error), np.isfinite(trial.error))


def test_score_does_not_depend_on_the_number_of_processes(tmp_path):
    """Round trip: two days in one process and in two."""
    network = read_network(noisy_scene(tmp_path, hours=30))
    one, two = score_network(network), score_network(network, jobs=2)
    for name, trial in one.trials.items():
        np.testing.assert_array_equal(trial.error, two.trials[name].error)
        np.testing.assert_array_equal(trial.sigma, two.trials[name].sigma)


def test_files_reopen_with_what_the_report_says(report, tmp_path):
    """Round trip: JSON without NaN, tables below comment lines."""
    paths = write_score(report, tmp_path)
    content = json.loads((tmp_path / "score.json").read_text(), parse_constant=pytest.fail)
    assert content["caution"] == CAUTION
    assert content["network"] == "Test isle"
    assert content["period_start"] == "2026-03-01T00:00:00Z"
    overall = report.trials["each_station"].overall
    assert content["trials"]["each_station"]["overall"]["rmse"] == round(overall.rmse, 4)
    stations = pd.read_csv(paths[1], comment="#", keep_default_na=True).set_index("station")
    assert stations.loc[BIASED, "bias"] == pytest.approx(report.worst[0].figures.bias, abs=1e-4)
    assert stations["count"].sum() == overall.count
    steps = pd.read_csv(paths[2], comment="#")
    assert steps.groupby("trial")["count"].sum()["each_station"] == overall.count
    for path in paths[1:]:
        assert f"# caution: {CAUTION}" in path.read_text()
        assert "# units: " in path.read_text()


def test_summary_is_short(report):
    """A limit: about thirty lines, none too wide for a terminal."""
    lines = format_score(report).splitlines()
    assert len(lines) <= 34
    assert max(len(line) for line in lines) <= 130
    assert lines[-1] == CAUTION


def test_hour_of_day_is_the_hour_that_holds_the_step():
    """A second derivation: steps that end at midnight belong to the 24th hour."""
    time = np.array(
        ["2026-03-02T00:00", "2026-03-02T00:15", "2026-03-02T01:00", "2026-03-02T23:45"],
        "datetime64[ns]",
    )
    assert hour_of_day(time).tolist() == [24, 1, 1, 24]


def test_height_bands_hold_each_height_once():
    """A limit: edges belong to the band above."""
    heights = np.array([-5.0, 199.9, 200.0, 1999.0, 2000.0, 4000.0])
    bands = height_bands(heights)
    assert np.sum(list(bands.values()), axis=0).tolist() == [1] * 6
    assert bands["below 200 m"].tolist() == [True, True, False, False, False, False]
    assert bands["above 2000 m"].tolist() == [False] * 4 + [True] * 2


def test_too_few_stations_cannot_be_scored(tmp_path):
    """Negative control: five stations make fields, but none can be left out."""
    network = read_network(noisy_scene(tmp_path, stations=5, gaps=0.0))
    with pytest.raises(InputError, match="no step has six stations"):
        score_network(network)
