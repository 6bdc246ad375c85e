"""COST-716 files, built from the format's description; the expected values are those written here.

The description (COST Action 716, V2.2a) is recalled, and held against the real file that
tests/outside reads.
"""

import numpy as np
import pytest

from fieldgen.errors import InputError
from fieldgen.readers.cost716 import is_cost716, read_cost716
from fieldgen.readers.formats import read_delays

from .fixtures import write, write_gzip

RULE = "-" * 100


def sample(clock, ztd=2401.5, sigma=1.3, slants=(), rest=None):
    """A sample line, the number of its slants, and they."""
    rest = "   -9.9   -9.9   -9.9   -9.9   -9.9 999.99 999.99  -9.99  -9.99 -99.999"
    line = f"{clock} FFFFFFFF{ztd:7.1f}{sigma:7.1f}{rest}"
    return "\n".join([line, f"{len(slants):4d}", *slants])


def cost_block(
    station="ARDA 99901M001           Arda pier",
    place="   47.739100  -27.811200     120.000      61.500       0.000",
    times="31-JAN-2030 00:00:00     31-JAN-2030 02:15:00",
    samples=("  0  0  0", "  0 15  0"),
    declared=None,
    version="V2.2a",
    receiver="INVENTED RECEIVER        INVENTED ANTENNA",
):
    body = [one if len(one) > 12 else sample(one) for one in samples]
    declared = len(samples) if declared is None else declared
    header = [
        f"COST-716 {version:<16}INVENTED                 TEST", station, receiver, place, times,
        "XYZ1                     INVENTED 1.0             NONE                     NONE",
        "   15   60  120", "00000075", f"{declared:4d}",
    ]  # fmt: skip
    return "\n".join([RULE, *header, *body, RULE]) + "\n"


def read(folder, text):
    return read_cost716(write(folder, text, "network.cost"), name="network.cost")


def counts(records):
    return {reason: count for (_, reason), count in records.rejections.counts.items()}


def test_read_cost716_gives_metres_utc_and_sites(tmp_path):
    records = read(tmp_path, cost_block())
    assert records.file == "network.cost" and records.station_ids == ["ARDA"]
    np.testing.assert_allclose(records.ztd, [2.4015, 2.4015], rtol=1e-12)
    np.testing.assert_allclose(records.ztd_sigma, [0.0013, 0.0013], rtol=1e-12)
    assert records.time.astype(str).tolist() == ["2030-01-31T00:00:00", "2030-01-31T00:15:00"]
    assert np.isnan(records.pwv).all()
    assert records.created == np.datetime64("2030-01-31T02:15:00")
    site = records.sites["ARDA"]
    assert (site.longitude, site.latitude) == (-27.8112, 47.7391)
    assert (site.ellipsoidal_height, site.msl_height, site.name) == (120.0, 61.5, "Arda pier")
    assert records.rejections.total == 0 and records.warnings == []


@pytest.mark.parametrize(
    "change",
    [
        pytest.param(lambda t: t.replace("\n", "\r\n"), id="CRLF"),
        pytest.param(lambda t: t.replace("V2.2a", "V2.0 "), id="V2.0"),
        pytest.param(lambda t: t.replace("V2.2a", "V1.0 "), id="V1.0"),
        pytest.param(lambda t: t.replace("ARDA", "arda"), id="lower case"),
        pytest.param(lambda t: t.replace("JAN", "Jan"), id="month"),
        pytest.param(lambda t: t.replace("INVENTED RECEIVER        INVENTED ANTENNA", ""),
                     id="no receiver"),
        pytest.param(lambda t: t.replace(RULE + "\n", "", 1), id="no first rule"),
        pytest.param(lambda t: t.rstrip("\n-"), id="no last rule"),
        pytest.param(lambda t: t.replace("-27.811200", "332.188800"), id="longitude to 360"),
        pytest.param(lambda t: t.replace("Arda pier", "Arda pi\xe9r"), id="not ASCII"),
        pytest.param(lambda t: t.replace("  0  0  0 FF", " 00 00 00 FF"), id="zeros"),
    ],
)  # fmt: skip
def test_read_cost716_sees_through(tmp_path, change):
    changed = change(cost_block())
    assert changed != cost_block()
    records = read_cost716(write(tmp_path, changed, encoding="latin-1"))
    assert records.station_ids == ["ARDA"]
    np.testing.assert_allclose(records.ztd, [2.4015, 2.4015], rtol=1e-12)
    assert records.sites["ARDA"].longitude == pytest.approx(-27.8112)
    assert records.rejections.total == 0 and records.warnings == []


