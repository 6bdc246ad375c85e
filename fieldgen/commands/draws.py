"""`fieldgen draws`."""

from __future__ import annotations

import argparse

from fieldgen.commands.arguments import (
    add_command,
    add_folder,
    add_network,
    add_period,
    check_writable,
    positive,
    product_folder,
)
from fieldgen.commands.terminal import show


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "draws",
        "draw equally likely fields, for what depends on cells and hours together",
        "fieldgen draws demo_network/network.toml --count 10 --start 2026-09-09 --end 2026-09-10",
        _run,
    )
    add_network(parser)
    parser.add_argument(
        "--count", metavar="N", type=positive, default=50, help="number of draws (default: 50)"
    )
    parser.add_argument(
        "--seed", metavar="N", type=positive, default=1,
        help="of the random numbers: the same gives the same draws (default: 1)",
    )  # fmt: skip
    add_period(parser)
    add_folder(parser)


def _run(options: argparse.Namespace) -> int:
    from fieldgen.draws import write_draws
    from fieldgen.period import check_period
    from fieldgen.progress import Progress
    from fieldgen.readers.network import read_network

    check_period(options.start, options.end)
    with Progress() as progress:
        network = read_network(options.network, progress.reading)
        folder = check_writable(product_folder(options, network.settings)) / "draws"
        paths = write_draws(
            network,
            folder,
            count=options.count,
            seed=options.seed,
            start=options.start,
            end=options.end,
            progress=progress.made,
        )
    show(f"{len(paths)} files of {options.count} draws written to {folder}")
    return 0
