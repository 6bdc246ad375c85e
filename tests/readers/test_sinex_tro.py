"""SINEX_TRO, both dialects, and what real files do to them.

The files are built from the format's description, so the expected values are those written here.
"""

from dataclasses import replace

import ncompress
import numpy as np
import pytest

from fieldgen.errors import InputError
from fieldgen.readers import text
from fieldgen.readers.epochs import sinex_epoch
from fieldgen.readers.records import LineError, Rejections
from fieldgen.readers.sinex_sites import parse_coordinates, parse_site_id
from fieldgen.readers.sinex_solution import (
    Layout,
    find_layout,
    find_sigma,
    parse_line,
    split_fields,
    unit_factor,
)
from fieldgen.readers.sinex_tro import block_of, read_sinex_tro

from .fixtures import OLD_DIALECT, XYZ, SinexFile, block, solution, write, write_gzip

TIMES = np.array(["2030-01-31T00:00:00", "2030-01-31T01:00:00"], "datetime64[s]")


def read(folder, sinex):
    return read_sinex_tro(write(folder, sinex.text()), name="network.tro")


def xyz_line(station, point="A", key="ARDA", extra="  1 P 2030:031:00000 2030:032:00000"):
    x, y, z = XYZ[key]
    return f" {station:<9} {point:>2} {extra} {x:12.3f} {y:12.3f} {z:12.3f} IGS20"


def counts(records):
    return {reason: count for (_, reason), count in records.rejections.counts.items()}


def test_read_sinex_tro_gives_metres_utc_and_sites(tmp_path):
    records = read(tmp_path, SinexFile())
    assert records.file == "network.tro"
    assert records.station_ids == ["ARDA00ATL", "BELU00ATL"]
    assert records.station.tolist() == [0, 0, 1, 1]
    assert records.time.tolist() == [*TIMES.tolist(), *TIMES.tolist()]
    np.testing.assert_allclose(records.ztd, [2.4015, 2.4025, 2.3015, 2.3025], rtol=1e-12)
    np.testing.assert_allclose(records.ztd_sigma, [0.0013, 0.0014, 0.0015, 0.0016], rtol=1e-12)
    assert np.isnan(records.pwv).all() and np.isnan(records.pwv_sigma).all()
    assert records.created == np.datetime64("2030-02-01T01:00:00")
    site = records.sites["ARDA00ATL"]
    assert (site.longitude, site.latitude) == (pytest.approx(-27.8112), 47.7391)
    assert (site.ellipsoidal_height, site.msl_height, site.name) == (120.0, 61.5, "Arda pier")
    assert records.rejections.total == 0 and records.warnings == []


def test_read_sinex_tro_reads_the_older_dialect(tmp_path):
    records = read(tmp_path, OLD_DIALECT)
    assert records.station_ids == ["ARDA"]
    assert records.time[0] == np.datetime64("1998-01-31T00:00:00")
    np.testing.assert_allclose(records.ztd, [2.4015, 2.4025], rtol=1e-12)
    np.testing.assert_allclose(records.ztd_sigma, [0.0013, 0.0014], rtol=1e-12)
    site = records.sites["ARDA"]
    # Coordinates are written to 1 mm: 1e-8 degrees.
    assert site.longitude == pytest.approx(-27.8112, abs=2e-8)
    assert site.latitude == pytest.approx(47.7391, abs=2e-8)
    assert site.ellipsoidal_height == pytest.approx(120.0, abs=2e-3)
    assert np.isnan(site.msl_height)


def test_read_sinex_tro_reads_a_new_header_over_an_old_body(tmp_path):
    records = read(tmp_path, replace(OLD_DIALECT, header=SinexFile().header))
    np.testing.assert_allclose(records.ztd, [2.4015, 2.4025], rtol=1e-12)
    assert records.time[0] == np.datetime64("1998-01-31T00:00:00")


