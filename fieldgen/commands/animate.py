"""`fieldgen animate`."""

from __future__ import annotations

import argparse

from fieldgen.commands.arguments import (
    add_command,
    add_language,
    add_period,
    add_products,
    add_public_folder,
    check_writable,
    public_folder,
)
from fieldgen.commands.terminal import show


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "animate",
        "draw a film of a period and stills of its newest hour, for screens of all shapes",
        'fieldgen animate "outputs/Quendrava GNSS network" --shape square --format gif',
        _run,
    )
    add_products(parser)
    add_period(parser, default="the newest three days")
    parser.add_argument(
        "--format", choices=("mp4", "gif"), default="mp4", help="of the film (default: mp4)"
    )
    parser.add_argument(
        "--shape", choices=("landscape", "square", "portrait"), default="landscape",
        help="of the film (default: landscape); stills are drawn in all",
    )  # fmt: skip
    add_language(parser)
    add_public_folder(parser)


def _run(options: argparse.Namespace) -> int:
    from fieldgen.outreach.animation import animate
    from fieldgen.outreach.folder import ProductFolder
    from fieldgen.outreach.language import read_language
    from fieldgen.period import check_period

    check_period(options.start, options.end)
    language = read_language(options.language)
    folder = ProductFolder(options.folder)
    out = check_writable(public_folder(options))
    paths = animate(
        folder, out, language,
        start=options.start, end=options.end, form=options.format, shape=options.shape,
    )  # fmt: skip
    show(f"{len(paths)} files written to {out}")
    return 0
