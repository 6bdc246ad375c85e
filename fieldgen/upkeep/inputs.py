"""Whether any input file changed since the last update, seen from sizes and times alone."""

from __future__ import annotations

import json
import time
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

from pydantic import BaseModel

from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import fieldgen_version
from fieldgen.readers.network import find_files
from fieldgen.readers.records import ReadingReport
from fieldgen.settings import Settings
from fieldgen.upkeep.lock import STATE

UNSURE_SECONDS = 2.0
"""A file that changed this short a time ago may change again without showing it: its time is not
trusted, and the next update reads it again."""

UNSURE = -1
"""Stands for a time that is not trusted."""


def list_inputs(path: Path, settings: Settings) -> dict:
    """What the products are made from: fieldgen's version, and size and time of every input file.

    path : of the settings file
    Raises InputError as `find_files` does.
    """
    kinds = [name for name, patterns in settings.stations if isinstance(patterns, list)]
    found = [file for kind in kinds for file in find_files(settings, kind, ReadingReport())]
    files = {str(file): _size_and_time(file) for file in [path, *found, *_named_files(settings)]}
    return {"fieldgen_version": fieldgen_version(), "files": files}


class Standing(NamedTuple):
    """What a finished update left: days with records, and files that belong to all of them."""

    days: list[str]
    files: list[str]


def read_standing(folder: Path, inputs: dict) -> Standing | None:
    """What the last finished update left, if it found the same inputs, all of them long at rest;
    None otherwise.

    inputs : of `list_inputs`
    """
    try:
        before = json.loads(_path(folder).read_text(encoding="utf-8"))
        standing = Standing(**before.pop("standing"))
    except (OSError, ValueError, KeyError, TypeError, AttributeError):
        return None
    at_rest = all(one is None or one[1] != UNSURE for one in inputs["files"].values())
    return standing if before == inputs and at_rest else None


def forget_inputs(folder: Path) -> None:
    """Forget what products were made from, before they change."""
    _path(folder).unlink(missing_ok=True)


def write_inputs(folder: Path, inputs: dict, standing: Standing) -> None:
    """Remember, when all is made, what it was made from."""
    with whole_file(_path(folder)) as temporary:
        content = inputs | {"standing": standing._asdict()}
        temporary.write_text(json.dumps(content), encoding="utf-8")


def _named_files(settings: Settings) -> Iterator[Path]:
    """Files that the settings name one by one: terrain, geoid, table, lines."""
    tables = (value for _, value in settings if isinstance(value, BaseModel))
    for table in tables:
        yield from (settings.path(value) for _, value in table if isinstance(value, Path))


def _size_and_time(path: Path) -> list[int] | None:
    """Size [bytes] and time of the last change [ns]; None for a file that is not there."""
    try:
        status = path.stat()
    except OSError:
        return None
    age = time.time() - status.st_mtime
    return [status.st_size, status.st_mtime_ns if age > UNSURE_SECONDS else UNSURE]


def _path(folder: Path) -> Path:
    return folder / STATE / "inputs.json"
