"""`status`: what it says of a folder, and its exit status."""

import json
import shutil
from datetime import timedelta

import numpy as np
import pytest

from fieldgen.cli import main
from fieldgen.commands.status import ATTENTION
from fieldgen.errors import InputError
from fieldgen.log import Log
from fieldgen.status import format_status, read_status
from fieldgen.update import update
from fieldgen.upkeep.lock import hold
from tests.scene import write_scene

TIME = np.datetime64("2026-03-01T14:00", "s")
"""Two hours after the end of the scene."""


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """Twelve hours of a scene where ST02 falls silent after five, ST04 is 8 kg m-2 off in the last,
    and a line cannot be read."""
    place = tmp_path_factory.mktemp("scene")
    path = write_scene(place, stations=12, hours=12)
    lines = []
    for line in (place / "delays.csv").read_text().splitlines():
        part = line.split(",")
        hour = int(part[1][11:13]) if part[0].startswith("ST") else None
        if part[0] == "ST02" and hour >= 5:
            continue
        if part[0] == "ST04" and hour == 11:
            part[2] = str(float(part[2]) + 8.0)
        if part[0] == "ST06" and hour == 3:
            part[2] = "oops"
        lines.append(",".join(part))
    (place / "delays.csv").write_text("\n".join(lines) + "\n")
    update(path, place / "out", log=Log(open(place / "log", "w")))  # noqa: SIM115
    return place


def test_status_tells_age_silence_and_rejections(folder):
    """Round trip: what the scene was made to hold."""
    status = read_status(folder / "out", TIME)
    assert status.newest == "2026-03-01T12:00"
    assert status.age_hours == 2.0
    assert status.stations == 12
    assert status.missing == {"ST02": "2026-03-01T05:00"}
    assert sum(status.rejected["ST04"].values()) >= 1
    assert "ST02" not in status.rejected
    assert any("delays.csv: 1 x" in line for line in status.rejected_lines)
    assert status.last_update["outcome"] == "done"
    assert status.problems == []
    text = format_status(status)
    assert "newest    2026-03-01T12:00Z, 2.0 h old" in text
    assert "missing   ST02, last delay 2026-03-01T05:00Z" in text


@pytest.mark.parametrize(
    ("time", "options", "problem"),
    [
        ("2026-03-01T15:30", {}, "the newest hour is 3.5 h old, expected at most 3"),
        ("2026-03-01T13:00", {"most_missing": 0}, "1 stations are missing, expected at most 0"),
        ("2026-03-01T13:00", {"most_age": timedelta(minutes=30)}, "expected at most 0.5"),
    ],
)
def test_status_finds_problems(folder, time, options, problem):
    """Negative control: each limit for itself."""
    found = read_status(folder / "out", np.datetime64(time, "s"), **options).problems
    assert len(found) == 1
    assert problem in found[0]


def test_status_tells_of_a_failed_update_and_of_one_at_work(folder):
    """Round trip: the outcome of the last update, and the lock."""
    (folder / "weather.csv").rename(folder / "away.csv")
    arguments = ["update", str(folder / "network.toml"), "--out", str(folder / "out")]
    assert main(arguments) == 1
    with hold(folder / "out"):
        status = read_status(folder / "out", TIME)
    (folder / "away.csv").rename(folder / "weather.csv")
    assert "the last update failed" in status.problems[0]
    assert "weather.csv" in status.problems[0]
    assert status.running.startswith("process ")
    assert main(arguments) == 0
    assert read_status(folder / "out", TIME).problems == []


def test_the_command_serves_people_and_monitoring(folder, capsys):
    """Round trip: text and JSON, exit status 0 or 4."""
    arguments = ["status", str(folder / "network.toml"), "--out", str(folder / "out")]
    assert main([*arguments, "--at", "2026-03-01T14:00"]) == 0
    assert "11 of 12 report" in capsys.readouterr().out
    assert main([*arguments, "--at", "2026-03-02T14:00", "--json"]) == ATTENTION
    content = json.loads(capsys.readouterr().out)
    assert content["ok"] is False
    assert content["age_hours"] == 26.0
    assert main([*arguments, "--at", "2026-03-02T14:00", "--max-age", "2d"]) == 0


def test_a_folder_without_products_is_one_clear_error(tmp_path):
    """Negative control."""
    with pytest.raises(InputError, match="holds no station files"):
        read_status(tmp_path, TIME)


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("stations/stations_20260301.nc", b"half"),
        ("fields/pwv_20260301.nc", b""),
        ("run.json", b"[1]"),
        (".fieldgen/last_update.json", b'{"x": 1}'),
        (".fieldgen/inputs.json", b"[]"),
    ],
)
def test_damaged_files_are_told_not_met_with_a_traceback(folder, tmp_path, name, content, capsys):
    """Negative control: the command that finds faults must survive them."""
    out = tmp_path / "out"
    shutil.copytree(folder / "out", out)
    (out / name).write_bytes(content)
    arguments = [str(folder / "network.toml"), "--out", str(out)]
    status = main(["status", *arguments, "--at", "2026-03-01T14:00"])
    told = capsys.readouterr().out
    if name.endswith(".nc"):
        assert status == ATTENTION
        assert f"{name.split('/')[1]} is damaged" in told
    else:
        assert status == 0
    assert main(["update", *arguments, "--jobs", "1"]) == 0
    assert main(["status", *arguments, "--at", "2026-03-01T14:00"]) == 0
