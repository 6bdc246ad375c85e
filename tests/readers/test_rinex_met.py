"""RINEX meteorological files of versions 2 and 3, and what real files do to them.

The files are built from the format's description, so the expected values are those written here.
"""

import numpy as np
import pytest

from fieldgen.errors import InputError
from fieldgen.readers.epochs import calendar_epoch
from fieldgen.readers.records import LineError
from fieldgen.readers.rinex_met import label_of, read_rinex_met, split_values, value_of

from .fixtures import labelled, rinex_header, rinex_record, types_lines, write, write_gzip

V2 = " 30  1 31  0  0  0"
V2_NEXT = " 30  1 31  1  0  0"
V3 = " 2030  1 31  0  0  0"
TIME = np.datetime64("2030-01-31T00:00:00")


def read(folder, content, name="arda0310.30m"):
    return read_rinex_met(write(folder, content, name), name="weather/arda")


def counts(records):
    return {reason: count for (_, reason), count in records.rejections.counts.items()}


def one_record(**header):
    return rinex_header(**header) + rinex_record(V2, [1012.3, 12.5, 81.0])


@pytest.mark.parametrize("version", ["2.11", "3.05"])
@pytest.mark.parametrize("epoch", [V2, V3, " 30 01 31 00 00 00"], ids=["YY", "YYYY", "zeros"])
def test_read_rinex_met_gives_hpa_kelvin_percent(tmp_path, version, epoch):
    """Either version may come with either year."""
    records = read(
        tmp_path, rinex_header(version=version) + rinex_record(epoch, [1012.3, 12.5, 81.0])
    )
    assert records.file == "weather/arda" and records.site_ids == ["ARDA"]
    assert records.site.tolist() == [0] and records.time.tolist() == [TIME.tolist()]
    assert records.pressure.tolist() == [1012.3]
    assert records.temperature.tolist() == [pytest.approx(285.65)]
    assert records.relative_humidity.tolist() == [81.0]
    site = records.sites["ARDA"]
    assert site.longitude == pytest.approx(-27.8112, abs=2e-8)
    assert site.latitude == pytest.approx(47.7391, abs=2e-8)
    assert site.ellipsoidal_height == 120.0
    assert records.warnings == [] and records.rejections.total == 0


def test_read_rinex_met_reads_gzip_under_any_name(tmp_path):
    path = write_gzip(tmp_path, one_record(marker=""), "arda0310.30m.gz")
    records = read_rinex_met(path)
    assert records.site_ids == ["ARDA0310"] and len(records.time) == 1


@pytest.mark.parametrize(
    "change",
    [
        pytest.param(lambda t: t.replace("\n", "\r\n"), id="CRLF"),
        pytest.param(lambda t: t.replace("                    OBS", " OBS"), id="short line"),
        pytest.param(lambda t: t.replace("  MARKER NAME", " MARKER NAME"), id="label shifted"),
        pytest.param(lambda t: t.replace("MARKER NAME", "marker name"), id="label in lower case"),
        pytest.param(lambda t: t.replace("invented", "inv\xe9nted"), id="not ASCII"),
        pytest.param(lambda t: t + "\n\n", id="blank lines"),
        pytest.param(lambda t: t.replace("1012.3", " 1012.3"), id="values shifted"),
        pytest.param(lambda t: t.replace("ARDA", "arda"), id="marker in lower case"),
    ],
)
def test_read_rinex_met_sees_through(tmp_path, change):
    path = write(tmp_path, change(one_record()), encoding="latin-1")
    records = read_rinex_met(path)
    assert records.site_ids == ["ARDA"]
    assert (records.pressure[0], records.relative_humidity[0]) == (1012.3, 81.0)
    assert records.rejections.total == 0


def test_read_rinex_met_follows_the_order_of_the_header(tmp_path):
    content = rinex_header(["HR", "WS", "TD", "PR"]) + rinex_record(V2, [81.0, 3.0, -2.5, 1012.3])
    records = read(tmp_path, content)
    assert (records.pressure[0], records.relative_humidity[0]) == (1012.3, 81.0)
    assert records.temperature[0] == pytest.approx(270.65)