def test_read_cost716_reads_several_blocks(tmp_path):
    belu = cost_block(
        "BELU XXXXXXXXX           Belu ridge",
        "   48.250000  -28.500000     815.250     756.000       0.071",
        "31-JAN-2030 00:00:00     31-JAN-2030 03:15:00",
    )
    records = read_delays(write_gzip(tmp_path, cost_block() + belu, "data"), "data")
    assert records.station_ids == ["ARDA", "BELU"] and records.station.tolist() == [0, 0, 1, 1]
    assert records.created == np.datetime64("2030-01-31T03:15:00")
    assert records.sites["BELU"].msl_height == 756.0


def test_read_cost716_passes_midnight(tmp_path):
    text = cost_block(
        times="31-JAN-2030 23:45:00     01-FEB-2030 00:20:00",
        samples=(" 23 45  0", "  0  0  0", "  0 15  0"),
    )
    assert read(tmp_path, text).time.astype(str).tolist() == [
        "2030-01-31T23:45:00", "2030-02-01T00:00:00", "2030-02-01T00:15:00",
    ]  # fmt: skip


def test_read_cost716_does_not_take_an_early_sample_for_the_next_day(tmp_path):
    text = cost_block(samples=("  0  0  0",), times="31-JAN-2030 00:00:30     31-JAN-2030 02:15:00")
    assert read(tmp_path, text).time.astype(str).tolist() == ["2030-01-31T00:00:00"]


@pytest.mark.parametrize("missing", [-9.9, -99.9, -999.9])
def test_read_cost716_takes_negative_values_as_missing(tmp_path, missing):
    text = cost_block(samples=(
        sample("  0  0  0", ztd=missing), sample("  0 15  0", sigma=missing), "  0 30  0"
    ))  # fmt: skip
    records = read(tmp_path, text)
    assert len(records.ztd) == 2 and counts(records) == {"no delay": 1}
    assert records.rejections.examples[0].line == 11
    np.testing.assert_allclose(records.ztd_sigma, [np.nan, 0.0013], rtol=1e-12)


def test_read_cost716_reads_values_that_touch(tmp_path):
    touching = sample("  0  0  0").replace("   -9.9   -9.9   -9.9", "-9999.9-9999.9-9999.9", 1)
    records = read(tmp_path, cost_block(samples=(touching,)))
    assert records.ztd.tolist() == [2.4015] and records.ztd_sigma.tolist() == [0.0013]


@pytest.mark.parametrize("heights", ["-999.000 -999.000", "-9999.0 -9999.0"])
def test_read_cost716_takes_missing_heights_as_nan(tmp_path, heights):
    place = f"   47.739100  -27.811200 {heights} 0.000"
    site = read(tmp_path, cost_block(place=place)).sites["ARDA"]
    assert np.isnan([site.ellipsoidal_height, site.msl_height]).all()


def test_read_cost716_passes_over_slants(tmp_path):
    """Slant lines look like nothing else; their number is told."""
    slants = ("  1 G05  45.10  120.30 FFFFFFFF 3401.5    9.9", " 17")
    text = cost_block(samples=(sample("  0  0  0", slants=slants), "  0 15  0"))
    records = read(tmp_path, text)
    assert len(records.ztd) == 2 and records.rejections.total == 0 and records.warnings == []


