"""Map files."""

import time

import numpy as np
import pytest
from PIL import Image

from fieldgen.errors import OutputError
from fieldgen.products import look
from fieldgen.products.maps import copy_newest, write_latest, write_maps
from fieldgen.products.maps.files import write_picture
from tests.products.maps.invented import hex_bytes, make_island, make_painter, make_stations


def test_write_maps_leaves_one_picture_an_hour(tmp_path, island, painter):
    folder = tmp_path / "new" / "maps"
    paths = write_maps(island, make_stations(island, [(40, 50), (60, 30)]), folder, painter)
    names = ["pwv_20260914T0100Z.png", "pwv_20260914T0200Z.png"]
    assert [path.name for path in paths] == names
    assert sorted(path.name for path in folder.iterdir()) == names
    with Image.open(paths[0]) as picture:
        assert (picture.format, picture.mode) == ("PNG", "RGB")
        assert picture.size == painter.layout.size


def test_copy_newest_copies_the_newest_and_leaves_it_when_it_is_there(tmp_path, island, painter):
    assert copy_newest(tmp_path) is None
    stations = make_stations(island, [(40, 50)])
    newest = write_maps(island, stations, tmp_path, painter)[-1]
    assert copy_newest(tmp_path) == tmp_path / "latest.png"
    assert (tmp_path / "latest.png").read_bytes() == newest.read_bytes()
    write_maps(island.isel(time=[0]), stations, tmp_path, painter)
    assert copy_newest(tmp_path) is None


def test_write_latest_is_the_map_of_the_last_hour_alone(tmp_path, island, painter):
    stations = make_stations(island, [(40, 50)])
    maps = write_maps(island, stations, tmp_path / "all", painter)
    latest = write_latest(island, stations, tmp_path / "latest", painter)
    assert [path.name for path in (tmp_path / "latest").iterdir()] == ["latest.png"]
    assert latest.read_bytes() == maps[-1].read_bytes()


def test_write_maps_does_not_depend_on_the_hours_before(tmp_path, island, painter):
    stations = make_stations(island, [(40, 50), (60, 30)])
    both = write_maps(island, stations, tmp_path / "both", painter)
    alone = write_maps(island.isel(time=[1]), stations, tmp_path / "alone", painter)
    assert both[1].read_bytes() == alone[0].read_bytes()
    assert both[0].read_bytes() != both[1].read_bytes()


def test_write_maps_crosses_out_all_stations_in_an_hour_they_lack(tmp_path, island, painter):
    stations = make_stations(island, [(40, 50), (60, 30)])
    with_all = write_maps(island, stations, tmp_path / "all", painter)
    rejected = stations.copy(deep=True)
    rejected["flag"].values[:, 1] = 1
    expected = write_maps(island, rejected, tmp_path / "rejected", painter)
    found = write_maps(island, stations.isel(time=[0]), tmp_path / "lacking", painter)
    assert found[0].read_bytes() == with_all[0].read_bytes()
    assert found[1].read_bytes() == expected[1].read_bytes() != with_all[1].read_bytes()


def test_write_maps_of_nothing_at_all_is_still_a_map(tmp_path, island, painter):
    empty = island.isel(time=[0]).copy(deep=True)
    empty["pwv"].values[:] = np.nan
    stations = make_stations(island, [(40, 50)]).isel(station=[])
    (path,) = write_maps(empty, stations, tmp_path, painter)
    with Image.open(path) as picture:
        column, row = painter.layout.map_corner
        assert picture.getpixel((column + 30, row + 30)) == hex_bytes(look.MISSING_COLOUR)


def test_write_picture_that_fails_leaves_the_old_file(tmp_path):
    path = tmp_path / "pwv.png"
    path.write_bytes(b"old")

    class Broken:
        def save(self, part, **_):
            part.write_bytes(b"half")
            raise OSError(28, "No space left on device")

    with pytest.raises(OutputError, match=r"pwv\.png: .*No space left"):
        write_picture(Broken(), path)
    assert [(file.name, file.read_bytes()) for file in tmp_path.iterdir()] == [("pwv.png", b"old")]


def test_a_day_of_maps_prints_its_time(tmp_path, capsys):
    """A measurement for the reader: printed, not compared."""
    fields = make_island(hours=24)
    cells = np.argwhere(fields["terrain"].values > 0)[:: 4000 // 40][:40]
    stations = make_stations(fields, cells)
    start = time.process_time()
    painter = make_painter(fields)
    base = time.process_time()
    paths = write_maps(fields, stations, tmp_path, painter)
    with capsys.disabled():
        print(f" base {base - start:.2f} s, 24 maps {time.process_time() - base:.2f} s ", end="")
    assert len(paths) == 24
    assert stations.sizes["station"] == 40
