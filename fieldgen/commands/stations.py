"""`fieldgen stations`."""

from __future__ import annotations

import argparse

from fieldgen.commands.arguments import (
    add_command,
    add_language,
    add_products,
    add_public_folder,
    check_writable,
    duration,
    public_folder,
)
from fieldgen.commands.terminal import show


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "stations",
        "plot the delay and water vapour of stations over time",
        'fieldgen stations "outputs/Quendrava GNSS network" --station RUSQ00XQV',
        _run,
    )
    add_products(parser)
    parser.add_argument("--station", metavar="ID", help="one station (default: all)")
    parser.add_argument(
        "--last", metavar="TIME", type=duration, default="7d",
        help="before the newest hour, such as 12h or 30d (default: 7d)",
    )  # fmt: skip
    add_language(parser)
    add_public_folder(parser)


def _run(options: argparse.Namespace) -> int:
    from fieldgen.outreach.folder import ProductFolder
    from fieldgen.outreach.language import read_language
    from fieldgen.outreach.station_plots import write_plots

    language = read_language(options.language)
    folder = ProductFolder(options.folder)
    out = check_writable(public_folder(options)) / "stations"
    paths = write_plots(folder, out, language, station=options.station, last=options.last)
    show(f"{len(paths)} files written to {out}")
    return 0
