"""CSV tables of delays, weather and stations, and the choice of a reader by content."""

import numpy as np
import pytest

from fieldgen.errors import InputError
from fieldgen.readers.epochs import iso_epoch
from fieldgen.readers.formats import read_delays, read_weather
from fieldgen.readers.records import LineError
from fieldgen.readers.tables import (
    StationRow,
    parse_number,
    read_delay_table,
    read_station_table,
    read_weather_table,
    split_cells,
)

from .fixtures import OLD_DIALECT, SinexFile, rinex_header, rinex_record, write, write_gzip

DELAYS = """station,time,ztd,ztd_sigma
ARDA00ATL,2030-01-31T00:00:00Z,2.4015,0.0013
ARDA00ATL,2030-01-31T01:00:00,2.4025,
belu,2030-01-31 00:00,2.3015,0.0015
"""
WEATHER = """site,time,pressure,temperature,relative_humidity
ARDA,2030-01-31T00:00:00Z,1012.3,285.65,81
ARDA,2030-01-31T01:00:00Z,1012.4,285.75,
"""
STATIONS = """id,longitude,latitude,ellipsoidal_height,undulation,orthometric_height,name
ARDA00ATL,-27.8112,47.7391,120.0,58.5,61.5,Arda pier
BELU00ATL,331.5,48.25,815.25,,,"Belu ridge, north"
cora,-28.1,47.1,,,12.5,
"""


def counts(rejections):
    return {reason: count for (_, reason), count in rejections.counts.items()}


def test_read_delay_table_gives_records(tmp_path):
    records = read_delay_table(write(tmp_path, DELAYS), name="delays.csv")
    assert records.file == "delays.csv" and records.station_ids == ["ARDA00ATL", "BELU"]
    assert records.station.tolist() == [0, 0, 1]
    assert records.time[1] == np.datetime64("2030-01-31T01:00:00")
    assert records.ztd.tolist() == [2.4015, 2.4025, 2.3015]
    np.testing.assert_array_equal(records.ztd_sigma, [0.0013, np.nan, 0.0015])
    assert np.isnan(records.pwv).all() and np.isnat(records.created)
    assert records.sites == {} and records.rejections.total == 0


def test_read_delay_table_reads_water_vapour(tmp_path):
    content = "pwv,time,station,pwv_sigma\n25.5,2030-01-31,ARDA,1.2\n"
    records = read_delay_table(write(tmp_path, content))
    assert records.pwv.tolist() == [25.5] and records.pwv_sigma.tolist() == [1.2]
    assert np.isnan(records.ztd).all()


def test_read_delay_table_reads_both(tmp_path):
    content = (
        "station,time,ztd,pwv\nARDA,2030-01-31,2.4,\nARDA,2030-01-31T01:00,,25.5\n"
        "ARDA,2030-01-31T02:00,,\n"
    )
    records = read_delay_table(write(tmp_path, content))
    np.testing.assert_array_equal(records.ztd, [2.4, np.nan])
    np.testing.assert_array_equal(records.pwv, [np.nan, 25.5])
    assert counts(records.rejections) == {"no delay": 1}


@pytest.mark.parametrize(
    "change",
    [
        pytest.param(lambda t: t.replace("\n", "\r\n"), id="CRLF"),
        pytest.param(lambda t: t.replace(",", ";"), id="semicolons"),
        pytest.param(lambda t: t.replace(",", "\t"), id="tabs"),
        pytest.param(lambda t: t.replace(",", " , "), id="blanks"),
        pytest.param(lambda t: t.replace("station,time", "Station,TIME"), id="header's case"),
        pytest.param(lambda t: "# network of\n\n" + t.replace("\n", "\n#\n"), id="comments"),
        pytest.param(lambda t: "\ufeff" + t, id="byte order mark"),
        pytest.param(lambda t: t.replace("ARDA00ATL", '"ARDA00ATL"'), id="quotes"),
        pytest.param(lambda t: t.replace("station,", '"station",'), id="quotes in the header"),
        pytest.param(lambda t: t.replace("2.4025,", "2.4025,NaN"), id="NaN"),
        pytest.param(lambda t: t.rstrip("\n"), id="no last newline"),
        pytest.param(lambda t: t.replace("Z,", "+00:00,"), id="offset zero"),
    ],
)
def test_read_delay_table_sees_through(tmp_path, change):
    assert change(DELAYS) != DELAYS
    records = read_delay_table(write(tmp_path, change(DELAYS)))
    assert records.station_ids == ["ARDA00ATL", "BELU"]
    assert records.ztd.tolist() == [2.4015, 2.4025, 2.3015]
    assert records.rejections.total == 0


