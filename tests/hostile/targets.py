"""What is fuzzed: a valid file for each reader, and what must hold of whatever is read from it."""

from __future__ import annotations

import atexit
import json
import shutil
import signal
import tempfile
import unicodedata
from collections.abc import Callable
from contextlib import contextmanager
from functools import cache
from pathlib import Path
from typing import NamedTuple

import numpy as np
import shapely

from fieldgen.chain import make_fields
from fieldgen.comparing.observations import LIMITS, read_truth
from fieldgen.errors import FieldgenError
from fieldgen.products.maps.geometries import clip_outlines, read_geometries
from fieldgen.quantities import QUANTITIES
from fieldgen.readers.epochs import YEARS
from fieldgen.readers.formats import read_delays, read_weather
from fieldgen.readers.network import read_network
from fieldgen.readers.records import Rejections
from fieldgen.readers.tables import read_station_table
from fieldgen.settings import read_settings
from tests.hostile.mutations import spoil, spoil_numbers, spoil_values
from tests.readers.fixtures import OLD_DIALECT, SinexFile, rinex_header, rinex_record
from tests.scene import SETTINGS, write_scene

SECONDS = 20.0
"""No small file may take longer than this to read."""

FIRST, LAST = (np.datetime64(f"{year}-01-01", "s") for year in (YEARS[0], YEARS[-1] + 1))

LOWEST, HIGHEST = -500.0, 9000.0
"""Heights [m] between which stations stand on Earth."""


class Target(NamedTuple):
    """A reader, a valid file for it, and the check of what it returns.

    cost : time that a file takes, against the quick ones
    spoil : how the file is spoilt by mutations
    """

    name: str
    seed: bytes
    read: Callable
    check: Callable
    cost: int = 1
    spoil: Callable = spoil


class TooSlow(BaseException):
    """The time is up; no `except` of the code under test takes it for an error of a file."""


@contextmanager
def time_limit(seconds: float):
    """Raise TooSlow in a block that takes longer."""

    def stop(*_):
        raise TooSlow(f"more than {seconds:g} s")

    before = signal.signal(signal.SIGALRM, stop)
    signal.setitimer(signal.ITIMER_REAL, seconds)
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)
        signal.signal(signal.SIGALRM, before)


def try_file(target: Target, path: Path) -> bool:
    """Whether the file could be read; only FieldgenError may say no, and what is read must hold."""
    with time_limit(SECONDS):
        try:
            found = target.read(path)
        except FieldgenError as error:
            check_message(str(error))
            return False
        target.check(found)
    return True


def check_message(text: str) -> None:
    """A message is there, and short enough to be read."""
    assert text.strip()
    assert len(text) < 20_000


def is_clean(text: str) -> bool:
    """Whether a text is one line without control characters or marks that turn it around."""
    return all(unicodedata.category(letter)[0] != "C" for letter in text) and (
        len(text.splitlines()) <= 1
    )


def check_rejections(rejections: Rejections) -> None:
    assert all(count > 0 for count in rejections.counts.values())
    assert all(one.line >= 1 and one.reason for one in rejections.examples)


def check_site(site) -> None:
    """A position on Earth or none; heights that occur or none."""
    if not np.isnan(site.longitude):
        assert -180.0 <= site.longitude <= 180.0
        assert -90.0 <= site.latitude <= 90.0
    for height in (site.ellipsoidal_height, getattr(site, "msl_height", np.nan)):
        assert np.isnan(height) or LOWEST <= height <= HIGHEST
    assert is_clean(site.name)


def check_records(records) -> None:
    """What the docstrings of `DelayRecords` and `WeatherRecords` promise."""
    place, count = getattr(records, records.places[1]), len(records.time)
    ids = records.identifiers
    assert count > 0
    assert len(place) == count
    assert (place >= 0).all()
    assert (place < len(ids)).all()
    assert (records.time >= FIRST).all()
    assert (records.time <= LAST).all()
    assert len(set(ids)) == len(ids)
    assert all(name.strip() and len(name) <= 60 and is_clean(name) for name in ids)
    assert len(set(zip(place.tolist(), records.time.tolist(), strict=True))) == count
    for name in records.values:
        values = getattr(records, name)
        low, high = (0.0, np.inf) if name.endswith("_sigma") else QUANTITIES[name][3:5]
        assert len(values) == count
        assert (np.isnan(values) | (np.isfinite(values) & (low <= values) & (values <= high))).all()
    for site in records.sites.values():
        check_site(site)
    check_rejections(records.rejections)
    before = place.copy()
    records.compact()
    assert (getattr(records, records.places[1]) == before).all()


