"""`fieldgen daily`."""

from __future__ import annotations

import argparse
from pathlib import Path

from fieldgen.commands.arguments import add_command, add_period, add_products, check_writable
from fieldgen.commands.terminal import show


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "daily",
        "write the mean and the maximum field of each day, with standard errors",
        'fieldgen daily "outputs/Quendrava GNSS network"',
        _run,
    )
    add_products(parser)
    add_period(parser)
    parser.add_argument("--out", metavar="FOLDER", type=Path, help="default: FOLDER/daily")


def _run(options: argparse.Namespace) -> int:
    from fieldgen.areas.daily import write_daily
    from fieldgen.areas.day import open_days
    from fieldgen.period import check_period, parse_time

    check_period(options.start, options.end)
    period = [parse_time(text) if text else None for text in (options.start, options.end)]
    days = open_days(options.folder, *period)
    out = check_writable(options.out or options.folder / "daily")
    for day in days:
        write_daily(day, out / day.fields.path.name.replace("pwv_", "daily_"))
    show(f"{len(days)} files written to {out}")
    return 0
