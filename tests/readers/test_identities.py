"""Stations that move, codes that two stations share, and files that overlap in time.

What is expected follows from the files as they are written here: a limit, or a negative control.
"""

import itertools
from dataclasses import replace

import numpy as np
import pytest

from fieldgen.readers.identities import tell_apart
from fieldgen.readers.pool import Pool, drop_far_epochs, oldest_first
from fieldgen.readers.records import DelayRecords, ReadingReport, Site, Stay
from fieldgen.readers.sinex_tro import read_sinex_tro
from fieldgen.readers.tables import StationRow, read_weather_table

from .fixtures import SinexFile, block, solution, write

HARBOUR = Site(-27.8112, 47.7391, 120.0, 61.5)
ROOF = replace(HARBOUR, ellipsoidal_height=123.0, msl_height=64.5)
FAR = Site(-28.8112, 47.7391, 140.0, 81.5)
DAY = 86_400


def delays(file, hours, *, site=HARBOUR, code="ARDA", ztd=2.4, created=None, stays=()):
    """Delays of one station at hours since 2030-01-31."""
    hours = np.asarray(hours)
    time = np.datetime64("2030-01-31T00:00:00") + hours.astype("m8[h]")
    nothing = np.full(len(hours), np.nan)
    return DelayRecords(
        file, [code], np.zeros(len(hours), int), time.astype("M8[s]"),
        np.full(len(hours), ztd), nothing, nothing, nothing,
        sites={code: site} if site else {},
        stays={code: list(stays)} if stays else {},
        created=np.datetime64(created or "NaT", "s"),
    )  # fmt: skip


def pooled(*tables, rows=None):
    """Number of records and mean delay of each station, its place, and the warnings."""
    report = ReadingReport()
    tables = oldest_first(list(tables))
    named = tell_apart(tables, rows or {}, report)
    pool = Pool.of(tables, named, DelayRecords.values)
    found = {}
    for station in named.sites:
        epoch, values, _ = pool.series(station)
        found[station] = (len(epoch), round(float(values["ztd"].mean()), 4))
    return found, named, report


def test_the_file_created_later_wins():
    old = delays("b.tro", range(4), ztd=2.4, created="2030-02-01T00:00")
    new = delays("a.tro", range(2, 6), ztd=2.5, created="2030-02-01T01:00")
    found, _, _ = pooled(new, old)
    assert found == {"ARDA": (6, round((2 * 2.4 + 4 * 2.5) / 6, 4))}


def test_a_file_without_time_of_creation_counts_as_oldest():
    unknown = delays("z.tro", range(4), ztd=2.4)
    new = delays("a.tro", range(2, 6), ztd=2.5, created="1999-02-01T01:00")
    assert pooled(new, unknown)[0] == {"ARDA": (6, round((2 * 2.4 + 4 * 2.5) / 6, 4))}


def test_ties_go_to_the_later_name():
    for created in (None, "2030-02-01T00:00"):
        one = delays("a.tro", range(4), ztd=2.4, created=created)
        other = delays("b.tro", range(4), ztd=2.5, created=created)
        assert pooled(other, one)[0] == {"ARDA": (4, 2.5)}


def test_the_order_of_the_files_does_not_matter():
    """Every order of five files, among them a move, a shared code and a tie, gives the same."""

    def files():
        return [
            delays("a", range(0, 6), ztd=2.1, created="2030-02-01"),
            delays("b", range(3, 9), ztd=2.2, created="2030-02-01"),
            delays("c", range(2, 4), ztd=2.3),
            delays("d", range(9, 12), ztd=2.4, site=FAR, created="2030-01-01"),
            delays("e", range(0, 6), ztd=2.5, code="BELU", site=FAR),
            delays("f", range(2, 8), ztd=2.6, code="BELU", site=HARBOUR),
        ]

    results = set()
    for order in itertools.permutations(range(6)):
        some = files()
        found, named, report = pooled(*(some[index] for index in order))
        results.add(repr((found, named.sites, sorted(report.warnings))))
    assert len(results) == 1
    assert sorted(found) == [
        "ARDA", "ARDA_20300131", "BELU_N47739W027811", "BELU_N47739W028811",
    ]  # fmt: skip


