"""The hours of a page, read back from an output folder."""

import json
from datetime import timedelta

import numpy as np
import pytest
import xarray as xr

from fieldgen.cli import main
from fieldgen.errors import InputError
from fieldgen.products.flag_words import REASONS, reason
from fieldgen.products.look import HATCHES
from fieldgen.products.page.figures import HATCH_PATTERNS
from fieldgen.products.page.layers import list_layers
from fieldgen.products.page.reading import read_hours
from fieldgen.station.screening import STATION_FLAGS
from tests.products.page.folders import read_fields, read_stations, write_invented


@pytest.fixture
def invented(tmp_path):
    """A folder of 30 hours over two days."""
    write_invented(tmp_path, hours=30, rows=6, columns=8)
    return tmp_path


@pytest.mark.parametrize("hours, kept", [(1, 1), (6, 6), (24, 24), (48, 30)])
def test_last_counts_back_from_the_newest_hour(invented, hours, kept):
    """Round trip; 6 hours lie within the second day, 24 reach into the first."""
    time = read_hours(invented, timedelta(hours=hours)).fields["time"].values
    assert len(time) == kept
    assert time[-1] == np.datetime64("2026-09-15T06:00")
    assert (np.diff(time) == np.timedelta64(1, "h")).all()


def test_without_last_all_hours_are_read_in_order(invented):
    """Round trip."""
    time = read_hours(invented, None).fields["time"].values
    assert len(time) == 30
    assert (np.diff(time) > np.timedelta64(0)).all()


def test_fields_and_stations_are_those_of_the_files(outputs):
    """Round trip through the files that the program wrote."""
    hours = read_hours(outputs, None)
    fields, stations = read_fields(outputs), read_stations(outputs)
    np.testing.assert_array_equal(hours.fields["pwv"].values, fields["pwv"].values)
    order = np.argsort(stations["station_id"].values.astype(str))
    for name in ("pwv", "residual", "flag"):
        np.testing.assert_array_equal(hours.stations[name].values, stations[name].values[order])


def test_a_day_without_station_file_has_no_stations(invented):
    """Limit."""
    assert read_hours(invented, None).stations.sizes["station"] == 0


def change(folder, spoil):
    """Spoil the newest field file."""
    path = folder / "fields/pwv_20260915.nc"
    with xr.open_dataset(path) as fields:
        fields.load()
    spoil(fields)
    path.unlink()
    fields.to_netcdf(path)


BAD = {
    "no folder": (lambda p: None, lambda p: p / "nothing", "holds no field files"),
    "no run.json": (lambda p: (p / "run.json").unlink(), None, "run.json: cannot be read"),
    "run.json without limits": (
        lambda p: (p / "run.json").write_text("{}"), None, "colour_limits is missing"
    ),
    "run.json cut short": (
        lambda p: (p / "run.json").write_text('{"colour'), None, "colour_limits is missing"
    ),
    "no name": (
        lambda p: change(p, lambda fields: fields.attrs.pop("project")), None,
        "attribute project is missing",
    ),
    "no terrain": (
        lambda p: change(p, lambda fields: fields.__delitem__("terrain")), None,
        "variable terrain is missing",
    ),
    "no meanings": (
        lambda p: change(p, lambda fields: fields["flag"].attrs.pop("flag_meanings")), None,
        "attribute flag_meanings of flag is missing",
    ),
    "no NetCDF": (
        lambda p: (p / "fields/pwv_20260915.nc").write_bytes(b"\0" * 99), None, "is not NetCDF"
    ),
}  # fmt: skip


@pytest.mark.parametrize("spoil, folder, words", BAD.values(), ids=BAD)
def test_bad_folders_end_in_one_clear_line(invented, capsys, spoil, folder, words):
    """Negative control, as a user meets it."""
    spoil(invented)
    assert main(["page", str(folder(invented) if folder else invented)]) == 1
    error = capsys.readouterr().err
    assert words in error
    assert error.count("\n") == 1


def test_another_grid_is_an_error(invented, tmp_path):
    """Negative control: hours of two grids are never mixed."""
    write_invented(tmp_path / "b", hours=24, rows=6, columns=9, start="2026-09-12T01:00")
    for path in (tmp_path / "b/fields").glob("*.nc"):
        path.rename(invented / "fields" / path.name)
    with pytest.raises(InputError, match="its grid differs"):
        read_hours(invented, None)
    assert read_hours(invented, timedelta(hours=12)).fields.sizes["time"] == 12


def test_every_flag_has_plain_words_and_a_pattern():
    """A second derivation: the bits themselves, and the patterns of the maps."""
    assert set(REASONS) == set(STATION_FLAGS)
    assert set(HATCH_PATTERNS) == set(HATCHES)
    assert reason("some_new_flag") == "some new flag"


def test_limits_of_layers_hold_all_hours(outputs):
    """Limit: PWV's are those of run.json, a change's are symmetric, the others hold all values."""
    hours = read_hours(outputs, None)
    layers = {layer.short: layer for layer in list_layers(hours)}
    given = json.loads((outputs / "run.json").read_text())["colour_limits"]
    assert [layers["PWV"].low, layers["PWV"].high] == given
    assert layers["Change 3 h"].low == -layers["Change 3 h"].high
    sigma = hours.fields["pwv_sigma"].values
    assert layers["Uncertainty"].low <= np.nanmin(sigma)
    assert np.nanmax(sigma) <= layers["Uncertainty"].high


def test_a_change_without_a_pair_of_hours_is_no_layer(invented):
    """Limit: three hours have pairs one hour apart, none six."""
    shorts = [layer.short for layer in list_layers(read_hours(invented, timedelta(hours=3)))]
    assert "Change 1 h" in shorts
    assert "Change 3 h" not in shorts