@pytest.mark.parametrize(
    ("line", "reason", "detail"),
    [
        ("ARDA,2030-01-31T05:00,2401.5,", "ztd out of range", "ztd is 2401.5 m, expected 1 to 3 m"),
        ("ARDA,2030-01-31T05:00+01:00,2.4,", "impossible time", "expected UTC"),
        ("ARDA,31.01.2030 05:00,2.4,", "impossible time", "expected ISO 8601"),
        ("ARDA,0030-01-31T05:00,2.4,", "impossible time", "year is 0030"),
        ("ARDA,,2.4,", "impossible time", "''"),
        (",2030-01-31T05:00,2.4,", "no identifier", "''"),
        ("ARDA,2030-01-31T05:00,two,", "not a number", "ztd is 'two'"),
        ("ARDA,2030-01-31T05:00,,0.001", "no delay", "station ARDA, 2030-01-31T05:00:00"),
        ("ARDA,2030-01-31T05:00,2,4,0,001", "wrong number of columns", "6, expected 4"),
        ("ARDA", "wrong number of columns", "1, expected 4"),
        ('"ARDA,2030-01-31T05:00,2.4,', "quotes do not match", "ARDA"),
        ("ARDA00ATL,2030-01-31T01:00,2.41,", "duplicate epoch", "a later line is used"),
        ("A" * 20_000 + ",2030-01-31T05:00,2.4,", "line too long", ""),
        ("A" * 200 + ",2030-01-31T05:00,2.4,", "no identifier", "AAA"),
    ],
)
def test_read_delay_table_counts_bad_lines(tmp_path, line, reason, detail):
    records = read_delay_table(write(tmp_path, DELAYS + line + "\n"), name="delays.csv")
    assert len(records.ztd) == 3
    assert counts(records.rejections) == {reason: 1}
    rejection = records.rejections.examples[0]
    assert detail in rejection.detail
    assert rejection.file == "delays.csv"
    assert rejection.line == (3 if reason == "duplicate epoch" else 5)


PLACED = "station,time,ztd,longitude,latitude,ellipsoidal_height,orthometric_height\n"


def test_read_delay_table_reads_places(tmp_path):
    content = PLACED + "ARDA,2030-01-31,2.4,332.1888,47.7391,120,61.5\nBELU,2030-01-31,2.3,,,,\n"
    records = read_delay_table(write(tmp_path, content))
    site = records.sites["ARDA"]
    assert site.longitude == pytest.approx(-27.8112) and site.latitude == 47.7391
    assert (site.ellipsoidal_height, site.msl_height) == (120.0, 61.5)
    assert list(records.sites) == ["ARDA"] and records.station_ids == ["ARDA", "BELU"]


@pytest.mark.parametrize(
    ("place", "detail"),
    [
        ("47.7,332.2", "latitude is 332.2, expected -90 to 90; longitude and latitude may be swap"),
        ("-127.8,97.7", "latitude is 97.7, expected -90 to 90"),
        ("432.2,47.7", "longitude is 432.2, expected -180 to 360"),
        (",47.7", "longitude is nan"),
        ("332.2,", "latitude is nan"),
    ],
)
def test_read_delay_table_counts_impossible_places(tmp_path, place, detail):
    content = PLACED + f"BELU,2030-01-31,2.3,,,,\nARDA,2030-01-31,2.4,{place},120,\n"
    records = read_delay_table(write(tmp_path, content))
    assert counts(records.rejections) == {"impossible position": 1}
    assert detail in records.rejections.examples[0].detail
    assert records.station_ids == ["BELU"]


def placed_lines(*longitudes):
    return PLACED + "".join(
        f"ARDA,2030-01-31T0{hour}:00,2.4,{longitude},47.7391,120,\n"
        for hour, longitude in enumerate(longitudes)
    )


