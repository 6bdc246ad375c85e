"""Readers against real files of other producers."""

import numpy as np
import pytest

from fieldgen.errors import InputError
from fieldgen.readers.formats import read_delays, read_weather
from fieldgen.readers.rinex_met import read_rinex_met
from tests.open_data import require


@pytest.fixture(scope="module")
def potsdam():
    """A day of weather at Potsdam, RINEX 2.11 of the GFZ: every ten minutes, HR PR TD."""
    return require("geodetic") / "rinex_met"


def test_read_rinex_met_of_a_real_day(potsdam):
    """Second derivation: the columns of the file, read here by splitting each line at blanks."""
    lines = potsdam.read_text().splitlines()
    end = next(i for i, line in enumerate(lines) if "END OF HEADER" in line)
    humidity, pressure, celsius = np.array([line.split()[6:] for line in lines[end + 1 :]], float).T
    records = read_rinex_met(potsdam)
    assert len(records.time) == 144
    assert records.rejections.total == 0
    np.testing.assert_array_equal(
        records.time, np.datetime64("2018-02-01") + np.arange(144) * np.timedelta64(600, "s")
    )
    np.testing.assert_allclose(records.pressure, pressure)
    np.testing.assert_allclose(records.temperature, celsius + 273.15)
    np.testing.assert_allclose(records.relative_humidity, humidity)


def test_read_rinex_met_keeps_the_order_of_observations(potsdam):
    """Published number: winter at Potsdam, 80 m; values exchanged would lie far off.

    987 to 991 hPa, 0 to 6 degrees C and 50 to 90 % as the file shows.
    """
    records = read_weather(potsdam)
    assert (np.abs(records.pressure - 989) < 3).all()
    assert (np.abs(records.temperature - 276.65) < 4).all()
    assert (np.abs(records.relative_humidity - 70) < 20).all()


def test_read_rinex_met_without_sensor_position(potsdam):
    """Published number: the header names the marker in lower case and no SENSOR POS XYZ/H."""
    records = read_rinex_met(potsdam)
    assert records.site_ids == ["POTS"]
    site = records.sites["POTS"]
    assert np.isnan([site.longitude, site.ellipsoidal_height, site.msl_height]).all()


def test_read_rinex_met_heeds_a_declared_order(potsdam, tmp_path):
    """Negative control: a header with the order exchanged makes pressure of humidity: caught."""
    text = potsdam.read_text()
    assert text.count("HR    PR    TD") == 1
    exchanged = tmp_path / "exchanged.rnx"
    exchanged.write_text(text.replace("HR    PR    TD", "PR    HR    TD"))
    with pytest.raises(InputError, match="pressure out of range"):
        read_rinex_met(exchanged)


@pytest.fixture(scope="module")
def northern_europe():
    """Delays of four stations of northern Europe, one hour, COST-716 V2.2a."""
    return require("geodetic") / "cost"


def test_read_cost716_of_a_real_file(northern_europe):
    """Second derivation: the sample lines of the file, found here by their quality word."""
    lines = [line.split() for line in northern_europe.read_text().splitlines()]
    samples = [words for words in lines if len(words) == 16 and words[3] == "FFFFFFFF"]
    records = read_delays(northern_europe, "cost")
    assert records.station_ids == ["AASC", "ABI0", "ABY0", "ADAC"]
    assert len(samples) == 16 and records.rejections.total == 0 and records.warnings == []
    np.testing.assert_allclose(records.ztd, [float(words[4]) / 1e3 for words in samples])
    np.testing.assert_allclose(records.ztd_sigma, [float(words[5]) / 1e3 for words in samples])
    clock = [f"2021-02-01T{int(h):02}:{int(m):02}" for h, m, *_ in samples]
    assert (records.time == np.array(clock, "M8[s]")).all()
    assert records.created == np.datetime64("2021-02-01T05:41:27")


def test_read_cost716_tells_the_heights_apart(northern_europe):
    """Published number: the geoid lies 39.0 m above the ellipsoid at Aas in Norway.

    The file's own two heights, 133.610 and 94.578 m; EGM96 says 39.2 m there (memory).
    """
    site = read_delays(northern_europe, "cost").sites["AASC"]
    assert (site.longitude, site.latitude, site.name) == (10.7817, 59.6603, "Aas [NO]")
    assert site.ellipsoidal_height - site.msl_height == pytest.approx(39.03, abs=0.01)
