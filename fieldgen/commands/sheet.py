"""`fieldgen sheet`."""

from __future__ import annotations

import argparse
from pathlib import Path

from fieldgen.commands.arguments import add_command, add_language, add_products
from fieldgen.commands.terminal import show


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "sheet",
        "write a page about a month: its mean, its moistest and driest hour, its stations",
        'fieldgen sheet "outputs/Quendrava GNSS network" --month 2026-09',
        _run,
    )
    add_products(parser)
    parser.add_argument("--month", metavar="YYYY-MM", required=True, help="such as 2026-09")
    add_language(parser)
    parser.add_argument(
        "--out", metavar="FILE.html", type=Path, help="default: FOLDER/public/sheet_YYYY-MM.html"
    )


def _run(options: argparse.Namespace) -> int:
    from fieldgen.outreach.folder import ProductFolder
    from fieldgen.outreach.language import read_language
    from fieldgen.outreach.sheet import parse_month, write_sheet

    language = read_language(options.language)
    month = parse_month(options.month)
    folder = ProductFolder(options.folder)
    path = options.out or options.folder / "public" / f"sheet_{month}.html"
    write_sheet(folder, month, path, language)
    show(f"{path} written")
    return 0