@pytest.mark.parametrize(
    "change",
    [
        pytest.param(lambda t: t.replace("\n ", "\n  "), id="one column right"),
        pytest.param(lambda t: t.replace("\n ", "\n"), id="one column left"),
        pytest.param(lambda t: t.replace("\n", "\r\n"), id="CRLF"),
        pytest.param(lambda t: t.replace("STDDEV", "STDEV"), id="STDEV"),
        pytest.param(lambda t: t.lower(), id="lower case"),
        pytest.param(lambda t: t.replace("PARAMETER NAMES ", "\tparameter Names\t"), id="tabs"),
        pytest.param(lambda t: t.replace("TROP/SOLUTION", "TROPO/SOLUTIONS"), id="block name"),
        pytest.param(lambda t: t.replace("TROP/SOLUTION", "TROP/SOLTUION"), id="misspelt block"),
        pytest.param(lambda t: t.replace("%=ENDTRO", "%=ENDSNX"), id="other trailer"),
        pytest.param(lambda t: t.replace("%=ENDTRO", "%ENDTRO"), id="trailer without ="),
        pytest.param(lambda t: t.replace("2030:03", "30:03"), id="two-digit years"),
        pytest.param(lambda t: t.replace("Arda pier", "Arda pi\xe9r"), id="not ASCII"),
        pytest.param(lambda t: "\ufeff" + t, id="byte order mark"),
        pytest.param(lambda t: t.replace("-TROP/DESCRIPTION\n", ""), id="block without end"),
    ],
)  # fmt: skip
def test_read_sinex_tro_sees_through(tmp_path, change):
    changed = change(SinexFile().text())
    assert changed != SinexFile().text()
    for encoding in ("utf-8",) if "\ufeff" in changed else ("utf-8", "latin-1"):
        records = read_sinex_tro(write(tmp_path, changed, encoding=encoding))
        assert records.station_ids == ["ARDA00ATL", "BELU00ATL"]
        np.testing.assert_allclose(records.ztd, [2.4015, 2.4025, 2.3015, 2.3025], rtol=1e-12)
        np.testing.assert_allclose(records.ztd_sigma * 1e3, [1.3, 1.4, 1.5, 1.6], rtol=1e-12)
        assert records.time[1] == TIMES[1]
        assert records.sites["BELU00ATL"].ellipsoidal_height == 815.25
        assert records.rejections.total == 0
        assert [warning for warning in records.warnings if " is read as " not in warning] == []


def test_read_sinex_tro_reads_gzip_under_any_name(tmp_path):
    records = read_sinex_tro(write_gzip(tmp_path, SinexFile().text(), "network.tro"))
    assert len(records.ztd) == 4


def test_read_sinex_tro_warns_of_a_misspelt_block(tmp_path):
    sinex = replace(SinexFile(), solution=SinexFile().solution.replace("SOLUTION", "SOLTUION"))
    assert read(tmp_path, sinex).warnings == ["block TROP/SOLTUION is read as TROP/SOLUTION."]


def test_read_sinex_tro_warns_of_a_missing_trailer(tmp_path):
    records = read(tmp_path, replace(SinexFile(), trailer=""))
    assert len(records.ztd) == 4
    assert "cut short" in records.warnings[0]


def test_read_sinex_tro_uses_a_file_cut_in_a_line(tmp_path):
    whole = replace(SinexFile(), trailer="").text()
    cut = whole[: whole.index("2302.5")]
    records = read_sinex_tro(write(tmp_path, cut))
    assert len(records.ztd) == 3
    assert counts(records) == {"no delay": 1}
    assert "cut short" in records.warnings[0]


def test_read_sinex_tro_counts_lines_outside_any_block(tmp_path):
    stray = " ARDA00ATL 2030:031:07200 2401.5   1.3   0.25  0.11\n"
    records = read(tmp_path, replace(SinexFile(), solution=SinexFile().solution + stray))
    assert len(records.ztd) == 4
    assert counts(records) == {"outside any block": 1}
    assert records.rejections.examples[0].line == 21


def test_read_sinex_tro_passes_over_other_blocks(tmp_path):
    other = block("SITE/ANTENNA", " ARDA00ATL  A 1 P 2030:031:00000 invented antenna")
    assert read(tmp_path, replace(SinexFile(), coordinates=other)).rejections.total == 0


@pytest.mark.parametrize(
    ("old", "new", "warning"),
    [
        ("SYSTEM                   G", "SYSTEM  LOCAL", "time system is LOCAL, expected G or UTC"),
        ("1e+03 1e+03 1e+03 1e+03", "1e+03 1e+03", "TROP/DESCRIPTION has 2 units, expected 4"),
    ],
    ids=["time system", "units"],
)
def test_read_sinex_tro_warns_of_the_description(tmp_path, old, new, warning):
    assert old in SinexFile().description
    sinex = replace(SinexFile(), description=SinexFile().description.replace(old, new))
    records = read(tmp_path, sinex)
    np.testing.assert_allclose(records.ztd_sigma * 1e3, [1.3, 1.4, 1.5, 1.6], rtol=1e-12)
    assert warning in records.warnings[0]