def check_station_table(found) -> None:
    stations, rejections = found
    assert stations
    for name, row in stations.items():
        assert row.id == name
        assert is_clean(name)
        check_site(row)
        assert np.isnan(row.orthometric_height) or LOWEST <= row.orthometric_height <= HIGHEST
        assert np.isnan(row.undulation) or -150.0 <= row.undulation <= 150.0
    check_rejections(rejections)


def check_truth(truth) -> None:
    ground = lambda longitude, latitude: np.full(len(longitude), 10.0)  # noqa: E731
    found = truth.observations(ground)
    assert found
    for one in found:
        assert is_clean(one.station)
        assert -180.0 <= one.longitude <= 180.0
        assert -90.0 <= one.latitude <= 90.0
        assert LIMITS["height"][0] <= one.height <= LIMITS["height"][1]
        assert np.isfinite([one.value, one.sigma]).all()
        assert one.sigma >= 0.0
    check_rejections(truth.rejections)


def check_geometries(geometries) -> None:
    for line in clip_outlines(geometries, (-31.0, -29.0, 47.0, 48.0)):
        assert np.isfinite(shapely.get_coordinates(line)).all()


def check_settings(settings) -> None:
    ny, nx = (
        (settings.grid.north - settings.grid.south) / settings.grid.spacing,
        (settings.grid.east - settings.grid.west) / settings.grid.spacing,
    )
    assert 4 <= round(ny) * round(nx) <= 25_000_000
    assert all(
        is_clean(text) for text in settings.network.model_dump(exclude={"time_step"}).values()
    )
    assert min(str(settings.terrain.file)) >= " "
    json.dumps(settings.model_dump(mode="json"), allow_nan=False)


def read_and_name(read):
    """Reader whose messages call the file by a short name."""
    return lambda path: read(path, name="file")


@cache
def scene() -> Path:
    """Folder of a small scene with a coast; it is removed when the process ends."""
    folder = Path(tempfile.mkdtemp(prefix="scene"))
    atexit.register(shutil.rmtree, folder)
    write_scene(folder, hours=3)
    (folder / "coast.json").write_text(COAST)
    return folder


def run_settings(path: Path):
    """Fields of the scene with other settings."""
    changed = scene() / "changed.toml"
    shutil.copy(path, changed)
    return make_fields(read_network(changed))


def run_delays(path: Path):
    """Fields of the scene with other delays."""
    shutil.copy(path, scene() / "delays_changed.csv")
    changed = scene() / "delays.toml"
    changed.write_text(SETTINGS.replace("delays.csv", "delays_changed.csv"))
    return make_fields(read_network(changed))


def check_run(fields) -> None:
    """What users of a field may rely on."""
    gap = (fields.flag.values & 4) > 0
    assert (np.isnan(fields.pwv.values) == gap).all()
    assert (fields.pwv.values[~gap] >= 0.0).all()
    assert (fields.pwv_sigma.values[~gap] > 0.0).all()


