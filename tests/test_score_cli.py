"""`fieldgen score` and `fieldgen compare` as a user meets them."""

import json

import numpy as np
import pandas as pd
import pytest

from fieldgen.cli import main
from fieldgen.products.metadata import CAUTION
from tests.scene import station_places, write_scene

START = np.datetime64("2026-03-01T00:00:00", "s")


@pytest.fixture(scope="module")
def scene(tmp_path_factory):
    """A scene of an exact exponential atmosphere of 2 km, with its fields made."""
    folder = tmp_path_factory.mktemp("scene")
    write_scene(folder)
    assert main(["make", str(folder / "network.toml"), "--out", str(folder / "made")]) == 0
    return folder


def run(capsys, *arguments):
    """Exit status, stdout and stderr of a command."""
    capsys.readouterr()
    status = main([str(part) for part in arguments])
    return status, *capsys.readouterr()


def one_line(err: str) -> str:
    """The error's line, the last of stderr."""
    line = err.strip().splitlines()[-1]
    assert line.startswith("fieldgen: ")
    return line


def test_score_writes_below_its_folder_and_sums_up(scene, capsys, tmp_path):
    """The whole output, in process."""
    status, out, _ = run(capsys, "score", scene / "network.toml", "--out", tmp_path, "--jobs", "1")
    assert status == 0
    assert out.startswith("Test isle, 2026-03-01 00:00 to 2026-03-01 06:00 UTC\n")
    assert "72 values of 12 stations" in out
    assert f"4 files written to {tmp_path / 'score'}" in out
    assert CAUTION in out
    names = ["score.json", "score.png", "score_hours.csv", "score_stations.csv"]
    assert sorted(path.name for path in (tmp_path / "score").iterdir()) == names


def test_score_defaults_to_the_folder_of_make(scene, capsys, tmp_path, monkeypatch):
    """The whole output, in process; a period of two hours."""
    monkeypatch.chdir(tmp_path)
    period = ("--start", "2026-03-01T02:00", "--end", "2026-03-01T04:00")
    status, _, _ = run(capsys, "score", scene / "network.toml", *period)
    assert status == 0
    content = json.loads((tmp_path / "outputs/Test isle/score/score.json").read_text())
    assert content["steps"] == 2
    assert content["period_end"] == "2026-03-01T04:00:00Z"


def test_score_of_bad_input_is_one_clear_line(scene, capsys, tmp_path):
    """Negative control: no network, a reversed period, too few stations, a folder in the way."""
    assert run(capsys, "score", tmp_path / "none.toml")[0] == 1
    few = write_scene(tmp_path, stations=5)
    for arguments, expected in (
        ((scene / "network.toml", "--start", "2026-03-02", "--end", "2026-03-01"), "is not before"),
        ((few, "--out", tmp_path / "few"), "no step has six stations"),
        ((few, "--out", few), "cannot be written"),
    ):
        status, out, err = run(capsys, "score", *arguments)
        assert (status, out) == (1, "")
        assert expected in one_line(err)


def write_values(path, shift: float = 0.0):
    """Exact values of the scene's atmosphere at heights of their own, for all six hours."""
    longitude, latitude, ground = station_places(8, seed=9)
    draw = np.random.default_rng(4)
    height = ground + draw.uniform(-100.0, 400.0, 8)
    lines = ["time,longitude,latitude,height,value,sigma"]
    for hour in range(6):
        time = START + np.timedelta64(3600 * hour + 1200, "s")
        lines += [
            f"{time}Z,{lon:.6f},{lat:.6f},{h + shift:.1f},{20.0 * np.exp(-h / 2000.0):.4f},0.1"
            for lon, lat, h in zip(longitude, latitude, height, strict=True)
        ]
    path.write_text("\n".join(lines) + "\n")
    return path


def test_compare_with_exact_values_at_other_heights(scene, capsys, tmp_path):
    """Analytic atmosphere: whatever the height, RMSE below 0.2 kg m-2 of about 15; heights wrong
    by 500 m, the negative control, cost kilograms."""
    fields = sorted((scene / "made/fields").glob("*.nc"))
    table = write_values(tmp_path / "values.csv")
    status, out, _ = run(capsys, "compare", *fields, "--with", table, "--out", tmp_path / "out")
    assert status == 0
    assert "48 values of" in out
    assert "48 compared" in out
    assert out.splitlines()[-1] == f"2 files written to {tmp_path / 'out'}"
    content = json.loads((tmp_path / "out/compare.json").read_text(), parse_constant=pytest.fail)
    assert content["figures"]["all"]["rmse"] < 0.2
    assert content["caution"] == CAUTION
    assert content["network"] == "Test isle"
    rows = pd.read_csv(tmp_path / "out/compare.csv", comment="#")
    assert len(rows) == 48
    np.testing.assert_allclose(rows.error, rows.field - rows.observed, atol=1e-3)
    assert np.sqrt((rows.error**2).mean()) == pytest.approx(
        content["figures"]["all"]["rmse"], abs=1e-3
    )
    wrong = write_values(tmp_path / "wrong.csv", shift=500.0)
    run(capsys, "compare", *fields, "--with", wrong, "--out", tmp_path / "out")
    content = json.loads((tmp_path / "out/compare.json").read_text())
    assert content["figures"]["all"]["bias"] < -2.0