def test_read_sinex_tro_does_not_read_water_vapour(tmp_path):
    sinex = replace(
        SinexFile(),
        description=block(
            "TROP/DESCRIPTION", " TROPO PARAMETER NAMES  IWV TROTOT STDDEV",
            " TROPO PARAMETER UNITS  1 1e+03 1e+03",
        ),
        solution=solution(" ARDA00ATL 2030:031:00000 25.5 2401.5 1.3"),
    )  # fmt: skip
    records = read(tmp_path, sinex)
    assert records.ztd.tolist() == [2.4015]
    assert np.isnan(records.pwv).all()


@pytest.mark.parametrize("missing", ["-999.0", "-999", "-999.00", "      "])
def test_read_sinex_tro_counts_missing_delays(tmp_path, missing):
    written = SinexFile().solution.replace("2402.5", f"{missing:>6}")
    records = read(tmp_path, replace(SinexFile(), solution=written))
    assert len(records.ztd) == 3
    assert counts(records) == {"no delay": 1}
    rejection = records.rejections.examples[0]
    assert rejection.line == SinexFile().text().splitlines().index(
        " ARDA00ATL 2030:031:03600 2402.5   1.4   0.26  0.12"
    ) + 1  # fmt: skip
    assert rejection.detail == "station ARDA00ATL, 2030-01-31T01:00:00"


@pytest.mark.parametrize("missing", ["-999", "    ", "   0", "****"])
def test_read_sinex_tro_keeps_delays_without_formal_error(tmp_path, missing):
    written = SinexFile().solution.replace(" 1.4 ", f"{missing:>4} ", 1)
    records = read(tmp_path, replace(SinexFile(), solution=written))
    assert len(records.ztd) == 4 and records.rejections.total == 0
    assert np.isnan(records.ztd_sigma).tolist() == [False, True, False, False]
    assert "1 of 4 delays have no formal error." in records.warnings


def test_read_sinex_tro_learns_the_columns_of_the_older_dialect(tmp_path):
    """The older dialect declares no widths; blank fields are told by the lines around them."""
    written = OLD_DIALECT.solution.replace("0.26  0.12", "      0.12")
    records = read(tmp_path, replace(OLD_DIALECT, solution=written))
    np.testing.assert_allclose(records.ztd, [2.4015, 2.4025], rtol=1e-12)
    np.testing.assert_allclose(records.ztd_sigma, [0.0013, 0.0014], rtol=1e-12)


@pytest.mark.parametrize(
    ("line", "reason", "detail"),
    [
        (" ARDA00ATL 2030:031:07200 9999.9 1.3 0.25 0.11", "ztd out of range", "ztd is 9.9999 m"),
        (" ARDA00ATL 2030:031:07200 2.4015 1.3 0.25 0.11", "ztd out of range", "expected 1 to 3 m"),
        (" ARDA00ATL 2030:031:07200 -1.0 1.3 0.25 0.11", "ztd out of range", "ztd is -0.001 m"),
        (" ARDA00ATL 2030:031:07200 inf 1.3 0.25 0.11", "ztd out of range", "ztd is inf m"),
        (" ARDA00ATL 2030:031:07200 ****** 1.3 0.25 0.11", "not a number", "'******'"),
        (
            " ARDA00ATL 2030:366:07200 2401.5 1.3 0.25 0.11",
            "impossible epoch",
            "day of year is 366",
        ),
        (" ARDA00ATL 2030:000:07200 2401.5 1.3 0.25 0.11", "impossible epoch", "day of year is 0"),
        (" ARDA00ATL 2030:031:86401 2401.5 1.3 0.25 0.11", "impossible epoch", "second of day"),
        (" ARDA00ATL 0000:031:07200 2401.5 1.3 0.25 0.11", "impossible epoch", "year is 0000"),
        (" ARDA00ATL 2030-01-31 2401.5 1.3 0.25 0.11", "no epoch", "ARDA00ATL 2030-01-31"),
        (" 2030:031:07200 2401.5 1.3 0.25 0.11", "no epoch", "2030:031:07200"),
        (" ARDA00ATLANTICHARBOURS 2030:031:07200 2401.5 1.3 0.25 0.11", "no station", "HARBOURS"),
        (" ARDA00ATL 2030:031:07200 2401.5 1.3 0.25 0.11 7", "wrong number of fields", "5, expect"),
        (" ARDA00ATL 2030:031:07200  2401.5 1.3", "fields off their columns", "2401.5 1.3"),
        ("\x00\xff\xfe garbage", "no epoch", "garbage"),
    ],
)
def test_read_sinex_tro_counts_bad_lines(tmp_path, line, reason, detail):
    written = SinexFile().solution.replace("-TROP", f"{line}\n-TROP")
    records = read(tmp_path, replace(SinexFile(), solution=written))
    assert len(records.ztd) == 4
    assert counts(records) == {reason: 1}
    rejection = records.rejections.examples[0]
    assert detail in rejection.detail
    assert (rejection.file, rejection.line) == ("network.tro", 20)


