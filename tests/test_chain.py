"""The chain on scenes with known answers."""

import filecmp
import json
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import fieldgen
from fieldgen.chain import make
from fieldgen.errors import InputError
from fieldgen.fields import FIELD_FLAGS
from fieldgen.period import parse_time
from fieldgen.retrieval import retrieve_water_vapour
from tests.scene import SETTINGS, write_scene

DEMO = Path(__file__).parents[1] / "demo_network"


def flagged(dataset, name):
    return (dataset.flag & FIELD_FLAGS[name]) > 0


def test_an_exponential_atmosphere_is_found_again(tmp_path):
    """Analytic: 20 exp(-h / 1800 m) everywhere, at 12 stations; most cells within 1 %."""
    path = write_scene(tmp_path, water_vapour=lambda h, hour: 20.0 * np.exp(-h / 1800.0))
    fields = fieldgen.make_fields(fieldgen.read_network(path))
    assert fields.pwv.dims == ("time", "y", "x")
    expected = 20.0 * np.exp(-fields.terrain.values / 1800.0)
    inside = ~flagged(fields, "extrapolated_in_height").values
    error = np.abs(fields.pwv.values / expected - 1.0)[inside]
    assert error.max() < 0.04
    assert np.median(error) < 0.01
    assert (np.abs(fields.scale_height - 1800.0) < 100.0).all()


def test_mean_factor_is_not_the_factor_of_the_mean_height(tmp_path):
    """Negative control: in cells of 20 km on the hill the two differ by more than the tolerance."""
    settings = SETTINGS.replace("spacing = 5000", "spacing = 20000")
    path = write_scene(
        tmp_path,
        settings=settings + "[heights]\nscale_height = 1000\n",
        water_vapour=lambda h, hour: 20.0 * np.exp(-h / 1000.0),
    )
    network = fieldgen.read_network(path)
    fields = fieldgen.make_fields(network)
    points = network.terrain.points
    right = 20.0 * np.exp(-points / 1000.0).mean(axis=0)
    wrong = 20.0 * np.exp(-points.mean(axis=0) / 1000.0)
    steep = np.unravel_index(np.argmax(right - wrong), right.shape)
    assert (right - wrong)[steep] > 0.2
    assert fields.pwv.values[0][steep] == pytest.approx(right[steep], abs=0.05)


def test_hours_with_four_stations_are_missing_and_flagged(tmp_path):
    """A limit: fewer than five usable stations."""
    path = write_scene(tmp_path, stations=4)
    fields = fieldgen.make_fields(fieldgen.read_network(path))
    assert np.isnan(fields.pwv).all()
    assert flagged(fields, "too_few_stations").all()
    assert (fields.station_count == 4).all()


def test_both_engines_make_the_same_fields(tmp_path):
    """Another library: PyKrige as the selectable engine, the stations' errors being equal.

    The errors at the reference height differ with the station's height, so the fields agree to
    the share of the error variance in the sill, not to rounding; tests/kriging has 1e-6.
    """
    settings = f"""{SETTINGS}
[heights]
scale_height = 1e4
[kriging]
engine = "ENGINE"
covariance = "exponential"
partial_sill = 4.0
range = 80
nugget = 0.2
"""
    fields = {}
    for engine in ("fieldgen", "pykrige"):
        path = write_scene(tmp_path, hours=2, settings=settings.replace("ENGINE", engine))
        fields[engine] = fieldgen.make_fields(fieldgen.read_network(path))
    difference = np.abs(fields["fieldgen"].pwv - fields["pykrige"].pwv)
    assert float(difference.max()) < 0.05


