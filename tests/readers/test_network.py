"""`read_network` on folders of files: what overlaps, what is absent, what is far off."""

import os

import numpy as np
import pytest

from fieldgen.errors import InputError
from fieldgen.readers import network as network_module
from fieldgen.readers.network import read_network
from tests.scene import SETTINGS, station_places, write_scene


def scene(folder, *, delays='["delays*.csv"]', weather='["weather*.csv"]', extra="", **options):
    text = SETTINGS.replace('["delays.csv"]', delays).replace('["weather.csv"]', weather)
    return write_scene(folder, settings=text.replace("[terrain]", f"{extra}\n[terrain]"), **options)


def lines(folder, name="delays.csv"):
    return (folder / name).read_text().splitlines()


def put(folder, name, *rows):
    (folder / name).write_text("\n".join(rows) + "\n")


def test_an_overlapping_file_wins_by_its_name(tmp_path):
    """A limit: without times of creation the later name wins, and the report counts."""
    path = scene(tmp_path)
    head, first, *_ = lines(tmp_path)
    put(tmp_path, "delays2.csv", head, first.replace(first.split(",")[2], "33.0", 1))
    network = read_network(path)
    assert network.delays.pwv.sel(station="ST00").values[0] == 33.0
    assert "1 delays stand in more than one file; the file created last is used" in (
        network.report.warnings
    )


def test_overlapping_weather_is_not_averaged(tmp_path):
    """Negative control: the mean of both would be 1003 hPa."""
    path = scene(tmp_path)
    head, first, *_ = lines(tmp_path, "weather.csv")
    put(tmp_path, "weather2.csv", head, first.replace("1005.0", "1001.0"))
    network = read_network(path)
    assert network.weather.pressure.values[0, 0] == pytest.approx(1001.0)
    assert network.weather.pressure.values[1, 0] == pytest.approx(1005.0)
    assert "1 weather records stand in more than one file" in str(network.report.warnings)


@pytest.mark.parametrize("kind", ["delays", "weather"])
def test_a_pattern_without_files_is_a_warning_beside_others(tmp_path, kind):
    path = scene(tmp_path, **{kind: f'["{kind}.csv", "new/*.{kind}"]'})
    warnings = read_network(path).report.warnings
    assert any(
        text.startswith(f"stations.{kind}: 'new/*.{kind}' names no file") for text in warnings
    )


@pytest.mark.parametrize("kind", ["delays", "weather"])
def test_patterns_without_any_file_are_an_error(tmp_path, kind):
    path = scene(tmp_path, **{kind: '["one/*.x", "other/*.x"]'})
    with pytest.raises(InputError, match=rf"stations\.{kind}: 'one/\*\.x' names no file"):
        read_network(path)


def test_a_file_that_vanishes_is_unusable(tmp_path):
    """A file that is listed, and gone when its turn comes."""
    path = scene(tmp_path)
    put(tmp_path, "delays2.csv", *lines(tmp_path))

    def progress(name):
        if name == "delays2.csv":
            os.remove(tmp_path / name)

    report = read_network(path, progress).report
    assert list(report.files) == ["delays.csv", "weather.csv"]
    assert "cannot be read (No such file" in report.unusable_files["delays2.csv"]


def test_a_far_epoch_does_not_stretch_the_time_grid(tmp_path):
    """Negative control: 2099 would make a grid of 640 000 hours."""
    path = scene(tmp_path)
    head, first, *_ = lines(tmp_path)
    put(tmp_path, "delays2.csv", head, first, first.replace("2026-03-01", "2099-03-01"))
    network = read_network(path)
    assert network.delays.sizes["time"] == 6
    assert network.report.rejections.counts["delays2.csv", "epoch far from all others"] == 1


def test_a_station_that_appears_in_the_middle_is_used(tmp_path):
    path = scene(tmp_path)
    head, *rows = lines(tmp_path)
    late = [row for row in rows if not row.startswith("ST05") or "T05:" in row or "T04:" in row]
    put(tmp_path, "delays.csv", head, *late)
    network = read_network(path)
    has = np.isfinite(network.delays.pwv.sel(station="ST05").values)
    assert has.tolist() == [False] * 4 + [True] * 2


def test_a_moved_station_becomes_two_with_their_own_heights(tmp_path):
    path = scene(tmp_path)
    head, *rows = lines(tmp_path)
    longitude, latitude, height = (values[5] for values in station_places(12))
    place = f"{longitude:.6f},{latitude:.6f},{height:.2f},{height + 57.0:.2f}"
    moved = place.replace(f",{height:.2f},", f",{height + 20:.2f},")
    moved = moved.replace(f"{height + 57.0:.2f}", f"{height + 77.0:.2f}")
    rows = [
        row.replace(place, moved) if row.startswith("ST05") and row[16:18] >= "03" else row
        for row in rows
    ]
    put(tmp_path, "delays.csv", head, *rows)
    network = read_network(path)
    before, after = (network.stations.sel(station=name) for name in ("ST05", "ST05_20260301"))
    assert float(after.orthometric_height - before.orthometric_height) == pytest.approx(20.0)
    used = np.isfinite(network.delays.pwv.sel(station=["ST05", "ST05_20260301"]).values)
    assert used.tolist() == [[True, False]] * 3 + [[False, True]] * 3
    assert any("station ST05: moved by 0 km and +20.0 m" in w for w in network.report.warnings)