def test_read_sinex_tro_uses_the_later_of_two_lines(tmp_path):
    written = SinexFile().solution.replace(
        "-TROP", " ARDA00ATL 2030:031:00000 2411.5   1.3   0.25  0.11\n-TROP"
    )
    records = read(tmp_path, replace(SinexFile(), solution=written))
    np.testing.assert_allclose(records.ztd, [2.4025, 2.3015, 2.3025, 2.4115], rtol=1e-12)
    assert counts(records) == {"duplicate epoch": 1}
    assert records.rejections.examples[0].line == 16


def test_read_sinex_tro_does_not_replace_a_value_by_a_missing_one(tmp_path):
    written = SinexFile().solution.replace(
        "-TROP", " ARDA00ATL 2030:031:00000 -999.0   1.3   0.25  0.11\n-TROP"
    )
    records = read(tmp_path, replace(SinexFile(), solution=written))
    assert records.ztd[0] == 2.4015
    assert counts(records) == {"no delay": 1}


def test_read_sinex_tro_reads_the_same_in_small_chunks(tmp_path, monkeypatch):
    """A second derivation: the chunk size must not matter, nor long lines in between."""
    long_line = " X" * 20_000
    written = SinexFile().solution.replace("\n BELU", f"\n{long_line}\n BELU", 1)
    path = write(tmp_path, replace(SinexFile(), solution=written).text())
    whole = read_sinex_tro(path)
    chunks = text.read_chunks
    monkeypatch.setattr(
        "fieldgen.readers.sinex_tro.read_chunks", lambda path, name: chunks(path, name, 97)
    )
    parts = read_sinex_tro(path)
    assert len(whole.ztd) == 4
    for records in (whole, parts):
        assert counts(records) == {"line too long": 1}
        assert records.rejections.examples[0].line == 18
    for name in ("station", "time", "ztd", "ztd_sigma"):
        np.testing.assert_array_equal(getattr(whole, name), getattr(parts, name))
    assert whole.sites.keys() == parts.sites.keys()


@pytest.mark.parametrize(
    "sinex",
    [
        SinexFile(),
        OLD_DIALECT,
        replace(SinexFile(), solution=SinexFile().solution.replace("ATL 2030", "ATL A 2030")),
    ],
    ids=["2.00", "older", "PT codes"],
)
def test_read_sinex_tro_reads_regular_lines_many_at_once(tmp_path, monkeypatch, sinex):
    """What makes large files quick: no regular line is read by itself."""
    monkeypatch.setattr("fieldgen.readers.sinex_solution.parse_line", None)
    assert np.isfinite(read(tmp_path, sinex).ztd).all()


def test_read_chunks_stays_bounded(tmp_path):
    path = write(tmp_path, "one\n" + "x" * 200_000 + "\nthree")
    chunks = list(text.read_chunks(path, "f", 64))
    assert max(len(chunk.data) for chunk in chunks) <= 64 + text.LONGEST_LINE + 1
    assert b"".join(chunk.data for chunk in chunks).count(b"\n") == 2
    assert (chunks[-1].data, chunks[-1].first_line) == (b"three", 3)


def test_read_lines_cuts_line_endings_and_rejects_long_lines(tmp_path):
    path = write(tmp_path, "one\r\n\r\n" + "x" * 20_000 + "\r\nfour")
    rejections = Rejections()
    assert list(text.read_lines(path, "f", rejections)) == [(1, "one"), (2, ""), (4, "four")]
    assert str(rejections.examples[0]) == "f, line 3: line too long (more than 10000 bytes)"


def test_rejections_keep_five_examples_and_count_all(tmp_path):
    lines = "".join(f" ARDA00ATL 2030:031:{i:05d} 9401.5 1.3 0.25 0.11\n" for i in range(9))
    written = SinexFile().solution.replace("-TROP", f"{lines}-TROP")
    rejections = read(tmp_path, replace(SinexFile(), solution=written)).rejections
    assert rejections.total == 9
    assert [rejection.line for rejection in rejections.examples] == [20, 21, 22, 23, 24]