RINEX = rinex_header() + "".join(
    rinex_record(f" 30  1 31 {hour:2d}  0  0", [1005.1 - hour, 12.5, 70.0]) for hour in range(6)
)
RINEX_LONG = rinex_header(["PR", "TD", "HR", "ZW", "ZD", "ZT", "WD", "WS", "RI", "HI"]) + "".join(
    rinex_record(f" 30  1 31 {hour:2d}  0  0", [1005.1, 12.5, 70.0, *range(7)]) for hour in range(4)
)
DELAY_CSV = "station,time,ztd,ztd_sigma,longitude,latitude,ellipsoidal_height\n" + "".join(
    f"ST{station:02d},2030-01-31T{hour:02d}:00:00Z,2.40{hour},0.0013,-27.8{station},47.7,120.5\n"
    for station in range(3)
    for hour in range(4)
)
WEATHER_CSV = (
    "site;time;pressure;temperature;relative_humidity;longitude;latitude;orthometric_height\n"
    + "".join(
        f"WX01;2030-01-31T{hour:02d}:00:00Z;1005.{hour};285.5;70;-27.8;47.7;10.0\n"
        for hour in range(6)
    )
)
STATION_CSV = (
    "id,longitude,latitude,ellipsoidal_height,undulation,orthometric_height,name\n"
    + "".join(f"ST{n:02d},-27.{n},47.{n},12{n}.5,57.0,6{n}.5,Isle {n}\n" for n in range(6))
)
VALUE_CSV = "time,longitude,latitude,height,value,sigma,station\n" + "".join(
    f"2030-01-31T{hour:02d}:00:00Z,-27.8,47.7,120,2{hour}.5,1.0,RS1\n" for hour in range(6)
)
SOUNDING_CSV = "time,longitude,latitude,height,pressure,temperature,dewpoint,station\n" + "".join(
    f"2030-01-31T12:00Z,-27.8,47.7,{60 + 900 * n},{1000 - 75 * n},{288 - 5 * n},{284 - 6 * n},RS1\n"
    for n in range(11)
)
COAST = json.dumps(
    {
        "type": "FeatureCollection",
        "features": [
            {
                "type": "Feature",
                "properties": {"name": "isle"},
                "geometry": {
                    "type": "Polygon",
                    "coordinates": [[[-30.2, 47.2], [-29.8, 47.2], [-29.8, 47.6], [-30.2, 47.2]]],
                },
            },
            {
                "type": "Feature",
                "properties": {},
                "geometry": {"type": "LineString", "coordinates": [[-30.5, 47.1], [-29.5, 47.9]]},
            },
            {"type": "Feature", "properties": {}, "geometry": None},
        ],
    },
    indent=0,
)
FULL_SETTINGS = (
    SETTINGS.replace(
        'name = "Test isle"',
        'name = "Test isle"\ntime_step = "1h"\ninstitution = "Invented"\nlicense = "free"\n'
        'url = "https://example.org"\nemail = "a@example.org"',
    ).replace('maps = "none"', 'maps = "none"\nlimits = [0, 40]\ncoast = "coast.json"')
    + """[retrieval]
mean_temperature = {intercept = 70.2, slope = 0.72, rms = 4.7}
ztd_sigma_scale = 1.5
common_sigma = 0.2
[screening]
jump = 8.0
condemn_share = 0.5
[heights]
reference_height = 800.0
scale_height = 2000
prior_sigma = 400.0
[kriging]
covariance = "exponential"
window = "48h"
partial_sill = 4.0
range = 80
nugget = 0.1
far_distance = 50
"""
)

SCENE_DELAYS = (scene() / "delays.csv").read_bytes()

FITTED_SETTINGS = (
    SETTINGS
    + """[retrieval]
ztd_sigma_scale = 1.5
ztd_sigma_floor = 0.004
common_sigma = 0.2
barometer_sigma = 0.3
barometer_distance = 1.0
[screening]
formal_error = 0.010
formal_error_ratio = 2.5
spike = 0.030
jump = 8.0
neighbour_ratio = 4.0
neighbour_difference = 2.5
bias_ratio = 2.0
condemn_share = 0.5
pressure_difference = 4.0
terrain_difference = 150
[heights]
prior = 2000
prior_sigma = 400.0
[kriging]
drift = "linear"
window = "48h"
far_distance = 50
"""
)

TARGETS = [
    Target("sinex 2.00", SinexFile().text().encode(), read_and_name(read_delays), check_records),
    Target("sinex old", OLD_DIALECT.text().encode(), read_and_name(read_delays), check_records),
    Target("rinex", RINEX.encode(), read_and_name(read_weather), check_records),
    Target("rinex long", RINEX_LONG.encode(), read_and_name(read_weather), check_records),
    Target("delay table", DELAY_CSV.encode(), read_and_name(read_delays), check_records),
    Target("weather table", WEATHER_CSV.encode(), read_and_name(read_weather), check_records),
    Target(
        "station table",
        STATION_CSV.encode(),
        read_and_name(read_station_table),
        check_station_table,
    ),
    Target("values", VALUE_CSV.encode(), read_truth, check_truth),
    Target("soundings", SOUNDING_CSV.encode(), read_truth, check_truth),
    Target("lines", COAST.encode(), read_geometries, check_geometries),
    Target("settings", FULL_SETTINGS.encode(), read_settings, check_settings),
    Target(
        "settings values",
        FULL_SETTINGS.encode(),
        read_settings,
        check_settings,
        spoil=spoil_values,
    ),
    Target("run as set", FULL_SETTINGS.encode(), run_settings, check_run, 50, spoil_numbers),
    Target("run fitted", FITTED_SETTINGS.encode(), run_settings, check_run, 50, spoil_numbers),
    Target("run of delays", SCENE_DELAYS, run_delays, check_run, 50),
]
