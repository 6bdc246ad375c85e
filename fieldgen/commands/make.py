"""`fieldgen make`."""

from __future__ import annotations

import argparse

from fieldgen.commands.arguments import (
    add_command,
    add_folder,
    add_jobs,
    add_network,
    add_period,
    check_writable,
    product_folder,
)
from fieldgen.commands.terminal import show


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "make",
        "make the fields, station files and maps of a period",
        "fieldgen make demo_network/network.toml --start 2026-09-09T12:00 --end 2026-09-09T18:00",
        _run,
    )
    add_network(parser)
    add_period(parser)
    add_folder(parser)
    add_jobs(parser)


def _run(options: argparse.Namespace) -> int:
    from fieldgen.chain import make
    from fieldgen.period import check_period
    from fieldgen.progress import Progress
    from fieldgen.readers.network import read_network
    from fieldgen.summary import format_run

    check_period(options.start, options.end)
    with Progress() as progress:
        network = read_network(options.network, progress.reading)
        run = make(
            network,
            check_writable(product_folder(options, network.settings)),
            start=options.start,
            end=options.end,
            jobs=options.jobs,
            progress=progress.made,
        )
    show(format_run(run))
    return 0
