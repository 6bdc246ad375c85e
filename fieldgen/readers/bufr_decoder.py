"""WMO BUFR messages on standard input -> a line of JSON for each on standard output.

Run by `fieldgen.readers.bufr` as a process of its own, which loads the decoder and nothing else:
decoders crash beside other libraries that bring the same C libraries, and a message that crashes
one must not end the run.

A line has `message` (from 1) and either `error` or `subsets`, a list of objects with FIELDS, null
where missing; without the decoder, one line with `fatal`.
"""

from __future__ import annotations

import json
import sys

START, END = b"BUFR", b"7777"

FIELDS = {
    "station": "stationOrSiteName",
    "year": "year",
    "month": "month",
    "day": "day",
    "hour": "hour",
    "minute": "minute",
    "latitude": "latitude",
    "longitude": "longitude",
    "height": "heightOfStation",
    "quality": "qualityFlagsForGroundBasedGnssData",
    "water_vapour": "precipitableWater",
}
"""Names of the decoder for what stands once in a subset."""

SLANTS = {
    "elevation": "elevation",
    "delay": "atmosphericPathDelayInSatelliteSignal",
    "sigma": "estimatedErrorInAtmosphericPathDelay",
}
"""Names for what stands once for each path of a subset; lists."""


def messages(data: bytes):
    """Number and bytes of each message, None for the bytes of one that is cut short or damaged."""
    number, place = 0, data.find(START)
    while place >= 0:
        number += 1
        end = place + int.from_bytes(data[place + 4 : place + 7])
        whole = data[place:end]
        if 8 < end - place == len(whole) and whole.endswith(END):
            yield number, whole
            place = data.find(START, end)
        else:
            yield number, None
            place = data.find(START, place + 4)


def decode(eccodes, message: bytes) -> list[dict]:
    """The subsets of one message; raises what the decoder raises."""
    handle = eccodes.codes_new_from_message(message)
    try:
        eccodes.codes_set(handle, "unpack", 1)
        count = eccodes.codes_get(handle, "numberOfSubsets")
        if eccodes.codes_get(handle, "compressedData"):
            columns = [_compressed(eccodes, handle, count, name) for name in FIELDS.values()]
            slants = [_compressed_slants(eccodes, handle, count, name) for name in SLANTS.values()]
            return [
                dict(zip(FIELDS, (column[index] for column in columns), strict=True))
                | dict(zip(SLANTS, (column[index] for column in slants), strict=True))
                for index in range(count)
            ]
        return [_subset(eccodes, handle, index + 1) for index in range(count)]
    finally:
        eccodes.codes_release(handle)


def _subset(eccodes, handle, number: int) -> dict:
    """One subset of a message that is not compressed."""
    values = {
        field: _values(eccodes, handle, f"/subsetNumber={number}/{name}")
        for field, name in (FIELDS | SLANTS).items()
    }
    once = {field: values[field][0] if values[field] else None for field in FIELDS}
    return once | {field: values[field] for field in SLANTS}


def _compressed(eccodes, handle, count: int, name: str, rank: int = 1) -> list:
    """One value for each subset of a compressed message; equal ones are stored once."""
    values = _values(eccodes, handle, f"#{rank}#{name}")
    return values * count if len(values) == 1 else values or [None] * count


def _compressed_slants(eccodes, handle, count: int, name: str) -> list[list]:
    """The values of all paths for each subset of a compressed message."""
    columns, rank = [], 1
    while eccodes.codes_is_defined(handle, f"#{rank}#{name}"):
        columns.append(_compressed(eccodes, handle, count, name, rank))
        rank += 1
    return [[column[index] for column in columns] for index in range(count)]


def _values(eccodes, handle, key: str) -> list:
    """Values of a key, None where missing; [] if the message does not have it."""
    try:
        values = eccodes.codes_get_array(handle, key)
    except eccodes.KeyValueNotFoundError:
        return []
    missing = (eccodes.CODES_MISSING_DOUBLE, eccodes.CODES_MISSING_LONG)
    return [
        None if value in missing else value.strip() if isinstance(value, str) else value.item()
        for value in values
    ]


def main() -> None:
    """Decode standard input."""
    try:
        import eccodes
    except Exception as error:  # a library that is there may still not load
        print(json.dumps({"fatal": f"{type(error).__name__}: {error}"}))
        return
    for number, message in messages(sys.stdin.buffer.read()):
        line = {"message": number}
        try:
            if message is None:
                raise ValueError("it is cut short or damaged")
            line["subsets"] = decode(eccodes, message)
        except Exception as error:  # the decoder raises many kinds
            line["error"] = f"{type(error).__name__}: {error}"
        print(json.dumps(line), flush=True)


if __name__ == "__main__":
    main()
