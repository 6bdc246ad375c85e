"""The command line as a user meets it: output, exit status, one clear line for bad input."""

import os

import pytest

from fieldgen.cli import main
from fieldgen.commands.arguments import folder_name
from tests.scene import SETTINGS, write_scene


@pytest.fixture
def scene(tmp_path, monkeypatch):
    """A scene's folder, made the working directory."""
    write_scene(tmp_path)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def run(capsys, *arguments):
    """Exit status, stdout and stderr of a command."""
    status = main(list(arguments))
    return status, *capsys.readouterr()


def test_make_writes_below_outputs_and_sums_up(scene, capsys):
    """The whole output, in process."""
    status, out, err = run(capsys, "make", "network.toml", "--jobs", "1")
    assert status == 0
    assert "6 of 6 steps made; leaving each station out: RMSE" in out
    assert f"3 files written to {os.path.join('outputs', 'Test isle')}" in out
    assert "20260301 done" in err
    assert (scene / "outputs/Test isle/fields/pwv_20260301.nc").exists()


def test_check_writes_nothing(scene, capsys):
    """The whole output, in process."""
    before = sorted(scene.rglob("*"))
    status, out, _ = run(capsys, "check", "network.toml")
    assert status == 0
    assert "grid      12 x 12 cells of 5000 in WGS 84 / UTM zone 26N" in out
    assert "stations  12, " in out
    assert sorted(scene.rglob("*")) == before


BAD = {
    "missing delays": (lambda p: (p / "delays.csv").unlink(), "names no file"),
    "missing weather": (lambda p: (p / "weather.csv").unlink(), "names no file"),
    "missing terrain": (lambda p: (p / "terrain.tif").unlink(), "terrain"),
    "empty delays": (lambda p: (p / "delays.csv").write_text(""), "delays.csv"),
    "binary delays": (lambda p: (p / "delays.csv").write_bytes(bytes(range(256))), "delays.csv"),
    "grid off the terrain": (
        lambda p: edit(p / "network.toml", "south = 5220000", "south = 5120000"),
        "does not cover the grid",
    ),
    "grid far from the stations": (
        lambda p: edit(p / "delays.csv", ",-2", ",2"), "lie more than 100 km away"
    ),
    "no heights": (
        lambda p: (edit(p / "network.toml", "geoid = 57.0", ""),
                   edit(p / "delays.csv", ",orthometric_height,", ",name,")),
        "delays.csv",
    ),
    "unknown geoid file": (
        lambda p: (edit(p / "network.toml", "geoid = 57.0", 'geoid = "no.gtx"'),
                   strip_column(p / "delays.csv", "orthometric_height")),
        "no.gtx",
    ),
}  # fmt: skip


def edit(path, old, new):
    path.write_text(path.read_text().replace(old, new))


def strip_column(path, name):
    import pandas as pd

    pd.read_csv(path).drop(columns=name).to_csv(path, index=False)


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_one_clear_line(scene, capsys, case):
    """Negative control: exit status 1, one line on stderr that names what to mend."""
    spoil, expected = BAD[case]
    spoil(scene)
    status, out, err = run(capsys, "make", "network.toml")
    assert status == 1
    assert out == ""
    line = err.strip().splitlines()[-1]
    assert line.startswith("fieldgen: ")
    assert expected in line


def test_swapped_longitude_and_latitude_are_suspected(scene, capsys):
    """Negative control: the message names the likely cause."""
    import pandas as pd

    table = pd.read_csv(scene / "delays.csv")
    table[["longitude", "latitude"]] = table[["latitude", "longitude"]].to_numpy()
    table.to_csv(scene / "delays.csv", index=False)
    status, _, err = run(capsys, "check", "network.toml")
    assert status == 1
    assert "swapped" in err


def test_reversed_period_is_an_error(scene, capsys):
    """Negative control."""
    status, _, err = run(
        capsys, "make", "network.toml", "--start", "2026-03-02", "--end", "2026-03-01"
    )
    assert status == 1
    assert "is not before" in err


@pytest.mark.parametrize("target", ["file", "nested"])
def test_unwritable_folder_is_found_before_the_work(scene, capsys, target):
    """Negative control: a file stands where the folder should be (root may write anywhere)."""
    (scene / "taken").write_text("")
    out = "taken" if target == "file" else "taken/below"
    status, _, err = run(capsys, "make", "network.toml", "--out", out)
    assert status == 1
    assert "cannot be written" in err
    assert "done" not in err


def test_usage_errors_exit_with_2(scene):
    """The shell's convention."""
    for arguments in ([], ["make"], ["make", "network.toml", "--jobs", "0"]):
        with pytest.raises(SystemExit) as caught:
            main(arguments)
        assert caught.value.code == 2


@pytest.mark.parametrize(
    ("name", "folder"),
    [("Test isle", "Test isle"), ("../../etc", "_.._etc"), ("a/b\\c", "a_b_c"), ("...", "network"),
     ("x\x00\n<b>", "x___b_")],
)  # fmt: skip
def test_folder_name_cannot_leave_outputs(name, folder):
    """Negative control: path separators and control characters are replaced."""
    assert folder_name(name) == folder


def test_stations_without_any_weather_need_their_pressure(scene, capsys):
    """A limit: delays in metres without barometers are counted, not turned into a field."""
    text = (scene / "delays.csv").read_text().replace("pwv,pwv_sigma", "ztd,ztd_sigma")
    lines = text.splitlines()
    moved = [lines[0]] + [",".join([*line.split(",")[:2], "2.4", "0.002", *line.split(",")[4:]])
                          for line in lines[1:]]  # fmt: skip
    (scene / "delays.csv").write_text("\n".join(moved))
    (scene / "network.toml").write_text(SETTINGS.replace('weather = ["weather.csv"]', ""))
    status, out, _ = run(capsys, "make", "network.toml", "--jobs", "1")
    assert status == 0
    assert "0 of 6 steps made" in out
    assert "72 climatology" in " ".join(out.split())
    assert "retrieval.climatology_in_fields" in out
