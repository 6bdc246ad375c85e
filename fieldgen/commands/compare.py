"""`fieldgen compare`."""

from __future__ import annotations

import argparse
from pathlib import Path

from fieldgen.commands.arguments import add_command, check_writable
from fieldgen.commands.terminal import show


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "compare",
        "compare field files with independent water vapour or soundings",
        "fieldgen compare outputs/*/fields/pwv_*.nc --with demo_network/observations.csv",
        _run,
    )
    parser.add_argument("fields", metavar="FIELDS", type=Path, nargs="+", help="pwv_YYYYMMDD.nc")
    parser.add_argument(
        "--with", dest="observations", metavar="TABLE.csv", type=Path, required=True,
        help="columns time, longitude, latitude, height, value, sigma, or a sounding's pressure, "
        "temperature, dewpoint or relative_humidity, height",
    )  # fmt: skip
    parser.add_argument(
        "--out", metavar="FOLDER", type=Path, help="write compare.json and compare.csv there"
    )


def _run(options: argparse.Namespace) -> int:
    from fieldgen.comparing.comparison import compare
    from fieldgen.comparing.files import write_comparison
    from fieldgen.comparing.summary import format_comparison

    if options.out is not None:
        check_writable(options.out)
    comparison = compare(options.fields, options.observations)
    show(format_comparison(comparison))
    if options.out is not None:
        paths = write_comparison(comparison, options.out)
        show(f"{len(paths)} files written to {options.out}")
    return 0