def test_compare_with_a_sounding(scene, capsys, tmp_path):
    """Analytic atmosphere: a sounding whose water vapour falls with 2 km from 20 kg m-2 at sea
    level, on the hill and beside it; within 2 % with the trapezoids of 50 m."""
    height = np.arange(0.0, 14000.0, 50.0)
    pressure = 1010.0 * np.exp(-height / 8000.0)
    decay = 1 / 2000.0 - 1 / 8000.0
    humidity = 20.0 * 9.80665 * 8000.0 / 2000.0 / 101000.0 * np.exp(-height * decay)
    vapour_pressure = humidity * pressure / (0.62199 + 0.37801 * humidity)
    logarithm = np.log(vapour_pressure / 6.112)
    dewpoint = 273.15 + 243.12 * logarithm / (17.62 - logarithm)
    lines = ["time,longitude,latitude,pressure,temperature,dewpoint,height"]
    for longitude, latitude in ((-28.98, 47.38), (-29.3, 47.3)):
        lines += [
            f"2026-03-01T02:30Z,{longitude},{latitude},{p:.3f},{max(dew, 240.0):.2f},{dew:.3f},{h}"
            for p, dew, h in zip(pressure, dewpoint, height, strict=True)
        ]
    table = tmp_path / "sounding.csv"
    table.write_text("\n".join(lines) + "\n")
    fields = sorted((scene / "made/fields").glob("*.nc"))
    status, out, _ = run(capsys, "compare", *fields, "--with", table, "--out", tmp_path)
    assert status == 0
    assert "2 soundings of" in out
    rows = pd.read_csv(tmp_path / "compare.csv", comment="#")
    assert rows.height.max() > 500.0
    assert (rows.error.abs() < 0.02 * rows.observed).all()
    np.testing.assert_allclose(rows.observed, 20.0 * np.exp(-rows.height / 2000.0), rtol=0.01)


def test_compare_counts_what_it_cannot_compare(scene, capsys, tmp_path):
    """Negative control: outside the grid, outside the period, a bad line."""
    table = write_values(tmp_path / "values.csv")
    with table.open("a") as file:
        file.write("2026-03-01T01:00Z,10,47,0,20,1\n2026-04-01T01:00Z,-28.98,47.38,0,20,1\n")
        file.write("2026-03-01T01:00Z,-28.98,47.38,0,wet,1\n")
    fields = sorted((scene / "made/fields").glob("*.nc"))
    status, out, _ = run(capsys, "compare", *fields, "--with", table)
    assert status == 0
    assert "48 compared, 1 outside the grid, 1 outside the period" in out
    assert "1 x not a number" in out
    assert "line 52" in out


def test_compare_of_bad_input_is_one_clear_line(scene, capsys, tmp_path):
    """Negative control."""
    (field,) = (scene / "made/fields").glob("*.nc")
    table = write_values(tmp_path / "values.csv")
    far = tmp_path / "far.csv"
    far.write_text("time,longitude,latitude,height,value,sigma\n2026-03-01T01:00Z,10,47,0,20,1\n")
    unknown = tmp_path / "unknown.csv"
    unknown.write_text("time,lon,lat,height,value,sigma\n")
    for fields, other, expected in (
        ((field,), tmp_path / "none.csv", "none.csv: cannot be read"),
        ((field,), far, "observations to compare are 0, expected at least 1 (1 outside the grid)"),
        ((field,), unknown, "column 'lon' is unknown"),
        ((table,), table, "cannot be read"),
        ((field, field), table, "Name each file once"),
    ):
        status, out, err = run(capsys, "compare", *fields, "--with", other)
        assert (status, out) == (1, "")
        assert expected in one_line(err)


def test_usage_errors_exit_with_2():
    """The shell's convention."""
    for arguments in (["score"], ["compare", "one.nc"], ["compare", "--with", "a.csv"]):
        with pytest.raises(SystemExit) as caught:
            main(arguments)
        assert caught.value.code == 2
