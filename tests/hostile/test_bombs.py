"""Files that wait, never end or unpack to gigabytes: a clear error, little memory, little time."""

import gzip
import os
import resource

import numpy as np
import pytest
import rasterio
import xarray as xr
from rasterio.transform import from_bounds

from fieldgen.comparing.observations import read_truth
from fieldgen.errors import FieldgenError, GridError, InputError
from fieldgen.ground.grid import Grid, read_grid
from fieldgen.ground.terrain import read_raster_at, read_terrain
from fieldgen.products.maps.geometries import read_geometries
from fieldgen.readers.formats import read_delays, read_weather
from fieldgen.readers.tables import read_station_table
from fieldgen.readers.text import LONGEST_LINE, MOST_UNPACKED
from fieldgen.settings import MOST_CELLS, read_settings
from tests.hostile.targets import DELAY_CSV, RINEX, STATION_CSV, time_limit
from tests.readers.fixtures import SinexFile
from tests.scene import SETTINGS, write_terrain

MEGABYTE = 1 << 20
GRID = Grid.between("EPSG:32626", 320000, 5220000, 380000, 5280000, 5000)

READERS = {
    "settings": read_settings,
    "delays": read_delays,
    "weather": read_weather,
    "stations": read_station_table,
    "observations": read_truth,
    "lines": read_geometries,
    "grid": read_grid,
    "terrain": lambda path: read_terrain(path, GRID),
}


