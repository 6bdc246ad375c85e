"""Settings: what is accepted, and that every problem is named with its key and rule."""

from datetime import timedelta

import pytest

from fieldgen.errors import SettingsError
from fieldgen.settings import parse_duration, read_settings
from tests.scene import SETTINGS


def write(folder, text):
    path = folder / "network.toml"
    path.write_text(text)
    return path


def test_settings_of_the_scene_have_the_defaults(tmp_path):
    """Round trip."""
    settings = read_settings(write(tmp_path, SETTINGS))
    assert settings.grid.spacing == 5000.0
    assert settings.kriging.covariance == "auto"
    assert settings.network.time_step == timedelta(hours=1)
    assert settings.path("delays.csv") == tmp_path / "delays.csv"


@pytest.mark.parametrize(
    ("text", "value"),
    [("15min", timedelta(minutes=15)), ("1h", timedelta(hours=1)), ("2d", timedelta(days=2))],
)
def test_durations(text, value):
    """Analytic."""
    assert parse_duration(text) == value


@pytest.mark.parametrize("text", ["", "1", "h", "-1h", "1.5h", "0h", "1 week"])
def test_durations_reject_the_rest(text):
    """Negative control."""
    with pytest.raises(ValueError, match="whole number and a unit"):
        parse_duration(text)


def test_all_problems_are_listed_at_once(tmp_path):
    """Negative control: seven mistakes, seven lines, each with the key's path."""
    text = SETTINGS.replace("spacing = 5000", "spacing = -1").replace(
        'maps = "none"', 'maps = "some"\ncolour = "red"'
    )
    text = text.replace('name = "Test isle"', 'name = "Test isle"\ntime_step = "7min"')
    text += '[kriging]\ncovariance = "cubic"\nnugget = -1\n[retrieval]\nrefractivity = "other"\n'
    with pytest.raises(SettingsError) as caught:
        read_settings(write(tmp_path, text))
    message = str(caught.value)
    for key in (
        "grid.spacing", "products.maps", "products.colour: unknown key", "network.time_step",
        "kriging.covariance", "kriging.nugget", "retrieval.refractivity",
    ):  # fmt: skip
        assert key in message, key
    assert "exponential" in message  # the names that would do
    assert "thayer1974" in message


@pytest.mark.parametrize(
    ("change", "rule"),
    [
        (("east = 380000", "east = 310000"), "west < east"),
        (("east = 380000", "east = 381000"), "whole spacings"),
        (("spacing = 5000", ""), "missing spacing"),
        (('crs = "EPSG:32626"', 'like = "model.nc"'), "like alone"),
    ],
    ids=["reversed", "uneven", "incomplete", "both"],
)
def test_grid_is_checked_as_a_whole(tmp_path, change, rule):
    """Negative control."""
    with pytest.raises(SettingsError, match=f"grid: .*{rule}"):
        read_settings(write(tmp_path, SETTINGS.replace(*change)))


@pytest.mark.parametrize(
    "content",
    ["= 1", "[grid", "a = " + "[" * 5000, "\udcff"],
    ids=["key", "table", "deep", "bytes"],
)
def test_broken_toml_is_one_clear_line(tmp_path, content):
    """Negative control."""
    path = tmp_path / "network.toml"
    path.write_bytes(content.encode("utf-8", "surrogateescape"))
    with pytest.raises(SettingsError, match="network.toml: is not valid TOML"):
        read_settings(path)


def test_missing_file_is_named(tmp_path):
    """Negative control."""
    with pytest.raises(SettingsError, match="none.toml: cannot be read"):
        read_settings(tmp_path / "none.toml")