@pytest.mark.parametrize(
    "record",
    [
        " 30  1 31  0  0  01012.34  12.50  81.00",
        " 2030  1 31  0  0  01012.34  12.50  81.00",
        "30 1 31 0 0 0 1012.34 12.5 81",
        " 2030 1 31 0 0 0.000 1012.34 12.5 81",
        " 30 1 31 0 0 0-999.00  12.50",
    ],
    ids=["touching", "touching, YYYY", "free", "decimal seconds", "free and touching"],
)
def test_read_rinex_met_finds_where_the_epoch_ends(tmp_path, record):
    records = read(tmp_path, rinex_header() + record + "\n")
    assert records.time[0] == TIME
    expected = np.nan if "-999" in record else 1012.34
    np.testing.assert_equal(records.pressure[0], expected)
    assert records.temperature[0] == pytest.approx(285.65)


MANY = ["ZW", "ZD", "ZT", "WD", "WS", "RI", "HI", "HR", "TD", "XX", "PR"]
MANY_VALUES = [1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 81.0, 12.5, 10.0, 1012.3]


def test_read_rinex_met_reads_continuation_lines(tmp_path):
    """Eleven types need two header lines and two record lines."""
    content = (
        rinex_header(MANY) + rinex_record(V2, MANY_VALUES) + rinex_record(V2_NEXT, MANY_VALUES)
    )
    assert content.count("TYPES OF OBSERV") == 2
    records = read(tmp_path, content)
    assert records.pressure.tolist() == [1012.3] * 2
    assert records.temperature.tolist() == [pytest.approx(285.65)] * 2
    assert records.relative_humidity.tolist() == [81.0] * 2


def test_read_rinex_met_reads_blank_fields_in_continuation_lines(tmp_path):
    values = [
        None if code in ("ZD", "XX") else v for code, v in zip(MANY, MANY_VALUES, strict=True)
    ]
    records = read(tmp_path, rinex_header(MANY) + rinex_record(V2, values))
    assert (records.pressure[0], records.relative_humidity[0]) == (1012.3, 81.0)


def test_read_rinex_met_reads_twenty_types(tmp_path):
    types = [*MANY[:-1], *(f"X{i}" for i in range(9)), "PR"]
    values = [float(i) for i in range(19)] + [1012.3]
    values[8] = 12.5
    records = read(tmp_path, rinex_header(types) + rinex_record(V2, values))
    assert (records.pressure[0], records.relative_humidity[0]) == (1012.3, 7.0)


def test_read_rinex_met_counts_a_record_cut_short(tmp_path):
    first_line = rinex_record(V2, MANY_VALUES).splitlines()[0] + "\n"
    content = rinex_header(MANY) + first_line + rinex_record(V2_NEXT, MANY_VALUES) + first_line
    records = read(tmp_path, content)
    assert records.time.tolist() == [np.datetime64("2030-01-31T01:00:00").tolist()]
    assert counts(records) == {"record cut short": 2}
    assert records.rejections.examples[0].line == rinex_header(MANY).count("\n") + 1


@pytest.mark.parametrize("missing", [None, 9999.9, -999.0, -999.9])
def test_read_rinex_met_takes_missing_values_as_nan(tmp_path, missing):
    content = rinex_header() + rinex_record(V2, [1012.3, missing, missing])
    records = read(tmp_path, content)
    assert records.pressure.tolist() == [1012.3]
    assert np.isnan(records.temperature[0]) and np.isnan(records.relative_humidity[0])
    assert records.rejections.total == 0


@pytest.mark.parametrize("missing", [None, 9999.9, -999.0])
def test_read_rinex_met_counts_records_without_pressure_and_temperature(tmp_path, missing):
    content = one_record() + rinex_record(V2_NEXT, [missing, missing, 81.0])
    records = read(tmp_path, content)
    assert len(records.time) == 1
    assert counts(records) == {"no pressure or temperature": 1}
    assert records.rejections.examples[0].detail == "site ARDA, 2030-01-31T01:00:00"


