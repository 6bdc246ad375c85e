"""`fieldgen export`."""

from __future__ import annotations

import argparse
from pathlib import Path

from fieldgen.commands.arguments import add_command, add_period, add_products, check_writable
from fieldgen.commands.terminal import show

FORMATS = ("geotiff", "grib2")
VARIABLES = ("pwv", "pwv_sigma", "pwv_at_reference", "flag")
"""Named here too, so that the help loads nothing heavy; a test compares them."""


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "export",
        "write fields as GeoTIFF or GRIB2, a file a day",
        'fieldgen export "outputs/Quendrava GNSS network" --format geotiff --variable pwv_sigma',
        _run,
    )
    add_products(parser)
    parser.add_argument("--format", choices=FORMATS, required=True, help="GRIB2 holds pwv alone")
    parser.add_argument(
        "--variable", choices=VARIABLES, default="pwv", help="of the field files (default: pwv)"
    )
    add_period(parser)
    parser.add_argument(
        "--out", metavar="FOLDER", type=Path, help="default: FOLDER/<format>"
    )  # fmt: skip


def _run(options: argparse.Namespace) -> int:
    from fieldgen.exporting.files import export_fields
    from fieldgen.period import check_period, parse_time

    check_period(options.start, options.end)
    period = [parse_time(text) if text else None for text in (options.start, options.end)]
    out = check_writable(options.out or options.folder / options.format)
    paths = export_fields(options.folder, options.format, options.variable, out, *period)
    show(f"{len(paths)} files written to {out}")
    return 0
