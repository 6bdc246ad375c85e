"""`update`: what it makes, what it leaves alone, and what it survives."""

import io
import json
import multiprocessing
import os
import resource
import shutil
import signal
import subprocess
import sys
import time
from io import StringIO

import numpy as np
import pytest
import xarray as xr

from fieldgen.chain import make
from fieldgen.cli import main
from fieldgen.errors import BusyError, OutputError, ProcessError
from fieldgen.log import Log
from fieldgen.processes import map_days
from fieldgen.readers.network import read_network
from fieldgen.update import update
from fieldgen.upkeep.lock import hold, is_held, read_owner
from tests.products_of import assert_same_products
from tests.scene import SETTINGS, write_scene
from tests.week import simulate, split_by_step

FIXED = """[heights]
reference_height = 600
[kriging]
covariance = "exponential"
"""
"""Settings that do not depend on which stations the input holds."""

KILLS = 50


def run(path, folder, jobs=1):
    """Days made by an update, and the lines of its log."""
    stream = StringIO()
    made = update(path, folder, jobs=jobs, log=Log(stream, as_json=True))
    return made, [json.loads(line) for line in stream.getvalue().splitlines()]


def scene(tmp_path, days=3, maps="none"):
    """A scene with one delay file a day; returns its settings file."""
    settings = SETTINGS.replace('maps = "none"', f'maps = "{maps}"\nlimits = [0, 40]')
    settings = settings.replace('"delays.csv"', '"delays/*.csv"') + FIXED
    settings = settings.replace('name = "Test isle"', 'name = "Test isle"\ntime_step = "6h"')
    path = write_scene(
        tmp_path,
        stations=8,
        hours=24 * days,
        settings=settings,
        water_vapour=lambda h, hour: (20.0 + 5.0 * np.sin(hour / 9.0)) * np.exp(-h / 1900.0),
    )
    split_by_step(tmp_path, 24)
    return path


def snapshot(folder):
    """Content and time of the last change of every product below a folder."""
    return {
        str(path.relative_to(folder)): (path.read_bytes(), path.stat().st_mtime_ns)
        for path in sorted(folder.rglob("*"))
        if path.is_file() and ".fieldgen" not in path.parts
    }


def age(folder):
    """Make all input files look as if they had been at rest for a minute."""
    for path in folder.rglob("*"):
        if path.is_file():
            os.utime(path, ns=(time.time_ns() - 60 * 10**9,) * 2)


def test_update_makes_what_make_makes(tmp_path):
    """Round trip: into an empty folder, both end the same."""
    path = scene(tmp_path, days=2, maps="all")
    made, _ = run(path, tmp_path / "updated")
    make(read_network(path), tmp_path / "made")
    assert made == ["20260301", "20260302"]
    assert_same_products(tmp_path / "updated", tmp_path / "made")


def test_update_after_make_has_nothing_to_do(tmp_path):
    """Round trip: both leave the same records."""
    path = scene(tmp_path, days=2)
    make(read_network(path), tmp_path / "out")
    before = snapshot(tmp_path / "out")
    made, _ = run(path, tmp_path / "out")
    before.pop("run.json")
    after = snapshot(tmp_path / "out")
    after.pop("run.json")
    assert made == []
    assert after == before


def test_nothing_new_reads_nothing_and_touches_nothing(tmp_path):
    """Negative control: every product keeps its bytes and its time."""
    path = scene(tmp_path, maps="latest")
    age(tmp_path)
    run(path, tmp_path / "out")
    before = snapshot(tmp_path / "out")
    made, log = run(path, tmp_path / "out")
    assert made == []
    assert [line["event"] for line in log] == ["update_begun", "nothing_new"]
    assert snapshot(tmp_path / "out") == before


def test_a_late_file_remakes_the_days_it_touches_and_no_other(tmp_path):
    """Round trip: a day's window is 48 h, so the day itself and the next; ends as one run."""
    path = scene(tmp_path, days=4, maps="all")
    late = tmp_path / "delays/001.csv"
    text = late.read_text()
    short = "\n".join(line for line in text.splitlines() if "T17:30" not in line) + "\n"
    late.write_text(short)
    run(path, tmp_path / "out")
    before = snapshot(tmp_path / "out")
    late.write_text(text)
    made, log = run(path, tmp_path / "out")
    assert made == ["20260302", "20260303"]
    reasons = [line["reason"] for line in log if line["event"] == "day_begun"]
    assert reasons == ["1 steps changed, from 2026-03-02T18:00"] * 2
    after = snapshot(tmp_path / "out")
    others = [name for name in before if "0301" in name or ("0304" in name and "T0000" not in name)]
    assert len(others) == 2 + 3 + 2 + 3  # field and station file, maps but the last
    assert all(after[name] == before[name] for name in others)
    make(read_network(path), tmp_path / "whole")
    assert_same_products(tmp_path / "out", tmp_path / "whole")


