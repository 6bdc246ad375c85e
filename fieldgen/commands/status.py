"""`fieldgen status`."""

from __future__ import annotations

import argparse

from fieldgen.commands.arguments import (
    add_command,
    add_folder,
    add_network,
    duration,
    product_folder,
)
from fieldgen.commands.terminal import show

ATTENTION = 4
"""Exit status when somebody should look."""


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "status",
        "tell how old the newest hour is, which stations are missing, and what was rejected lately",
        "fieldgen status demo_network/network.toml --at 2026-09-11T01:00",
        _run,
    )
    add_network(parser)
    add_folder(parser)
    parser.add_argument("--json", action="store_true", help="for a program")
    parser.add_argument(
        "--max-age", metavar="AGE", type=duration, default="3h",
        help="of the newest hour, such as 90min or 3h (default: 3h)",
    )  # fmt: skip
    parser.add_argument(
        "--max-missing", metavar="N", type=int,
        help="stations that may be missing (default: a quarter of them)",
    )  # fmt: skip
    parser.add_argument("--at", metavar="T", help="as seen at this time, in UTC (default: now)")


def _run(options: argparse.Namespace) -> int:
    import numpy as np

    from fieldgen.period import parse_time
    from fieldgen.settings import read_settings
    from fieldgen.status import as_json, format_status, read_status

    folder = product_folder(options, read_settings(options.network))
    time = parse_time(options.at) if options.at else np.datetime64("now", "s")
    status = read_status(folder, time, most_age=options.max_age, most_missing=options.max_missing)
    show(as_json(status) if options.json else format_status(status))
    return ATTENTION if status.problems else 0
