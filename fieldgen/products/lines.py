"""Copies of the lines that a network draws, so that its products need nothing beside them."""

from __future__ import annotations

from pathlib import Path

from fieldgen.products.atomic import whole_file
from fieldgen.settings import Settings

NAMES = ("coast", "rivers", "catchments")


def copy_lines(settings: Settings, folder: Path) -> None:
    """Copy the coast, rivers and catchments of the settings as ``<name>.geojson``.

    Files that are the same already are not touched; those that are no longer set are removed.
    Raises OutputError.
    """
    lines = settings.products.lines
    for name in NAMES:
        copy = folder / f"{name}.geojson"
        if name not in lines:
            copy.unlink(missing_ok=True)
            continue
        content = settings.path(lines[name]).read_bytes()
        if not copy.is_file() or copy.read_bytes() != content:
            with whole_file(copy) as temporary:
                temporary.write_bytes(content)
