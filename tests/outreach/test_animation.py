import sys

import imageio_ffmpeg
import numpy as np
import pytest
from PIL import Image

from fieldgen.cli import main
from fieldgen.outreach import film
from fieldgen.outreach.shapes import SHAPES
from tests.outreach.invented import HOURS, write_folder


def run(capsys, *arguments):
    """Exit status, stdout and stderr of a command."""
    status = main([str(one) for one in arguments])
    return status, *capsys.readouterr()


def test_animate_leaves_a_film_that_another_reader_opens(written, tmp_path, capsys):
    """Another library's answer: the film's frames, size, length and colours by a FFmpeg build."""
    status, out, _ = run(capsys, "animate", written[0], "--out", tmp_path, "--shape", "square")
    assert (status, out) == (0, f"8 files written to {tmp_path}\n")
    reader = imageio_ffmpeg.read_frames(str(tmp_path / "film_square.mp4"))
    told = next(reader)
    frames = list(reader)
    expected = HOURS * film.REPEATS + film.HOLD * 24 - film.REPEATS
    assert len(frames) == expected
    assert told["size"] == (1080, 1080)
    assert told["duration"] == pytest.approx(expected / 24, abs=0.05)
    assert (told["codec"], told["pix_fmt"][:7]) == ("h264", "yuv420p")
    last = np.frombuffer(frames[-1], np.uint8).reshape(1080, 1080, 3).astype(int)
    still = np.asarray(Image.open(tmp_path / "still_square.png").convert("RGB")).astype(int)
    assert np.abs(last - still)[260:].mean() < 2.5  # below the bar that only the film has


def test_animate_leaves_stills_in_all_shapes_with_words(written, tmp_path, capsys):
    """Round trip through Pillow."""
    run(capsys, "animate", written[0], "--out", tmp_path, "--format", "gif", "--language", "german")
    for name, shape in SHAPES.items():
        words = (tmp_path / f"still_{name}.txt").read_text().strip()
        assert words.startswith("Karte des Wasserdampfs")
        with Image.open(tmp_path / f"still_{name}.png") as still:
            assert (still.size, still.mode) == (shape.size, "RGB")
            assert still.text["Description"] == words
    with Image.open(tmp_path / "film_landscape.gif") as moving:
        assert (moving.n_frames, moving.size) == (HOURS, (960, 540))
        durations = []
        for number in range(HOURS):
            moving.seek(number)
            durations.append(moving.info["duration"])
    assert durations == [120] * (HOURS - 1) + [2000]
    assert "Für 1 dieser Stunden" in (tmp_path / "film_landscape.txt").read_text()


def test_film_shows_days_without_files_as_such(tmp_path, capsys):
    """An analytic answer: three days of which the middle one has no files."""
    write_folder(tmp_path / "in", hours=50)
    for kind in ("fields/pwv", "stations/stations"):
        (tmp_path / "in" / f"{kind}_20260915.nc").unlink()
    period = ("--start", "2026-09-14T20:00", "--end", "2026-09-16T02:00")
    options = ("--format", "gif", "--shape", "square", "--out", tmp_path / "out")
    assert run(capsys, "animate", tmp_path / "in", *period, *options)[0] == 0
    with Image.open(tmp_path / "out/film_square.gif") as moving:
        assert moving.n_frames > 4  # equal pictures become a longer one
    words = (tmp_path / "out/film_square.txt").read_text()
    assert "30 maps from 14 September 2026, 20:00 to 21:00 UTC" in words
    assert "Of these hours 24 have no map" in words


def test_animate_without_the_encoder_says_what_to_do(written, tmp_path, capsys, monkeypatch):
    """Negative control: the library is not installed."""
    monkeypatch.setitem(sys.modules, "av", None)
    status, _, error = run(capsys, "animate", written[0], "--out", tmp_path)
    assert status == 1
    assert "pip install 'fieldgen[film]', or choose --format gif" in error
    assert not list(tmp_path.iterdir())


BAD = {
    "no products": (lambda path: path / "none", (), "holds no field files"),
    "no limits": (lambda path: (path / "run.json").unlink(), (), "does not tell colour_limits"),
    "broken file": (
        lambda path: (path / "fields/pwv_20260914.nc").write_bytes(b"x"), (), "is not a NetCDF file"
    ),
    "before": (lambda path: None, ("--end", "2026-01-01"), "no field between"),
    "reversed": (lambda path: None, ("--start", "2027-01-01", "--end", "2026-01-01"),
                 "is not before"),
    "no language": (lambda path: None, ("--language", "no.toml"), "no.toml: cannot be read"),
}  # fmt: skip


@pytest.mark.parametrize("spoil, options, said", BAD.values(), ids=BAD.keys())
def test_animate_tells_in_one_line_why_not(tmp_path, capsys, spoil, options, said):
    """Negative control."""
    write_folder(tmp_path / "in")
    path = spoil(tmp_path / "in") if said == "holds no field files" else tmp_path / "in"
    spoil(tmp_path / "in")
    options = ("--format", "gif", "--out", tmp_path / "out", *options)
    status, _, error = run(capsys, "animate", path, *options)
    assert (status, error.count("\n")) == (1, 1)
    assert said in error


def test_grid_that_changed_is_told(tmp_path, capsys):
    """Negative control: an older file on another grid."""
    write_folder(tmp_path / "in", hours=26)
    write_folder(tmp_path / "other", columns=30)
    other = (tmp_path / "other/fields/pwv_20260914.nc").read_bytes()
    (tmp_path / "in/fields/pwv_20260914.nc").write_bytes(other)
    status, _, error = run(capsys, "animate", tmp_path / "in", "--format", "gif")
    assert status == 1
    assert "pwv_20260914.nc: its grid is not that of the newest" in error