CHANGES = {
    "setting": (
        lambda p: edit(p / "network.toml", "geoid = 57.0", "geoid = 57.0\nlowest_land = -5.0"),
        ["20260301", "20260302"],
    ),
    "station moved": (
        lambda p: edit(p / "delays/000.csv", "ST03,", "ST99,"), ["20260301", "20260302"]
    ),
    "field file lost": (lambda p: (p / "out/fields/pwv_20260302.nc").unlink(), ["20260302"]),
    "field file cut": (
        lambda p: os.truncate(p / "out/fields/pwv_20260301.nc", 1000), ["20260301"]
    ),
    "map lost": (lambda p: (p / "out/maps/pwv_20260301T0600Z.png").unlink(), ["20260301"]),
    "record lost": (lambda p: (p / "out/.fieldgen/days/20260302.json").unlink(), ["20260302"]),
    "record spoilt": (
        lambda p: (p / "out/.fieldgen/days/20260302.json").write_text("{"), ["20260302"]
    ),
    "colours": (
        lambda p: edit(p / "network.toml", "[0, 40]", "[5, 40]"), ["20260301", "20260302"]
    ),
}  # fmt: skip


def edit(path, old, new):
    assert old in path.read_text()
    path.write_text(path.read_text().replace(old, new))


@pytest.mark.parametrize("change", CHANGES)
def test_what_changed_is_made_again(tmp_path, change):
    """Round trip: the folder ends as one run over the changed input."""
    path = scene(tmp_path, days=2, maps="all")
    age(tmp_path)
    run(path, tmp_path / "out")
    spoil, expected = CHANGES[change]
    spoil(tmp_path)
    made, _ = run(path, tmp_path / "out")
    assert made == expected
    make(read_network(path), tmp_path / "whole")
    assert_same_products(tmp_path / "out", tmp_path / "whole")


def test_new_colours_leave_the_netcdf_files(tmp_path):
    """Negative control: only the maps are drawn anew."""
    path = scene(tmp_path, days=1, maps="all")
    run(path, tmp_path / "out")
    before = snapshot(tmp_path / "out")
    edit(path, "[0, 40]", "[5, 40]")
    run(path, tmp_path / "out")
    after = snapshot(tmp_path / "out")
    changed = {name for name in before if after[name] != before[name]} - {"run.json"}
    assert changed
    assert all(name.startswith("maps/") for name in changed)


def test_days_whose_input_was_put_away_keep_their_files(tmp_path):
    """Negative control: an archive that is emptied from behind does not spoil what was made."""
    path = scene(tmp_path, days=3)
    run(path, tmp_path / "out")
    before = snapshot(tmp_path / "out")
    (tmp_path / "delays/000.csv").unlink()
    middle = tmp_path / "delays/001.csv"
    lines = middle.read_text().splitlines()
    middle.write_text("\n".join(lines[:1] + lines[1 + 8 * 12 :]) + "\n")
    made, log = run(path, tmp_path / "out")
    assert made == []
    assert [line["day"] for line in log if line["event"] == "day_kept"] == ["20260302"]
    after = snapshot(tmp_path / "out")
    assert {k: v for k, v in after.items() if k != "run.json"} == {
        k: v for k, v in before.items() if k != "run.json"
    }


def test_two_at_once_do_no_harm(tmp_path, capsys, monkeypatch):
    """Negative control: the second says who is at work and since when, and exits 3."""
    path = scene(tmp_path, days=1)
    with hold(tmp_path / "out"):
        assert is_held(tmp_path / "out")
        with pytest.raises(BusyError, match=f"process {os.getpid()} on .*, for 0 min"):
            run(path, tmp_path / "out")
        assert main(["update", str(path), "--out", str(tmp_path / "out")]) == 3
        assert main(["make", str(path), "--out", str(tmp_path / "out"), "--jobs", "1"]) == 3
    assert not is_held(tmp_path / "out")
    assert "another run is at work" in capsys.readouterr().err
    assert run(path, tmp_path / "out")[0] == ["20260301"]


