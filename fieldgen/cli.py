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
from fieldgen.plain_text import file_name, printable

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
        _show(f"fieldgen: {error}", sys.stderr)
        return 1
    except KeyboardInterrupt:
        print("fieldgen: interrupted; files already written are whole.", file=sys.stderr)
        return 130
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1


def _show(text: str, file=None) -> None:
    """Print a text that may hold names from outside, escaped so that none commands the terminal."""
    file = file or sys.stdout
    encoding = file.encoding or "utf-8"
    text = printable(text).encode(encoding, "backslashreplace").decode(encoding)
    print(text, file=file)


def _make_parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser("fieldgen", description=_DESCRIPTION, epilog=_EPILOG)
    parser.add_argument("--version", action="version", version=_Version())
    commands = parser.add_subparsers(title="commands", required=True, metavar="COMMAND")
    _add_make(commands)
    _add_check(commands)
    _add_score(commands)
    _add_compare(commands)
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
    parser.set_defaults(run=run)
    return parser


def _add_network(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("network", metavar="NETWORK.toml", type=Path, help="the settings file")


def _add_period_and_folder(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--start", metavar="T", help="first instant, ISO 8601 in UTC")
    parser.add_argument("--end", metavar="T", help="last instant; default: all hours of the input")
    parser.add_argument(
        "--out", metavar="FOLDER", type=Path, help="default: outputs/<network name>"
    )
    parser.add_argument(
        "--jobs", metavar="N", type=_positive, default=os.cpu_count() or 1,
        help="processes that share the days (default: all cores)",
    )  # fmt: skip


def _add_make(commands) -> None:
    parser = _add_command(
        commands,
        "make",
        "make the fields, station files and maps of a period",
        "fieldgen make demo_network/network.toml --start 2026-09-09T12:00 --end 2026-09-09T18:00",
        _make,
    )
    _add_network(parser)
    _add_period_and_folder(parser)


def _add_check(commands) -> None:
    parser = _add_command(
        commands,
        "check",
        "read and check everything and print what would be used, writing nothing",
        "fieldgen check demo_network/network.toml",
        _check,
    )
    _add_network(parser)


def _add_score(commands) -> None:
    parser = _add_command(
        commands,
        "score",
        "leave out each station, and each with its neighbours, and tell how well the rest predicts",
        "fieldgen score demo_network/network.toml --start 2026-09-08 --end 2026-09-10",
        _score,
    )
    _add_network(parser)
    _add_period_and_folder(parser)


def _add_compare(commands) -> None:
    parser = _add_command(
        commands,
        "compare",
        "compare field files with independent water vapour or soundings",
        "fieldgen compare outputs/*/fields/pwv_*.nc --with observations.csv",
        _compare,
    )
    parser.add_argument("fields", metavar="FIELDS", type=Path, nargs="+", help="pwv_YYYYMMDD.nc")
    parser.add_argument(
        "--with", dest="observations", metavar="TABLE.csv", type=Path, required=True,
        help="columns time, longitude, latitude, height, value, sigma, or a sounding's pressure, "
        "temperature, dewpoint or relative_humidity, height",
    )  # fmt: skip
    parser.add_argument(
        "--out", metavar="FOLDER", type=Path, help="write compare.json and compare.csv there"
    )


def _positive(text: str) -> int:
    number = int(text)
    if number < 1:
        raise argparse.ArgumentTypeError(f"{number} is not one or more")
    return number


def _make(options: argparse.Namespace) -> int:
    from fieldgen.chain import make
    from fieldgen.period import check_period
    from fieldgen.progress import Progress
    from fieldgen.summary import format_run

    check_period(options.start, options.end)
    with Progress() as progress:
        network = _read(options.network, progress)
        folder = _product_folder(options, network)
        run = make(
            network,
            folder,
            start=options.start,
            end=options.end,
            jobs=options.jobs,
            progress=progress.made,
        )
    _show(format_run(run))
    return 0


def _check(options: argparse.Namespace) -> int:
    from fieldgen.progress import Progress
    from fieldgen.retrieval import retrieve_water_vapour
    from fieldgen.summary import format_check

    with Progress() as progress:
        network = _read(options.network, progress)
        stations = retrieve_water_vapour(network)
    _show(format_check(network, stations))
    return 0


def _score(options: argparse.Namespace) -> int:
    from fieldgen.period import check_period
    from fieldgen.progress import Progress
    from fieldgen.scoring.files import write_score
    from fieldgen.scoring.picture import write_picture
    from fieldgen.scoring.report import report_score
    from fieldgen.scoring.summary import format_score
    from fieldgen.scoring.trials import score_network

    check_period(options.start, options.end)
    with Progress() as progress:
        network = _read(options.network, progress)
        folder = _product_folder(options, network) / "score"
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
    _show(format_score(report))
    _show(f"{len(paths) + 1} files written to {folder}")
    return 0


def _compare(options: argparse.Namespace) -> int:
    from fieldgen.comparing.comparison import compare
    from fieldgen.comparing.files import write_comparison
    from fieldgen.comparing.summary import format_comparison

    if options.out is not None:
        _check_writable(options.out)
    comparison = compare(options.fields, options.observations)
    _show(format_comparison(comparison))
    if options.out is not None:
        paths = write_comparison(comparison, options.out)
        _show(f"{len(paths)} files written to {options.out}")
    return 0


def _product_folder(options: argparse.Namespace, network) -> Path:
    """The folder of a network's products, found writable."""
    folder = options.out or Path("outputs") / folder_name(network.settings.network.name)
    _check_writable(folder)
    return folder


def _read(path: Path, progress):
    from fieldgen.readers.network import read_network

    return read_network(path, progress.reading)


def folder_name(name: str) -> str:
    """Name of a folder made from the network's name: nothing in it can leave `outputs`."""
    return file_name(name, "network")


def _check_writable(folder: Path) -> None:
    """Make the folder before the work begins; raises OutputError if that is not possible."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".writable.{os.getpid()}"
        probe.touch()
        probe.unlink()
    except OSError as error:
        raise OutputError(f"{folder}: cannot be written: {error.strerror}.") from None
