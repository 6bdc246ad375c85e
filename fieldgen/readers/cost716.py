"""COST-716 files, V1.0 to V2.2a -> zenith total delays.

A file holds blocks, one for each station and batch, each between lines of dashes: nine lines of
header, then for each sample one line, the number of its slant delays, and a line for each of them.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from functools import partial

import numpy as np

from fieldgen.readers.assembly import DELAY_VALUES, Rows, delay_records
from fieldgen.readers.epochs import DAY, calendar_epoch
from fieldgen.readers.positions import check_position
from fieldgen.readers.records import NO_TIME, DelayRecords, LineError, Rejections, Site
from fieldgen.readers.stated_places import StatedPlaces
from fieldgen.readers.text import read_lines

FORMAT = "COST-716"
RULE = re.compile(r"\s*-{20,}\s*$")
"""The line of dashes around a block."""

STATION, PLACE, TIMES, COUNT = 1, 3, 4, 8
"""Lines of a block's header, from 0, that are read."""

TIME = re.compile(r"(\d{1,2})-([A-Za-z]{3})-(\d{4})\s+(\d{1,2}):(\d{1,2}):(\d{1,2})")
MONTHS = ("JAN", "FEB", "MAR", "APR", "MAY", "JUN", "JUL", "AUG", "SEP", "OCT", "NOV", "DEC")

SAMPLE = re.compile(r"\s*(\d{1,2})\s+(\d{1,2})\s+(\d{1,2})\s+[0-9A-Fa-f]{8}(?=[\s-]|$)")
"""Hour, minute, second and quality word that a sample begins with."""

VALUES = 12
VALUE_WIDTH = 7
"""ZTD, its error, ZWD, IWV, pressure, temperature, humidity [F7.1], gradients [F7.2] and electron
content [F8.3] of a sample."""

MILLIMETRES_PER_METRE = 1e3

MISSING_HEIGHT = -999.0
"""Heights at or below it stand for none."""


def is_cost716(line: str) -> bool:
    """Whether a file that begins with `line` is COST-716."""
    return bool(RULE.match(line)) or line.lstrip().upper().startswith(FORMAT)


def read_cost716(path, *, name: str | None = None) -> DelayRecords:
    """Zenith total delays [m] and their errors [m] of one COST-716 file.

    Heights are those of the antenna, above the ellipsoid and above the geoid. Epochs are UTC.
    Negative values (-9.9, -99.9 ...) are missing, NaN. Water vapour that the file gives is not
    read, because it was computed with another mean temperature; the quality word is not judged.
    `name` stands for the file in messages. Raises InputError if nothing in the file can be used.
    """
    name = name or str(path)
    reading = _Reading(name)
    for number, line in read_lines(path, name, reading.rejections):
        reading.take(number, line)
    return reading.records()


def parse_times(line: str) -> tuple[int, int]:
    """Epoch of the first sample and time of processing [s] of a header line, as
    `01-FEB-2021 03:00:00     01-FEB-2021 05:41:27`; LineError for anything else."""
    found = TIME.findall(line)
    if len(found) != 2:
        raise LineError("no times", f"line is {line.strip()[:60]!r}")
    try:
        return tuple(
            calendar_epoch(year, str(MONTHS.index(month.upper()) + 1), day, *clock)
            for day, month, year, *clock in found
        )
    except ValueError:
        raise LineError("impossible epoch", f"line is {line.strip()[:60]!r}") from None


def parse_site(line: str, name: str) -> Site:
    """Place of a header line: latitude, longitude, ellipsoidal height, height above the geoid, and
    antenna above benchmark, which is not used; LineError for anything else."""
    try:
        latitude, longitude, *heights = (float(word) for word in line.split()[:4])
        position = check_position(longitude, latitude)
        ellipsoidal, msl = (value if value > MISSING_HEIGHT else np.nan for value in heights)
    except ValueError as error:
        raise LineError("no position", f"line is {line.strip()[:60]!r} ({error})") from None
    return Site(*position, ellipsoidal, msl, name)


def parse_sample(line: str) -> tuple[int, float, float]:
    """Second of the day, delay and its error [m], NaN where missing; LineError if it is none."""
    match = SAMPLE.match(line)
    if not match:
        raise LineError("no sample", f"line begins {line.strip()[:40]!r}")
    hour, minute, second = (int(part) for part in match.groups())
    if hour > 24 or minute > 59 or second > 60:
        raise LineError("impossible epoch", f"time of day is {hour:02}:{minute:02}:{second:02}")
    text = line[match.end() :]
    words = text.split()
    if len(words) != VALUES:
        words = [text[start : start + VALUE_WIDTH] for start in (0, VALUE_WIDTH)]
    return hour * 3600 + minute * 60 + second, _value(words[0]), _value(words[1])