def station_table(folder, *rows):
    put(
        folder, "stations.csv",
        "id,longitude,latitude,ellipsoidal_height,orthometric_height,barometer_height", *rows,
    )  # fmt: skip


def test_barometer_height_of_the_table_wins(tmp_path):
    """The file says 10 m, the table 35 m for this site alone, at another place."""
    path = scene(tmp_path, extra='table = "stations.csv"')
    station_table(tmp_path, "WX01,-28.9,47.4,,,35.0")
    network = read_network(path)
    site = network.weather.sel(site="WX01")
    assert float(site.orthometric_height) == 35.0
    assert (float(site.longitude), float(site.latitude)) == (-28.9, 47.4)
    assert (
        "barometer WX01: its files say 10.0 m above sea level, but barometer_height of "
        "stations.table is 35.0 m; the table is used"
    ) in network.report.warnings


def test_barometer_height_close_to_the_files_does_not_warn(tmp_path):
    path = scene(tmp_path, extra='table = "stations.csv"')
    station_table(tmp_path, "WX01,-28.9,47.4,,,19.0")
    network = read_network(path)
    assert float(network.weather.sel(site="WX01").orthometric_height) == 19.0
    assert not any("barometer" in text for text in network.report.warnings)


def test_a_row_without_barometer_height_leaves_the_barometer_where_it_is(tmp_path):
    """Negative control: an antenna's row of the same name is not the barometer's place."""
    path = scene(tmp_path, extra='table = "stations.csv"')
    station_table(tmp_path, "WX01,-28.9,47.4,500.0,443.0,")
    assert float(read_network(path).weather.sel(site="WX01").orthometric_height) == 10.0


@pytest.mark.parametrize(("unit", "factor"), [("0.1 hPa", 10.0), ("Pa", 100.0)])
def test_pressure_unit_is_what_the_message_says(tmp_path, unit, factor):
    """The rejection names the setting, and with the setting the file is read."""
    path = scene(tmp_path)
    rows = [
        row.replace("1005.0", f"{1005.0 * factor:.1f}") for row in lines(tmp_path, "weather.csv")
    ]
    put(tmp_path, "weather.csv", *rows)
    with pytest.raises(InputError) as error:
        read_network(path)
    advice = f'If the file is in {unit}, set stations.pressure_unit = "{unit}"'
    assert advice in str(error.value)
    path.write_text(path.read_text().replace("[stations]", f'[stations]\npressure_unit = "{unit}"'))
    assert read_network(path).weather.pressure.values == pytest.approx(1005.0)


def test_reading_is_the_same_whatever_order_the_files_are_listed_in(tmp_path, monkeypatch):
    path = scene(tmp_path)
    head, *rows = lines(tmp_path)
    for name, some, value in (("delays2.csv", rows[:30], "33.0"), ("delays3.csv", rows[20:], "21")):
        put(tmp_path, name, head, *(row.replace(row.split(",")[2], value, 1) for row in some))
    once = read_network(path)
    listed = network_module.glob.glob
    monkeypatch.setattr(
        network_module.glob, "glob", lambda *args, **options: listed(*args, **options)[::-1]
    )
    again = read_network(path)
    np.testing.assert_array_equal(once.delays.pwv, again.delays.pwv)
    assert once.report == again.report


def test_a_geoid_of_the_wrong_sign_is_not_used(tmp_path):
    """Negative control: height above sea level written as ellipsoidal + undulation, 114 m off."""
    path = scene(tmp_path)
    head, *rows = lines(tmp_path)
    height = station_places(12)[2][5]
    above_ellipsoid = f"{height + 57.0:.2f}"
    written, wrong = f",{height:.2f},{above_ellipsoid}", f",{height + 114.0:.2f},{above_ellipsoid}"
    put(tmp_path, "delays.csv", head, *(row.replace(written, wrong) for row in rows))
    network = read_network(path)
    assert float(network.stations.orthometric_height.sel(station="ST05")) == pytest.approx(
        height, abs=0.01
    )
    assert any("ST05: its listed height above sea level is" in w for w in network.report.warnings)


def test_a_pressure_reduced_to_sea_level_is_reported(tmp_path):
    """Published number: 898.7 hPa at 1000 m in the ICAO standard atmosphere (Doc 7488)."""
    path = scene(tmp_path)
    rows = lines(tmp_path, "weather.csv")
    put(tmp_path, "weather.csv", *(row.replace(",10.0", ",1000.0") for row in rows))
    assert (
        "barometer WX01: its pressure is 1005 hPa, expected about 899 hPa at its height of 1000 m. "
        "Check the height, and whether the pressure is reduced to sea level."
    ) in read_network(path).report.warnings


def test_an_ordinary_pressure_is_not_reported(tmp_path):
    warnings = read_network(scene(tmp_path)).report.warnings
    assert not any("its pressure is" in text for text in warnings)


def test_a_station_that_lost_all_its_lines_stays_in_the_network(tmp_path):
    """Its rejected lines are counted, and it is there without values."""
    path = scene(tmp_path)
    head, *rows = lines(tmp_path)
    rows = [
        row.replace(row.split(",")[2], "999") if row.startswith("ST05") else row for row in rows
    ]
    put(tmp_path, "delays.csv", head, *rows)
    network = read_network(path)
    assert network.report.rejections.counts["delays.csv", "pwv out of range"] == 6
    assert "ST05" in network.stations.station.values
    assert np.isnan(network.delays.pwv.sel(station="ST05")).all()