def test_read_delay_table_tells_where_a_station_was_when(tmp_path):
    records = read_delay_table(write(tmp_path, placed_lines(-27.8112, -28.8112, -28.8112)))
    assert len(records.ztd) == 3 and records.station_ids == ["ARDA"]
    before, after = records.stays["ARDA"]
    assert (before.site.longitude, after.site.longitude) == (-27.8112, -28.8112)
    assert (before.last, after.first, after.last - after.first) == (
        iso_epoch("2030-01-31T00:00"), iso_epoch("2030-01-31T01:00"), 3600
    )  # fmt: skip


def test_read_delay_table_rejects_a_second_place_at_the_same_time(tmp_path):
    records = read_delay_table(write(tmp_path, placed_lines(-27.8112, -28.8112, -27.8112)))
    assert records.time.tolist() == [
        np.datetime64(f"2030-01-31T0{hour}:00:00").tolist() for hour in (0, 2)
    ]
    assert counts(records.rejections) == {"several places at the same time": 1}
    assert records.rejections.examples[0].line == 3
    assert records.sites["ARDA"].longitude == -27.8112 and records.stays == {}


def test_read_weather_table_gives_records(tmp_path):
    records = read_weather_table(write_gzip(tmp_path, WEATHER, "weather.csv"))
    assert records.site_ids == ["ARDA"] and records.site.tolist() == [0, 0]
    assert records.pressure.tolist() == [1012.3, 1012.4]
    assert records.temperature.tolist() == [285.65, 285.75]
    np.testing.assert_array_equal(records.relative_humidity, [81.0, np.nan])


@pytest.mark.parametrize(
    ("line", "reason", "kept"),
    [
        ("ARDA,2030-01-31T05:00,10123,285,81", "pressure out of range", 2),
        ("ARDA,2030-01-31T05:00,1012.3,12.5,81", "temperature out of range", 3),
        ("ARDA,2030-01-31T05:00,1012.3,285,810", "relative_humidity out of range", 3),
        ("ARDA,2030-01-31T05:00,,,81", "no pressure or temperature", 2),
    ],
)
def test_read_weather_table_counts_absurd_values(tmp_path, line, reason, kept):
    records = read_weather_table(write(tmp_path, WEATHER + line + "\n"))
    assert len(records.pressure) == kept
    assert counts(records.rejections) == {reason: 1}
    assert records.rejections.examples[0].line == 4
    if kept == 3:
        assert np.isnan(getattr(records, reason.split()[0])[2])


def test_read_station_table_gives_stations(tmp_path):
    stations, rejections = read_station_table(write(tmp_path, STATIONS))
    assert list(stations) == ["ARDA00ATL", "BELU00ATL", "CORA"]
    assert stations["ARDA00ATL"] == StationRow(
        "ARDA00ATL", -27.8112, 47.7391, 120.0, 58.5, 61.5, "Arda pier"
    )
    assert stations["BELU00ATL"].longitude == -28.5
    assert stations["BELU00ATL"].name == "Belu ridge, north"
    assert np.isnan(stations["CORA"].ellipsoidal_height)
    assert stations["CORA"].orthometric_height == 12.5
    assert rejections.total == 0


@pytest.mark.parametrize(
    ("line", "reason", "number"),
    [
        ("DELO,47.7,-27.8,120,,,", "longitude and latitude exchanged", 5),
        ("DELO,47.7,332.2,120,,,", "impossible position", 5),
        ("DELO,,,120,,,", "no position", 5),
        ("DELO,-27.8,47.7,,,,", "no height", 5),
        ("DELO,-27.8,47.7,high,,,", "not a number", 5),
        ("ARDA00ATL,-27.8112,47.7391,121.0,,,", "duplicate station", 2),
    ],
)
def test_read_station_table_counts_bad_lines(tmp_path, line, reason, number):
    stations, rejections = read_station_table(write(tmp_path, STATIONS + line + "\n"))
    assert list(stations) == ["ARDA00ATL", "BELU00ATL", "CORA"]
    assert counts(rejections) == {reason: 1}
    assert rejections.examples[0].line == number
    if reason == "duplicate station":
        assert stations["ARDA00ATL"].ellipsoidal_height == 121.0


