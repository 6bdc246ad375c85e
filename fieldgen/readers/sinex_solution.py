"""TROP/SOLUTION of SINEX_TRO: lines of site, epoch and the fields that the file declares.

Regular lines, with one word a field, are read many at once. The others (blank fields, words that
touch, odd epochs) are read one by one from the columns.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field, replace

import numpy as np

from fieldgen.errors import InputError
from fieldgen.readers.assembly import DELAY_VALUES, Columns, Rows, columns_from_parts
from fieldgen.readers.epochs import SINEX_EPOCH, sinex_epoch
from fieldgen.readers.records import LineError, Rejections
from fieldgen.readers.text import decode
from fieldgen.readers.words import WordIndex

TOTAL_DELAY = ("TROTOT", "ZTD")
"""Names of the total delay."""

SIGMA = ("STDDEV", "STDEV", "STD", "SIGMA", "SIG", "_SIG")
"""Names of a standard error: of the column before it, or of the column in front of the suffix."""

UNIT_WORDS = {"M": 1.0, "CM": 1e2, "MM": 1e3}
"""Units that some files spell out; most give the factor itself."""

DEFAULT_FACTOR = 1e3
"""File value / SI value where no unit is declared: millimetres, as in the older dialect."""

MISSING = -999.0
"""A missing value, before scaling; writers differ in decimals."""

WIDEST_FIELD = 30
LONGEST_STATION = 16
LONGEST_EPOCH = 14

POINT_MARK = " "
"""Between station and PT code, which hold none, in files that have a PT code before the epoch."""

LAST_ASCII = 0x7E
"""The last letter of ASCII; bytes above it may be control characters."""

_EPOCH_IN_LINE = re.compile(rf"(?<!\S){SINEX_EPOCH.pattern}(?!\S)")


@dataclass(frozen=True)
class Layout:
    """What stands in a line after the epoch.

    count : number of fields
    total, sigma : positions of the total delay and of its standard error (None: not in the file)
    total_factor, sigma_factor : file value / value in m
    widths : columns of each field without the blank before it; () if not known
    """

    count: int
    total: int
    sigma: int | None
    total_factor: float
    sigma_factor: float
    widths: tuple[int, ...] = ()


def find_layout(file: str, names: list[str], units: list[str], widths: list[str]) -> Layout:
    """The layout that TROP/DESCRIPTION declares; lists that do not match `names` count as absent.

    Raises InputError if the total delay is not among the names.
    """
    names = [name.upper() for name in names]
    total = next((names.index(name) for name in TOTAL_DELAY if name in names), None)
    if total is None:
        declared = " ".join(names[:20]) or "none"
        raise InputError(
            f"{file}: fields of TROP/SOLUTION are {declared}, expected {TOTAL_DELAY[0]} among them."
        )
    sigma = find_sigma(names, total)
    total_factor = unit_factor(units[total]) if total < len(units) else DEFAULT_FACTOR
    matching = sigma is not None and len(units) == len(names)
    sigma_factor = unit_factor(units[sigma]) if matching else total_factor
    return Layout(
        len(names), total, sigma, total_factor, sigma_factor, check_widths(widths, len(names))
    )


def find_sigma(names: list[str], total: int) -> int | None:
    """Position of the standard error of the field at `total`, None if there is none."""
    for suffix in SIGMA:
        own_name = f"{names[total]}_{suffix.removeprefix('_')}"
        if own_name in names:
            return names.index(own_name)
    following = total + 1
    return following if names[following : following + 1] and names[following] in SIGMA else None


def unit_factor(unit: str) -> float:
    """File value / SI value of a declared unit; millimetres where it cannot be read."""
    try:
        factor = float(unit.upper().replace("D", "E"))
    except ValueError:
        return UNIT_WORDS.get(unit.upper(), DEFAULT_FACTOR)
    return factor if 0.0 < factor < np.inf else DEFAULT_FACTOR


def check_widths(widths: list[str], count: int) -> tuple[int, ...]:
    """Declared widths as numbers, () unless there is a plausible one for each field."""
    plausible = all(
        word.isdecimal() and len(word) <= 2 and 0 < int(word) <= WIDEST_FIELD for word in widths
    )
    return tuple(int(word) for word in widths) if plausible and len(widths) == count else ()


def parse_line(text: str, layout: Layout) -> tuple[str, int, float, float]:
    """Station, epoch [s], total delay and standard error [m], NaN where missing, of one line.

    Raises LineError where there is no epoch or the fields cannot be told apart.
    """
    match = _EPOCH_IN_LINE.search(text)
    before = text[: match.start()].split() if match else []
    if not 1 <= len(before) <= 2:
        raise LineError("no epoch", f"line begins {text.strip()[:40]!r}")
    if len(before[0]) > LONGEST_STATION or not "".join(before).isprintable():
        raise LineError("no station", f"line begins {text.strip()[:40]!r}")
    try:
        time = sinex_epoch(match[0])
    except ValueError as error:
        raise LineError("impossible epoch", f"station {before[0]}: {error}") from None
    fields = split_fields(text[match.end() :], layout)
    total = _number(fields[layout.total], layout.total_factor)
    sigma = np.nan
    if layout.sigma is not None:
        sigma = _number_or_nan(fields[layout.sigma], layout.sigma_factor)
    return POINT_MARK.join(before), time, total, sigma


def split_fields(text: str, layout: Layout) -> list[str]:
    """The fields after the epoch, '' for a blank one: one word each, else cut by the widths."""
    words = text.split()
    if len(words) == layout.count:
        return words
    if len(words) > layout.count or not layout.widths:
        raise LineError("wrong number of fields", f"{len(words)}, expected {layout.count}")
    fields, place = [], 0
    for width in layout.widths:
        fields.append(text[place : place + 1 + width].rstrip())
        place += 1 + width
    cut = any(piece and piece[0] not in " \t+-" for piece in fields)
    if cut or text[place:].strip() or any(len(piece.split()) > 1 for piece in fields):
        raise LineError("fields off their columns", f"fields are {text.strip()[:40]!r}")
    return [piece.strip() for piece in fields]


def _number(text: str, factor: float) -> float:
    """Value in m of a field, NaN if it is missing; LineError if it is not a number."""
    try:
        value = float(text.upper().replace("D", "E")) if text else np.nan
    except ValueError:
        raise LineError("not a number", f"delay is {text[:20]!r}") from None
    return np.nan if is_missing(value) else value / factor


def _number_or_nan(text: str, factor: float) -> float:
    """Value in m of a field, NaN if it is missing or not a number."""
    try:
        return _number(text, factor)
    except LineError:
        return np.nan


def is_missing(value):
    """Whether a value as written stands for none."""
    return np.abs(value - MISSING) < 1.0


@dataclass
class Solution:
    """The records of one file's TROP/SOLUTION, gathered chunk by chunk."""

    file: str
    rejections: Rejections
    station_ids: dict[str, int] = field(default_factory=dict)
    parts: list[Columns] = field(default_factory=list)

    def read(self, words: WordIndex, lines, layout: Layout) -> None:
        """Take in the data lines at indices `lines` (n,) of a chunk."""
        offset = _words_before_fields(words, lines)
        regular = words.word_count[lines] == offset + layout.count
        if not layout.widths and regular.any():
            layout = replace(layout, widths=_widths_of(words, lines[regular][0], offset, layout))
        columns, odd = self._read_regular(words, lines[regular], offset, layout)
        self.parts.append(columns)
        self._read_odd(words, np.concatenate([lines[~regular], odd]), layout)

    def _read_regular(self, words: WordIndex, lines, offset: int, layout: Layout):
        """Columns of the lines that read well, and the indices of those that do not."""
        time = _each_once(_epoch_or_none, words.words(lines, offset - 1, LONGEST_EPOCH))
        total = _numbers(words.words(lines, offset + layout.total, WIDEST_FIELD))
        sigma = np.full(len(lines), np.nan)
        if layout.sigma is not None:
            sigma = _numbers(words.words(lines, offset + layout.sigma, WIDEST_FIELD))
        station = words.words(lines, 0, LONGEST_STATION)
        good = (time != _NO_EPOCH) & ~np.isnan(total) & (station != b"")
        if offset == 3:
            point = words.words(lines, 1, LONGEST_STATION)
            station = np.char.add(np.char.add(station, POINT_MARK.encode()), point)
        if (words.letters > LAST_ASCII).any():
            good &= _each_once(_is_printable, station) == 1
        place = _each_once(self._station_number, station[good])
        return Columns(
            words.line_number(lines[good]),
            place,
            time[good],
            _delays(
                _scaled(total[good], layout.total_factor), _scaled(sigma[good], layout.sigma_factor)
            ),
        ), lines[~good]

    def _read_odd(self, words: WordIndex, lines, layout: Layout) -> None:
        """Take in lines one by one."""
        rows = Rows(DELAY_VALUES)
        for index in lines:
            number = int(words.line_number(index))
            try:
                station, time, total, sigma = parse_line(words.line(index), layout)
            except LineError as error:
                self.rejections.add(self.file, number, error.reason, error.detail)
            else:
                place = self._station_number(station.encode())
                rows.add(number, place, time, total, sigma, np.nan, np.nan)
        self.parts.append(rows.columns())

    def _station_number(self, station: bytes) -> int:
        """Index of a station, new ones are added."""
        name = decode(station).upper()
        return self.station_ids.setdefault(name, len(self.station_ids))

    def columns(self) -> Columns:
        """All records in the order of the file."""
        return columns_from_parts(self.parts, DELAY_VALUES)


