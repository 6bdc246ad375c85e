"""`fieldgen update`."""

from __future__ import annotations

import argparse
import sys

from fieldgen.commands.arguments import (
    add_command,
    add_folder,
    add_jobs,
    add_network,
    product_folder,
)
from fieldgen.errors import FieldgenError


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "update",
        "make what is missing, late or changed, and leave the rest as it is",
        "fieldgen update demo_network/network.toml --log-json",
        _run,
    )
    add_network(parser)
    add_folder(parser)
    add_jobs(parser)
    parser.add_argument(
        "--log-json", action="store_true", help="write the log as one JSON object a line"
    )


def _run(options: argparse.Namespace) -> int:
    from fieldgen.log import Log
    from fieldgen.settings import read_settings
    from fieldgen.update import update

    log = Log(sys.stderr, options.log_json)
    try:
        folder = product_folder(options, read_settings(options.network))
        update(options.network, folder, jobs=options.jobs, log=log)
    except FieldgenError as error:
        log.error("failed", reason=str(error))
        return error.exit_status
    return 0
