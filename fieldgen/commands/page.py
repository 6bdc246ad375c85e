"""`fieldgen page`."""

from __future__ import annotations

import argparse
from pathlib import Path

from fieldgen.commands.arguments import add_command, add_products, duration
from fieldgen.commands.terminal import show

NAME = "page.html"


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "page",
        "write the newest hours as one HTML file for a forecaster",
        'fieldgen page "outputs/Quendrava GNSS network" --last 24h',
        _run,
    )
    add_products(parser)
    parser.add_argument(
        "--last", metavar="TIME", type=duration, default="48h",
        help="how far back from the newest hour (default: 48h)",
    )  # fmt: skip
    parser.add_argument("--out", metavar="FILE.html", type=Path, help=f"default: FOLDER/{NAME}")


def _run(options: argparse.Namespace) -> int:
    from fieldgen.products.page import write_page

    path = write_page(options.folder, options.out or options.folder / NAME, options.last)
    show(f"{path} written, {path.stat().st_size / 1e6:.1f} MB")
    return 0