def test_read_rinex_met_keeps_a_record_with_temperature_only(tmp_path):
    records = read(tmp_path, rinex_header() + rinex_record(V2, [None, 12.5, None]))
    assert np.isnan(records.pressure[0]) and records.temperature[0] == pytest.approx(285.65)


@pytest.mark.parametrize(
    ("line", "reason", "detail"),
    [
        (V2_NEXT + " 1312.0   12.5   81.0", "pressure out of range", "ARDA, 2030-01-31T01:00:00: "
         "pressure is 1312 hPa, expected 400 to 1100 hPa"),
        (V2_NEXT + "  101.2   12.5   81.0", "pressure out of range", "pressure is 101.2 hPa"),
        (V2_NEXT + " 1012.3   what   81.0", "not a number", "'what'"),
        (V2_NEXT + " 1012.3   12.5   81.0    1.0", "wrong number of values", "4, expected 3"),
        (" 30 13 31  1  0  0 1012.3   12.5   81.0", "impossible epoch", "month"),
        (" 30  2 30  1  0  0 1012.3   12.5   81.0", "impossible epoch", "day"),
        (" 30  1 31 25  0  0 1012.3   12.5   81.0", "impossible epoch", "25:00:00"),
        ("garbage", "no epoch", "garbage"),
        ("x" * 20_000, "line too long", "10000"),
    ],
)  # fmt: skip
def test_read_rinex_met_counts_bad_lines(tmp_path, line, reason, detail):
    records = read(tmp_path, one_record() + line + "\n")
    assert records.pressure.tolist() == [1012.3]
    assert counts(records) == {reason: 1}
    rejection = records.rejections.examples[0]
    assert detail in rejection.detail
    assert (rejection.file, rejection.line) == ("weather/arda", 8)


@pytest.mark.parametrize("celsius", [99.0, -120.0])
def test_read_rinex_met_counts_an_absurd_temperature_but_keeps_the_pressure(tmp_path, celsius):
    records = read(tmp_path, rinex_header() + rinex_record(V2, [1012.3, celsius, 81.0]))
    assert records.pressure.tolist() == [1012.3] and np.isnan(records.temperature[0])
    assert counts(records) == {"temperature out of range": 1}
    assert "expected 180 to 340 K" in records.rejections.examples[0].detail


def test_read_rinex_met_drops_a_record_whose_only_value_is_absurd(tmp_path):
    records = read(tmp_path, one_record() + rinex_record(V2_NEXT, [None, 99.0, 81.0]))
    assert len(records.time) == 1
    assert counts(records) == {"temperature out of range": 1}


def test_read_rinex_met_uses_the_later_of_two_records(tmp_path):
    records = read(tmp_path, one_record() + rinex_record(V2, [1002.3, 12.5, 81.0]))
    assert records.pressure.tolist() == [1002.3]
    assert counts(records) == {"duplicate epoch": 1}


@pytest.mark.parametrize(
    ("positions", "expected"),
    [
        (((0.0, 0.0, 0.0, 123.4, "PR"),), (np.nan, np.nan, 123.4)),
        (((3800928.631, -2004951.959, 4697505.388, 0.0, "PR"),), (-27.8112, 47.7391, 120.0)),
        (
            ((0.0, 0.0, 0.0, 99.0, "TD"), (3800928.631, -2004951.959, 4697505.388, 118.0, "PR")),
            (-27.8112, 47.7391, 118.0),
        ),
        (((0.0, 0.0, 0.0, 99.0, "TD"),), (np.nan, np.nan, 99.0)),
        ((), (np.nan, np.nan, np.nan)),
    ],
    ids=["height only", "X, Y, Z only", "barometer's of two", "another sensor's", "none"],
)
def test_read_rinex_met_places_the_barometer(tmp_path, positions, expected):
    site = read(tmp_path, one_record(positions=positions)).sites["ARDA"]
    found = (site.longitude, site.latitude, site.ellipsoidal_height)
    # X, Y, Z are written to 1 mm.
    np.testing.assert_allclose(found, expected, rtol=0, atol=2e-3)


