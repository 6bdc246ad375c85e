from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest

from fieldgen.errors import InputError
from fieldgen.outreach.language import read_language

SHIPPED = Path(str(files("fieldgen.outreach") / "languages"))
ENGLISH = (SHIPPED / "english.toml").read_text()


@pytest.mark.parametrize("path", sorted(SHIPPED.glob("*.toml")), ids=lambda path: path.stem)
def test_every_language_that_comes_along_is_whole(path):
    """Round trip: the check that a user's file goes through."""
    assert read_language(path).say("language") == read_language(Path(path.stem)).say("language")


CHANGES = {
    "missing": ('caution = "', 'cautoin = "', ["missing: caution", "unknown: cautoin"]),
    "two missing": ("month_1", "monat_1", ["missing: month_1\n", "missing: month_12"]),
    "not text": ('decimal_mark = "."', "decimal_mark = 1", ["decimal_mark: is not text"]),
    "a place too many": ("{used} of {all}", "{used} of {any}", ["fills in {any}"]),
    "inside an object": ("fieldgen {version}", "{version.__class__}", ["{version.__class__}"]),
    "a format": ("fieldgen {version}", "{version:>9}", ["expected {version}"]),
    "by number": ("fieldgen {version}", "{0}", ["fills in {0}"]),
    "open brace": ("fieldgen {version}", "fieldgen {", ["version: "]),
}


@pytest.mark.parametrize("old, new, said", CHANGES.values(), ids=CHANGES.keys())
def test_read_language_lists_what_is_wrong(tmp_path, old, new, said):
    """Negative control: each mistake on its own."""
    path = tmp_path / "mine.toml"
    path.write_text(ENGLISH.replace(old, new))
    with pytest.raises(InputError) as caught:
        read_language(path)
    assert str(caught.value).startswith(f"{path}: ")
    assert all(words in str(caught.value) for words in said)


@pytest.mark.parametrize("content", [b"a = ", b"\xff\xfe"], ids=["not TOML", "not UTF-8"])
def test_read_language_names_a_file_that_it_cannot_read(tmp_path, content):
    """Negative control."""
    path = tmp_path / "mine.toml"
    path.write_bytes(content)
    with pytest.raises(InputError, match=r"mine\.toml: is not TOML in UTF-8"):
        read_language(path)
    with pytest.raises(InputError, match="cannot be read: No such file"):
        read_language(tmp_path / "none.toml")


@pytest.mark.parametrize(
    "value, digits, signed, text",
    [(-1.26, 1, False, "−1,3"), (-0.04, 1, True, "+0,0"), (12.5, 0, False, "12"),
     (np.nan, 1, False, "–"), (3.0, 2, True, "+3,00")],
)  # fmt: skip
def test_number_is_written_as_the_language_does(value, digits, signed, text):
    """Common practice, no source: the decimal comma of German, a true minus, no minus zero."""
    assert read_language(Path("german")).number(value, digits, signed=signed) == text


def test_hour_ends_a_day_at_24():
    """ISO 8601:2004, 4.2.3 (from memory): the end of a day is 24:00 of that day."""
    start, end = np.datetime64("2026-03-31T23:00"), np.datetime64("2026-04-01T00:00")
    assert read_language().hour(start, end) == "31 March 2026, 23:00 to 24:00 UTC"