def _value(text: str) -> float:
    """Value [m] of a field in mm, NaN if it is blank or negative; LineError for words."""
    try:
        value = float(text) if text.strip() else np.nan
    except ValueError:
        raise LineError("not a number", f"value is {text.strip()[:20]!r}") from None
    return value / MILLIMETRES_PER_METRE if value >= 0.0 else np.nan


@dataclass
class _Block:
    """What has been read of a block."""

    first_line: int
    header: list[str] = field(default_factory=list)
    station: str = ""
    place: tuple = ()
    name: str = ""
    time: int = 0
    day: int = 0
    declared: int = 0
    samples: int = 0
    usable: bool = False


@dataclass
class _Reading:
    """What has been read of one file."""

    file: str
    rejections: Rejections = field(default_factory=Rejections)
    warnings: list[str] = field(default_factory=list)
    block: _Block | None = None
    slants_left: int = 0
    after_sample: bool = False
    created: np.datetime64 = NO_TIME
    places: StatedPlaces = field(default_factory=StatedPlaces)
    rows: Rows = field(default_factory=lambda: Rows(DELAY_VALUES))

    def take(self, number: int, line: str) -> None:
        """Read a line; in the header one may be empty."""
        if line.lstrip().upper().startswith(FORMAT):
            self._end_block()
            self.block = _Block(number, [line])
        elif RULE.match(line):
            self._end_block()
        elif self.block and len(self.block.header) <= COUNT:
            self._take_header(number, line, self.block)
        elif not line.strip():
            return
        elif self.block is None:
            self._reject(number, LineError("outside any block", f"line is {line.strip()[:40]!r}"))
        else:
            self._take_data(number, line, self.block)

    def _take_header(self, number: int, line: str, block: _Block) -> None:
        """Take in a header line; the last one makes the block usable."""
        block.header.append(line)
        if len(block.header) <= COUNT:
            return
        try:
            block.station, *rest = _station_words(block.header[STATION])
            block.name = rest[1].strip() if len(rest) > 1 else ""
            block.place = tuple(block.header[PLACE].split()[:4])
            parse_site(block.header[PLACE], block.name)
            start, processed = parse_times(block.header[TIMES])
            block.day, block.time = start - start % DAY, start
            block.declared = _count(line)
        except LineError as error:
            detail = f"header of the block at line {block.first_line}: {error.detail}"
            self._reject(number, LineError(error.reason, detail))
            return
        block.usable = True
        processed = np.datetime64(processed, "s")
        self.created = processed if np.isnat(self.created) else max(self.created, processed)

    def _take_data(self, number: int, line: str, block: _Block) -> None:
        """Read a sample, the number of its slant delays, or pass over one of them."""
        if self.slants_left:
            self.slants_left -= 1
        elif self.after_sample and line.strip().isdecimal():
            self.slants_left, self.after_sample = int(line), False
        else:
            self.after_sample = True
            block.samples += 1
            try:
                self._take_sample(number, line, block)
            except LineError as error:
                self._reject(number, error)

    def _take_sample(self, number: int, line: str, block: _Block) -> None:
        second, delay, sigma = parse_sample(line)
        if not block.usable:
            raise LineError("block without usable header", f"it begins at line {block.first_line}")
        if block.day + second < block.time - DAY // 2:  # past midnight
            block.day += DAY
        block.time = block.day + second
        site = partial(parse_site, block.header[PLACE], block.name)
        place = self.places.number(block.station, block.place, block.time, site)
        self.rows.add(number, place, block.time, delay, sigma, np.nan, np.nan)

    def _end_block(self) -> None:
        """Warn of a block that holds fewer or more samples than its header says."""
        block, self.block = self.block, None
        self.slants_left, self.after_sample = 0, False
        if block is None:
            return
        if len(block.header) <= COUNT:
            self._reject(
                block.first_line, LineError("block cut short", f"{len(block.header)} lines")
            )
        elif block.usable and block.samples != block.declared:
            self.warnings.append(
                f"block at line {block.first_line}, station {block.station}: has {block.samples}"
                f" samples, expected {block.declared}."
            )

    def _reject(self, line: int, error: LineError) -> None:
        self.rejections.add(self.file, line, error.reason, error.detail)

    def records(self) -> DelayRecords:
        """The records of the whole file."""
        self._end_block()
        ids, columns, places = self.places.tell(self.rows.columns(), self.file, self.rejections)
        return delay_records(
            self.file,
            ids,
            columns,
            self.rejections,
            created=self.created,
            warnings=self.warnings,
            **places,
        )


def _station_words(line: str) -> list[str]:
    """Code, DOMES number and name of a station."""
    words = line.upper().split(maxsplit=1)[:1] + line.split(maxsplit=2)[1:]
    if not words:
        raise LineError("no station", "line is empty")
    return words


def _count(line: str) -> int:
    """The number of samples that a header declares."""
    if not line.strip().isdecimal():
        raise LineError("no number of samples", f"line is {line.strip()[:40]!r}")
    return int(line)
