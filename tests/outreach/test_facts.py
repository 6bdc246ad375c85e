import re

import numpy as np
import pytest

from fieldgen.outreach.facts import describe_film, describe_map, read_facts
from fieldgen.outreach.folder import observed_at
from fieldgen.outreach.language import read_language

ENGLISH = read_language()


def field_with(row, column, value):
    """20 everywhere, but one cell of nine; the south row first."""
    pwv = np.full((9, 12), 20.0)
    pwv[3 * row + 1, 4 * column + 1] = value
    return pwv


@pytest.mark.parametrize(
    "row, column, part",
    [(0, 0, "south_west"), (0, 2, "south_east"), (2, 0, "north_west"), (2, 1, "north"),
     (1, 0, "west"), (1, 1, "centre"), (1, 2, "east")],
)  # fmt: skip
def test_read_facts_finds_the_part_by_its_place(row, column, part):
    """An analytic field with known answer, moist and dry."""
    assert read_facts(field_with(row, column, 60.0)).moistest == part
    assert read_facts(field_with(row, column, 2.0)).driest == part


def test_read_facts_calls_nothing_moist_where_all_is_even():
    """A limit: an even field, one with a single value, and none."""
    assert read_facts(np.full((9, 9), 20.0)).moistest is None
    single = np.full((9, 9), np.nan)
    single[0, 0] = 7.0
    assert (read_facts(single).lowest, read_facts(single).driest) == (7.0, None)
    assert not read_facts(single * np.nan).has_field
    assert not read_facts(None).has_field


def test_describe_map_tells_the_numbers_of_the_field(written):
    """A second derivation: range, mean and stations by numpy from what the files were made of."""
    _, fields, stations = written
    pwv, flag = fields["pwv"].values[3], stations["flag"].values[:, 3]
    words = describe_map(
        ENGLISH, read_facts(pwv), network="Ostrana", hour="now",
        used=int((flag == 0).sum()), stations=6,
    )  # fmt: skip
    numbers = [int(number) for number in re.findall(r"\d+", words)]
    assert numbers == [round(pwv.min()), round(pwv.max()), round(pwv.mean()), 5, 6]
    assert "Not a warning product" in words


def test_observed_at_lacks_all_stations_where_the_files_do(folder):
    """A limit."""
    pwv, flag = observed_at(folder.read_stations(), np.datetime64("2026-01-01"))
    assert np.isnan(pwv).all()
    assert (flag == 1).all()


def test_describe_film_tells_the_course_and_the_gaps():
    """An analytic course with known answer."""
    words = describe_film(ENGLISH, list("abcd"), [20.0, 12.4, np.nan, 31.2], "Ostrana")
    assert "4 maps from a to d" in words
    assert (
        "lowest, 12 kg per square metre, at b, and highest, 31 kg per square metre, at d" in words
    )
    assert "Of these hours 1 have no map" in words
    assert "no map" not in describe_film(ENGLISH, ["a"], [20.0], "Ostrana")