def test_a_part_is_the_same_alone_and_within_the_whole(tmp_path):
    """Round trip: a day does not depend on the days made with it."""
    path = write_scene(tmp_path, hours=60)
    network = fieldgen.read_network(path)
    whole = fieldgen.make_fields(network)
    part = fieldgen.make_fields(network, "2026-03-02T00:00Z", "2026-03-03T00:00Z")
    assert part.sizes["time"] == 24
    np.testing.assert_array_equal(part.pwv, whole.pwv.sel(time=part.time))
    np.testing.assert_array_equal(part.pwv_sigma, whole.pwv_sigma.sel(time=part.time))
    hours = fieldgen.make_fields(network, "2026-03-02T06:00Z", "2026-03-02T09:00Z")
    assert hours.sizes["time"] == 3
    np.testing.assert_array_equal(hours.pwv, whole.pwv.sel(time=hours.time))


def test_a_run_of_one_hour_keeps_the_others(tmp_path):
    """Negative control: the file of a day that was made whole is not cut down to the hour."""
    network = fieldgen.read_network(write_scene(tmp_path))
    make(network, tmp_path / "out")
    make(network, tmp_path / "out", start="2026-03-01T02:00", end="2026-03-01T03:00")
    with xr.open_dataset(tmp_path / "out/fields/pwv_20260301.nc") as fields:
        assert fields.sizes["time"] == 6


def test_files_do_not_depend_on_the_number_of_jobs(tmp_path):
    """Round trip: to the last bit."""
    network = fieldgen.read_network(write_scene(tmp_path, hours=50))
    for jobs in (1, 2):
        make(network, tmp_path / f"out{jobs}", jobs=jobs)
    for day in ("20260301", "20260302", "20260303"):
        name = f"fields/pwv_{day}.nc"
        one, two = (xr.load_dataset(tmp_path / folder / name) for folder in ("out1", "out2"))
        xr.testing.assert_equal(one, two)


def test_make_writes_what_make_fields_returns(tmp_path):
    """Round trip through NetCDF, to the packed step of 0.01 kg m-2."""
    network = fieldgen.read_network(write_scene(tmp_path))
    make(network, tmp_path / "out")
    fields = fieldgen.make_fields(network)
    with xr.open_dataset(tmp_path / "out/fields/pwv_20260301.nc") as written:
        np.testing.assert_allclose(written.pwv, fields.pwv, atol=0.0051)
        np.testing.assert_array_equal(written.flag, fields.flag)
        assert (written.time.values == fields.time.values).all()
        assert set(written.data_vars) == set(fields.data_vars)
        assert "national weather and hydrological services" in written.attrs["comment"]
    assert not list((tmp_path / "out").rglob("*.part"))


def test_the_step_covers_the_hour_before_its_stamp(tmp_path):
    """Analytic: records at half past make hours stamped at the next full hour, with bounds."""
    fields = fieldgen.make_fields(fieldgen.read_network(write_scene(tmp_path, hours=2)))
    assert fields.time.values[0] == np.datetime64("2026-03-01T01:00")
    hour = [np.datetime64("2026-03-01T00:00"), np.datetime64("2026-03-01T01:00")]
    assert list(fields.time_bnds.values[0]) == hour


def test_the_report_says_what_happened(tmp_path):
    """Round trip: run.json counts stations, hours and reasons."""
    path = write_scene(tmp_path, stations=12)
    text = (tmp_path / "delays.csv").read_text().replace("ST03,2026-03-01T00:30:00Z,", "ST03,oops,")
    (tmp_path / "delays.csv").write_text(text)
    make(fieldgen.read_network(path), tmp_path / "out")
    report = json.loads((tmp_path / "out/run.json").read_text())
    assert report["summary"]["steps_made"] == 6
    assert report["days"][0]["rejected"] == {"ST03": {"no_delay": 1}}
    assert report["days"][0]["steps_used"][report["stations"].index("ST03")] == 5
    assert report["read"]["rejected"][0]["count"] == 1
    assert "delays.csv, line 5" in report["read"]["rejected_examples"][0]


