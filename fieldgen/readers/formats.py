"""Which reader a file needs, seen from how it begins, not from its name."""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

from fieldgen.errors import InputError
from fieldgen.readers.bufr import is_bufr, read_bufr
from fieldgen.readers.cost716 import is_cost716, read_cost716
from fieldgen.readers.records import DelayRecords, WeatherRecords
from fieldgen.readers.rinex_met import is_rinex_met, read_rinex_met
from fieldgen.readers.sinex_tro import is_sinex_tro, read_sinex_tro
from fieldgen.readers.tables import (
    DELAY_TABLE,
    WEATHER_TABLE,
    TableKind,
    is_table,
    read_delay_table,
    read_weather_table,
)
from fieldgen.readers.text import first_bytes, first_content_line


class Format(NamedTuple):
    """A file format: what it is, whether a beginning fits it, and its reader.

    The beginning is the first line with content; of a binary format, the first bytes as Latin-1.
    """

    description: str
    fits: Callable[[str], bool]
    read: Callable
    binary: bool = False


def _table_format(kind: TableKind, read: Callable) -> Format:
    """A table with one header line."""
    columns = ", ".join(kind.required + kind.one_of)
    return Format(f"table with columns {columns}", lambda line: is_table(line, kind), read)


DELAY_FORMATS = {
    "SINEX_TRO": Format("2.00, 1.00 or 0.01, begins with %=TRO", is_sinex_tro, read_sinex_tro),
    "COST-716": Format("V1.0 to V2.2a, begins with a line of dashes", is_cost716, read_cost716),
    "BUFR": Format("WMO sequence 3 07 022, begins with BUFR", is_bufr, read_bufr, binary=True),
    "CSV": _table_format(DELAY_TABLE, read_delay_table),
}

WEATHER_FORMATS = {
    "RINEX": Format(
        "meteorological, 2.11 or 3.0x, begins with RINEX VERSION / TYPE",
        is_rinex_met,
        read_rinex_met,
    ),
    "CSV": _table_format(WEATHER_TABLE, read_weather_table),
}


def read_delays(path, name: str | None = None) -> DelayRecords:
    """Delays of a file in any of DELAY_FORMATS; InputError if it is in none of them."""
    name = name or str(path)
    return find_format(path, name, DELAY_FORMATS).read(path, name=name)


def read_weather(path, name: str | None = None, pressure_unit: str = "hPa") -> WeatherRecords:
    """Weather of a file in any of WEATHER_FORMATS; InputError if it is in none of them."""
    name = name or str(path)
    read = find_format(path, name, WEATHER_FORMATS).read
    return read(path, name=name, pressure_unit=pressure_unit)


def find_format(path, name: str, formats: dict[str, Format]) -> Format:
    """The first format that fits how the file begins."""
    start = first_bytes(path, name).decode("latin-1")
    for known in formats.values():
        if known.binary and known.fits(start):
            return known
    line = first_content_line(path, name)
    for known in formats.values():
        if not known.binary and known.fits(line):
            return known
    begins = f"begins with {line.strip()[:40]!r}" if line else "is empty"
    raise InputError(f"{name}: file {begins}, expected {describe_formats(formats)}.")


def describe_formats(formats: dict[str, Format]) -> str:
    """`SINEX_TRO (...) or CSV (...)`."""
    return " or ".join(f"{name} ({known.description})" for name, known in formats.items())
