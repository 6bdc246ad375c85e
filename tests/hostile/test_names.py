"""Names that would do harm: cleaned or escaped wherever they appear, in a whole run."""

import csv
import json

import pytest
import xarray as xr
from PIL import Image

from fieldgen.cli import main
from fieldgen.plain_text import cell, file_name, one_line, printable
from fieldgen.readers.formats import read_delays, read_weather
from tests.hostile.targets import DELAY_CSV, RINEX, is_clean
from tests.readers.fixtures import SinexFile
from tests.scene import SETTINGS, write_scene

HOSTILE = (
    "<script>alert(1)</script>", "=HYPERLINK(1)", "+1", "-1+1", "@SUM(A1)", "$\\frac{$",
    "../../etc/x",    "%s{0}{}", "[red]x[/red]", "A" * 40, "Ænïgmå Йж 北",
)  # fmt: skip
"""Names that are legal, and that no product may act upon."""

CONTROL = ("\x1b[31mred", "\x00", "a\rb", "\u202eevil", "\x9b31m", "\x7f", "a\u2028b")
"""Names that no identifier may have."""


def test_one_line_and_printable_and_cell_and_file_name():
    """Analytic."""
    assert one_line(" a\r\nb\x1b[31m\u202e\u2028c ") == "a b [31m c"
    assert printable("a\x1b[0m\u202e\udcff\nb") == "a\\x1b[0m\\u202e\\udcff\nb"
    assert [cell(text) for text in ("=1", "+1", "-1", "@a", "a=1", "")] == [
        "'=1", "'+1", "'-1", "'@a", "a=1", "",
    ]  # fmt: skip
    assert file_name("../../etc/x", "default") == "_.._etc_x"
    assert file_name("\x00..", "default") == "_"
    assert file_name(" .. ", "default") == "default"
    assert len(file_name("北" * 120, "default").encode()) <= 120


def quoted(text: str) -> str:
    """A cell of CSV."""
    return '"' + text.replace('"', '""') + '"'


def hostile_scene(folder):
    """Scene whose stations, network and institution have hostile names."""
    settings = SETTINGS.replace('maps = "none"', 'maps = "latest"').replace(
        'name = "Test isle"',
        r"""name = "../$x^{$ <b>\u202e\u001b[31m"
institution = "=cmd|' /C calc'!A0\n<img src=x>"
license = "$\\frac{"
""",
    )
    settings = settings.replace("[terrain]", 'table = "stations.csv"\n[terrain]')
    path = write_scene(folder, hours=2, settings=settings)
    head, *rows = (folder / "delays.csv").read_text().splitlines()
    new = {f"ST{n:02d}": name for n, name in enumerate(HOSTILE)}
    lines, table = [head], {}
    for row in rows:
        old, *cells = row.split(",")
        name = new.get(old, old)
        lines.append(",".join([quoted(name), *cells]))
        table[name] = ",".join([quoted(name), *cells[3:5], cells[6], quoted(f"{name}\x1b[31m")])
    lines += [lines[1].replace(quoted(HOSTILE[0]), quoted(name)) for name in CONTROL[:2]]
    (folder / "delays.csv").write_text("\n".join(lines))
    head = "id,longitude,latitude,ellipsoidal_height,name\n"
    (folder / "stations.csv").write_text(head + "\n".join(table.values()))
    return path


def test_a_whole_run_with_hostile_names(tmp_path, monkeypatch, capsys):
    """A limit: make and score write what they should, where they should, and act upon no name."""
    scene = tmp_path / "scene"
    scene.mkdir()
    path = hostile_scene(scene)
    before = {one for one in tmp_path.rglob("*")}
    monkeypatch.chdir(scene)
    for command in ("check", "make", "score"):
        options = [] if command == "check" else ["--jobs", "1"]
        assert main([command, str(path), *options]) == 0
    shown = capsys.readouterr()
    for text in (shown.out, shown.err):
        assert all(is_clean(line) for line in text.split("\n"))
    assert "2 x no identifier" in shown.out
    made = {one for one in tmp_path.rglob("*")} - before
    folder = scene / "outputs" / file_name("../$x^{$ <b> [31m", "")
    assert folder.is_dir(), sorted(str(one) for one in made)[:3]
    assert all(one.is_relative_to(scene / "outputs") for one in made)
    names = {name.upper() for name in HOSTILE}
    check_files(folder, names)


