from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from PIL import Image

from fieldgen.cli import main
from fieldgen.outreach.language import read_language
from fieldgen.outreach.station_plots import (
    Series,
    describe_series,
    draw_figure,
    network_median,
    read_months,
    read_reasons,
)
from fieldgen.station.screening import STATION_FLAGS
from tests.outreach.invented import SCRIPT, write_folder

ENGLISH, GERMAN = read_language(), read_language(Path("german"))


def series(reasons=None, months=None, name="Ardal (ARDA)"):
    """Two days of a station, hourly."""
    time = np.datetime64("2026-09-14T01:00", "ns") + np.arange(48) * np.timedelta64(1, "h")
    reason = np.full(48, "", dtype=object)
    for place, key in (reasons or {}).items():
        reason[place] = key
    pwv = 20 + np.arange(48) / 4
    pwv[reason == "reason_no_pressure"] = np.nan
    return Series(
        name=name, height=123.0, network_name="Ostrana", time=time, step=np.timedelta64(1, "h"),
        pwv=pwv, sigma=np.full(48, 0.8), ztd=2.2 + np.arange(48) / 600, reason=reason,
        network=np.full(48, 22.0), months=months,
    )  # fmt: skip


REASONS = {3: "reason_jump", 4: "reason_jump", 9: "reason_no_pressure", 20: "reason_condemned"}


def test_plot_marks_each_value_not_used_with_its_reason():
    """A second derivation: places of the markers against the flags they come from."""
    vapour = draw_figure(series(REASONS), ENGLISH).axes[0]
    marked = {line.get_label(): line for line in vapour.lines if line.get_linestyle() == "None"}
    assert set(marked) == {
        "not used: sudden jump (2)", "not used: no air pressure (1)",
        "not used: station not trusted (1)",
    }  # fmt: skip
    jumps = marked["not used: sudden jump (2)"]
    assert jumps.get_ydata().tolist() == [20.75, 21.0]
    bottom = vapour.get_ylim()[0]
    assert marked["not used: no air pressure (1)"].get_ydata()[0] == pytest.approx(bottom, abs=1.5)
    own = next(line for line in vapour.lines if line.get_label() == "this station")
    assert np.flatnonzero(np.isnan(own.get_ydata())).tolist() == sorted(REASONS)


def test_band_is_one_standard_error_to_either_side():
    """68 % of a normal distribution lie within one standard deviation (tables; from memory)."""
    vapour = draw_figure(series(), ENGLISH).axes[0]
    vertices = vapour.collections[0].get_paths()[0].vertices
    at_start = vertices[vertices[:, 0] == vertices[:, 0].min()][:, 1]
    assert (at_start.min(), at_start.max()) == (pytest.approx(19.2), pytest.approx(20.8))


def test_describe_series_tells_the_values_used():
    """A second derivation: by numpy from the same series, without the values not used."""
    words = describe_series(series(REASONS | {47: "reason_no_delay"}), ENGLISH)
    assert "Steps with a used value: 43 of 48. They run from 20.0 to 31.5 kg" in words
    assert "Not used: station not trusted 1; sudden jump 2; no air pressure 1." in words
    none = describe_series(series(dict.fromkeys(range(48), "reason_condemned")), ENGLISH)
    assert "No value of the station was used" in none


def test_read_reasons_takes_the_first_and_knows_new_ones():
    """A limit: two reasons at once, and one that no language file has."""
    attributes = {"flag_masks": np.array([1, 2, 4]), "flag_meanings": "no_delay jump moonlight"}
    flags = xr.DataArray([0, 1, 2, 3, 4], attrs=attributes)
    assert read_reasons(flags, ENGLISH).tolist() == [
        "", "reason_no_delay", "reason_jump", "reason_no_delay", "reason_other",
    ]  # fmt: skip


def year_of_a_station(days):
    """A value a day: the number of the month; every third not used and absurd."""
    time = np.datetime64("2025-03-01", "ns") + np.arange(days) * np.timedelta64(1, "D")
    pwv = time.astype("datetime64[M]").astype(int) % 12 + 1.0
    flag = (np.arange(days) % 3 == 0).astype(int)
    values = {"pwv": ("time", np.where(flag, 999.0, pwv)), "flag": ("time", flag)}
    return xr.Dataset(values, coords={"time": time})


