"""Settings that are valid TOML and no settings: every one a clear SettingsError or GridError."""

import pytest

from fieldgen import read_network
from fieldgen.errors import GridError, SettingsError
from fieldgen.settings import LARGEST_FILE, MOST_CELLS, read_settings
from tests.hostile.targets import time_limit
from tests.scene import SETTINGS, write_scene


def read(folder, *changes):
    """Settings of the scene after replacements."""
    text = SETTINGS
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    path = folder / "network.toml"
    path.write_text(text)
    with time_limit(10):
        return read_settings(path)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("spacing = 5000", "spacing = 0.06", "expected at most 25000000 cells; they are 1e.12"),
        ("spacing = 5000", "spacing = 1e-9", "east - west alone is 6e.13 spacings"),
        ("west = 320000", "west = -1e308", "east - west alone is 2e.304 spacings"),
        ("west = 320000", "west = nan", "grid.west: is nan, input should be a finite number"),
        ("west = 320000", "west = " + "9" * 400, "grid.west: is a number of many digits"),
        ("west = 320000", "west = " + "9" * 5000, "is not valid TOML: Exceeds the limit"),
        ("west = 320000", 'west = "' + "x" * 4500 + '"', r"grid.west: is 'x{80}\.\.\.'"),
        ("geoid = 57.0", "geoid = 1e6", "terrain.geoid"),
        ("geoid = 57.0", "geoid = 1979-05-27", "terrain.geoid"),
        ('file = "terrain.tif"', 'file = "a\\u0000b"', "terrain.file: .*control characters"),
        ('delays = ["delays.csv"]', 'delays = ["\\u001b[31m"]', r"delays.0: is '\\x1b\[31m'"),
        ('maps = "none"', "limits = [0, 1e308]", "products.limits"),
        ('maps = "none"', '"\\u001b[31m" = 1', r"products.'\\x1b\[31m': unknown key"),
        ('maps = "none"', 'maps = "none"\nmaps = "all"', "is not valid TOML: Cannot overwrite"),
        ('name = "Test isle"', 'name = "\\u202e \\n"', "network.name: .*letters that can be seen"),
        ('name = "Test isle"', 'time_step = "9999999d"', "network.time_step"),
        ('name = "Test isle"', 'time_step = "²h"', "whole number and a unit"),
        ("[products]", '[kriging]\nwindow = "99999999999999999999d"\n[products]', "kriging.window"),
        ("[products]", "[heights]\nprior_sigma = 1e-300\n[products]", "heights.prior_sigma"),
        ("[products]", "[retrieval]\nbarometer_sigma = 1e300\n[products]", "barometer_sigma"),
    ],
)  # fmt: skip
def test_absurd_values_are_named(tmp_path, old, new, message):
    """Negative control."""
    with pytest.raises(SettingsError, match=message) as caught:
        read(tmp_path, (old, new))
    assert len(str(caught.value)) < 1000


def test_a_grid_just_within_the_limit_is_accepted(tmp_path):
    """A limit: 5000 x 5000 cells."""
    grid = read(tmp_path, ("spacing = 5000", "spacing = 12")).grid
    assert ((grid.east - grid.west) / grid.spacing) ** 2 == MOST_CELLS


@pytest.mark.parametrize(
    "text",
    [
        "a = " + "[" * 7000,
        "a = " + "{a = " * 1500,
        "a." * 1500 + "a = 1",
        "a." * 10_000 + "a = 1",
        "a = " + "[\n" * 10_000,
    ],
    ids=["arrays", "tables", "dotted", "more dotted", "lines"],
)
def test_deep_nesting_is_one_clear_error(tmp_path, text):
    """Negative control."""
    path = tmp_path / "network.toml"
    path.write_text(text)
    with time_limit(10), pytest.raises(SettingsError) as caught:
        read_settings(path)
    assert len(str(caught.value)) < 1000


def test_very_many_problems_are_counted(tmp_path):
    """Negative control."""
    keys = "\n".join(f"key_{chr(97 + n % 26) * (n // 26 + 1)} = 1" for n in range(500))
    with pytest.raises(SettingsError, match="and 470 more$"):
        read(tmp_path, ("[products]", f"[products]\n{keys}"))


def test_a_settings_file_of_megabytes_is_refused(tmp_path):
    """Negative control."""
    path = tmp_path / "network.toml"
    path.write_text("#" * (LARGEST_FILE + 1))
    with pytest.raises(SettingsError, match="cannot be read: it has more than 100000 bytes"):
        read_settings(path)


@pytest.mark.parametrize(
    "crs",
    ["", "nonsense", "\\u0000", "EPSG:99999999999999999999", "EPSG:4978", "EPSG:5773", "{}", "[]",
     "+proj=pipeline", "+proj=laea +lat_0=nan", "PROJCS[", "x" * 4000, "EPSG:32626+9999"],
)  # fmt: skip
def test_a_crs_that_is_none_is_named(tmp_path, crs):
    """Negative control."""
    path = write_scene(tmp_path, settings=SETTINGS.replace("EPSG:32626", crs))
    with time_limit(10), pytest.raises((GridError, SettingsError), match="grid"):
        read_network(path)


def test_texts_of_the_network_become_one_line(tmp_path):
    """A limit: a licence of several lines stays a licence."""
    words = 'license = """Free\nfor\tall"""\ninstitution = "\\u202eInstitute\\u0007 of x"'
    network = read(tmp_path, ('name = "Test isle"', words)).network
    assert (network.license, network.institution) == ("Free for all", "Institute of x")