def test_one_of_two_that_begin_together_does_the_work(tmp_path):
    """Round trip: two processes, one exits 0 and the other 3 or, if it came later, 0."""
    path = scene(tmp_path, days=1)
    command = [
        sys.executable,
        "-m",
        "fieldgen",
        "update",
        str(path),
        "--out",
        str(tmp_path / "out"),
        "--jobs",
        "1",
    ]
    both = [subprocess.Popen(command, stderr=subprocess.PIPE) for _ in range(2)]
    ends = sorted(one.wait() for one in both)
    for one in both:
        one.stderr.close()
    assert ends in ([0, 0], [0, 3])
    make(read_network(path), tmp_path / "whole")
    assert_same_products(tmp_path / "out", tmp_path / "whole")


def begin(path, folder, jobs=1):
    """An update in a process of its own, which has everything loaded already."""
    process = multiprocessing.get_context("fork").Process(target=_quiet, args=(path, folder, jobs))
    process.start()
    return process


def _quiet(path, folder, jobs):
    update(path, folder, jobs=jobs, log=Log(StringIO()))


def whole_files(folder):
    """Open every product: none may be truncated or half-written under its final name."""
    from PIL import Image

    for path in folder.rglob("*"):
        if path.suffix == ".nc":
            xr.load_dataset(path).close()
        elif path.suffix == ".png" and not path.name.startswith("."):
            Image.open(path).load()
        elif path.suffix == ".json" and not path.name.startswith("."):
            json.loads(path.read_text())


def test_killed_at_any_moment_it_ends_as_if_undisturbed(tmp_path):
    """Round trip: SIGKILL at 50 moments spread over the length of a run. Before each run the
    settings change to and fro, so that all files are made anew over those the last one left."""
    path = scene(tmp_path, days=1, maps="latest")
    texts = [path.read_text(), path.read_text() + "slope_sill = 0\n[retrieval]\ncommon_sigma = 0.9"]
    out = tmp_path / "out"
    begun = time.monotonic()
    undisturbed = begin(path, tmp_path / "undisturbed")
    undisturbed.join()
    assert undisturbed.exitcode == 0
    length = time.monotonic() - begun
    draw = np.random.default_rng(7)
    killed = 0
    for number in range(KILLS):
        path.write_text(texts[number % 2])
        process = begin(path, out)
        process.join(draw.uniform(0.0, length))
        if process.is_alive():
            os.kill(process.pid, signal.SIGKILL)
            killed += 1
        process.join()
        whole_files(out)
    assert killed > KILLS / 2, "most runs ended before they were killed"
    path.write_text(texts[0])
    run(path, out)
    assert_same_products(out, tmp_path / "undisturbed")
    assert not list(out.rglob("*.part"))


def test_the_processes_of_a_killed_run_let_the_folder_go(tmp_path):
    """Negative control: a run of two processes is killed, and the next may begin at once."""
    path = scene(tmp_path, days=4, maps="all")
    out = tmp_path / "out"
    process = begin(path, out, jobs=2)
    deadline = time.monotonic() + 60.0
    while not list(out.glob("fields/*.nc")) and time.monotonic() < deadline:
        time.sleep(0.05)
    os.kill(process.pid, signal.SIGKILL)
    process.join()
    while is_held(out) and time.monotonic() < deadline:
        time.sleep(0.05)
    assert not is_held(out)
    assert read_owner(out).process == process.pid
    assert run(path, out)[0]


def _with_little_room(path, folder, limit):
    signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit))
    try:
        update(path, folder, jobs=1, log=Log(StringIO()))
    except OutputError as error:
        os._exit(42 if "cannot be written" in str(error) else 43)


@pytest.mark.parametrize("limit", [0, 3000, 20000])
def test_a_quota_leaves_whole_files_and_the_next_run_completes(tmp_path, limit):
    """Negative control: the system refuses to let any file grow beyond a limit [bytes]."""
    path = scene(tmp_path, days=2)
    out = tmp_path / "out"
    run(path, out)
    path.write_text(path.read_text() + "[retrieval]\ncommon_sigma = 0.3\n")
    context = multiprocessing.get_context("fork")
    process = context.Process(target=_with_little_room, args=(path, out, limit))
    process.start()
    process.join()
    assert process.exitcode == 42
    whole_files(out)
    run(path, out)
    make(read_network(path), tmp_path / "whole")
    assert_same_products(out, tmp_path / "whole")


