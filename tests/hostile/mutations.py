"""Ways to spoil a file, as plain data that hypothesis can draw, shrink and print."""

from __future__ import annotations

import gzip
import re
from typing import NamedTuple

from hypothesis import strategies as st

NUMBER = re.compile(rb"[-+]?\d+(?:\.\d*)?(?:[eE][-+]?\d+)?")

PIECES = (
    b"nan", b"NaN", b"inf", b"-inf", b"1e308", b"-1e308", b"1e-320", b"-0", b"0", b"1_0", b"+-1",
    b"9" * 30, b"9" * 5000, b"-9999", b"-999.0", b"1e400", b"0x10", b"1D+03", b"*" * 7,
    "١٢٣".encode(), "²".encode(), "－1".encode(), "\u202e".encode(), "\u2028".encode(),
    "\ufeff".encode(), "\u00a0".encode(), "\u0130".encode(), b"\xed\xa0\x80", b"\xff\xfe",
    b"\xc3", b"\x9b31m", b"\x00", b"\x1b[31m", b"\x07", b"\x7f", b"\x85", b"\r", b"\n", b"\n\n",
    b"\r\n", b"\t", b"  ", b"", b",", b";", b'"', b'""', b"'", b"#", b"*", b"+", b"-", b"%",
    b"%=TRO", b"%=ENDTRO\n", b"+TROP/SOLUTION\n", b"-TROP/SOLUTION\n", b"+TROP/DESCRIPTION\n",
    b"+SITE/ID\n", b"+\n", b"../../etc/x", b"<b>x</b>", b"=1+1", b"$x$", b"/", b"A/B", b"A" * 300,
    b"x" * 20_000, b"1998:366:86400", b"2030:999:99999", b"1980:001:00000", b"2099:365:86400",
    b"2030-02-30", b"2030-01-31T24:00Z", b"1980-01-01T00:00Z", b"2099-12-31T23:59:59.999Z",
    b"2030-01-31T00:00:00+05:00", b"null", b"true", b"{", b"}", b"[", b"]", b"[" * 5000,
    b"RINEX VERSION / TYPE", b"END OF HEADER", b"# / TYPES OF OBSERV", b"1000000000",
)  # fmt: skip
"""What is put in."""

KINDS = (
    "flip", "insert", "insert", "number", "number", "number", "drop line", "double line",
    "swap lines", "cut line", "rotate lines", "double", "truncate", "gzip", "truncated gzip",
    "long line",
)  # fmt: skip


class Mutation(NamedTuple):
    """One way to spoil a file: what is done, where (in millionths), where else, and with what."""

    kind: str
    place: int
    other: int
    piece: bytes


mutations = st.lists(
    st.builds(
        Mutation,
        st.sampled_from(KINDS),
        st.integers(0, 999_999),
        st.integers(0, 999_999),
        st.sampled_from(PIECES) | st.binary(max_size=6),
    ),
    min_size=1,
    max_size=3,
)


def spoil(data: bytes, steps) -> bytes:
    """`data` after all mutations."""
    for step in steps:
        data = _spoil_once(data, step)
    return data


VALUES = (
    "nan", "-nan", "inf", "-inf", "0", "-1", "1", "3", "1e308", "-1e308", "1e-308", "1e-9", "1e9",
    "-0.0", "500", "10000", "9" * 400, "9" * 4400, "0x" + "f" * 5000, "true", "[]", "[[]]", "{}",
    "{a = 1}", "[1, 2]", "[2, 1]", "[0, 1e308]", "[nan, 1]", "1979-05-27", "07:32:00",
    "1979-05-27T07:32:00Z", '""', '" "', '"\\u0000"', '"\\u001B[31m"', '"\\u202E"', '"a\\nb"',
    '"/dev/zero"', '"/"', '"."', '".."', '"**"', '"../../etc/x"', '"[a"', '"linear"', '"pykrige"',
    '"auto"', '"EPSG:4326"', '"EPSG:4978"', '"EPSG:99999999999999999999"', '"+proj=laea"',
    '"+proj=pipeline"', '"{}"', '"1h"', '"1d"', '"999999d"', '"9999999d"', '"²h"', '"0h"',
    f'"{"x" * 300}"', f'"{"x" * 100_000}"', f'"{"é" * 120}"', '"terrain.tif"', '"delays.csv"',
    '["delays.csv", "delays.csv"]', "[" * 900 + "]" * 900, "{a = " * 200 + "1" + "}" * 200,
)  # fmt: skip
"""What is put in the place of a setting, all of it valid TOML."""


def spoil_values(data: bytes, steps) -> bytes:
    """Settings with some values replaced by others, one a mutation."""
    lines = data.decode().split("\n")
    keys = [index for index, line in enumerate(lines) if " = " in line]
    for step in steps:
        index = keys[len(keys) * step.place // 10**6]
        key = lines[index].split(" = ")[0]
        lines[index] = f"{key} = {VALUES[len(VALUES) * step.other // 10**6]}"
    return "\n".join(lines).encode()


NUMBERS = (
    "0", "1", "3", "50", "500", "1e3", "1e4", "1e6", "1e9", "1e30", "1e154", "1e308", "1e-2",
    "1e-4", "1e-9", "1e-30", "1e-160", "1e-308", "-1", "-400", "-1e4", "-1e308",
)  # fmt: skip
"""What is put in the place of a number of the settings for a whole run."""


def spoil_numbers(data: bytes, steps) -> bytes:
    """Settings with some numbers replaced by others, one a mutation."""
    lines = data.decode().split("\n")
    keys = [index for index, line in enumerate(lines) if re.search(r" = [-0-9.]+$", line)]
    for step in steps:
        index = keys[len(keys) * step.place // 10**6]
        key = lines[index].split(" = ")[0]
        lines[index] = f"{key} = {NUMBERS[len(NUMBERS) * step.other // 10**6]}"
    return "\n".join(lines).encode()


def _spoil_once(data: bytes, step: Mutation) -> bytes:
    kind, place, other, piece = step
    at, stop = sorted((len(data) * place // 10**6, len(data) * other // 10**6))
    if kind == "flip":
        return data[:at] + bytes([data[at] ^ (1 << other % 8)]) + data[at + 1 :] if data else data
    if kind == "insert":
        return data[:at] + piece + data[at:]
    if kind == "number":
        return _replace_number(data, place, piece)
    if kind == "double":
        return data[:stop] + data[at:]
    if kind == "truncate":
        return data[:stop]
    if kind == "gzip":
        return gzip.compress(data, 1)
    if kind == "truncated gzip":
        packed = gzip.compress(data, 1)
        return packed[: len(packed) * other // 10**6]
    return _spoil_lines(data, step)


def _replace_number(data: bytes, place: int, piece: bytes) -> bytes:
    found = list(NUMBER.finditer(data))
    if not found:
        return data
    one = found[len(found) * place // 10**6]
    return data[: one.start()] + piece + data[one.end() :]


def _spoil_lines(data: bytes, step: Mutation) -> bytes:
    lines = data.split(b"\n")
    first, second = (len(lines) * place // 10**6 for place in (step.place, step.other))
    if step.kind == "drop line":
        del lines[first]
    elif step.kind == "double line":
        lines.insert(second, lines[first])
    elif step.kind == "swap lines":
        lines[first], lines[second] = lines[second], lines[first]
    elif step.kind == "cut line":
        lines[first] = lines[first][: len(lines[first]) * step.other // 10**6]
    elif step.kind == "rotate lines":
        lines = lines[first:] + lines[:first]
    else:
        lines[first] += (step.piece[:3] or b" ") * 11_000
    return b"\n".join(lines)