def _is_printable(word: bytes) -> bool:
    """Whether a word is nothing but letters that can be seen."""
    return decode(word).isprintable()


_NO_EPOCH = np.iinfo(np.int64).min


def _words_before_fields(words: WordIndex, lines) -> int:
    """2 for site and epoch, 3 if the first line has a PT code between them."""
    head = words.line(lines[0]).split()[:3]
    return 3 if len(head) == 3 and SINEX_EPOCH.fullmatch(head[2]) else 2


def _widths_of(words: WordIndex, line: int, offset: int, layout: Layout) -> tuple[int, ...]:
    """Widths of the fields in a regular line, whose numbers end where the columns end."""
    last = words.first_word[line] + offset + layout.count
    ends = words.word_end[last - layout.count - 1 : last]
    return tuple(int(width) for width in np.diff(ends) - 1)


def _epoch_or_none(word: bytes) -> int:
    """Seconds of an epoch, _NO_EPOCH if it is none."""
    try:
        return sinex_epoch(word.decode("latin-1"))
    except ValueError:
        return _NO_EPOCH


def _each_once(function, values):
    """function(value) as int64 (n,), called once for each different value, the first one first."""
    different, first, number = np.unique(values, return_index=True, return_inverse=True)
    result = np.empty(len(different), np.int64)
    for index in np.argsort(first):
        result[index] = function(different[index])
    return result[number]


def _numbers(words):
    """Words (n,) bytes as float, NaN for those that are not numbers."""
    try:
        return words.astype(float)
    except ValueError:
        return np.array([_float_or_nan(word) for word in words], float)


def _float_or_nan(word: bytes) -> float:
    """A number, NaN if it is none."""
    try:
        return float(word)
    except ValueError:
        return np.nan


def _scaled(values, factor: float):
    """Values in m, NaN where missing."""
    return np.where(is_missing(values), np.nan, values / factor)


def _delays(total, sigma) -> dict:
    """The values of delay columns without PWV."""
    nothing = np.full(len(total), np.nan)
    return dict(zip(DELAY_VALUES, (total, sigma, nothing, nothing), strict=True))