def memory() -> float:
    """Most memory of this process so far [MB]."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


@pytest.fixture(params=["pipe", "device", "folder", "absent"])
def no_file(request, tmp_path):
    """A path that is no file."""
    path = tmp_path / "here"
    if request.param == "device":
        return "/dev/zero"
    if request.param == "pipe":
        os.mkfifo(path)
    elif request.param == "folder":
        path.mkdir()
    return path


@pytest.mark.parametrize("read", READERS.values(), ids=READERS)
def test_what_is_no_file_is_refused_at_once(no_file, read):
    """Negative control: a pipe would wait for ever, and /dev/zero never ends."""
    from pathlib import Path

    with time_limit(10), pytest.raises(FieldgenError, match="cannot be read|expected a file"):
        read(Path(no_file))


HEADS = {
    "sinex": SinexFile(solution="").text().partition("%=ENDTRO")[0] + "+TROP/SOLUTION\n",
    "rinex": RINEX,
    "table": DELAY_CSV,
}
FILLS = {"blanks": b" " * MEGABYTE, "line feeds": b"\n" * MEGABYTE, "one line": b"1" * MEGABYTE}


@pytest.mark.parametrize("fill", FILLS.values(), ids=FILLS)
@pytest.mark.parametrize("head", HEADS)
def test_gzip_bombs_are_refused(tmp_path, head, fill):
    """A limit: what would unpack to half a gigabyte is given up early, whatever fills it."""
    path = tmp_path / "bomb.gz"
    path.write_bytes(gzip.compress(HEADS[head].encode()) + 512 * gzip.compress(fill))
    assert path.stat().st_size < 3 * MEGABYTE / 4
    before = memory()
    with time_limit(30), pytest.raises(InputError, match=f"more than {MOST_UNPACKED} times its"):
        (read_weather if head == "rinex" else read_delays)(path, name="bomb")
    assert memory() - before < 600


def test_a_file_that_packs_well_is_read(tmp_path):
    """Negative control: the same lines again and again pack to a hundredth and are no bomb."""
    path = tmp_path / "delays.csv.gz"
    path.write_bytes(gzip.compress(DELAY_CSV.encode() + b"\n" * MEGABYTE))
    assert len(read_delays(path).time) == 12


@pytest.mark.parametrize(("head", "size"), [("table", 30), ("sinex", 27), ("rinex", 27)])
def test_a_line_of_a_gigabyte_is_one_rejected_line(tmp_path, head, size):
    """A limit: the line is passed over in little memory, and what stands before it is used."""
    path = tmp_path / "long"
    text = HEADS[head]
    if head == "sinex":
        text += " ARDA00ATL 2030:031:00000 2401.5   1.3   0.25  0.11\n"
    path.write_bytes(text.encode() + b"x" * (LONGEST_LINE + 1))
    os.truncate(path, 1 << size)  # the rest are zeros that take no room on the disk
    before = memory()
    with time_limit(60):
        records = (read_weather if head == "rinex" else read_delays)(path, name="long")
    assert len(records.time) >= 1
    assert records.rejections.counts["long", "line too long"] == 1
    assert memory() - before < 300


def test_sinex_with_very_many_blocks_is_refused(tmp_path):
    """Negative control: names of blocks are compared with the known ones, which costs time."""
    path = tmp_path / "blocks.tro"
    path.write_text("%=TRO 2.00\n" + "".join(f"+BLOCK{n}\n" for n in range(100_000)))
    with time_limit(10), pytest.raises(InputError, match="more than 1000 different names"):
        read_delays(path, name="blocks")


def test_sinex_with_very_many_fields_is_refused_or_read(tmp_path):
    """A limit: a million declared fields, of which the lines have four."""
    names = " TROPO PARAMETER NAMES         " + "TROTOT STDDEV " * 500 + "\n"
    text = SinexFile().text().replace("+TROP/DESCRIPTION\n", "+TROP/DESCRIPTION\n" + 1000 * names)
    path = tmp_path / "fields.tro"
    path.write_text(text)
    with time_limit(20), pytest.raises(InputError, match="wrong number of fields"):
        read_delays(path, name="fields")


@pytest.mark.parametrize("count", ["1000000000", "9" * 45])
def test_rinex_that_claims_very_many_types_is_refused(tmp_path, count):
    """Negative control."""
    path = tmp_path / "types.rnx"
    path.write_text(RINEX.replace("     3    PR    TD    HR", f"{count} PR TD HR"[:60].ljust(23)))
    with time_limit(5), pytest.raises(InputError, match="TYPES OF OBSERV lists|observations are"):
        read_weather(path, name="types")


def test_a_table_with_a_million_columns_is_refused(tmp_path):
    """Negative control: its first line is longer than any that is read."""
    path = tmp_path / "wide.csv"
    path.write_text(",".join(["station", "time", "ztd"] * 333_334) + "\n1,2,3\n")
    with time_limit(5), pytest.raises(InputError, match="file begins with '1,2,3'"):
        read_delays(path, name="wide")


def test_a_table_with_very_many_stations_is_read(tmp_path):
    """A limit: more stations than 16 bits can count keep their own values."""
    head, row = DELAY_CSV.split("\n")[:2]
    path = tmp_path / "delays.csv"
    rows = (row.replace("ST00", f"S{n:05d}") for n in range(33_000))
    path.write_text("\n".join([head, *rows]))
    with time_limit(30):
        records = read_delays(path)
    records.compact()
    assert (records.place == records.identifiers.index("S32999")).sum() == 1


def test_a_station_table_with_very_many_rows_is_read(tmp_path):
    """A limit."""
    head, row = STATION_CSV.split("\n")[:2]
    path = tmp_path / "stations.csv"
    path.write_text("\n".join([head, *(row.replace("ST00", f"S{n:06d}") for n in range(10_000))]))
    with time_limit(30):
        assert len(read_station_table(path)[0]) == 10_000


def test_one_record_of_a_wrong_year_does_not_take_all_memory(tmp_path):
    """Negative control: 120 years of five minutes for 15 stations would take gigabytes. Those
    more than 15 years off are rejected; those that are not must not make too many steps."""
    from fieldgen import read_network
    from tests.scene import write_scene

    settings = SETTINGS.replace("[grid]", 'time_step = "5min"\n[grid]')
    path = write_scene(tmp_path, stations=15, settings=settings)
    text = (tmp_path / "delays.csv").read_text()
    last = text.splitlines()[-1]
    more = last.replace("2026", "1980") + "\n" + last.replace("2026", "2099") + "\n"
    (tmp_path / "delays.csv").write_text(text + more)
    network = read_network(path)
    assert network.delays.sizes["time"] < 100
    assert network.report.rejections.counts["delays.csv", "epoch far from all others"] == 2
    more = last.replace("2026", "2012") + "\n" + last.replace("2026", "2040") + "\n"
    (tmp_path / "delays.csv").write_text(text + more)
    with pytest.raises(InputError, match=r"from 2012-.*to 2040-.*a wrong year"):
        read_network(path)


def spoil_terrain(folder, what: str):
    """terrain.tif, damaged."""
    write_terrain(folder)
    path = folder / "terrain.tif"
    data = path.read_bytes()
    if what == "empty":
        path.write_bytes(b"")
    elif what == "text":
        path.write_text("no raster")
    elif what == "head only":
        path.write_bytes(data[:200])
    elif what == "cut":
        path.write_bytes(data[: len(data) // 2])
    elif what == "overwritten":
        path.write_bytes(data[:8] + b"\xff" * 400 + data[408:])
    return path


@pytest.mark.parametrize("what", ["empty", "text", "head only", "cut", "overwritten"])
def test_damaged_terrain_is_named(tmp_path, what):
    """Negative control."""
    path = spoil_terrain(tmp_path, what)
    with time_limit(20), pytest.raises(FieldgenError, match=r"terrain.tif: the terrain"):
        read_terrain(path, GRID)


def test_terrain_with_an_undeclared_missing_value_is_refused(tmp_path):
    """Negative control: 3e38 m is no mountain."""
    write_terrain(tmp_path)
    with rasterio.open(tmp_path / "terrain.tif", "r+") as raster:
        height = raster.read(1)
        height[50, 50] = 3.0e38
        raster.write(height, 1)
    with pytest.raises(InputError, match=r"terrain is .*expected at most 9000 m"):
        read_terrain(tmp_path / "terrain.tif", GRID)


def test_a_raster_larger_than_the_memory_is_sampled(tmp_path):
    """A limit: 4e11 pixels, of which the four around each point are read."""
    path = tmp_path / "huge.tif"
    size = 1 << 19
    profile = {
        "driver": "GTiff", "width": size, "height": size, "count": 1, "dtype": "int16",
        "crs": "EPSG:4326", "transform": from_bounds(-40, 40, -20, 60, size, size), "tiled": True,
        "blockxsize": 4096, "blockysize": 4096, "SPARSE_OK": True, "BIGTIFF": "YES",
    }  # fmt: skip
    with rasterio.open(path, "w", **profile):
        pass
    before = memory()
    with time_limit(30):
        values = read_raster_at(path, [-30.0, -25.0, 10.0], [50.0, 41.0, 50.0], "geoid")
    assert values[:2].tolist() == [0.0, 0.0]
    assert np.isnan(values[2])
    assert memory() - before < 400


def test_bilinear_values_are_those_of_scipy(tmp_path):
    """Another library's answer: scipy.ndimage.map_coordinates, order 1, edges held."""
    from scipy.ndimage import map_coordinates

    draw = np.random.default_rng(4)
    band = draw.normal(50.0, 5.0, (7, 9)).astype(np.float32)
    path = tmp_path / "small.tif"
    profile = {
        "driver": "GTiff", "width": 9, "height": 7, "count": 1, "dtype": "float32",
        "crs": "EPSG:4326", "transform": from_bounds(-39, 43, -30, 50, 9, 7),
    }  # fmt: skip
    with rasterio.open(path, "w", **profile) as raster:
        raster.write(band, 1)
    longitude, latitude = draw.uniform(-39, -30, 200), draw.uniform(43, 50, 200)
    found = read_raster_at(path, longitude, latitude, "geoid")
    place = [50 - latitude - 0.5, longitude + 39 - 0.5]
    assert found == pytest.approx(map_coordinates(band, place, order=1, mode="nearest"), abs=1e-4)