@pytest.fixture
def small_disk(tmp_path):
    """A file system of 1 MB."""
    disk = tmp_path / "disk"
    disk.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", "size=1m", "tmpfs", str(disk)]
    if subprocess.run(command, capture_output=True).returncode:
        pytest.skip("mounting is not allowed here")
    yield disk
    subprocess.run(["umount", "-l", str(disk)], check=True)


def test_a_full_disk_is_one_clear_error(tmp_path, small_disk, capsys):
    """Negative control: what was made before stays, and is completed when there is room."""
    path = scene(tmp_path, days=3)
    out = small_disk / "out"
    ballast = small_disk / "ballast"
    (tmp_path / "delays/002.csv").rename(tmp_path / "later.csv")
    assert main(["update", str(path), "--out", str(out), "--jobs", "1"]) == 0
    ballast.write_bytes(bytes(shutil.disk_usage(small_disk).free - 4096))
    (tmp_path / "later.csv").rename(tmp_path / "delays/002.csv")
    assert main(["update", str(path), "--out", str(out), "--jobs", "1"]) == 1
    assert "cannot be written: No space left on device" in capsys.readouterr().err
    whole_files(out)
    assert not list(out.rglob("*.part"))
    ballast.unlink()
    run(path, out)
    make(read_network(path), tmp_path / "whole")
    assert_same_products(out, tmp_path / "whole")


def test_a_read_only_folder_is_one_clear_error(tmp_path, small_disk, capsys):
    """Negative control."""
    path = scene(tmp_path, days=1)
    subprocess.run(["mount", "-o", "remount,ro", str(small_disk)], check=True)
    assert main(["update", str(path), "--out", str(small_disk / "out")]) == 1
    assert "cannot be written: Read-only file system" in capsys.readouterr().err


def test_the_log_is_for_a_person_or_a_machine(tmp_path, capsys):
    """Round trip: the same events, as text and as JSON with the same messages."""
    path = scene(tmp_path, days=1)
    assert main(["update", str(path), "--out", str(tmp_path / "one"), "--jobs", "1"]) == 0
    text = capsys.readouterr().err.splitlines()
    arguments = ["--out", str(tmp_path / "two"), "--jobs", "1", "--log-json"]
    assert main(["update", str(path), *arguments]) == 0
    lines = [json.loads(line) for line in capsys.readouterr().err.splitlines()]
    assert [line["event"] for line in lines][-2:] == ["day_made", "update_done"]
    assert {line["level"] for line in lines} <= {"info", "warning"}
    assert [line.split(maxsplit=2)[2] for line in text][2:-1] == [
        line["message"] for line in lines
    ][2:-1]


def test_a_failed_update_says_why_in_its_log(tmp_path, capsys):
    """Negative control: exit status 1, and the reason as the last line."""
    path = scene(tmp_path, days=1)
    shutil.rmtree(tmp_path / "delays")
    assert main(["update", str(path), "--out", str(tmp_path / "out"), "--log-json"]) == 1
    last = json.loads(capsys.readouterr().err.splitlines()[-1])
    assert last["level"] == "error"
    assert "names no file" in last["message"]


def test_the_same_size_within_the_clock_s_step_is_seen(tmp_path):
    """Negative control: a file rewritten at once with as many bytes does not pass as unchanged."""
    path = scene(tmp_path, days=1)
    run(path, tmp_path / "out")
    file = tmp_path / "delays/000.csv"
    status = file.stat()
    text = file.read_text()
    other = text.replace(",0.7,", ",0.9,")
    assert len(other) == len(text)
    file.write_text(other)
    os.utime(file, ns=(status.st_atime_ns, status.st_mtime_ns))
    assert run(path, tmp_path / "out")[0] == ["20260301"]


