"""Writers of the open formats that the demo's instruments deliver."""

import csv
import json

import numpy as np

from generator.setting import DAYS, START, geocentric, undulation

AGENCY = "XQV"
MISSING = -999.0
OLD_RINEX_EVERY = 3  # every third sensor still writes version 2


def write_delays(folder, sites, listed_ellipsoidal, ztd, formal, marked_missing):
    """One SINEX_TRO 2.00 file a day.

    NaN is left out, or written as missing for the station `marked_missing`.
    """
    for day in range(DAYS):
        midnight = START + np.timedelta64(day, "D")
        epochs = slice(96 * day, 96 * (day + 1))
        lines = [
            _tro_header(midnight),
            *_tro_description(),
            *_block("SITE/ID", _tro_identities(sites, listed_ellipsoidal)),
            *_block("SITE/COORDINATES", _tro_coordinates(sites, listed_ellipsoidal, midnight)),
            *_tro_solution(sites, ztd[epochs], formal[epochs], midnight, marked_missing),
            "%=ENDTRO",
        ]
        write_lines(folder / f"quendrava_{_day_of_year(midnight)}.tro", lines)


def write_weather(folder, sensors, reports, moments):
    """One RINEX meteorological file a sensor."""
    longitude, latitude = sensors.position
    positions = geocentric(longitude, latitude, sensors.ellipsoidal_height)
    for number, identifier in enumerate(sensors.identifier):
        version = 2.11 if number % OLD_RINEX_EVERY == 0 else 3.03
        marker = identifier[:4] if version < 3 else identifier
        header = _rinex_header(
            version, marker, positions[number], sensors.ellipsoidal_height[number]
        )
        records = [
            _rinex_record(version, moment, row)
            for moment, row in zip(moments, reports[:, number], strict=True)
        ]
        write_lines(folder / f"{identifier[:4].lower()}.rnx", header + records)


