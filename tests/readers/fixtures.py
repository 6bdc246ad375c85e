"""Small files of an invented network in the open ocean, built from the format descriptions."""

from __future__ import annotations

import gzip
from dataclasses import dataclass

FIELDS = ("TROTOT", "STDDEV", "TGNTOT", "STDDEV")
XYZ = {
    "ARDA": (3800928.631, -2004951.959, 4697505.388),
    "BELU": (3800928.631, -2004951.959, -4697505.388),
}
"""X, Y, Z [m] of 27.8112 W, 47.7391 N, 120 m (pyproj, EPSG:4979 to EPSG:4978), and mirrored."""


def block(name: str, *lines: str) -> str:
    """A block of SINEX_TRO."""
    return "\n".join([f"+{name}", *lines, f"-{name}"]) + "\n"


@dataclass
class SinexFile:
    """Parts of a SINEX_TRO 2.00 file, two stations and two epochs; replace what a test needs."""

    header: str = "%=TRO 2.00 XYZ 2030:032:03600 XYZ 2030:031:00000 2030:031:82800 P MIX"
    description: str = block(
        "TROP/DESCRIPTION",
        "*_________KEYWORD_____________ __VALUE(S)______________________________",
        " TIME SYSTEM                   G",
        " TROPO PARAMETER NAMES         TROTOT STDDEV TGNTOT STDDEV",
        " TROPO PARAMETER UNITS         1e+03 1e+03 1e+03 1e+03",
        " TROPO PARAMETER WIDTH         6 5 6 5",
    )
    site_id: str = block(
        "SITE/ID",
        "*STATION__ PT __DOMES__ T _STATION_DESCRIPTION__ _LONGITUDE _LATITUDE_ _HGT_ELI_",
        " ARDA00ATL  A 99901M001 P Arda pier             332.188800  47.739100   120.000    61.500",
        " BELU00ATL  A 99902M001 P Belu ridge            331.500000  48.250000   815.250   756.000",
    )
    coordinates: str = ""
    solution: str = block(
        "TROP/SOLUTION",
        "*STATION__ ____EPOCH_____ TROTOT STDDEV TGNTOT STDDEV",
        " ARDA00ATL 2030:031:00000 2401.5   1.3   0.25  0.11",
        " ARDA00ATL 2030:031:03600 2402.5   1.4   0.26  0.12",
        " BELU00ATL 2030:031:00000 2301.5   1.5  -0.25  0.13",
        " BELU00ATL 2030:031:03600 2302.5   1.6  -0.26  0.14",
    )
    trailer: str = "%=ENDTRO\n"

    def text(self) -> str:
        """The whole file."""
        return "".join(
            [
                self.header,
                "\n",
                self.description,
                self.site_id,
                self.coordinates,
                self.solution,
                self.trailer,
            ]
        )


def solution(*lines: str) -> str:
    """A TROP/SOLUTION block without column headings."""
    return block("TROP/SOLUTION", *lines)


OLD_DIALECT = SinexFile(
    header="%=TRO 0.01 XYZ 98:032:03600 XYZ 98:031:00000 98:031:82800 P",
    description=block(
        "TROP/DESCRIPTION",
        " SAMPLING INTERVAL                  3600",
        " SOLUTION_FIELDS_1             TROTOT STDDEV TGNTOT STDDEV",
    ),
    site_id="",
    coordinates=block(
        "TROP/STA_COORDINATES",
        "*SITE PT SOLN T __STA_X_____ __STA_Y_____ __STA_Z_____ SYSTEM REMRK",
        " ARDA  A    1 P  3800928.631 -2004951.959  4697505.388 ITRF20 XYZ",
    ),
    solution=solution(
        " ARDA 98:031:00000 2401.5  1.3   0.25  0.11",
        " ARDA 98:031:03600 2402.5  1.4   0.26  0.12",
    ),
)


def write(folder, text: str, name: str = "network.tro", *, encoding: str = "utf-8"):
    """The path of a new file that holds `text`."""
    path = folder / name
    path.write_bytes(text.encode(encoding))
    return path


def write_gzip(folder, text: str, name: str):
    """The path of a new gzip file that holds `text`."""
    path = folder / name
    path.write_bytes(gzip.compress(text.encode()))
    return path


def labelled(content: str, label: str) -> str:
    """A RINEX header line, with its label from column 61."""
    return f"{content:<60}{label}"


def types_lines(types: list[str]) -> list[str]:
    """Header lines for the types of observation, nine a line."""
    lines = []
    for start in range(0, len(types), 9):
        count = f"{len(types):6d}" if start == 0 else " " * 6
        codes = "".join(f"    {code}" for code in types[start : start + 9])
        lines.append(labelled(count + codes, "# / TYPES OF OBSERV"))
    return lines


def rinex_header(
    types: list[str] | None = None,
    *,
    version: str = "2.11",
    marker: str = "ARDA",
    positions: tuple[tuple[float, float, float, float, str], ...] = (
        (3800928.631, -2004951.959, 4697505.388, 120.0, "PR"),
    ),
) -> str:
    """A RINEX meteorological header."""
    lines = [
        labelled(f"{version:>9}{'':11}METEOROLOGICAL DATA", "RINEX VERSION / TYPE"),
        labelled(marker, "MARKER NAME"),
        *types_lines(types or ["PR", "TD", "HR"]),
        labelled("invented barometer", "SENSOR MOD/TYPE/ACC"),
        *(
            labelled(f"{x:14.4f}{y:14.4f}{z:14.4f}{h:14.4f} {code}", "SENSOR POS XYZ/H")
            for x, y, z, h, code in positions
        ),
        labelled("", "END OF HEADER"),
    ]
    return "\n".join(lines) + "\n"


def rinex_record(epoch: str, values: list[float | None]) -> str:
    """A record: the epoch as written, then F7.1 values, eight on the first line, then ten."""

    def fields(some) -> str:
        return "".join(" " * 7 if value is None else f"{value:7.1f}" for value in some)

    lines = [epoch + fields(values[:8])]
    for start in range(8, len(values), 10):
        lines.append(" " * 4 + fields(values[start : start + 10]))
    return "\n".join(lines) + "\n"