def check_files(folder, names):
    """Every file can be read back, and holds the names as they are or escaped."""
    run = json.loads((folder / "run.json").read_text())
    assert names <= set(run["stations"])
    with xr.open_dataset(next((folder / "stations").glob("*.nc"))) as stations:
        assert names <= set(stations.station_id.values)
        assert all(is_clean(name) for name in stations.station_name.values)
        assert stations.attrs["institution"] == "=cmd|' /C calc'!A0 <img src=x>"
    with xr.open_dataset(next((folder / "fields").glob("*.nc"))) as fields:
        assert fields.attrs["project"] == "../$x^{$ <b> [31m"
    for picture in (folder / "maps" / "latest.png", folder / "score" / "score.png"):
        with Image.open(picture) as image:
            image.load()
    lines = (folder / "score" / "score_stations.csv").read_text().splitlines()
    rows = list(csv.DictReader(line for line in lines if not line.startswith("#")))
    assert {cell(name) for name in names} <= {row["station"] for row in rows}
    for row in rows:
        for key in ("station", "name"):
            assert not row[key].startswith(("=", "+", "-", "@"))


@pytest.mark.parametrize("name", CONTROL, ids=ascii)
def test_an_identifier_with_control_characters_is_rejected(tmp_path, name):
    """Negative control: such a line is counted, and the others are used."""
    path = tmp_path / "delays.csv"
    path.write_bytes((DELAY_CSV + DELAY_CSV.split("\n")[1].replace("ST00", f'"{name}"')).encode())
    records = read_delays(path, name="delays")
    assert records.station_ids == ["ST00", "ST01", "ST02"]
    assert records.rejections.total == 1


@pytest.mark.parametrize("name", ["\x7fARDA", "ARDA\x9b31m", "AR\u202eDA"], ids=ascii)
def test_a_station_of_sinex_with_control_characters_is_rejected(tmp_path, name):
    """Negative control."""
    path = tmp_path / "delays.tro"
    line = " ARDA00ATL 2030:031:00000"
    path.write_bytes(SinexFile().text().replace(line, f" {name} 2030:031:00000").encode())
    records = read_delays(path, name="delays")
    assert records.rejections.counts["delays", "no station"] == 1
    assert sorted(records.station_ids) == ["ARDA00ATL", "BELU00ATL"]


def test_a_station_of_sinex_with_a_slash_keeps_its_name(tmp_path):
    """Negative control: a slash in a code does not make a PT code of what follows."""
    path = tmp_path / "delays.tro"
    path.write_text(SinexFile().text().replace(" ARDA00ATL 2030", " ../ARDA/X 2030"))
    assert "../ARDA/X" in read_delays(path).station_ids


def test_a_marker_with_control_characters_is_cleaned(tmp_path):
    """A limit: some writers fill the marker with zeros."""
    path = tmp_path / "weather.rnx"
    path.write_text(RINEX.replace(f"{'ARDA':<60}MARKER", f"{'ARDA' + chr(0) * 3:<60}MARKER"))
    assert read_weather(path).site_ids == ["ARDA"]


@pytest.mark.parametrize("height", ["1e308", "-1e5", "inf", "12000"])
def test_a_height_where_no_station_stands_is_rejected(tmp_path, height):
    """Negative control."""
    path = tmp_path / "delays.csv"
    head, first, *rest = DELAY_CSV.split("\n")
    path.write_text("\n".join([head, first.replace("120.5", height), *rest]))
    assert read_delays(path, name="d").rejections.counts["d", "impossible height"] == 1


def test_file_names_of_any_bytes_are_shown_escaped(tmp_path, capsys):
    """A limit: names of files that are not text, or that hold an escape sequence."""
    path = write_scene(tmp_path, hours=1, settings=SETTINGS.replace("delays.csv", "*.tab"))
    (tmp_path / "delays.csv").rename(tmp_path / "a\x1b[31m\udcff.tab")
    (tmp_path / "b\nb.tab").write_text("nothing")
    assert main(["check", str(path)]) == 0
    shown = capsys.readouterr().out
    assert "\x1b" not in shown
    assert "warning" in shown or "unusable" in shown
