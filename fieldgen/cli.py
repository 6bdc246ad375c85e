"""The command line.

Exit status: 0 when the job is done, 1 when the input cannot be used or the output not be written,
2 for wrong usage, 3 when another run is at work in the folder, 4 when `status` finds a problem.
Heavy modules are loaded by the command that needs them.
"""

from __future__ import annotations

import argparse
import os
import sys

from fieldgen.commands import (
    animate,
    catchments,
    check,
    compare,
    daily,
    draws,
    export,
    make,
    page,
    score,
    sheet,
    stations,
    status,
    update,
)
from fieldgen.commands.terminal import show
from fieldgen.errors import FieldgenError

COMMANDS = (
    make, update, status, check, score, compare,
    page,
    catchments, daily, draws, export,
    animate, stations, sheet,
)  # fmt: skip
"""In the order of the help."""

_DESCRIPTION = (
    "Hourly maps and grids of precipitable water vapour from the zenith delays of a regional GNSS "
    "network."
)
_EPILOG = (
    "Not a warning product. Decisions belong to the national weather and hydrological services."
)


def main(arguments: list[str] | None = None) -> int:
    """Run a command and return its exit status."""
    options = make_parser().parse_args(arguments)
    try:
        return options.run(options)
    except FieldgenError as error:
        show(f"fieldgen: {error}", sys.stderr)
        return error.exit_status
    except KeyboardInterrupt:
        print("fieldgen: interrupted; files already written are whole.", file=sys.stderr)
        return 130
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1


def make_parser() -> argparse.ArgumentParser:
    """Parser of the command line, with all commands."""
    parser = argparse.ArgumentParser("fieldgen", description=_DESCRIPTION, epilog=_EPILOG)
    parser.add_argument("--version", action="version", version=_Version())
    commands = parser.add_subparsers(title="commands", required=True, metavar="COMMAND")
    for command in COMMANDS:
        command.add(commands)
    return parser


class _Version:
    """The version, looked up only when it is printed."""

    def __str__(self) -> str:
        from fieldgen.products.metadata import fieldgen_version

        return f"fieldgen {fieldgen_version()}"

    def __mod__(self, _) -> str:
        return str(self)