def test_series_count_records_that_gave_way():
    tables = [delays("a", range(4)), delays("b", range(2, 6))]
    named = tell_apart(tables, {}, ReadingReport())
    assert Pool.of(tables, named, DelayRecords.values).series("ARDA")[2] == 2


@pytest.mark.parametrize(
    ("place", "moves"),
    [
        (replace(HARBOUR, ellipsoidal_height=121.9), False),
        (ROOF, True),
        (replace(HARBOUR, longitude=-27.8112 + 0.0012), False),
        (replace(HARBOUR, longitude=-27.8112 + 0.0015), True),
        (replace(HARBOUR, ellipsoidal_height=np.nan, msl_height=64.5), True),
        (replace(HARBOUR, ellipsoidal_height=np.nan, msl_height=np.nan), False),
        (FAR, True),
    ],
    ids=["1.9 m up", "3 m up", "90 m east", "112 m east", "above the sea", "no height", "75 km"],
)
def test_a_move_is_more_than_2_m_or_100_m(place, moves):
    """One degree of longitude at this latitude is 74.8 km (a sphere of 6371 km)."""
    found, named, report = pooled(
        delays("a", range(24)), delays("b", range(24, 48), site=place, ztd=2.5)
    )
    if moves:
        assert found == {"ARDA": (24, 2.4), "ARDA_20300201": (24, 2.5)}
        assert named.codes["ARDA_20300201"] == "ARDA"
        (warning,) = report.warnings
        assert warning.startswith("station ARDA: moved by ")
        assert "2030-02-01T00:00:00; it is ARDA before and ARDA_20300201 from then on" in warning
    else:
        assert found == {"ARDA": (48, 2.45)} and report.warnings == []
        assert named.sites["ARDA"].longitude == HARBOUR.longitude  # the oldest


def test_files_of_a_moved_station_may_overlap_a_little():
    """Files of 12 hours, one an hour: those after the move reach back before it."""
    before = [delays(f"a{h:02}", range(h, h + 12)) for h in range(24)]
    after = [delays(f"b{h:02}", range(h, h + 12), site=FAR, ztd=2.5) for h in range(24, 48)]
    found, _, _ = pooled(*before, *after)
    assert found == {"ARDA": (35, 2.4), "ARDA_20300201": (35, 2.5)}


def test_two_moves_on_a_day_have_two_names():
    found, _, _ = pooled(
        delays("a", range(4)), delays("b", range(4, 8), site=FAR),
        delays("c", range(8, 12), site=ROOF),
    )  # fmt: skip
    assert list(found) == ["ARDA", "ARDA_20300131", "ARDA_20300131T0800"]
    assert len(found) == 3


def test_files_without_places_follow_the_move():
    """A file that says nothing of places is split at the epoch of the move."""
    found, _, report = pooled(
        delays("a", range(4)), delays("b", range(8, 12), site=FAR, ztd=2.4),
        delays("c", range(4, 10), site=None, ztd=2.5),
    )  # fmt: skip
    assert found == {"ARDA": (8, 2.45), "ARDA_20300131": (4, 2.45)}
    assert report.rejections.total == 0


def test_a_listed_station_does_not_move():
    row = StationRow("ARDA", -27.8112, 47.7391, 120.0)
    found, named, report = pooled(
        delays("a", range(4)), delays("b", range(4, 8), site=FAR), rows={"ARDA": row}
    )
    assert list(found) == ["ARDA"] and found["ARDA"][0] == 8
    assert named.rows == {"ARDA": row} and report.warnings == []