def test_read_sinex_tro_prefers_xyz_to_an_unsigned_southern_latitude(tmp_path):
    sinex = replace(
        SinexFile(), coordinates=block("SITE/COORDINATES", xyz_line("ARDA00ATL", key="BELU"))
    )
    records = read(tmp_path, sinex)
    assert records.sites["ARDA00ATL"].latitude == pytest.approx(-47.7391, abs=2e-8)
    assert records.sites["ARDA00ATL"].msl_height == 61.5
    (warning,) = records.warnings
    assert warning.startswith("station ARDA00ATL: SITE/ID is 10616")
    assert "X, Y, Z are used" in warning


def test_read_sinex_tro_does_not_warn_where_positions_agree(tmp_path):
    sinex = replace(SinexFile(), coordinates=block("SITE/COORDINATES", xyz_line("ARDA00ATL")))
    assert read(tmp_path, sinex).warnings == []


def test_read_sinex_tro_warns_of_a_height_that_disagrees_with_xyz(tmp_path):
    sinex = replace(
        SinexFile(),
        site_id=SinexFile().site_id.replace("120.000", " 61.500"),
        coordinates=block("SITE/COORDINATES", xyz_line("ARDA00ATL")),
    )
    records = read(tmp_path, sinex)
    assert "0.0 km and -58.5 m in height" in records.warnings[0]
    assert records.sites["ARDA00ATL"].ellipsoidal_height == pytest.approx(120.0, abs=2e-3)


def test_read_sinex_tro_warns_of_an_impossible_undulation(tmp_path):
    sinex = replace(SinexFile(), site_id=SinexFile().site_id.replace(" 61.500", "461.500"))
    (warning,) = read(tmp_path, sinex).warnings
    assert "ARDA00ATL: ellipsoidal minus mean-sea-level height is -341.5 m" in warning


def test_read_sinex_tro_counts_site_lines_without_position(tmp_path):
    swapped = SinexFile().site_id.replace("332.188800  47.739100", "47.739100 332.188800")
    sinex = replace(SinexFile(), site_id=swapped)
    records = read(tmp_path, sinex)
    assert "ARDA00ATL" not in records.sites and len(records.ztd) == 4
    assert counts(records) == {"no position": 1}
    assert "may be swapped" in records.rejections.examples[0].detail


TWO_PLACES = block(
    "SITE/ID",
    " ARDA  A 99901M001 P Arda pier             332.188800  47.739100   120.000    61.500",
    " ARDA  B 99903M001 P Arda bank             331.188800  47.739100   140.000    81.500",
)


def test_read_sinex_tro_keeps_points_of_one_code_apart(tmp_path):
    written = solution(
        " ARDA  A 2030:031:00000 2401.5   1.3   0.25  0.11",
        " ARDA  B 2030:031:00000 2301.5   1.3   0.25  0.11",
    )
    records = read(tmp_path, replace(SinexFile(), site_id=TWO_PLACES, solution=written))
    assert records.station_ids == ["ARDA_A", "ARDA_B"]
    np.testing.assert_allclose(records.ztd, [2.4015, 2.3015], rtol=1e-12)
    assert records.sites["ARDA_B"].name == "Arda bank"
    assert "ARDA: points A, B are 75 km apart" in records.warnings[0]


def test_read_sinex_tro_rejects_lines_that_would_mix_two_places(tmp_path):
    sinex = SinexFile()
    written = solution(
        " ARDA      2030:031:00000 2401.5   1.3   0.25  0.11",
        " BELU00ATL 2030:031:00000 2301.5   1.3   0.25  0.11",
    )
    records = read(tmp_path, replace(sinex, site_id=TWO_PLACES, solution=written))
    assert [records.station_ids[i] for i in records.station] == ["BELU00ATL"]
    assert counts(records) == {"station code shared by two places": 1}
    assert records.rejections.examples[0].detail == "station ARDA"


def test_read_sinex_tro_takes_points_of_one_place_as_one_station(tmp_path):
    sites = TWO_PLACES.replace("331.188800", "332.188900")
    written = solution(
        " ARDA  A 2030:031:00000 2401.5   1.3   0.25  0.11",
        " ARDA  B 2030:031:03600 2301.5   1.3   0.25  0.11",
    )
    records = read(tmp_path, replace(SinexFile(), site_id=sites, solution=written))
    assert records.station_ids == ["ARDA"] and records.station.tolist() == [0, 0]
    assert records.warnings == []


