"""BUFR messages of ground-based GNSS, built with ecCodes itself, which knows the WMO tables.

Truth: the message's own values, to the steps of the tables (delay 0.1 mm, place 1e-5 degrees).
"""

import subprocess
import sys
from importlib.util import find_spec

import numpy as np
import pytest

from fieldgen.errors import InputError
from fieldgen.readers import bufr
from fieldgen.readers.bufr import is_bufr, read_bufr
from fieldgen.readers.formats import read_delays, read_weather

from .fixtures import write

if find_spec("eccodes") is None:
    pytest.skip("eccodes is not installed", allow_module_level=True)

ENCODE = """
import eccodes, json, sys
subsets, compressed = json.loads(sys.argv[1])
h = eccodes.codes_bufr_new_from_samples("BUFR4")
eccodes.codes_set(h, "masterTablesVersionNumber", 33)
eccodes.codes_set(h, "numberOfSubsets", len(subsets))
eccodes.codes_set(h, "compressedData", compressed)
eccodes.codes_set(h, "unexpandedDescriptors", 307022)
def put(rank, name, value):
    if value is not None:
        eccodes.codes_set(h, f"#{rank}#{name}", value)
if compressed:
    for key in sorted({key for subset in subsets for key in subset}):
        rank, name = key.split(" ")
        values = [subset.get(key) for subset in subsets]
        if isinstance(values[0], str):
            eccodes.codes_set_array(h, f"#{rank}#{name}", values)
        else:
            eccodes.codes_set_double_array(h, f"#{rank}#{name}", [float(v) for v in values])
else:
    paths = ("elevation", "atmosphericPathDelayInSatelliteSignal",
             "estimatedErrorInAtmosphericPathDelay")
    for index, subset in enumerate(subsets):
        for key, value in subset.items():
            rank, name = key.split(" ")
            put(int(rank) + index * (25 if name in paths else 1), name, value)
eccodes.codes_set(h, "pack", 1)
sys.stdout.buffer.write(eccodes.codes_get_message(h))
"""
"""Makes a message, in a process of its own."""


def subset(station="ARDA", hour=0, ztd=2.4015, sigma=0.0013, path=1, elevation=90.0, **others):
    """Values by rank and name of the decoder."""
    values = {
        "1 stationOrSiteName": station, "1 year": 2030, "1 month": 1, "1 day": 31, "1 hour": hour,
        "1 minute": 15, "1 latitude": 47.7391, "1 longitude": -27.8112, "1 heightOfStation": 62,
        f"{path} elevation": elevation, f"{path} atmosphericPathDelayInSatelliteSignal": ztd,
        f"{path} estimatedErrorInAtmosphericPathDelay": sigma,
    }  # fmt: skip
    return {key: value for key, value in (values | others).items() if value is not None}


def message(*subsets, compressed=0):
    import json

    command = [sys.executable, "-c", ENCODE, json.dumps([subsets, compressed])]
    return subprocess.run(command, capture_output=True, check=True).stdout


def read(folder, content):
    path = folder / "delays.bufr"
    path.write_bytes(content)
    return read_bufr(path, name="delays.bufr")


def counts(records):
    return {reason: count for (_, reason), count in records.rejections.counts.items()}


@pytest.fixture(scope="module")
def plain():
    return message(subset())


def test_read_bufr_gives_metres_utc_and_sites(tmp_path, plain):
    records = read(tmp_path, plain)
    assert records.file == "delays.bufr" and records.station_ids == ["ARDA"]
    assert records.ztd == pytest.approx([2.4015], abs=5e-5)
    assert records.ztd_sigma == pytest.approx([0.0013], abs=5e-5)
    assert records.time.astype(str).tolist() == ["2030-01-31T00:15:00"]
    site = records.sites["ARDA"]
    assert (site.longitude, site.latitude) == pytest.approx((-27.8112, 47.7391), abs=1e-5)
    assert site.msl_height == 62.0 and np.isnan(site.ellipsoidal_height)
    assert np.isnan(records.pwv).all() and records.rejections.total == 0


@pytest.mark.parametrize("compressed", [0, 1], ids=["plain", "compressed"])
def test_read_bufr_reads_subsets(tmp_path, compressed):
    """Both ways in which a message may hold several stations."""
    belu = {"1 latitude": 48.25, "1 longitude": -28.5, "1 heightOfStation": 756}
    one, two = subset(), subset("BELU", ztd=2.3015, sigma=0.0021, **belu)
    records = read(tmp_path, message(one, two, compressed=compressed))
    assert records.station_ids == ["ARDA", "BELU"]
    assert records.ztd == pytest.approx([2.4015, 2.3015], abs=5e-5)
    assert records.ztd_sigma == pytest.approx([0.0013, 0.0021], abs=5e-5)
    assert records.sites["BELU"].msl_height == 756.0


def test_read_bufr_takes_the_path_at_the_zenith(tmp_path):
    """Negative control: the first path is slant, the third stands upright."""
    slant = {"1 elevation": 30.0, "1 atmosphericPathDelayInSatelliteSignal": 4.1}
    records = read(tmp_path, message(subset(path=3, **slant)))
    assert records.ztd == pytest.approx([2.4015], abs=5e-5)