@pytest.mark.parametrize(
    ("read", "content", "message"),
    [
        (read_delay_table, "", "nothing in the file, expected columns station, time, ztd, pwv"),
        (read_delay_table, "station,ztd\n", "column time is missing. Known columns: station, time"),
        (read_delay_table, "station,time\n", "columns ztd and pwv are missing"),
        (
            read_delay_table,
            "station,time,ztd,height\n",
            "column 'height' is unknown. Known columns",
        ),
        (read_delay_table, "station,time,ztd,ztd\n", "a column occurs twice"),
        (read_delay_table, "station,time,ztd\n", "usable records are 0"),
        (read_delay_table, "station,time,ztd\nARDA,2030-01-31,2400\n", "1 ztd out of range"),
        (read_weather_table, "site,time,relative_humidity\n", "columns pressure and temperature"),
        (read_weather_table, "station,time,pressure\n", "column 'station' is unknown"),
        (read_station_table, "id,longitude,latitude\n", "column ellipsoidal_height is missing"),
        (read_station_table, STATIONS.splitlines()[0], "usable records are 0"),
    ],
)
def test_tables_refuse(tmp_path, read, content, message):
    with pytest.raises(InputError, match=message) as error:
        read(write(tmp_path, content), name="table.csv")
    assert str(error.value).startswith("table.csv: ")


@pytest.mark.parametrize("name", ["data.txt", "data.csv", "data.26m"])
def test_read_delays_chooses_by_content(tmp_path, name):
    assert len(read_delays(write(tmp_path, SinexFile().text(), name)).ztd) == 4
    assert len(read_delays(write(tmp_path, "\n" + OLD_DIALECT.text(), name)).ztd) == 2
    assert len(read_delays(write_gzip(tmp_path, SinexFile().text(), name)).ztd) == 4
    assert len(read_delays(write(tmp_path, "# comment\n" + DELAYS, name), "d").ztd) == 3


@pytest.mark.parametrize("name", ["data.txt", "data.csv", "data.tro"])
def test_read_weather_chooses_by_content(tmp_path, name):
    rinex = rinex_header() + rinex_record(" 30  1 31  0  0  0", [1012.3, 12.5, 81.0])
    assert len(read_weather(write(tmp_path, rinex, name)).pressure) == 1
    assert len(read_weather(write_gzip(tmp_path, rinex, name)).pressure) == 1
    assert len(read_weather(write(tmp_path, WEATHER, name)).pressure) == 2


@pytest.mark.parametrize(
    ("read", "content", "message"),
    [
        (read_delays, "", "file is empty, expected SINEX_TRO"),
        (
            read_delays,
            "what\n",
            r"begins with 'what', expected SINEX_TRO \(.*\) or CSV \(.*ztd, pwv",
        ),
        (read_delays, rinex_header(), "expected SINEX_TRO"),
        (read_delays, "\x00\x01\x02" * 10_000, "expected SINEX_TRO"),
        (read_weather, SinexFile().text(), r"expected RINEX \(.*\) or CSV \(.*pressure"),
        (read_weather, "x" * 50_000, "expected RINEX"),
    ],
)
def test_formats_refuse_what_none_fits(tmp_path, read, content, message):
    with pytest.raises(InputError, match=message) as error:
        read(write(tmp_path, content), "some.file")
    assert str(error.value).startswith("some.file: ")


def test_read_delays_names_the_missing_file(tmp_path):
    with pytest.raises(InputError, match="cannot be read"):
        read_delays(tmp_path / "nowhere.csv")
    with pytest.raises(InputError, match="cannot be read"):
        read_delays(tmp_path)


@pytest.mark.parametrize("text", ["", "nan", "NA", "null"])
def test_parse_number_of_missing_is_nan(text):
    assert np.isnan(parse_number({"ztd": text}, "ztd"))


def test_split_cells_respects_quotes():
    assert split_cells('ARDA,"one, two", 3', ",", 3) == ["ARDA", "one, two", "3"]
    with pytest.raises(LineError, match="wrong number"):
        split_cells("ARDA,one, two, 3", ",", 3)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2030-01-31T01:02:03Z", "2030-01-31T01:02:03"),
        ("2030-01-31 01:02", "2030-01-31T01:02:00"),
        ("2030-01-31T01:02:03.999", "2030-01-31T01:02:03"),
        ("2030-01-31", "2030-01-31T00:00:00"),
    ],
)
def test_iso_epoch_gives_seconds(text, expected):
    assert np.datetime64(iso_epoch(text), "s") == np.datetime64(expected)