@pytest.mark.parametrize(
    ("options", "reason", "line"),
    [
        ({"place": "   97.739100  -27.811200     120.000      61.500"}, "no position", 10),
        ({"place": "   47.739100  somewhere"}, "no position", 10),
        ({"place": "   47.739100"}, "no position", 10),
        ({"times": "31-JAN-2030 00:00:00"}, "no times", 10),
        ({"times": "31-JAX-2030 00:00:00 31-JAN-2030 02:15:00"}, "impossible epoch", 10),
        ({"times": "31-FEB-2030 00:00:00 31-JAN-2030 02:15:00"}, "impossible epoch", 10),
        ({"station": ""}, "no station", 10),
        ({"declared": "many"}, "no number of samples", 10),
    ],
    ids=[
        "latitude", "words", "one number", "one time", "month", "day", "no station", "count",
    ],
)  # fmt: skip
def test_read_cost716_counts_a_block_with_a_bad_header(tmp_path, options, reason, line):
    """The header counts once, its samples each; the next block is used."""
    if "declared" in options:
        bad = cost_block().replace("   2\n", "many\n")
    else:
        bad = cost_block(**options)
    belu = cost_block("BELU XXXXXXXXX           Belu ridge")
    records = read(tmp_path, bad + belu)
    assert records.station_ids == ["BELU"] and len(records.ztd) == 2
    assert counts(records) == {reason: 1, "block without usable header": 2}
    example = records.rejections.examples[0]
    assert example.line == line and "block at line 2" in example.detail


@pytest.mark.parametrize(
    ("bad", "reason"),
    [
        ("  0 15  0 FFFFFFFF what    1.3", "not a number"),
        (" 25 15  0 FFFFFFFF 2401.5    1.3", "impossible epoch"),
        ("garbage FFFFFFFF", "no sample"),
        ("  0 15  0 FFFFFFFF 9401.5    1.3", "ztd out of range"),
        ("  0  0  0 FFFFFFFF 2401.5    1.3", "duplicate epoch"),
    ],
)
def test_read_cost716_counts_bad_samples(tmp_path, bad, reason):
    records = read(tmp_path, cost_block(samples=("  0  0  0", bad + "\n   0", "  0 30  0")))
    assert len(records.ztd) == 2 and counts(records) == {reason: 1}
    assert records.rejections.examples[0].line == (11 if reason == "duplicate epoch" else 13)


def test_read_cost716_warns_of_missing_samples(tmp_path):
    whole = cost_block(declared=4)
    records = read(tmp_path, whole)
    assert records.warnings == ["block at line 2, station ARDA: has 2 samples, expected 4."]


def test_read_cost716_counts_a_header_cut_short(tmp_path):
    text = cost_block()
    records = read(tmp_path, text + "\n".join(text.splitlines()[:6]))
    assert len(records.ztd) == 2 and counts(records) == {"block cut short": 1}


def test_read_cost716_counts_lines_outside_any_block(tmp_path):
    records = read(tmp_path, cost_block() + "stray\n")
    assert counts(records) == {"outside any block": 1}


def test_read_cost716_rejects_a_code_at_two_places_at_once(tmp_path):
    """Negative control: two stations of one code in one file are not mixed."""
    other = cost_block(place="   47.739100  -28.811200     140.000      81.500       0.000")
    records = read(tmp_path, cost_block() + other)
    assert len(records.ztd) == 2 and counts(records) == {"several places at the same time": 2}


@pytest.mark.parametrize(
    ("text", "message"),
    [("", "usable records are 0"), (RULE + "\n", "usable records are 0"),
     (cost_block(samples=(sample("  0  0  0", ztd=-9.9),)), "1 no delay")],
    ids=["empty", "dashes", "missing"],
)  # fmt: skip
def test_read_cost716_refuses(tmp_path, text, message):
    with pytest.raises(InputError, match=message) as error:
        read(tmp_path, text)
    assert str(error.value).startswith("network.cost: ")


def test_is_cost716_knows_how_files_begin():
    assert is_cost716(RULE) and is_cost716("COST-716 V2.0") and not is_cost716("station,time,ztd")