def test_a_code_of_two_places_at_once_is_kept_apart():
    found, named, report = pooled(delays("a", range(24)), delays("b", range(24), site=FAR, ztd=2.5))
    assert found == {"ARDA_N47739W027811": (24, 2.4), "ARDA_N47739W028811": (24, 2.5)}
    assert named.sites["ARDA_N47739W028811"] == FAR
    assert report.warnings == [
        "station ARDA: files use the code for 2 places, expected one; they are kept apart as "
        "ARDA_N47739W027811 and ARDA_N47739W028811"
    ]


def test_one_epoch_at_two_places_is_no_move():
    found, _, _ = pooled(delays("a", [5]), delays("b", [5], site=FAR, ztd=2.5))
    assert found == {"ARDA_N47739W027811": (1, 2.4), "ARDA_N47739W028811": (1, 2.5)}


def test_a_file_that_does_not_say_which_of_two_places_is_left_out():
    found, _, report = pooled(
        delays("a", range(24)), delays("b", range(24), site=FAR, ztd=2.5),
        delays("c", range(24), site=None, ztd=2.9),
    )  # fmt: skip
    assert found == {"ARDA_N47739W027811": (24, 2.4), "ARDA_N47739W028811": (24, 2.5)}
    assert report.rejections.counts == {
        ("c", "code shared by several places, and the file does not say which"): 24
    }


def test_the_station_table_tells_which_of_two_places_has_the_code():
    row = StationRow("ARDA", FAR.longitude + 0.001, FAR.latitude, 140.0)
    found, named, _ = pooled(
        delays("a", range(24)), delays("b", range(24), site=FAR, ztd=2.5), rows={"ARDA": row}
    )
    assert found == {"ARDA": (24, 2.5), "ARDA_N47739W027811": (24, 2.4)}
    assert named.rows == {"ARDA": row}


def test_files_that_disagree_a_little_mean_one_station():
    new = delays("a", range(24), site=ROOF, ztd=2.5, created="2030-02-02")
    found, named, report = pooled(new, delays("b", range(24)))
    assert found == {"ARDA": (24, 2.5)}
    assert named.sites["ARDA"] == ROOF
    assert "files place it 0 km and" in report.warnings[0]
    assert report.warnings[0].endswith("apart at the same time; the newest is used")


def test_a_place_is_filled_from_older_files():
    bare = Site(HARBOUR.longitude, HARBOUR.latitude, 120.0)
    _, named, _ = pooled(delays("a", range(4)), delays("b", range(4, 8), site=bare))
    assert named.sites["ARDA"].msl_height == 61.5


def test_stays_within_a_file_part_its_records():
    start = int(np.datetime64("2030-01-31T00:00:00").astype(int))
    stays = (Stay(HARBOUR, start - DAY, start + 6 * 3600), Stay(FAR, start + 6 * 3600, np.inf))
    found, named, _ = pooled(delays("a", range(24), stays=stays))
    assert found == {"ARDA": (6, 2.4), "ARDA_20300131": (18, 2.4)}
    assert named.sites["ARDA_20300131"] == FAR


def test_far_epochs_are_counted_by_file():
    """15 years of 366 days are within the limit, two days more are not."""
    good = delays("a", range(48))
    edge = 15 * 366 * 24
    odd = delays("b", [48 - edge, edge, edge + 48, -(edge + 48), 24 * 40_000])
    report = ReadingReport()
    drop_far_epochs([good, odd], report.rejections)
    assert (len(good.time), len(odd.time)) == (48, 2)
    assert report.rejections.counts == {("b", "epoch far from all others"): 3}


def xyz_line(site, start, end, solution=1):
    import pyproj

    to_xyz = pyproj.Transformer.from_crs(4979, 4978, always_xy=True)
    x, y, z = to_xyz.transform(site.longitude, site.latitude, site.ellipsoidal_height)
    return f" ARDA00ATL  A {solution:4d} P {start} {end} {x:12.3f} {y:12.3f} {z:12.3f} IGS20"


