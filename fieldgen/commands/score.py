"""`fieldgen score`."""

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
        "score",
        "leave out each station, and each with its neighbours, and tell how well the rest predicts",
        "fieldgen score demo_network/network.toml --start 2026-09-08 --end 2026-09-10",
        _run,
    )
    add_network(parser)
    add_period(parser)
    add_folder(parser)
    add_jobs(parser)


def _run(options: argparse.Namespace) -> int:
    from fieldgen.period import check_period
    from fieldgen.progress import Progress
    from fieldgen.readers.network import read_network
    from fieldgen.scoring.files import write_score
    from fieldgen.scoring.picture import write_picture
    from fieldgen.scoring.report import report_score
    from fieldgen.scoring.summary import format_score
    from fieldgen.scoring.trials import score_network

    check_period(options.start, options.end)
    with Progress() as progress:
        network = read_network(options.network, progress.reading)
        folder = check_writable(product_folder(options, network.settings)) / "score"
        score = score_network(
            network,
            options.start,
            options.end,
            jobs=options.jobs,
            progress=progress.made,
        )
        report = report_score(network, score)
        paths = write_score(report, folder)
        write_picture(report, folder / "score.png")
    show(format_score(report))
    show(f"{len(paths) + 1} files written to {folder}")
    return 0
