"""Text files as blocks of whole lines or as lines, memory staying bounded.

Plain, gzip or compress (.Z), known by the first bytes, whatever the file is called. Text is UTF-8,
or Latin-1 where it is not valid UTF-8. Lines end in LF or CRLF.
"""

from __future__ import annotations

import gzip
import os
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from io import BufferedReader
from pathlib import Path
from typing import IO, NamedTuple

from fieldgen.errors import InputError
from fieldgen.input_files import check_is_file
from fieldgen.readers.records import Rejections

LONGEST_LINE = 10_000
"""Longest line [bytes] that is read; no format here comes near it."""

FEW_BYTES = 1 << 14
"""Size of a block [bytes] where only the first line is wanted."""

BEGINNING_BYTES = 300
"""Bytes by which a binary file is known."""

CHUNK_BYTES = 1 << 22
"""Size of a block [bytes]: about 50 000 lines."""

MOST_UNPACKED, UNPACKED_FREELY = 100, 1 << 24
"""A file may unpack to this many times its size, or to this size [bytes] if that is more."""

GZIP_MAGIC = b"\x1f\x8b"
COMPRESS_MAGIC = b"\x1f\x9d"
UTF8_MARK = b"\xef\xbb\xbf"
OTHER_COMPRESSION = {
    b"BZh": "bzip2",
    b"PK\x03\x04": "zip",
    b"\xfd7zXZ": "xz",
}


class Chunk(NamedTuple):
    """Some whole lines, each ending in LF (the last line of a file may lack it).

    Of a line longer than a chunk the middle is left out, but it stays longer than LONGEST_LINE.
    """

    data: bytes
    first_line: int


@contextmanager
def open_bytes(path, name: str) -> Iterator[IO[bytes]]:
    """An open binary file, decompressed on the way if it is gzip or compress.

    Data of compress have no checksum: that they are whole, only their text can tell.

    Raises InputError, which begins with `name`, where the file cannot be opened or read to its end.
    """
    try:
        check_is_file(path)
        with open(path, "rb") as raw:
            start = raw.read(6)
            raw.seek(0)
            _check_compression(start, name)
            if start.startswith(GZIP_MAGIC):
                with gzip.open(raw) as unpacked:
                    yield unpacked
            elif start.startswith(COMPRESS_MAGIC):
                with _open_compress(raw, name) as unpacked:
                    yield unpacked
            else:
                yield raw
    except EOFError as error:
        raise InputError(
            f"{name}: gzip data end early, expected a complete file. Fetch the file again."
        ) from error
    except (gzip.BadGzipFile, zlib.error) as error:
        raise InputError(
            f"{name}: gzip data are damaged ({error}). Fetch the file again."
        ) from error
    except OSError as error:
        raise InputError(f"{name}: cannot be read ({error.strerror or error}).") from error


@contextmanager
def _open_compress(raw: IO[bytes], name: str) -> Iterator[IO[bytes]]:
    """What a file of the Unix tool compress holds."""
    from uncompresspy import LZWFile

    try:
        with LZWFile(raw, warn_truncation=False, save_checkpoints=False) as unpacked:
            yield BufferedReader(unpacked)
    except (ValueError, IndexError) as error:
        raise InputError(
            f"{name}: compress (.Z) data are damaged ({error}). Fetch the file again."
        ) from error


def _check_compression(start: bytes, name: str) -> None:
    """Refuse what is compressed in a way that is not read here."""
    for magic, kind in OTHER_COMPRESSION.items():
        if start.startswith(magic):
            raise InputError(
                f"{name}: compression is {kind}, expected plain text, gzip or compress (.Z)."
                " Unpack it first."
            )


def read_chunks(path, name: str, size: int = CHUNK_BYTES) -> Iterator[Chunk]:
    """The file as chunks of about `size` bytes, cut between lines; blank ones are left out."""
    line, taken = 1, 0
    with open_bytes(path, name) as stream:
        rest = stream.read(len(UTF8_MARK)).removeprefix(UTF8_MARK)
        while block := stream.read(size):
            taken += len(block)
            _check_unpacked(taken, path, name)
            whole, newline, rest = (rest + block).rpartition(b"\n")
            rest = rest[: LONGEST_LINE + 1]
            if newline:
                if whole.strip():
                    yield Chunk(whole + newline, line)
                line += whole.count(b"\n") + 1
        if rest:
            yield Chunk(rest, line)


def _check_unpacked(taken: int, path, name: str) -> None:
    """Refuse a small file that unpacks without end; text of measurements shrinks to a tenth."""
    if taken > UNPACKED_FREELY and taken > MOST_UNPACKED * os.path.getsize(path):
        raise InputError(
            f"{name}: unpacks to more than {MOST_UNPACKED} times its size, expected text of "
            "measurements, which packs to a tenth. Fetch the file again."
        )


def decode(data: bytes) -> str:
    """Text of `data`: UTF-8 if it is valid, else Latin-1, which takes any byte."""
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError:
        return data.decode("latin-1")


def read_lines(
    path, name: str, rejections: Rejections, size: int = CHUNK_BYTES
) -> Iterator[tuple[int, str]]:
    """Line number (from 1) and text without its line ending; lines too long are rejected."""
    for chunk in read_chunks(path, name, size):
        lines = chunk.data.removesuffix(b"\n").split(b"\n")
        for number, line in enumerate(lines, chunk.first_line):
            if len(line) > LONGEST_LINE:
                reject_long_line(rejections, name, number)
            else:
                yield number, decode(line).rstrip("\r")


def reject_long_line(rejections: Rejections, name: str, line: int) -> None:
    """Count a line that is too long to belong to any format read here."""
    rejections.add(name, line, "line too long", f"more than {LONGEST_LINE} bytes")


def first_bytes(path, name: str) -> bytes:
    """The first BEGINNING_BYTES of a file, or all of it, decompressed."""
    with open_bytes(path, name) as stream:
        return stream.read(BEGINNING_BYTES)


def first_content_line(path, name: str) -> str:
    """The first line that is neither empty nor a `#` comment, '' if there is none."""
    for _, line in read_lines(path, name, Rejections(), FEW_BYTES):
        if line.strip() and not line.lstrip().startswith("#"):
            return line
    return ""


def file_stem(path) -> str:
    """Name of a file without folder, `.gz` or `.Z`, and its last suffix."""
    return Path(Path(path).name.removesuffix(".gz").removesuffix(".Z")).stem
