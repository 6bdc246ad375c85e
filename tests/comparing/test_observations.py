"""Tables of independent water vapour."""

import numpy as np
import pytest

from fieldgen.comparing.observations import SOUNDING_SIGMA, read_truth
from fieldgen.errors import InputError

VALUES = "time,longitude,latitude,height,value,sigma"
LEVELS = "time,longitude,latitude,pressure,temperature,dewpoint,height"


def write(folder, *lines):
    path = folder / "truth.csv"
    path.write_text("\n".join(lines) + "\n")
    return path


def sounding(place="2026-03-01T01:00Z,-28.0,47.5", bottom=0.0, top=200.0):
    """Lines of an isothermal sounding, 100 hPa apart."""
    pressure = np.arange(1000.0, top - 1.0, -100.0)
    return [
        f"{place},{p:.0f},280,{275 - 0.05 * (1000 - p):.2f},{bottom + 8000 * np.log(1000 / p):.1f}"
        for p in pressure
    ]


def test_values_are_read_with_place_time_and_line(tmp_path):
    """Round trip: longitudes of 0 to 360 are wrapped, the optional station is kept."""
    path = write(tmp_path, f"station,{VALUES}", "A1,2026-03-01T01:00Z,332,47.5,120,18.5,0.7")
    (one,) = read_truth(path).observations(None)
    assert one == (2, "A1", 1772326800, -28.0, 47.5, 120.0, 18.5, 0.7)


BAD_LINES = {
    "2026-03-01T01:00Z,-28.0,97.5,120,18.5,0.7": "impossible position",
    "2026-03-01T01:00Z,,47.5,120,18.5,0.7": "no position",
    "yesterday,-28.0,47.5,120,18.5,0.7": "impossible time",
    "2026-03-01T01:00Z,-28.0,47.5,,18.5,0.7": "no height",
    "2026-03-01T01:00Z,-28.0,47.5,120,185,0.7": "impossible value",
    "2026-03-01T01:00Z,-28.0,47.5,120,18.5,": "no sigma",
    "2026-03-01T01:00Z,-28.0,47.5,120,18.5,-1": "impossible sigma",
    "2026-03-01T01:00Z,-28.0,47.5,120,abc,0.7": "not a number",
    "2026-03-01T01:00Z,-28.0,47.5,120": "wrong number of columns",
}


@pytest.mark.parametrize("line", BAD_LINES)
def test_bad_lines_are_counted_with_line_and_reason(tmp_path, line):
    """Negative control: the rest of the file is used."""
    path = write(tmp_path, VALUES, "2026-03-01T01:00Z,-28.0,47.5,120,18.5,0.7", line)
    truth = read_truth(path)
    assert len(truth.values) == 1
    assert truth.rejections.counts == {(str(path), BAD_LINES[line]): 1}
    assert f"line 3: {BAD_LINES[line]}" in str(truth.rejections.examples[0])


@pytest.mark.parametrize(
    ("header", "message"),
    [
        (VALUES.replace("sigma", "error"), "column 'error' is unknown"),
        (VALUES.removesuffix(",sigma"), "column sigma is missing"),
        (LEVELS.replace(",dewpoint", ""), "columns dewpoint and relative_humidity are missing"),
        (LEVELS.replace(",height", ""), "column height is missing"),
        (f"{VALUES},pressure", "column 'pressure' is unknown"),
        ("", "nothing in the file"),
    ],
)
def test_unknown_and_missing_columns_are_errors(tmp_path, header, message):
    """Negative control: one message, which tells the columns that are known."""
    with pytest.raises(InputError, match=message):
        read_truth(write(tmp_path, header))


def test_nothing_usable_is_an_error(tmp_path):
    """Negative control: temperatures in Celsius are found out."""
    lines = [line.replace(",280,", ",7,") for line in sounding()]
    with pytest.raises(InputError, match=r"impossible temperature .* 7 K, expected 150 to 340"):
        read_truth(write(tmp_path, LEVELS, *lines))


def test_soundings_are_told_apart_by_time_and_place(tmp_path):
    """Round trip: levels in any order, two soundings in turns."""
    other = sounding("2026-03-01T02:00Z,-28.0,47.5")
    lines = [line for pair in zip(sounding()[::-1], other, strict=True) for line in pair]
    truth = read_truth(write(tmp_path, LEVELS, *lines))
    assert truth.is_soundings
    one, two = truth.observations(lambda longitude, latitude: np.zeros(2))
    assert one.value == pytest.approx(two.value)
    assert two.time - one.time == 3600
    assert one.sigma == pytest.approx(SOUNDING_SIGMA * one.value)
    assert (one.line, two.line) == (2, 3)


def test_soundings_start_at_the_ground_or_their_lowest_level(tmp_path):
    """A limit: terrain inside the profile cuts it, terrain below it does not, nor does NaN."""
    truth = read_truth(write(tmp_path, LEVELS, *sounding(bottom=50.0)))
    heights = [
        truth.observations(lambda longitude, latitude, ground=ground: np.array([ground]))[0]
        for ground in (400.0, 0.0, np.nan)
    ]
    assert [one.height for one in heights] == [400.0, 50.0, 50.0]
    assert heights[0].value < 0.9 * heights[1].value == heights[2].value * 0.9


def test_relative_humidity_serves_where_there_is_no_dewpoint(tmp_path):
    """A second derivation: saturated air, dew point equal to temperature."""
    by_dewpoint = [line.replace(",280,", ",270,").split(",") for line in sounding()]
    for cells in by_dewpoint:
        cells[5] = "270"
    by_humidity = [[*cells[:5], "100", *cells[6:]] for cells in by_dewpoint]
    values = []
    humid = LEVELS.replace("dewpoint", "relative_humidity")
    for header, rows in ((LEVELS, by_dewpoint), (humid, by_humidity)):
        truth = read_truth(write(tmp_path, header, *(",".join(row) for row in rows)))
        values.append(truth.observations(lambda longitude, latitude: np.zeros(1))[0].value)
    assert values[0] == pytest.approx(values[1])


BAD_SOUNDINGS = {
    "too low": (sounding(top=500.0), "sounding ends too low"),
    "few levels": (sounding()[-4:], "sounding with too few levels"),
    "sinking": ([*sounding(), "2026-03-01T01:00Z,-28.0,47.5,150,220,200,12"],
                "does not rise as the pressure falls"),
    "dewpoint": ([*sounding(), "2026-03-01T01:00Z,-28.0,47.5,150,220,230,15200"],
                 "dewpoint above temperature"),
}  # fmt: skip


@pytest.mark.parametrize("case", BAD_SOUNDINGS)
def test_bad_soundings_and_levels_are_counted(tmp_path, case):
    """Negative control: another sounding of the file is used."""
    lines, reason = BAD_SOUNDINGS[case]
    path = write(tmp_path, LEVELS, *sounding("2026-03-01T02:00Z,-28.0,47.5"), *lines)
    truth = read_truth(path)
    assert truth.rejections.counts == {(str(path), reason): 1}
    assert len(truth.profiles) == (1 if reason.startswith("sounding") else 2)