def test_read_sinex_tro_takes_the_only_point_of_each_block_as_the_same(tmp_path):
    """Blocks may call the only point of a station differently."""
    line = xyz_line("ARDA00ATL", point="1", key="BELU")
    records = read(tmp_path, replace(SinexFile(), coordinates=block("SITE/COORDINATES", line)))
    site = records.sites["ARDA00ATL"]
    assert site.latitude == pytest.approx(-47.7391, abs=2e-8) and site.msl_height == 61.5
    assert "X, Y, Z are used" in records.warnings[0]


def test_read_sinex_tro_warns_where_one_point_is_in_two_places(tmp_path):
    records = read(tmp_path, replace(SinexFile(), site_id=TWO_PLACES.replace("  B ", "  A ")))
    assert "positions in SITE/ID are 75 km apart" in records.warnings[0]
    assert records.sites["ARDA"].name == "Arda pier"


def test_read_sinex_tro_takes_field_names_from_the_headings(tmp_path):
    sinex = replace(SinexFile(), description="")
    records = read(tmp_path, sinex)
    np.testing.assert_allclose(records.ztd_sigma, [0.0013, 0.0014, 0.0015, 0.0016], rtol=1e-12)
    assert "column headings are used" in records.warnings[0]


@pytest.mark.parametrize(
    ("sinex", "message"),
    [
        (replace(SinexFile(), header="TROPOSPHERE"), "expected %=TRO and a version"),
        (
            replace(SinexFile(), solution=""),
            "blocks are TROP/DESCRIPTION, SITE/ID, expected TROP/S",
        ),
        (replace(SinexFile(), solution=solution()), "usable records are 0"),
        (
            replace(
                SinexFile(), solution=solution(" ARDA00ATL 2030:031:00000 -999 1 1 1", " what")
            ),
            r"rejected lines: 1 no epoch, 1 no delay; network.tro, line \d+: no epoch \(line beg",
        ),
        (
            replace(SinexFile(), description=SinexFile().description.replace("TROTOT", "TRODRY")),
            "fields of TROP/SOLUTION are TRODRY STDDEV TGNTOT STDDEV, expected TROTOT among them",
        ),
        (replace(SinexFile(), description="", solution=solution(" A 30:031:00000 2")), "are none"),
    ],
    ids=["no header", "no solution", "empty solution", "nothing usable", "no total", "no names"],
)
def test_read_sinex_tro_refuses(tmp_path, sinex, message):
    with pytest.raises(InputError, match=message) as error:
        read(tmp_path, sinex)
    assert str(error.value).startswith("network.tro: ")


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "nothing in the file"),
        (b"BZh91AY&SY", "compression is bzip2, expected plain text, gzip or compress"),
        (b"\x1f\x9d\x90" + b"\xff" * 50, r"compress \(.Z\) data are damaged"),
        (b"\x1f\x9d", r"compress \(.Z\) data are damaged"),
        (b"\x1f\x8b\x08\x00garbage", "gzip data"),
    ],
    ids=["empty", "bzip2", "bad compress", "cut compress", "bad gzip"],
)
def test_read_sinex_tro_refuses_files_that_are_no_text(tmp_path, content, message):
    path = tmp_path / "network.tro"
    path.write_bytes(content)
    with pytest.raises(InputError, match=message):
        read_sinex_tro(path)


def test_read_sinex_tro_refuses_damaged_gzip(tmp_path):
    path = write_gzip(tmp_path, SinexFile().text(), "network.tro.gz")
    content = bytearray(path.read_bytes())
    content[30:60] = bytes(30)
    path.write_bytes(content)
    with pytest.raises(InputError, match="gzip data are damaged"):
        read_sinex_tro(path)


def test_read_sinex_tro_refuses_cut_gzip(tmp_path):
    path = write_gzip(tmp_path, SinexFile().text(), "network.tro.gz")
    path.write_bytes(path.read_bytes()[:-20])
    with pytest.raises(InputError, match="gzip data end early"):
        read_sinex_tro(path)


def write_compress(folder, text, name):
    """The path of a new file of the Unix tool compress, packed by another library."""
    path = folder / name
    path.write_bytes(ncompress.compress(text.encode()))
    return path


