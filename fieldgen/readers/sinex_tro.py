"""SINEX_TRO files of versions 2.00, 1.00 and 0.01 -> zenith total delays.

The dialects are told apart by what stands in the file, not by the version it claims.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import lru_cache
from itertools import islice

import numpy as np

from fieldgen.errors import InputError
from fieldgen.readers.assembly import Columns, delay_records
from fieldgen.readers.epochs import SINEX_EPOCH, sinex_epoch
from fieldgen.readers.records import NO_TIME, DelayRecords, LineError, Rejections
from fieldgen.readers.sinex_sites import ID, XYZ, SiteBlocks, parse_coordinates, parse_site_id
from fieldgen.readers.sinex_solution import POINT_MARK, Layout, Solution, find_layout
from fieldgen.readers.text import LONGEST_LINE, read_chunks, reject_long_line
from fieldgen.readers.words import WordIndex

HEADER = re.compile(r"\s*%\s*=?\s*(?:TRO|SNX)\b", re.IGNORECASE)

DESCRIPTION, SOLUTION = "TROP/DESCRIPTION", "TROP/SOLUTION"
BLOCKS = {
    DESCRIPTION: DESCRIPTION,
    SOLUTION: SOLUTION,
    "TROPO/DESCRIPTION": DESCRIPTION,
    "TROPO/SOLUTION": SOLUTION,
    ID: ID,
    XYZ: XYZ,
    "TROP/STA_COORDINATES": XYZ,
    "TROP/COORDINATES": XYZ,
}
"""What is read, by the names that blocks have."""

OTHER_BLOCKS = (
    "FILE/REFERENCE",
    "FILE/COMMENT",
    "INPUT/ACKNOWLEDGEMENTS",
    "SITE/RECEIVER",
    "SITE/ANTENNA",
    "SITE/ECCENTRICITY",
    "SITE/GPS_PHASE_CENTER",
    "BIAS/DESCRIPTION",
)
"""Blocks that are passed over, so that no misspelling of another block is seen in them."""

MOST_BLOCKS = 1000
"""Different names of blocks in one file; a file that has more is damaged."""

KEYWORDS = {
    "names": re.compile(r"(?:TROPO?[ _]PARAMETERS?[ _]NAMES?|SOLUTION[ _]FIELDS(?:[ _]?\d+)?) "),
    "units": re.compile(r"TROPO?[ _]PARAMETERS?[ _]UNITS? "),
    "widths": re.compile(r"TROPO?[ _]PARAMETERS?[ _]WIDTHS? "),
    "time_system": re.compile(r"TIME[ _]SYSTEM "),
}
"""Keywords of TROP/DESCRIPTION that are read, in upper case with single blanks."""

TIME_SYSTEMS = ("G", "GPS", "GPST", "U", "UTC", "UT")

OUTSIDE = ""
"""The block of lines that stand in none; a block that is passed over is None."""

COMMENT, CONTROL, BLOCK_START, BLOCK_END = b"*%+-"


def is_sinex_tro(line: str) -> bool:
    """Whether a file that begins with `line` is SINEX_TRO."""
    return bool(HEADER.match(line))


def read_sinex_tro(path, *, name: str | None = None) -> DelayRecords:
    """Zenith total delays [m] and their formal errors [m] of one SINEX_TRO file, plain or gzip.

    Epochs are UTC; files in GPS time are taken as UTC, 18 s being far below the time step.
    Water vapour that the file gives is not read, because it was computed with another mean
    temperature. Missing values are NaN; lines without a usable delay are counted in `rejections`.
    `name` stands for the file in messages. Raises InputError if nothing in the file can be used.
    """
    name = name or str(path)
    reading = _Reading(name)
    for chunk in read_chunks(path, name):
        reading.take(WordIndex.of(chunk))
    return reading.records()


@lru_cache(maxsize=1000)
def block_of(heading: str) -> str | None:
    """Which block a line such as `+TROP/SOLUTION` opens: one of BLOCKS' values, None for others."""
    name = normal_name(heading)
    if name in BLOCKS:
        return BLOCKS[name]
    if "SOLUTION" in name and "TROP" in name:
        return SOLUTION
    close = get_close_matches(name, [*BLOCKS, *OTHER_BLOCKS], n=1, cutoff=0.8)
    return BLOCKS.get(close[0]) if close else None


