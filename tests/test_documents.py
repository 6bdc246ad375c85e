"""The documents tell the truth about the code."""

import re
from pathlib import Path

import pytest

from fieldgen.fields import FIELD_FLAGS
from fieldgen.settings import Settings
from fieldgen.station.screening import STATION_FLAGS

README = (Path(__file__).parents[1] / "README.md").read_text()

TABLES = [name for name in Settings.model_fields if name != "folder"]


@pytest.mark.parametrize("table", TABLES)
def test_readme_names_every_setting_and_no_other(table):
    """Round trip: the settings reference against the model that checks the settings."""
    named = set()
    for row in re.findall(rf"^\| (`{table}\..*?) \|", README, re.MULTILINE):
        named |= {key.removeprefix(f"{table}.") for key in re.findall(r"`([^`]+)`", row)}
    model = Settings.model_fields[table].annotation
    assert named == set(model.model_fields)


def test_readme_names_every_flag():
    """Round trip."""
    for bit in FIELD_FLAGS.values():
        assert f"| {bit} |" in README
    for name, bit in STATION_FLAGS.items():
        assert re.search(rf"`{name}`[^`]* {bit}\b", README), name


def test_readme_shows_pictures_that_exist():
    """Round trip."""
    root = Path(__file__).parents[1]
    for picture in re.findall(r"!\[[^\]]*\]\(([^)]+)\)", README):
        assert (root / picture).exists(), picture
