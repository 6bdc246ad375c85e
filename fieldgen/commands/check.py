"""`fieldgen check`."""

from __future__ import annotations

import argparse

from fieldgen.commands.arguments import add_command, add_network
from fieldgen.commands.terminal import show


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "check",
        "read and check everything and print what would be used, writing nothing",
        "fieldgen check demo_network/network.toml",
        _run,
    )
    add_network(parser)


def _run(options: argparse.Namespace) -> int:
    from fieldgen.progress import Progress
    from fieldgen.readers.network import read_network
    from fieldgen.retrieval import retrieve_water_vapour
    from fieldgen.summary import format_check

    with Progress() as progress:
        network = read_network(options.network, progress.reading)
        stations = retrieve_water_vapour(network)
    show(format_check(network, stations))
    return 0
