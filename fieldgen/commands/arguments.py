"""Arguments that several commands share, and what they stand for."""

from __future__ import annotations

import argparse
import os
from datetime import timedelta
from pathlib import Path

from fieldgen.errors import OutputError
from fieldgen.plain_text import file_name


def add_command(commands, name: str, help_text: str, example: str, run) -> argparse.ArgumentParser:
    """Parser of a command that calls `run(options)`, which returns the exit status."""
    parser = commands.add_parser(
        name,
        help=help_text,
        description=f"{help_text[0].upper()}{help_text[1:]}.",
        epilog=f"example: {example}",
    )
    parser.set_defaults(run=run)
    return parser


def add_network(parser: argparse.ArgumentParser) -> None:
    """The settings file."""
    parser.add_argument("network", metavar="NETWORK.toml", type=Path, help="the settings file")


def add_products(parser: argparse.ArgumentParser) -> None:
    """The folder of a network's products, to be read from."""
    parser.add_argument(
        "folder", metavar="FOLDER", type=Path, help="where make or update wrote their products"
    )


def add_period(parser: argparse.ArgumentParser, default: str = "all hours of the input") -> None:
    """Start and end of a period."""
    parser.add_argument("--start", metavar="T", help="first instant, ISO 8601 in UTC")
    parser.add_argument("--end", metavar="T", help=f"last instant; default: {default}")


def add_folder(parser: argparse.ArgumentParser) -> None:
    """The folder of the products, to be written to."""
    parser.add_argument(
        "--out", metavar="FOLDER", type=Path, help="default: outputs/<network name>"
    )


def add_public_folder(parser: argparse.ArgumentParser) -> None:
    """The folder of pictures made from products."""
    parser.add_argument("--out", metavar="OUT", type=Path, help="default: FOLDER/public")


def add_language(parser: argparse.ArgumentParser) -> None:
    """The file of sentences."""
    parser.add_argument(
        "--language", metavar="FILE.toml", type=Path,
        help="the sentences to use, or german (default: english)",
    )  # fmt: skip


def add_jobs(parser: argparse.ArgumentParser) -> None:
    """Number of processes."""
    parser.add_argument(
        "--jobs", metavar="N", type=positive, default=os.cpu_count() or 1,
        help="processes that share the days (default: all cores)",
    )  # fmt: skip


def positive(text: str) -> int:
    """A whole number above zero, as an argument."""
    number = int(text)
    if number < 1:
        raise argparse.ArgumentTypeError(f"{number} is not one or more")
    return number


def duration(text: str) -> timedelta:
    """A duration such as 15min, 3h or 2d, as an argument."""
    from fieldgen.settings import parse_duration

    try:
        return parse_duration(text)
    except ValueError as error:
        raise argparse.ArgumentTypeError(str(error)) from None


def product_folder(options: argparse.Namespace, settings) -> Path:
    """The folder that is asked for, or that of the network's name."""
    return options.out or Path("outputs") / folder_name(settings.network.name)


def public_folder(options: argparse.Namespace) -> Path:
    """The folder that is asked for, or `public` in that of the products."""
    return options.out or options.folder / "public"


def folder_name(name: str) -> str:
    """Name of a folder made from the network's name: nothing in it can leave `outputs`."""
    return file_name(name, "network")


def check_writable(folder: Path) -> Path:
    """The folder, made before the work begins; raises OutputError if that is not possible."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".writable.{os.getpid()}"
        probe.touch()
        probe.unlink()
    except OSError as error:
        raise OutputError(f"{folder}: cannot be written: {error.strerror}.") from None
    return folder
