"""Words on a map."""

import numpy as np
import pytest
import xarray as xr

from fieldgen.plain_text import one_line
from fieldgen.products import look
from fieldgen.products.maps.words import format_facts, format_hour, read_hour_bounds
from fieldgen.products.metadata import CAUTION
from tests.products.maps.invented import make_painter


def words_of(figure):
    return [text.get_text() for text in figure.texts]


@pytest.mark.parametrize("name", ["Net $x^2$ & <b>bold</b> $", r"\alpha_{1} %s {0} #", "Ørø Ňet"])
def test_title_draws_names_literally(island, name):
    painter = make_painter(island, network_name=name)
    (text,) = [text for text in painter.figure.texts if text.get_text() == name]
    assert not text.get_parse_math()


def test_one_line_leaves_no_control_characters():
    assert one_line(" North\tcoast\r\n\x1b[31m\x00net\u202e ") == "North coast [31m net"


def test_title_of_any_length_stays_on_the_picture(island):
    painter = make_painter(island, network_name="A very long name " * 30)
    width, height = painter.layout.size
    for text in painter.figure.texts:
        left, bottom, right, top = text.get_window_extent().extents
        assert 0 <= left <= right <= width
        assert 0 <= bottom <= top <= height
    assert any(words.endswith("…") for words in words_of(painter.figure))


def test_base_tells_caution_version_and_unit(painter):
    words = words_of(painter.figure)
    assert {CAUTION, "fieldgen 0.1.0", "kg m⁻² (= mm)", "Ostrana"} <= set(words)
    assert {"beyond the stations' heights", "far from stations", look.MISSING_LABEL} <= set(words)


def test_format_hour_ends_a_day_at_24():
    late = np.datetime64("2026-09-14T23:00")
    assert (
        format_hour(late, late + np.timedelta64(1, "h")) == "mean over 23:00–24:00 UTC, 2026-09-14"
    )


def test_read_hour_bounds_are_those_of_the_field(island):
    """Negative control: the stamp is the end of the hour, not its start."""
    field = island.isel(time=1)
    start, end = read_hour_bounds(field)
    assert (start, end) == (field["time"] - np.timedelta64(1, "h"), field["time"])


@pytest.mark.parametrize(
    ("count", "scale_height", "facts"),
    [(38, 2140.0, "38 stations used · scale height 2.1 km"), (1, np.nan, "1 station used")],
)
def test_format_facts(count, scale_height, facts):
    field = xr.Dataset({"station_count": count, "scale_height": scale_height})
    assert format_facts(field) == facts