def test_a_week_of_operation_ends_as_one_run_over_the_complete_input(tmp_path):
    """Round trip: an update every twelve hours while files come late, twice, wrong and broken.

    Memory and open files of the second half of the week are those of the first.
    """
    week = simulate(tmp_path, every=12)
    assert_same_products(tmp_path / "updated", tmp_path / "whole")
    made, updates = sum(week.days_made), len(week.days_made)
    assert made < 3 * updates, "updates remade days that nothing had changed"
    half = len(week.memory) // 2
    assert week.memory[-1] < 1.1 * week.memory[half]
    assert week.open_files[-1] == week.open_files[half]


def test_the_page_is_kept_current_and_does_not_stop_a_run(tmp_path, monkeypatch):
    """Negative control: a page that is too large is a warning, once."""
    from fieldgen.products.page import file

    path = scene(tmp_path, days=1)
    edit(path, 'page = "none"', 'page = "6h"')
    age(tmp_path)
    run(path, tmp_path / "out")
    assert "Test isle" in (tmp_path / "out/page.html").read_text()
    (tmp_path / "out/page.html").unlink()
    monkeypatch.setattr(file, "MOST_VALUES", 1)
    made, log = run(path, tmp_path / "out")
    assert made == []
    assert "page_not_made" in [line["event"] for line in log]
    assert run(path, tmp_path / "out")[1][-1]["event"] == "nothing_new"


def test_a_file_that_vanishes_from_the_middle_does_not_spoil_its_day(tmp_path):
    """Negative control: with one record of the day left in the next file, too."""
    path = scene(tmp_path, days=3)
    first = (tmp_path / "delays/001.csv").read_text().splitlines()
    with (tmp_path / "delays/002.csv").open("a") as later:
        later.write(first[1].replace(",0.7,", ",0.7,") + "\n")
    run(path, tmp_path / "out")
    before = snapshot(tmp_path / "out")
    (tmp_path / "delays/001.csv").unlink()
    made, log = run(path, tmp_path / "out")
    assert "20260302" not in made
    assert [line["day"] for line in log if line["event"] == "day_kept"] == ["20260302"]
    after = snapshot(tmp_path / "out")
    assert after["fields/pwv_20260302.nc"] == before["fields/pwv_20260302.nc"]


def test_another_time_step_makes_all_days_anew(tmp_path):
    """Round trip: longer steps have other stamps, which is no loss of input."""
    path = scene(tmp_path, days=2)
    run(path, tmp_path / "out")
    edit(path, 'time_step = "6h"', 'time_step = "8h"')
    assert run(path, tmp_path / "out")[0] == ["20260301", "20260302"]
    make(read_network(path), tmp_path / "whole")
    assert_same_products(tmp_path / "out", tmp_path / "whole")


def test_a_make_of_an_earlier_period_leaves_the_latest_map(tmp_path):
    """Negative control: with products.maps = "latest"."""
    path = scene(tmp_path, days=2, maps="latest")
    run(path, tmp_path / "out")
    before = (tmp_path / "out/maps/latest.png").read_bytes()
    make(read_network(path), tmp_path / "out", start="2026-03-01", end="2026-03-01T12:00")
    assert (tmp_path / "out/maps/latest.png").read_bytes() == before


def test_a_log_that_cannot_be_written_does_not_stop_the_run(tmp_path):
    """Negative control: /dev/full refuses every byte."""
    path = scene(tmp_path, days=1)
    number = os.open("/dev/full", os.O_WRONLY)
    log = Log(io.TextIOWrapper(io.FileIO(number, "w", closefd=False), write_through=True))
    assert update(path, tmp_path / "out", log=log) == ["20260301"]
    os.close(number)


def _die(_):
    os.kill(os.getpid(), signal.SIGKILL)


def test_a_killed_worker_is_one_clear_error():
    """Negative control: as when memory is short."""
    with pytest.raises(ProcessError, match="was killed"):
        list(map_days(_die, [1, 2], jobs=2))


def test_an_update_that_was_cut_off_is_told(tmp_path):
    """Round trip: the outcome says so from the beginning, until the end."""
    path = scene(tmp_path, days=2, maps="all")
    process = begin(path, tmp_path / "out")
    outcome = tmp_path / "out/.fieldgen/last_update.json"
    while not outcome.exists() and process.is_alive():
        time.sleep(0.01)
    os.kill(process.pid, signal.SIGKILL)
    process.join()
    assert json.loads(outcome.read_text())["outcome"] == "was cut off"
    run(path, tmp_path / "out")
    assert json.loads(outcome.read_text())["outcome"] == "done"
