"""WMO BUFR messages of ground-based GNSS (sequence 3 07 022) -> zenith total delays.

The messages are decoded by ecCodes, an optional library, in a process of its own.
"""

from __future__ import annotations

import json
import re
import subprocess
import sys
from functools import partial
from importlib.util import find_spec

import numpy as np

from fieldgen.errors import InputError
from fieldgen.readers import bufr_decoder
from fieldgen.readers.assembly import DELAY_VALUES, Rows, delay_records
from fieldgen.readers.epochs import calendar_epoch
from fieldgen.readers.positions import check_position
from fieldgen.readers.records import DelayRecords, LineError, Rejections, Site
from fieldgen.readers.stated_places import StatedPlaces
from fieldgen.readers.text import open_bytes

BEGINNING = re.compile(r"BUFR.{3}[\x02-\x04]", re.DOTALL)
"""Name, three bytes of length and the edition; a bulletin's heading may stand in front."""

LARGEST_FILE = 1 << 28
"""Bytes of messages that are read at once."""

TIMEOUT_S = 600
"""A decoder that takes longer hangs."""

ZENITH, NEAR_ZENITH = 90.0, 0.05
"""Elevation [degrees] of the path whose delay is read, and how far off it may be."""

POOR = 1 << 9
"""Bit 1 of the ten of 0 33 038, from the left: the quality of the delay is considered poor."""

INSTALL = "Install it with: pip install 'fieldgen[bufr]'."


def is_bufr(start: str) -> bool:
    """Whether a file that begins with `start`, bytes as Latin-1, is BUFR."""
    return bool(BEGINNING.search(start))


def read_bufr(path, *, name: str | None = None) -> DelayRecords:
    """Zenith total delays [m] and their errors [m] of the BUFR messages of one file.

    The delay (0 15 031) and its error (0 15 032) are those of the path at 90 degrees elevation;
    precipitable water (0 13 016) [kg m-2] is read where there is no delay. The height of the
    station (0 07 001) is above mean sea level. The epoch is the one of the message; the period it
    stands for is not judged. Delays that their producer flags as poor (0 33 038), and messages that
    cannot be decoded, are counted in `rejections`, whose line is the number of the message.
    `name` stands for the file in messages. Raises InputError if ecCodes is not installed or fails,
    or if nothing in the file can be used.
    """
    name = name or str(path)
    rejections, places, rows = Rejections(), StatedPlaces(), Rows(DELAY_VALUES)
    for line in decoded_messages(path, name):
        number = line["message"]
        if "error" in line:
            rejections.add(name, number, "message cannot be decoded", line["error"])
        for subset in line.get("subsets", []):
            try:
                _take_subset(number, subset, places, rows)
            except LineError as error:
                rejections.add(name, number, error.reason, error.detail)
    ids, columns, about = places.tell(rows.columns(), name, rejections)
    return delay_records(name, ids, columns, rejections, **about)


def decoded_messages(path, name: str) -> list[dict]:
    """What `bufr_decoder` prints for each message of a file; InputError if it fails."""
    if find_spec("eccodes") is None:
        raise InputError(f"{name}: BUFR needs ecCodes, which is not installed. {INSTALL}")
    with open_bytes(path, name) as stream:
        data = stream.read(LARGEST_FILE + 1)
    if len(data) > LARGEST_FILE:
        raise InputError(f"{name}: file is over {LARGEST_FILE >> 20} MB, expected less. Split it.")
    command = [sys.executable, "-P", bufr_decoder.__file__]
    try:
        done = subprocess.run(command, input=data, capture_output=True, timeout=TIMEOUT_S)
    except subprocess.TimeoutExpired:
        raise InputError(f"{name}: the BUFR decoder did not end in {TIMEOUT_S} s.") from None
    lines = [json.loads(line) for line in done.stdout.splitlines()]
    if lines and "fatal" in lines[0]:
        raise InputError(f"{name}: ecCodes does not load ({lines[0]['fatal']}). {INSTALL}")
    if done.returncode:
        why = done.stderr.decode("utf-8", "replace").strip().splitlines()[-1:] or ["no message"]
        raise InputError(
            f"{name}: the BUFR decoder ended with status {done.returncode} after {len(lines)}"
            f" messages ({why[0]})."
        )
    return lines


def _take_subset(number: int, subset: dict, places: StatedPlaces, rows: Rows) -> None:
    """Take in one subset; LineError if it cannot be used."""
    station = (subset["station"] or "").upper()
    if not station:
        raise LineError("no station", f"message {number}")
    time = _time(subset)
    if (subset["quality"] or 0) & POOR:
        raise LineError("flagged as poor by its producer", f"station {station}")
    delay, sigma = zenith_delay(subset)
    water_vapour = _number(subset["water_vapour"]) if np.isnan(delay) else np.nan
    key = (subset["longitude"], subset["latitude"], subset["height"])
    place = places.number(station, key, time, partial(_site, station, subset))
    rows.add(number, place, time, delay, sigma, water_vapour, np.nan)


def zenith_delay(subset: dict) -> tuple[float, float]:
    """Delay and its error [m] of the path at the zenith, NaN where there is none."""
    errors = subset["sigma"] or [None] * len(subset["delay"])
    for elevation, delay, error in zip(subset["elevation"], subset["delay"], errors, strict=False):
        at_zenith = elevation is not None and abs(elevation - ZENITH) <= NEAR_ZENITH
        if at_zenith and delay is not None:
            return float(delay), _number(error)
    return np.nan, np.nan


def _time(subset: dict) -> int:
    """Seconds since 1970 of a subset."""
    parts = [subset[part] for part in ("year", "month", "day", "hour", "minute")]
    if None in parts:
        raise LineError("no epoch", f"station {subset['station']}")
    try:
        return calendar_epoch(*(str(part) for part in parts), "0")
    except ValueError as error:
        raise LineError("impossible epoch", f"station {subset['station']}: {error}") from None


def _site(station: str, subset: dict) -> Site:
    """Place of a subset, NaN where it does not say."""
    longitude, latitude = _number(subset["longitude"]), _number(subset["latitude"])
    if not np.isnan([longitude, latitude]).any():
        try:
            longitude, latitude = check_position(longitude, latitude)
        except ValueError as error:
            raise LineError("impossible position", f"station {station}: {error}") from None
    return Site(longitude, latitude, msl_height=_number(subset["height"]))


def _number(value) -> float:
    """A value, NaN for none."""
    return np.nan if value is None else float(value)