def test_read_rinex_met_warns_of_a_height_that_disagrees_with_xyz(tmp_path):
    position = (3800928.631, -2004951.959, 4697505.388, 61.5, "PR")
    records = read(tmp_path, one_record(positions=(position,)))
    assert records.sites["ARDA"].ellipsoidal_height == 61.5
    (warning,) = records.warnings
    assert "sensor height is 61.5 m, expected 120.0 m" in warning


def test_read_rinex_met_reads_files_joined_into_one(tmp_path):
    belu = rinex_header(["TD", "PR"], marker="BELU") + rinex_record(V3, [11.5, 902.3])
    records = read(tmp_path, one_record() + belu)
    assert records.site_ids == ["ARDA", "BELU"] and records.site.tolist() == [0, 1]
    assert records.pressure.tolist() == [1012.3, 902.3]


HEADER_LINES = rinex_header().splitlines(keepends=True)
RECORD = rinex_record(V2, [1012.3, 12.5, 81.0])


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("", "header does not end"),
        (RECORD, r"weather/arda, line 1: header begins '30  1 31 "),
        ("".join(HEADER_LINES[:-1]) + RECORD, "expected a line END OF HEADER"),
        ("".join(HEADER_LINES[:2] + HEADER_LINES[3:]), "observations are none, expected PR or TD"),
        (rinex_header(["HR", "WS"]) + RECORD, "observations are HR WS, expected PR or TD"),
        (rinex_header().replace("     3    PR", "     4    PR"), "lists 3 codes, expected 4"),
        (rinex_header().replace("     3    PR", "1000000000  PR"), "3 codes, expected 1000000000"),
        (rinex_header().replace("     3    PR", "          PR"), "expected a number"),
        (rinex_header().replace("METEOR", "OBSERV"), "file type is 'OBSERVOLOGICAL', expected M"),
        (rinex_header(version="4.00") + RECORD, "version is 4.00, expected 2 or 3"),
        (rinex_header().replace("120.0000 PR", "12O.0000 PR"), "line 5: SENSOR POS XYZ/H is"),
        (rinex_header(), "usable records are 0, expected at least 1"),
        (rinex_header() + "what\n", "1 no epoch; weather/arda, line 7: no epoch"),
    ],
)
def test_read_rinex_met_refuses(tmp_path, content, message):
    with pytest.raises(InputError, match=message) as error:
        read(tmp_path, content)
    assert str(error.value).startswith("weather/arda")


def test_label_of_finds_shifted_labels():
    assert label_of(labelled("ARDA", " MARKER NAME")) == "MARKER NAME"
    assert label_of(types_lines(["PR"])[0]) == "# / TYPES OF OBSERV"
    assert label_of("ARDA") == ""


@pytest.mark.parametrize(
    ("text", "values"),
    [
        (" 1012.3   12.5   81.0", ["1012.3", "12.5", "81.0"]),
        ("          12.5   81.0", ["", "12.5", "81.0"]),
        (" 1012.3", ["1012.3", "", ""]),
        (" 1012.3-9999.9   81.0", ["1012.3", "-9999.9", "81.0"]),
        ("", ["", "", ""]),
    ],
    ids=["regular", "blank inside", "blank at the end", "touching", "all blank"],
)
def test_split_values_cuts(text, values):
    assert split_values(text, 3) == values


@pytest.mark.parametrize("text", ["", "9999.9", "-999", "-999.9", "nan", "99999.9"])
def test_value_of_missing_is_nan(text):
    assert np.isnan(value_of(text))


def test_value_of_refuses_words():
    with pytest.raises(LineError, match="not a number"):
        value_of("12,5")


@pytest.mark.parametrize(
    ("parts", "expected"),
    [
        ("30 1 31 23 59 60", "2030-02-01T00:00:00"),
        ("98 12 31 24 0 0", "1999-01-01T00:00:00"),
        ("2032 2 29 0 0 1", "2032-02-29T00:00:01"),
    ],
)
def test_calendar_epoch_gives_seconds(parts, expected):
    assert np.datetime64(calendar_epoch(*parts.split()), "s") == np.datetime64(expected)