def test_seasons_need_all_months_and_take_used_values():
    """An analytic course of the year with known medians."""
    assert read_months(year_of_a_station(330)) is None
    months = read_months(year_of_a_station(365))
    assert months.tolist() == [[month] * 3 for month in range(1, 13)]
    drawn = draw_figure(series(months=months), GERMAN)
    assert len(drawn.axes) == 3
    assert drawn.axes[2].lines[0].get_ydata().tolist() == list(range(1, 13))
    words = describe_series(series(months=months), GERMAN)
    assert "im Januar am kleinsten, 1,0 kg" in words
    assert "im Dezember am größten, 12,0." in words


def test_network_median_leaves_out_what_is_not_used():
    """Checked by hand."""
    values = np.array([[1.0, 5.0], [3.0, 99.0], [8.0, np.nan]])
    flags = np.array([[0, 0], [0, 16], [0, 1]])
    shape = ("station", "time")
    stations = xr.Dataset({"pwv": (shape, values), "flag": (shape, flags)})
    assert network_median(stations).tolist() == [3.0, 5.0]


@pytest.mark.parametrize("months", [None, np.tile([5.0, 6.0, 7.0], (12, 1))], ids=["days", "year"])
@pytest.mark.parametrize("language", [ENGLISH, GERMAN], ids=["english", "german"])
def test_nothing_is_cut_off_or_overlaps(months, language):
    """Common practice, no source: extents of all words."""
    reasons = dict(enumerate(f"reason_{flag}" for flag in STATION_FLAGS))
    figure = draw_figure(series(reasons, months, name=f"{SCRIPT} {'long ' * 40}"), language)
    width, height = figure.canvas.get_width_height()
    boxes = {text.get_text(): text.get_window_extent() for text in figure.texts}
    for axes in figure.axes:
        boxes[axes.get_title(loc="left")] = axes._left_title.get_window_extent()
        if axes.get_legend():
            boxes[f"legend {len(boxes)}"] = axes.get_legend().get_window_extent()
    for name, box in boxes.items():
        assert box.x0 >= 0 and box.x1 <= width and box.y0 >= 0 and box.y1 <= height, (name, box)
    names = list(boxes)
    for index, name in enumerate(names):
        for other in names[index + 1 :]:
            up = min(boxes[name].y1, boxes[other].y1) - max(boxes[name].y0, boxes[other].y0)
            across = min(boxes[name].x1, boxes[other].x1) - max(boxes[name].x0, boxes[other].x0)
            assert up <= 2 or across <= 2, (name, other)


def test_stations_writes_below_its_folder_whatever_their_names(tmp_path, capsys):
    """Negative control: identifiers that would leave the folder or break a page."""
    names = ["../../evil", SCRIPT, ".", "A B", "naïve", "C" * 300]
    write_folder(tmp_path / "in", names=names)
    before = set(tmp_path.rglob("*"))
    options = ["--out", str(tmp_path / "out")]
    assert main(["stations", str(tmp_path / "in"), *options]) == 0
    assert "12 files written" in capsys.readouterr().out
    new = [path for path in set(tmp_path.rglob("*")) - before if path.is_file()]
    assert len(new) == 12
    assert {path.parent for path in new} == {tmp_path / "out/stations"}
    for path in (tmp_path / "out/stations").glob("*.png"):
        with Image.open(path) as plot:
            assert plot.text["Description"] == path.with_suffix(".txt").read_text().strip()


def test_stations_names_those_it_has(written, capsys, tmp_path):
    """Negative control."""
    options = ["--station", "NONE", "--out", str(tmp_path)]
    assert main(["stations", str(written[0]), *options]) == 1
    assert "has no station NONE, expected one of ST00, ST01," in capsys.readouterr().err


def test_last_cuts_the_period(written, capsys, tmp_path):
    """An analytic answer: two of six hours."""
    options = ["--station", "ST00", "--last", "2h", "--out", str(tmp_path)]
    assert main(["stations", str(written[0]), *options]) == 0
    assert "used value: 2 of 2." in (tmp_path / "stations/ST00.txt").read_text()