def test_read_sinex_tro_reads_compress_under_any_name(tmp_path):
    """Another library: ncompress packs what is read here."""
    for name in ("network.tro.Z", "network.tro"):
        records = read_sinex_tro(write_compress(tmp_path, SinexFile().text(), name))
        assert len(records.ztd) == 4 and records.warnings == []


def test_read_chunks_of_compress_gives_every_byte(tmp_path):
    """Another library: 3 MB that fill the table of codes several times."""
    draw = np.random.default_rng(1)
    lines = "".join(f" ARDA00ATL {value:.9f}\n" for value in draw.random(150_000))
    path = write_compress(tmp_path, lines, "data.Z")
    chunks = list(text.read_chunks(path, "f", 100_000))
    assert max(len(chunk.data) for chunk in chunks) < 120_000
    assert b"".join(chunk.data for chunk in chunks) == lines.encode()


def test_read_sinex_tro_refuses_damaged_compress(tmp_path):
    """Damage anywhere is an InputError, or lines that are rejected: never another error."""
    path = write_compress(tmp_path, SinexFile().text() * 20, "network.tro.Z")
    whole, draw, refused = path.read_bytes(), np.random.default_rng(2), 0
    for _ in range(60):
        content = bytearray(whole)
        start = int(draw.integers(2, len(content)))
        content[start : start + 20] = draw.bytes(20)
        path.write_bytes(content)
        try:
            read_sinex_tro(path)
        except InputError:
            refused += 1
    assert refused > 20


def test_read_sinex_tro_warns_of_compress_cut_short(tmp_path):
    """These data have no checksum; the missing trailer tells."""
    path = write_compress(tmp_path, SinexFile().text() * 20, "network.tro.Z")
    path.write_bytes(path.read_bytes()[:-40])
    assert any("cut short" in text for text in read_sinex_tro(path).warnings)


def test_read_sinex_tro_refuses_a_missing_file(tmp_path):
    with pytest.raises(InputError, match=r"nowhere\.tro: cannot be read"):
        read_sinex_tro(tmp_path / "nowhere.tro")


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2030:001:00000", "2030-01-01T00:00:00"),
        ("2030:001:86400", "2030-01-02T00:00:00"),
        ("2032:366:86400", "2033-01-01T00:00:00"),
        ("50:001:00030", "2050-01-01T00:00:30"),
        ("98:365:00000", "1998-12-31T00:00:00"),
        ("30:1:0", "2030-01-01T00:00:00"),
    ],
)
def test_sinex_epoch_gives_seconds(text, expected):
    assert np.datetime64(sinex_epoch(text), "s") == np.datetime64(expected)


@pytest.mark.parametrize("text", ["", "2030:001", "2030:001:-1", "2031:366:00000", "230:001:00000"])
def test_sinex_epoch_refuses(text):
    with pytest.raises(ValueError, match="expected"):
        sinex_epoch(text)


@pytest.mark.parametrize(
    ("names", "sigma"),
    [
        ("TROTOT STDDEV", 1),
        ("TROTOT STDEV TGNTOT", 1),
        ("TROTOT TGNTOT STDDEV", None),
        ("TROTOT TROTOT_SIG", 1),
        ("TROTOT TGNTOT TROTOT_SIG TGNTOT_SIG", 2),
        ("TROTOT _SIG", 1),
        ("TROTOT", None),
        ("TROTOT TRWET MTEMP WVAPOR", None),
    ],
)
def test_find_sigma_finds_the_one_of_the_delay(names, sigma):
    assert find_sigma(names.split(), 0) == sigma


@pytest.mark.parametrize(
    ("unit", "factor"),
    [("1e+03", 1e3), ("1E3", 1e3), ("1.0D+00", 1.0), ("1", 1.0), ("m", 1.0), ("mm", 1e3)],
)
def test_unit_factor_reads(unit, factor):
    assert unit_factor(unit) == factor


def test_find_layout_scales_by_the_declared_units():
    layout = find_layout("f", ["iwv", "trotot", "stddev"], ["1", "1", "1e+03"], ["5", "7", "4"])
    assert layout == Layout(3, 1, 2, 1.0, 1e3, (5, 7, 4))


@pytest.mark.parametrize(
    "widths",
    [["6"], ["6", "9" * 5000], ["6", "99"], ["6", "-5"], ["a", "b"]],
    ids=["too few", "absurd", "too wide", "negative", "words"],
)
def test_find_layout_leaves_out_impossible_widths(widths):
    assert find_layout("f", ["TROTOT", "STDDEV"], [], widths).widths == ()


LAYOUT = Layout(3, 0, 1, 1e3, 1e3, (6, 4, 6))