def write_station_table(path, sites, listed_error):
    """Station list; the orthometric height is given for two stations in three."""
    longitude, latitude = sites.position
    with open(path, "w", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(
            ["id", "longitude", "latitude", "ellipsoidal_height", "orthometric_height", "name"]
        )
        for number, identifier in enumerate(sites.identifier):
            ellipsoidal = sites.ellipsoidal_height[number] + listed_error[number]
            orthometric = sites.orthometric_height[number] + listed_error[number]
            writer.writerow(
                [
                    identifier,
                    f"{longitude[number]:.7f}",
                    f"{latitude[number]:.7f}",
                    f"{ellipsoidal:.3f}",
                    f"{orthometric:.2f}" if number % 3 else "",
                    sites.name[number],
                ]
            )


def write_features(path, features):
    """GeoJSON feature collection."""
    collection = {"type": "FeatureCollection", "name": path.stem, "features": features}
    path.write_text(json.dumps(collection) + "\n")


def write_json(path, content):
    """JSON to be read by people."""
    path.write_text(json.dumps(content, indent=1) + "\n")


def write_lines(path, lines):
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text("\n".join(lines) + "\n", encoding="ascii")


def _day_of_year(moment):
    """YYYYDDD."""
    return moment.astype("datetime64[s]").item().strftime("%Y%j")


def _epoch(moment):
    """YYYY:DDD:SSSSS."""
    seconds = (moment - moment.astype("datetime64[D]")).astype("timedelta64[s]").astype(int)
    return f"{moment.astype('datetime64[s]').item():%Y:%j}:{seconds:05d}"


def _tro_period(midnight):
    """First and last epoch of a day's file."""
    return _epoch(midnight), _epoch(midnight + np.timedelta64(23 * 60 + 45, "m"))


def _tro_header(midnight):
    created = _epoch(midnight + np.timedelta64(25, "h"))
    first, last = _tro_period(midnight)
    return f"%=TRO 2.00 {AGENCY} {created} {AGENCY} {first} {last} P MIX"


def _block(name, lines):
    return [f"+{name}", *lines, f"-{name}"]


def _tro_description():
    reference = {
        "DESCRIPTION": "Quendrava geodetic survey (invented)",
        "OUTPUT": "Zenith total delays of an invented network",
        "SOFTWARE": "demo_network/make_demo.py",
        "INPUT": "Simulated atmosphere",
    }
    description = {
        "TROPO MODELING METHOD": "Simulation",
        "TIME SYSTEM": "UTC",
        "TROPO SAMPLING INTERVAL": f"{900:>22d}",
        "ELEVATION CUTOFF ANGLE": f"{5:>22d}",
        "TROPO PARAMETER NAMES": " TROTOT STDDEV",
        "TROPO PARAMETER UNITS": "  1e+03  1e+03",
        "TROPO PARAMETER WIDTH": "      7      6",
    }
    return [
        *_block("FILE/REFERENCE", [f" {key:18s} {value}" for key, value in reference.items()]),
        *_block("TROP/DESCRIPTION", [f" {key:29s} {value}" for key, value in description.items()]),
    ]


def _tro_identities(sites, ellipsoidal):
    longitude, latitude = sites.position
    sea_level = ellipsoidal - undulation(sites.easting, sites.northing)
    rows = zip(
        sites.identifier, sites.name, longitude, latitude, ellipsoidal, sea_level, strict=True
    )
    return [
        "*STATION__ PT __DOMES__ T _STATION_DESCRIPTION__"
        " _LONGITUDE _LATITUDE_ _HGT_ELI_ _HGT_MSL_",
        *(
            f" {site:9s}  A {'-' * 9} P {name:22.22s}"
            f" {east % 360:10.6f} {north:10.6f} {height:9.3f} {above_sea:9.3f}"
            for site, name, east, north, height, above_sea in rows
        ),
    ]


def _tro_coordinates(sites, ellipsoidal, midnight):
    first, last = _tro_period(midnight)
    places = geocentric(*sites.position, ellipsoidal)
    return [
        "*STATION__ PT SOLN T __DATA_START__ __DATA_END____"
        " _____X______ _____Y______ _____Z______ SYSTEM",
        *(
            f" {site:9s}  A    1 P {first} {last} {x:12.3f} {y:12.3f} {z:12.3f} WGS84 "
            for site, (x, y, z) in zip(sites.identifier, places, strict=True)
        ),
    ]


def _tro_solution(sites, ztd, formal, midnight, marked_missing):
    lines = ["*STATION__ ____EPOCH_____  TROTOT STDDEV"]
    for number, site in enumerate(sites.identifier):
        for epoch in range(len(ztd)):
            value, error = ztd[epoch, number], formal[epoch, number]
            if np.isnan(value):
                if site != marked_missing:
                    continue
                value = error = MISSING
            moment = _epoch(midnight + np.timedelta64(15 * epoch, "m"))
            lines.append(f" {site:9s} {moment} {value:7.1f} {error:6.1f}")
    return _block("TROP/SOLUTION", lines)


def _rinex_header(version, marker, position, ellipsoidal_height):
    x, y, z = position
    lines = [
        (f"{version:9.2f}{'':11s}{'METEOROLOGICAL DATA':40s}", "RINEX VERSION / TYPE"),
        (f"{'make_demo':20s}{AGENCY:40s}", "PGM / RUN BY / DATE"),
        (f"{marker:60s}", "MARKER NAME"),
        (f"{3:6d}    PR    TD    HR{'':36s}", "# / TYPES OF OBSERV"),
        *(
            (f"{'SIMULATED':20s}{'':26s}{accuracy:7.1f}    {quantity} ", "SENSOR MOD/TYPE/ACC")
            for quantity, accuracy in (("PR", 0.2), ("TD", 0.4), ("HR", 2.0))
        ),
        (f"{x:14.4f}{y:14.4f}{z:14.4f}{ellipsoidal_height:14.4f} PR ", "SENSOR POS XYZ/H"),
        ("", "END OF HEADER"),
    ]
    return [f"{content:60s}{label}".rstrip() for content, label in lines]


def _rinex_record(version, moment, row):
    year, *parts = moment.astype("datetime64[s]").item().timetuple()[:6]
    stamp = f" {year % 100:02d}" if version < 3 else f" {year:4d}"
    clock = "".join(f" {part:2d}" for part in parts)
    return stamp + clock + "".join(f"{9999.9 if np.isnan(value) else value:7.1f}" for value in row)