def test_read_bufr_uses_water_vapour_where_there_is_no_delay(tmp_path):
    pw = {"1 precipitableWater": 25.5}
    both, alone = message(subset(**pw)), message(subset(hour=1, ztd=None, sigma=None, **pw))
    records = read(tmp_path, both + alone)
    np.testing.assert_allclose(records.pwv, [np.nan, 25.5], atol=0.051)
    np.testing.assert_allclose(records.ztd, [2.4015, np.nan], atol=5e-5)


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        ({"ztd": None}, "no delay"),
        ({"elevation": 45.0}, "no delay"),
        ({"elevation": None}, "no delay"),
        ({"1 qualityFlagsForGroundBasedGnssData": 512 + 64}, "flagged as poor by its producer"),
        ({"station": None}, "no station"),
        ({"1 month": 13}, "impossible epoch"),
        ({"1 hour": None}, "no epoch"),
        ({"1 latitude": 99.0}, "impossible position"),
        ({"ztd": 1.0, "1 latitude": 47.0}, "several places at the same time"),
    ],
    ids=["no delay", "slant", "no elevation", "poor", "no station", "month", "no hour", "place",
         "two places"],
)  # fmt: skip
def test_read_bufr_counts_bad_subsets(tmp_path, plain, change, reason):
    records = read(tmp_path, plain + message(subset(**change)) + message(subset(hour=1)))
    assert len(records.ztd) == 2
    assert counts(records) == {reason: 1}
    assert records.rejections.examples[0].line == 2


def test_read_bufr_keeps_delays_that_are_flagged_otherwise(tmp_path):
    """Negative control: the other nine bits tell which satellites and corrections were used."""
    flags = {"1 qualityFlagsForGroundBasedGnssData": 511 - 1}
    assert len(read(tmp_path, message(subset(**flags))).ztd) == 1


@pytest.mark.parametrize("harm", ["end", "length", "middle"])
def test_read_bufr_counts_a_damaged_message_among_others(tmp_path, plain, harm):
    bad = bytearray(message(subset("BELU", hour=1)))
    if harm == "end":
        bad = bad[:-9]
    elif harm == "length":
        bad[4:7] = b"\xff\xff\xff"
    else:
        bad[30:36] = b"\xff" * 6  # the descriptors
    records = read(tmp_path, plain + bytes(bad) + message(subset("CORA", hour=2)))
    assert records.station_ids == ["ARDA", "CORA"]
    assert counts(records) == {"message cannot be decoded": 1}
    assert records.rejections.examples[0].line == 2


def test_read_delays_knows_bufr_by_its_beginning(tmp_path, plain):
    """Also behind the heading of a bulletin, and in gzip."""
    import gzip

    heading = b"\x01\r\r\n123\r\r\nISXX01 EGRR 310000\r\r\n"
    for content in (plain, heading + plain + b"\r\r\n\x03", gzip.compress(plain)):
        path = tmp_path / "data"
        path.write_bytes(content)
        assert read_delays(path).station_ids == ["ARDA"]
    with pytest.raises(InputError, match=r"begins with 'BUFR.*expected RINEX"):
        path.write_bytes(plain)
        read_weather(path, "data")


def test_a_table_that_speaks_of_bufr_is_a_table(tmp_path):
    """Negative control."""
    text = "# converted from BUFR 4\nstation,time,ztd\nARDA,2030-01-31,2.4\n"
    assert len(read_delays(write(tmp_path, text)).ztd) == 1
    assert not is_bufr("BUFR 4.0")


def test_read_bufr_says_how_to_install_the_decoder(tmp_path, plain, monkeypatch):
    monkeypatch.setattr(bufr, "find_spec", lambda name: None)
    with pytest.raises(InputError, match=r"delays.bufr: BUFR needs ecCodes.*fieldgen\[bufr\]"):
        read(tmp_path, plain)


@pytest.mark.parametrize(
    ("code", "message"),
    [
        ("import os; os.abort()", "decoder ended with status -6 after 0 messages"),
        ("import time; time.sleep(60)", "did not end in 1 s"),
        ("import sys; sys.exit('out of memory')", r"status 1 after 0 messages \(out of memory\)"),
        ('print(\'{"fatal": "OSError: no library"}\')', "ecCodes does not load"),
    ],
    ids=["crash", "hang", "failure", "broken library"],
)
def test_read_bufr_survives_its_decoder(tmp_path, plain, monkeypatch, code, message):
    """What the process boundary is for."""
    decoder = write(tmp_path, code, "decoder.py")
    monkeypatch.setattr(bufr.bufr_decoder, "__file__", str(decoder))
    monkeypatch.setattr(bufr, "TIMEOUT_S", 1 if "sleep" in code else 60)
    with pytest.raises(InputError, match=message):
        read(tmp_path, plain)


@pytest.mark.parametrize("content", [b"BUFR\x00\x00\x20\x04", b"BUFR\x00\x00\x08\x047777"])
def test_read_bufr_refuses_files_without_any_message(tmp_path, content):
    with pytest.raises(InputError, match="usable records are 0.*message cannot be decoded"):
        read(tmp_path, content)