def test_a_station_that_is_biased_is_not_used(tmp_path):
    """Negative control: 6 kg m-2 too much at one station; its neighbours stay."""
    path = write_scene(tmp_path, stations=16, hours=12)
    lines = (tmp_path / "delays.csv").read_text().splitlines()
    lines = [
        line if not line.startswith("ST05") else line.replace(
            line.split(",")[2], str(float(line.split(",")[2]) + 6.0), 1
        )
        for line in lines
    ]  # fmt: skip
    (tmp_path / "delays.csv").write_text("\n".join(lines))
    make(fieldgen.read_network(path), tmp_path / "out")
    report = json.loads((tmp_path / "out/run.json").read_text())
    used = dict(zip(report["stations"], report["days"][0]["steps_used"], strict=True))
    assert used.pop("ST05") == 0
    assert set(used.values()) == {12}


@pytest.mark.parametrize(
    "text", ["yesterday", "2026-13-01", "2026-03-01T00:00+02:00"], ids=["word", "month", "offset"]
)
def test_times_must_be_iso_and_utc(text):
    """Negative control."""
    with pytest.raises(InputError, match="expected"):
        parse_time(text)


def test_periods_must_run_forwards_and_meet_the_input(tmp_path):
    """Negative control."""
    network = fieldgen.read_network(write_scene(tmp_path))
    with pytest.raises(InputError, match="is not before"):
        fieldgen.make_fields(network, "2026-03-02", "2026-03-01")
    with pytest.raises(InputError, match="the input runs from 2026-03-01T00:00"):
        fieldgen.make_fields(network, "2025-01-01", "2025-02-01")


def test_atomic_write_leaves_the_old_file_when_the_new_fails(tmp_path):
    """Negative control: the final name never holds half a file."""
    from fieldgen.products.atomic import whole_file

    path = tmp_path / "a.txt"
    path.write_text("old")
    copy = tmp_path / "copy.txt"
    copy.write_text("old")
    with pytest.raises(RuntimeError), whole_file(path) as temporary:
        temporary.write_text("half")
        raise RuntimeError
    assert filecmp.cmp(path, copy, shallow=False)
    assert sorted(item.name for item in tmp_path.iterdir()) == ["a.txt", "copy.txt"]


def test_atomic_write_leaves_a_reader_the_file_it_opened(tmp_path):
    """Round trip: the new file takes the name, it is not written into the old one."""
    from fieldgen.products.atomic import whole_file

    path = tmp_path / "a.txt"
    path.write_text("old")
    with path.open() as reader:
        with whole_file(path) as temporary:
            temporary.write_text("new")
        assert reader.read() == "old"
    assert path.read_text() == "new"


def test_days_without_a_record_are_not_made(tmp_path):
    """A limit: a mistyped year must not make thousands of empty days."""
    path = write_scene(tmp_path)
    last = (tmp_path / "delays.csv").read_text().splitlines()[-1].replace("2026-03", "2026-06")
    with (tmp_path / "delays.csv").open("a") as file:
        file.write(last + "\n")
    make(fieldgen.read_network(path), tmp_path / "out")
    files = sorted(file.name for file in (tmp_path / "out/fields").iterdir())
    assert files == ["pwv_20260301.nc", "pwv_20260601.nc"]


def test_station_error_counts_what_all_stations_share():
    """A second derivation on the demo: the whole error is the own and the common part together."""
    network = fieldgen.read_network(DEMO / "network.toml")
    stations = retrieve_water_vapour(network, slice(0, 6))
    pwv = stations.pwv.values
    tm_rms = network.settings.retrieval.mean_temperature_model.rms
    relative = tm_rms / stations.mean_temperature.values
    common = np.hypot(network.settings.retrieval.common_sigma, relative * pwv)
    whole = np.hypot(stations.pwv_independent_sigma.values, common)
    known = np.isfinite(pwv)
    np.testing.assert_allclose(stations.pwv_sigma.values[known], whole[known], rtol=0.03)
    assert (stations.pwv_sigma.values[known] > stations.pwv_independent_sigma.values[known]).all()