def test_a_grid_that_claims_to_be_huge_is_refused(tmp_path):
    """Negative control: the coordinates alone are read, and they are counted first."""
    path = tmp_path / "model.nc"
    count = 6000
    coordinates = {
        name: (name, np.linspace(low, low + 6.0, count), {"standard_name": standard})
        for name, standard, low in (("x", "longitude", -33.0), ("y", "latitude", 44.0))
    }
    xr.Dataset(coords=coordinates).to_netcdf(path)
    with pytest.raises(GridError, match=f"cells are 6000 x 6000, expected at most {MOST_CELLS}"):
        read_grid(path)


@pytest.mark.parametrize("share", [0.0, 0.1, 0.5, 0.9])
def test_a_grid_file_cut_short_is_named(tmp_path, share):
    """Negative control."""
    path = tmp_path / "model.nc"
    x = ("x", np.linspace(-33.0, -27.0, 50), {"standard_name": "longitude"})
    y = ("y", np.linspace(44.0, 50.0, 50), {"standard_name": "latitude"})
    xr.Dataset(coords={"x": x, "y": y}).to_netcdf(path)
    data = path.read_bytes()
    path.write_bytes(data[: int(len(data) * share)])
    with pytest.raises(GridError, match="model.nc: cannot be read as NetCDF"):
        read_grid(path)