@pytest.mark.parametrize(
    ("text", "fields"),
    [
        (" 2401.5  1.3   0.25", ["2401.5", "1.3", "0.25"]),
        (" 2401.5        0.25", ["2401.5", "", "0.25"]),
        (" 2401.5", ["2401.5", "", ""]),
        (" 2401.5  1.3-100.25", ["2401.5", "1.3", "-100.25"]),
    ],
    ids=["regular", "blank inside", "blank at the end", "touching"],
)
def test_split_fields_cuts(text, fields):
    assert split_fields(text, LAYOUT) == fields


@pytest.mark.parametrize("text", [" 1 2 3 4", " 12401.5", " 24 1", " 2401.5            7"])
def test_split_fields_refuses_to_guess(text):
    with pytest.raises(LineError):
        split_fields(text, LAYOUT)


def test_parse_line_gives_metres():
    station, time, total, sigma = parse_line(" ARDA 30:001:00060 2401.5  1.3   0.25", LAYOUT)
    assert (station, np.datetime64(time, "s")) == ("ARDA", np.datetime64("2030-01-01T00:01:00"))
    assert (total, sigma) == (pytest.approx(2.4015), pytest.approx(0.0013))


@pytest.mark.parametrize(
    ("heading", "name"),
    [
        ("+TROP/SOLUTION", "TROP/SOLUTION"),
        ("+trop/solution", "TROP/SOLUTION"),
        ("+TROP SOLUTION", "TROP/SOLUTION"),
        ("+SOLUTION/TROP", "TROP/SOLUTION"),
        ("+TROP/DESCRIPTON", "TROP/DESCRIPTION"),
        ("+SITE/COORDINATE", "SITE/COORDINATES"),
        ("+TROP/STA_COORDINATES", "SITE/COORDINATES"),
        ("+SITE/ECCENTRICITY", None),
        ("+SITE/ANTENNA", None),
        ("+FILE/REFERENCE", None),
    ],
)
def test_block_of_is_tolerant(heading, name):
    assert block_of(heading) == name


@pytest.mark.parametrize(
    ("line", "position"),
    [
        (" ARDA  A 99901M001 P Arda pier             332.188800  47.739100   120.000    61.500",
         (-27.8112, 47.7391, 120.0, 61.5)),
        (" ARDA  A 99901M001 P Arda pier             -27.811200  47.739100   120.000",
         (-27.8112, 47.7391, 120.0, np.nan)),
        (" ARDA  A           P                       332.188800 -47.739100   120.000    61.500",
         (-27.8112, -47.7391, 120.0, 61.5)),
        (" ARDA  A 99901M001 P Arda pier 7           332.188800  47.739100   120.000",
         (-27.8112, 47.7391, 120.0, np.nan)),
        (" ARDA  A 99901M001 P Arda pier           332 11 19.68  47 44 20.76   120.0",
         (-27.8112, 47.7391, 120.0, np.nan)),
        (" ARDA  A 99901M001 P Arda pier           332 11 19.68  -0 30 00.00   120.0",
         (-27.8112, -0.5, 120.0, np.nan)),
    ],
    ids=["full", "no msl height", "no names", "number in the name", "sexagesimal", "minus zero"],
)  # fmt: skip
def test_parse_site_id_finds_the_position(line, position):
    site = parse_site_id(line).site
    found = (site.longitude, site.latitude, site.ellipsoidal_height, site.msl_height)
    np.testing.assert_allclose(found, position, rtol=0, atol=1e-9)


@pytest.mark.parametrize("line", ["", " ARDA", " ARDA A 1 2", " 1 2 3", " ARDA A P 0 0 0 0 nan"])
def test_parse_site_id_refuses(line):
    with pytest.raises(LineError, match="no position"):
        parse_site_id(line)


@pytest.mark.parametrize(
    "line",
    [xyz_line("ARDA"), xyz_line("ARDA", extra="   1 P"), xyz_line("ARDA", extra="")],
    ids=["2.00", "older", "no solution number"],
)
def test_parse_coordinates_finds_xyz(line):
    entry = parse_coordinates(line)
    assert (entry.station, entry.point) == ("ARDA", "A")
    assert entry.site.latitude == pytest.approx(47.7391, abs=2e-8)


def test_parse_coordinates_refuses_a_place_off_the_ground():
    with pytest.raises(LineError, match="no position"):
        parse_coordinates(" ARDA A 1 P 0.0 0.0 0.0 IGS20")
