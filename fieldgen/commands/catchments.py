"""`fieldgen catchments`."""

from __future__ import annotations

import argparse
import sys
from datetime import timedelta
from pathlib import Path

from fieldgen.commands.arguments import (
    add_command,
    add_period,
    add_products,
    check_writable,
    duration,
)
from fieldgen.commands.terminal import show
from fieldgen.errors import InputError


def add(commands) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "catchments",
        "mean water vapour, its standard error and its volume over areas",
        'fieldgen catchments "outputs/Quendrava GNSS network" '
        "--areas demo_network/catchments.geojson --every 1d",
        _run,
    )
    add_products(parser)
    parser.add_argument(
        "--areas", metavar="FILE", type=Path,
        help="polygons: GeoJSON, GeoPackage or shapefile (default: the network's catchments)",
    )  # fmt: skip
    parser.add_argument(
        "--name", metavar="FIELD", help="field that names the areas (default: name, or id)"
    )
    parser.add_argument(
        "--every", metavar="STEP", type=duration, default=None,
        help="1d for means of days, or the step of the fields, which is the default",
    )  # fmt: skip
    add_period(parser)
    parser.add_argument(
        "--out", metavar="STEM", type=Path,
        help="write STEM.csv, STEM.nc and STEM.png (default: FOLDER/catchments/<areas>_<step>)",
    )  # fmt: skip


def _run(options: argparse.Namespace) -> int:
    from fieldgen.areas.day import open_days
    from fieldgen.areas.files import write_series
    from fieldgen.areas.picture import write_picture
    from fieldgen.areas.series import area_series
    from fieldgen.areas.summary import format_series
    from fieldgen.period import check_period, parse_time
    from fieldgen.readers.areas import read_areas

    check_period(options.start, options.end)
    period = [parse_time(text) if text else None for text in (options.start, options.end)]
    source = options.areas or options.folder / "lines" / "catchments.geojson"
    areas = read_areas(source, options.name)
    for note in areas.notes:
        show(f"fieldgen: {note}", file=sys.stderr)
    days = open_days(options.folder, *period)
    every, label = _interval(options.every, days[0].step)
    stem = options.out or options.folder / "catchments" / f"{source.stem}_{label}"
    check_writable(stem.parent)
    series = area_series(days, areas, every).between(*period)
    about = days[0].fields.dataset.attrs
    paths = write_series(series, about, stem)
    paths.append(write_picture(series, about["project"], stem.with_name(f"{stem.name}.png")))
    show(format_series(series))
    show(f"{len(paths)} files written to {stem.parent}")
    return 0


def _interval(asked: timedelta | None, step: timedelta) -> tuple[str, str]:
    """ "step" or "day", and how the file's name tells it."""
    minutes = int(step.total_seconds() // 60)
    label = f"{minutes // 60}h" if minutes % 60 == 0 else f"{minutes}min"
    if asked is None or asked == step:
        return "step", label
    if asked != timedelta(days=1):
        raise InputError(f"--every: is {asked}, expected {label}, the step of the fields, or 1d.")
    return "day", "1d"
