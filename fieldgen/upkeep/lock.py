"""One run at a time in an output folder.

The lock belongs to the process: the system lets it go when the process ends, however it ends.
"""

from __future__ import annotations

import json
import os
import socket
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path
from typing import NamedTuple

from filelock import FileLock, Timeout

from fieldgen.errors import BusyError, OutputError
from fieldgen.products.atomic import whole_file

STATE = ".fieldgen"
"""Folder, within an output folder, of what runs tell each other."""

MOMENT = 0.3
"""Seconds that a run waits for the folder: `is_held` takes it for less than that."""


class Owner(NamedTuple):
    """The run that holds a folder: process, host, since when (UTC, ISO 8601)."""

    process: int
    host: str
    since: str

    @property
    def age(self) -> float:
        """Seconds since the run took the folder."""
        return (datetime.now(UTC) - datetime.fromisoformat(self.since)).total_seconds()

    def __str__(self) -> str:
        return f"process {self.process} on {self.host}, for {self.age / 60.0:.0f} min"


@contextmanager
def hold(folder: Path) -> Iterator[None]:
    """Hold an output folder; temporary files that a killed run left in it are removed.

    Raises BusyError that names the owner if another run holds it, OutputError if the folder cannot
    be written.
    """
    state = folder / STATE
    lock = FileLock(state / "lock", timeout=MOMENT, thread_local=False)
    try:
        state.mkdir(parents=True, exist_ok=True)
        lock.acquire()
    except Timeout:
        owner = read_owner(folder)
        raise BusyError(
            f"{folder}: another run is at work there ({owner or 'it has just begun'}); "
            "nothing was done."
        ) from None
    except OSError as error:
        raise OutputError(f"{folder}: cannot be written: {error.strerror or error}.") from None
    try:
        _write_owner(state)
        _remove_leftovers(folder)
        yield
    finally:
        (state / "owner.json").unlink(missing_ok=True)
        lock.release()


def read_owner(folder: Path) -> Owner | None:
    """The run that holds a folder, as far as it says; None if it says nothing.

    A killed run leaves its name behind: whether the folder is held is for `is_held` to tell.
    """
    try:
        return Owner(**json.loads((folder / STATE / "owner.json").read_text(encoding="utf-8")))
    except (OSError, ValueError, TypeError):
        return None


def is_held(folder: Path) -> bool:
    """Whether a run holds the folder at this moment."""
    path = folder / STATE / "lock"
    if not path.exists():
        return False
    try:
        with FileLock(path, timeout=0):
            return False
    except Timeout:
        return True
    except OSError:  # of another user: cannot be opened for locking
        return False


def _write_owner(state: Path) -> None:
    owner = Owner(
        os.getpid(), socket.gethostname(), datetime.now(UTC).isoformat(timespec="seconds")
    )
    with whole_file(state / "owner.json") as temporary:
        temporary.write_text(json.dumps(owner._asdict()), encoding="utf-8")


def _remove_leftovers(folder: Path) -> None:
    """Remove what runs that were killed had not finished writing."""
    for place in (folder, *(path for path in folder.iterdir() if path.is_dir())):
        for leftover in place.glob(".*.part"):
            leftover.unlink(missing_ok=True)