def test_sinex_coordinates_hold_for_their_interval(tmp_path):
    """SITE/COORDINATES with start and end; SITE/ID gives the geoid height for both."""
    coordinates = block(
        "SITE/COORDINATES",
        xyz_line(HARBOUR, "2030:001:00000", "2030:031:01800"),
        xyz_line(FAR, "2030:031:01800", "00:000:00000", 2),
    )
    far_id = SinexFile().site_id.replace("332.188800", "331.188800").replace("120.000", "140.000")
    sinex = replace(
        SinexFile(), coordinates=coordinates, site_id=far_id.replace(" 61.500", " 81.500")
    )
    records = read_sinex_tro(write(tmp_path, sinex.text()), name="network.tro")
    assert records.warnings == []
    found, named, _ = pooled(records)
    assert found == {
        "ARDA00ATL": (1, 2.4015), "ARDA00ATL_20300131": (1, 2.4025), "BELU00ATL": (2, 2.302),
    }  # fmt: skip
    before, after = named.sites["ARDA00ATL"], named.sites["ARDA00ATL_20300131"]
    assert before.longitude == pytest.approx(HARBOUR.longitude, abs=2e-8)
    assert after.longitude == pytest.approx(FAR.longitude, abs=2e-8)
    assert before.msl_height == pytest.approx(61.5, abs=2e-3)  # the same undulation
    assert after.msl_height == pytest.approx(81.5, abs=2e-3)


@pytest.mark.parametrize(
    ("first", "second"),
    [
        ("2030:001:00000 2030:032:00000", "2030:030:00000 2030:040:00000"),
        ("00:000:00000 00:000:00000", "00:000:00000 00:000:00000"),
        ("2030:031:00000 2030:001:00000", "2030:032:00000 2030:031:00000"),
    ],
    ids=["overlap", "open", "reversed"],
)
def test_sinex_coordinates_at_the_same_time_are_no_move(tmp_path, first, second):
    coordinates = block(
        "SITE/COORDINATES",
        xyz_line(HARBOUR, *first.split()),
        xyz_line(FAR, *second.split(), 2),
    )
    sinex = replace(SinexFile(), coordinates=coordinates)
    records = read_sinex_tro(write(tmp_path, sinex.text()), name="network.tro")
    assert records.stays == {}
    assert "positions in SITE/COORDINATES are 75 km apart" in records.warnings[0]


def test_two_files_with_the_same_four_letters_are_never_mixed(tmp_path):
    """Two producers' SINEX_TRO files, each with its own ARDA, at the same epochs."""

    def file(name, site, ztd):
        text = replace(
            SinexFile(),
            site_id="",
            coordinates=block("SITE/COORDINATES", xyz_line(site, "00:000:00000", "00:000:00000")),
            solution=solution(
                f" ARDA00ATL 2030:031:00000 {ztd:6.1f}   1.3   0.25  0.11",
                f" ARDA00ATL 2030:031:03600 {ztd:6.1f}   1.3   0.25  0.11",
            ),
        ).text()
        return read_sinex_tro(write(tmp_path, text.replace("ARDA00ATL", "ARDA"), name), name=name)

    found, _, _ = pooled(file("a.tro", HARBOUR, 2401.5), file("b.tro", FAR, 2301.5))
    assert found == {"ARDA_N47739W027811": (2, 2.4015), "ARDA_N47739W028811": (2, 2.3015)}


def test_weather_sites_move_too(tmp_path):
    header = "site,time,pressure,longitude,latitude,orthometric_height\n"
    text = header + "".join(
        f"ARDA,2030-01-31T0{hour}:00,1012.3,-27.8112,47.7391,{height}\n"
        for hour, height in enumerate((60, 60, 90, 90))
    )
    report = ReadingReport()
    named = tell_apart([read_weather_table(write(tmp_path, text))], {}, report, "barometer")
    assert {name: site.msl_height for name, site in named.sites.items()} == {
        "ARDA": 60.0, "ARDA_20300131": 90.0,
    }  # fmt: skip
    assert report.warnings[0].startswith("barometer ARDA: moved by 0 km and +30.0 m in height")