def normal_name(heading: str) -> str:
    """Name of a block in upper case, words joined by a slash."""
    return "/".join(heading.strip().lstrip("+-").upper().split())[:60]


@dataclass
class _Reading:
    """What has been read of one file so far."""

    file: str
    rejections: Rejections = field(default_factory=Rejections)
    warnings: list[str] = field(default_factory=list)
    created: np.datetime64 = NO_TIME
    begun: bool = False
    ended: bool = False
    block: str | None = OUTSIDE
    blocks_seen: dict[str, str | None] = field(default_factory=dict)
    declared: dict[str, list[str]] = field(default_factory=dict)
    headings: list[str] = field(default_factory=list)
    layout: Layout | None = None
    site_blocks: SiteBlocks = field(default_factory=SiteBlocks)
    solution: Solution = field(init=False)

    def __post_init__(self) -> None:
        self.solution = Solution(self.file, self.rejections)

    def take(self, words: WordIndex) -> None:
        """Read the lines of a chunk: control lines one by one, others in runs between them."""
        first = words.first_letter()
        first[words.line_length > LONGEST_LINE] = 0
        self._reject_long_lines(words)
        control = np.flatnonzero(np.isin(first, (CONTROL, BLOCK_START, BLOCK_END)))
        run_start = 0
        for index in [*control.tolist(), len(first)]:
            self._take_run(words, run_start, first[run_start:index])
            if index < len(first):
                self._take_control(first[index], words.line(index))
            run_start = index + 1

    def _take_run(self, words: WordIndex, start: int, first) -> None:
        """Read the lines between two control lines; `first` (n,) are their first letters."""
        if self.block == SOLUTION and not self.layout:
            for index in start + np.flatnonzero(first == COMMENT):
                self.headings = self.headings or _field_headings(words.line(index))
        data = start + np.flatnonzero((first != 0) & (first != COMMENT))
        if len(data):
            self._take_data(words, data)

    def _reject_long_lines(self, words: WordIndex) -> None:
        for index in np.flatnonzero(words.line_length > LONGEST_LINE):
            reject_long_line(self.rejections, self.file, int(words.line_number(index)))

    def _take_control(self, letter: int, line: str) -> None:
        """Read a line that begins with one of `%+-`."""
        if letter == CONTROL:
            self._take_header_or_trailer(line)
            return
        self._check_begun(line)
        if letter == BLOCK_START:
            self._open_block(line)
        else:
            self.block = OUTSIDE

    def _take_header_or_trailer(self, line: str) -> None:
        if is_sinex_tro(line):
            self.begun, self.ended = True, False
            self.created = _created(line)
            self.block = OUTSIDE
        elif "END" in line.upper():
            self.ended = True
            self.block = OUTSIDE

    def _check_begun(self, line: str) -> None:
        if not self.begun:
            raise InputError(
                f"{self.file}: first line is {line.strip()[:40]!r}, expected %=TRO and a version."
            )

    def _open_block(self, line: str) -> None:
        self.block = block_of(line)
        name = normal_name(line)
        if self.block and name not in BLOCKS and name not in self.blocks_seen:
            self.warnings.append(f"block {name} is read as {self.block}.")
        self.blocks_seen[name] = self.block
        if len(self.blocks_seen) > MOST_BLOCKS:
            raise InputError(
                f"{self.file}: blocks have more than {MOST_BLOCKS} different names, expected about "
                f"{len(BLOCKS)}. Fetch the file again."
            )
        if self.block == DESCRIPTION:
            self.declared = {}
            self.layout = None

    def _take_data(self, words: WordIndex, lines) -> None:
        """Read data lines, all of one block."""
        self._check_begun(words.line(lines[0]))
        if self.block == SOLUTION:
            self.layout = self.layout or self._find_layout()
            self.solution.read(words, lines, self.layout)
        elif self.block == DESCRIPTION:
            for index in lines:
                self._take_description(words.line(index))
        elif self.block in SITE_PARSERS:
            self._take_sites(words, lines)
        elif self.block == OUTSIDE:
            self.rejections.add_each(
                self.file,
                words.line_number(lines),
                "outside any block",
                lambda index: f"line begins {words.line(lines[index]).strip()[:40]!r}",
            )

    def _take_description(self, line: str) -> None:
        text = " ".join(line.split())
        for key, keyword in KEYWORDS.items():
            if match := keyword.match(text.upper()):
                self.declared.setdefault(key, []).extend(text[match.end() :].split())

    def _take_sites(self, words: WordIndex, lines) -> None:
        for index in lines:
            try:
                entry = SITE_PARSERS[self.block](words.line(index))
            except LineError as error:
                number = int(words.line_number(index))
                self.rejections.add(self.file, number, error.reason, error.detail)
            else:
                self.site_blocks.add(self.block, entry)

    def _find_layout(self) -> Layout:
        """The layout of TROP/SOLUTION, from its column headings if TROP/DESCRIPTION has none."""
        names = self.declared.get("names", [])
        if not names and self.headings:
            names = self.headings
            self.warnings.append(f"no field names in {DESCRIPTION}; the column headings are used.")
        units = self.declared.get("units", [])
        if units and len(units) != len(names):
            self.warnings.append(
                f"{DESCRIPTION} has {len(units)} units, expected {len(names)}, one a field."
            )
        return find_layout(self.file, names, units, self.declared.get("widths", []))

    def records(self) -> DelayRecords:
        """The records of the whole file, with stations that cannot be told apart taken out."""
        self._check_blocks()
        sites, shared = self.site_blocks.sites()
        ids, columns = self._resolved_stations(shared)
        self._warn_of_the_whole(columns)
        return delay_records(
            self.file,
            ids,
            columns,
            self.rejections,
            sites=sites,
            stays=self.site_blocks.stays,
            created=self.created,
            warnings=self.warnings + self.site_blocks.warnings,
        )

    def _check_blocks(self) -> None:
        """Refuse a file without TROP/SOLUTION; warn if the file has no trailer."""
        if not self.begun:
            raise InputError(f"{self.file}: nothing in the file, expected %=TRO and blocks.")
        if SOLUTION not in self.blocks_seen.values():
            seen = ", ".join(islice(self.blocks_seen, 20)) or "none"
            raise InputError(f"{self.file}: blocks are {seen}, expected {SOLUTION} among them.")
        if not self.ended:
            self.warnings.append("no %=ENDTRO at the end; the file may be cut short.")

    def _resolved_stations(self, shared: set[str]) -> tuple[list[str], Columns]:
        """Identifiers, and records that refer to them.

        CODE_PT where a code is shared and its lines have a PT code. Without a PT code the records
        of a shared code would mix two places, so they are rejected.
        """
        columns = self.solution.columns()
        ids: dict[str, int] = {}
        place = np.empty(len(self.solution.station_ids), int)
        mixed = np.zeros(len(place), bool)
        for written, number in self.solution.station_ids.items():
            code, _, point = written.partition(POINT_MARK)
            name = f"{code}_{point}" if point and code in shared else code
            place[number] = ids.setdefault(name, len(ids))
            mixed[number] = name in shared
        bad = mixed[columns.place]
        columns.place = place[columns.place]
        names = list(ids)
        self.rejections.add_each(
            self.file,
            columns.line[bad],
            "station code shared by two places",
            lambda index: f"station {names[columns.place[bad][index]]}",
        )
        return names, columns.keep(~bad)

    def _warn_of_the_whole(self, columns: Columns) -> None:
        """Warnings that need all records."""
        system = self.declared.get("time_system", ["UTC"])[:1]
        if system and system[0].upper() not in TIME_SYSTEMS:
            self.warnings.append(f"time system is {system[0]}, expected G or UTC; read as UTC.")
        given = ~np.isnan(columns.values["ztd"])
        without = given & ~(columns.values["ztd_sigma"] > 0.0)
        if without.any():
            self.warnings.append(f"{without.sum()} of {given.sum()} delays have no formal error.")


SITE_PARSERS: dict[str | None, Callable] = {ID: parse_site_id, XYZ: parse_coordinates}
"""What reads a line of each site block."""


def _created(header: str) -> np.datetime64:
    """Time of creation in the header, its first epoch; NaT if there is none."""
    match = SINEX_EPOCH.search(header)
    try:
        return np.datetime64(sinex_epoch(match[0]), "s") if match else NO_TIME
    except ValueError:
        return NO_TIME


def _field_headings(comment: str) -> list[str]:
    """Field names in a comment such as `*SITE ___EPOCH____ TROTOT STDDEV`, [] in any other."""
    words = [word.strip("_") for word in comment.upper().split()]
    return words[words.index("EPOCH") + 1 :] if "EPOCH" in words else []
