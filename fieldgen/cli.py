"""The command line: arguments, progress, printing and exit codes.

Exit status: 0 when the job is done, 1 when the input cannot be used or the output not be written,
2 for wrong usage. Heavy modules are loaded by the command that needs them.
"""

from __future__ import annotations

import argparse
import os
import sys
from pathlib import Path

from fieldgen.errors import FieldgenError, OutputError

_DESCRIPTION = (
    "Hourly maps and grids of precipitable water vapour from the zenith delays of a regional GNSS "
    "network."
)
_EPILOG = (
    "Not a warning product. Decisions belong to the national weather and hydrological services."
)


def main(arguments: list[str] | None = None) -> int:
    """Run a command and return its exit status."""
    parser = _make_parser()
    options = parser.parse_args(arguments)
    try:
        return options.run(options)
    except FieldgenError as error:
        print(f"fieldgen: {error}", file=sys.stderr)
        return 1
    except KeyboardInterrupt:
        print("fieldgen: interrupted; files already written are whole.", file=sys.stderr)
        return 130
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1


def _make_parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser("fieldgen", description=_DESCRIPTION, epilog=_EPILOG)
    parser.add_argument("--version", action="version", version=_Version())
    commands = parser.add_subparsers(title="commands", required=True, metavar="COMMAND")
    _add_make(commands)
    _add_check(commands)
    return parser


class _Version:
    """The version, looked up only when it is printed."""

    def __str__(self) -> str:
        from fieldgen.products.metadata import fieldgen_version

        return f"fieldgen {fieldgen_version()}"

    def __mod__(self, _) -> str:
        return str(self)


def _add_command(commands, name: str, help_text: str, example: str, run) -> argparse.ArgumentParser:
    parser = commands.add_parser(
        name,
        help=help_text,
        description=f"{help_text[0].upper()}{help_text[1:]}.",
        epilog=f"example: {example}",
    )
    parser.add_argument("network", metavar="NETWORK.toml", type=Path, help="the settings file")
    parser.set_defaults(run=run)
    return parser


def _add_make(commands) -> None:
    parser = _add_command(
        commands,
        "make",
        "make the fields, station files and maps of a period",
        "fieldgen make demo_network/network.toml --start 2026-09-09T12:00 --end 2026-09-09T18:00",
        _make,
    )
    parser.add_argument("--start", metavar="T", help="first instant, ISO 8601 in UTC")
    parser.add_argument("--end", metavar="T", help="last instant; default: all hours of the input")
    parser.add_argument(
        "--out", metavar="FOLDER", type=Path, help="default: outputs/<network name>"
    )
    parser.add_argument(
        "--jobs", metavar="N", type=_positive, default=os.cpu_count() or 1,
        help="processes that share the days (default: all cores)",
    )  # fmt: skip


def _add_check(commands) -> None:
    _add_command(
        commands,
        "check",
        "read and check everything and print what would be used, writing nothing",
        "fieldgen check demo_network/network.toml",
        _check,
    )


def _positive(text: str) -> int:
    number = int(text)
    if number < 1:
        raise argparse.ArgumentTypeError(f"{number} is not one or more")
    return number


def _make(options: argparse.Namespace) -> int:
    from fieldgen.chain import make
    from fieldgen.progress import Progress
    from fieldgen.summary import format_run

    with Progress() as progress:
        network = _read(options.network, progress)
        folder = options.out or Path("outputs") / folder_name(network.settings.network.name)
        _check_writable(folder)
        run = make(
            network,
            folder,
            start=options.start,
            end=options.end,
            jobs=options.jobs,
            progress=progress.made,
        )
    print(format_run(run))
    return 0


def _check(options: argparse.Namespace) -> int:
    from fieldgen.progress import Progress
    from fieldgen.retrieval import retrieve_water_vapour
    from fieldgen.summary import format_check

    with Progress() as progress:
        network = _read(options.network, progress)
        stations = retrieve_water_vapour(network)
    print(format_check(network, stations))
    return 0


def _read(path: Path, progress):
    from fieldgen.readers.network import read_network

    return read_network(path, progress.reading)


def folder_name(name: str) -> str:
    """Name of a folder made from the network's name: nothing in it can leave `outputs`."""
    kept = "".join(letter if letter.isalnum() or letter in "-_ ." else "_" for letter in name)
    return kept.strip(" .") or "network"


def _check_writable(folder: Path) -> None:
    """Make the folder before the work begins; raises OutputError if that is not possible."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".writable.{os.getpid()}"
        probe.touch()
        probe.unlink()
    except OSError as error:
        raise OutputError(f"{folder}: cannot be written: {error.strerror}.") from None
